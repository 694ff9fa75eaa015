"""What the controller's timer, its pauses, its jitter and its SPI mode make of commanded pulses."""

from __future__ import annotations

from pathlib import Path

import pytest
from firing_boards import board, pattern
from hypothesis import given, settings
from hypothesis import strategies as st

from boardsim.board.reader import Board, read_board
from boardsim.firing.pattern import Pulse
from boardsim.firing.schedule import fire, on_ticks
from boardsim.verdict.switching import judge_switching

FRAME = 17e-6  # two registers at 1 MHz and 1 us of latch time
PROPAGATION = 44e-9


def timed(folder: Path, controller: str) -> Board:
    return board(folder, controller=controller)


@pytest.mark.parametrize(
    ("start", "width", "expected"),
    [
        (1.4e-3, 2.6e-3, (1e-3, 3e-3)),
        (1.5e-3, 2.5e-3, (2e-3, 3e-3)),  # halves upwards
        (0.0, 0.4e-3, (0.0, 0.0)),
        (7e-3, 1e-3, (7e-3, 1e-3)),
    ],
)
def test_starts_and_widths_go_to_the_nearest_tick(start: float, width: float, expected: tuple[float, float]) -> None:
    rounded = on_ticks(Pulse(0, start, width), 1e-3)
    assert (rounded.start, rounded.width) == pytest.approx(expected)
    assert on_ticks(Pulse(0, start, width), 0.0) == Pulse(0, start, width)


@given(st.integers(0, 10**9), st.integers(1, 10**7), st.integers(1, 10**6))
def test_no_time_moves_by_more_than_half_a_tick_and_rounding_twice_changes_nothing(
    start: int, width: int, tick: int
) -> None:
    asked = Pulse(0, start * 1e-9, width * 1e-9)
    rounded = on_ticks(asked, tick * 1e-9)
    for a, b in ((asked.start, rounded.start), (asked.width, rounded.width)):
        assert abs(a - b) <= tick * 1e-9 * (0.5 + 1e-6) + 1e-12
    assert on_ticks(rounded, tick * 1e-9) == rounded


def test_asked_rounded_and_actual_times_are_all_kept(tmp_path: Path) -> None:
    firing = fire(timed(tmp_path, 'tick = "1 ms"'), pattern((3, 10.4e-3, 2.4e-3), (4, 20e-3, 1e-3)))
    first, second = firing.moved
    assert (first.pulse.start, first.timed.start, first.timed.width) == pytest.approx((10.4e-3, 10e-3, 2e-3))
    assert (first.start, first.stop) == pytest.approx((10e-3 + FRAME + PROPAGATION, 12e-3 + FRAME + PROPAGATION))
    assert second.rounded is None


def test_a_pulse_that_rounds_to_nothing_is_lost_and_says_why(tmp_path: Path) -> None:
    the_board = timed(tmp_path, 'tick = "1 ms"')
    firing = fire(the_board, pattern((3, 10e-3, 0.4e-3), (4, 20e-3, 5e-3)))
    assert len(firing.on[3]) == 0
    (f,) = (f for f in judge_switching(the_board, firing) if f.check == "lost-pulse")
    assert "rounds to nothing on a timer tick of 1.00 ms" in f.sentence
    assert f.verdict == "fail"


def test_pulses_that_ticks_push_together_are_reported_with_the_times_that_were_asked_for(tmp_path: Path) -> None:
    firing = fire(timed(tmp_path, 'tick = "1 ms"'), pattern((3, 10e-3, 2e-3), (3, 12.3e-3, 2e-3)))
    assert [p.start for p in firing.merged] == [12.3e-3]


def test_a_pause_between_frames_delays_the_next_frame_only(tmp_path: Path) -> None:
    two = pattern((0, 0.01, 0.002), (1, 0.01 + 3e-6, 0.002))
    plain, paused = fire(board(tmp_path), two), fire(timed(tmp_path, 'frame_gap = "100 us"'), two)
    assert paused.on[0][0, 0] == plain.on[0][0, 0]
    assert paused.on[1][0, 0] == pytest.approx(plain.on[1][0, 0] + 100e-6)


def test_jitter_is_added_to_how_late_a_pulse_comes_and_to_how_its_width_changes(tmp_path: Path) -> None:
    asked = pattern((3, 10e-3, 2e-3))
    found = {}
    for jitter in ("0 s", "50 us"):
        the_board = timed(tmp_path, f'jitter = "{jitter}"')
        found[jitter] = {f.quantity: f.value for f in judge_switching(the_board, fire(the_board, asked))}
    for what in ("lateness of a pulse", "change of a pulse's width"):
        assert found["50 us"][what] == pytest.approx(found["0 s"][what] + 50e-6 / 2e-3)


def test_a_pulse_no_longer_than_the_jitter_can_get_lost(tmp_path: Path) -> None:
    the_board = timed(tmp_path, 'jitter = "500 us"')
    found = judge_switching(the_board, fire(the_board, pattern((3, 10e-3, 0.4e-3))))
    (f,) = (f for f in found if f.check == "lost-pulse")
    assert "can get lost" in f.sentence


def test_a_limit_of_lateness_holds_whatever_the_width_of_the_pulse(tmp_path: Path) -> None:
    path = tmp_path / "board.toml"
    timed(tmp_path, 'jitter = "50 us"')
    text = path.read_text(encoding="utf-8")
    for lateness, verdict in (("60 us", "fail"), ("200 us", "pass")):
        path.write_text(text + f'\n[limits]\nlateness = "{lateness}"\n', encoding="utf-8")
        the_board = read_board(path)
        found = {f.quantity: f for f in judge_switching(the_board, fire(the_board, pattern((3, 10e-3, 20e-3))))}
        assert found["latest pulse"].verdict == verdict
        assert found["latest pulse"].value == pytest.approx(FRAME + PROPAGATION + 50e-6)


def test_in_spi_mode_1_every_bit_comes_one_place_late(tmp_path: Path) -> None:
    """The clock's rising edge takes the bit before: each bit is shifted once less and stays one output nearer."""
    firing = fire(timed(tmp_path, "spi_mode = 1"), pattern((3, 0.01, 0.002)))
    assert {w.channel for w in firing.wrong} == {2, 3}
    assert len(firing.on[2]) == 1
    assert len(firing.on[3]) == 0


@pytest.mark.parametrize("mode", [0, 2, 3])
def test_in_the_other_modes_bits_come_where_they_are_meant(tmp_path: Path, mode: int) -> None:
    assert fire(timed(tmp_path, f"spi_mode = {mode}"), pattern((3, 0.01, 0.002))).wrong == ()


@settings(deadline=None, max_examples=50)
@given(st.lists(st.tuples(st.integers(0, 15), st.integers(0, 5000), st.integers(1, 900)), min_size=1, max_size=10))
def test_ticks_jitter_and_pauses_leave_all_outputs_off_in_the_end(
    tmp_path_factory: pytest.TempPathFactory, pulses: list[tuple[int, int, int]]
) -> None:
    folder = tmp_path_factory.mktemp("timed")
    the_board = timed(folder, 'tick = "37 us"\njitter = "5 us"\nframe_gap = "11 us"')
    firing = fire(the_board, pattern(*((c, s * 1e-6, w * 1e-6) for c, s, w in pulses)))
    assert not any(levels[-1][1] for levels in firing.levels.values())
    assert all(m.start >= m.timed.start + FRAME - 1e-12 for m in firing.moved if m.timed.width)
