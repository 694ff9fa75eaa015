"""Enable lines: what they take off, when they stay on for one channel's sake, and what cannot hang on them."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from firing_boards import board
from hypothesis import given, settings
from hypothesis import strategies as st

from boardsim.board.reader import Board
from boardsim.circuit.assemble import assemble, refuse_too_many, windows
from boardsim.errors import InputError
from boardsim.firing.csv_events import read_events
from boardsim.firing.enable import gated, without
from boardsim.firing.hold import Hold
from boardsim.firing.pattern import Pattern, Pulse, by_start, read_pattern
from boardsim.firing.schedule import Firing, fire
from boardsim.parts.base import NOMINAL

DELAY = 17e-6 + 44e-9  # two registers at 1 MHz, 1 us of latch time, and the propagation of the library's 74HC595
LINE = 20e-9  # from the line to the outputs, as it is assumed
PIN = "[chain.output_enable]\npin = true\npull_up = '10 kohm'"


def lined(tmp_path: Path, *lines: str, control: str = "", **more: str | bool) -> Board:
    """A board of sixteen channels with enable lines."""
    tables = "\n".join(f"[enable_lines.{name}]\n{body}" for name, body in zip("ab", lines, strict=False))
    return board(tmp_path, columns=f"{tables}\n{control}", **more)  # type: ignore[arg-type]


def pulse(
    channels: str, start: str, width: str = "20 ms", peak: str = "8 ms", duty: str = "30 %", frequency: str = "1 kHz"
) -> str:
    plain = f'channels = "{channels}"\nstart = "{start}"\nwidth = "{width}"'
    return f'{plain}\npeak = "{peak}"\nhold = "{duty}"\nhold_frequency = "{frequency}"' if peak else plain


def fired(tmp_path: Path, the_board: Board, *pulses: str) -> Firing:
    path = tmp_path / "held.toml"
    path.write_text("\n".join(f"[[pulses]]\n{p}" for p in pulses))
    return fire(the_board, read_pattern(path, the_board))


def test_a_line_chops_beside_the_registers_which_send_two_frames_a_pulse(tmp_path: Path) -> None:
    firing = fired(tmp_path, lined(tmp_path, 'channels = "0-7"'), pulse("0", "1 ms"))
    assert firing.frames == 2
    # Full drive from 1 ms to 9 ms; then off for 0.7 ms of each 1 ms, until 21 ms.
    off = 9e-3 + np.arange(12) * 1e-3 + DELAY + LINE
    on = off + 0.7e-3
    expected = np.column_stack([[1e-3 + DELAY, *on[:-1], on[-1]], [*off, 21e-3 + DELAY]])
    assert firing.switched(0) == pytest.approx(expected, abs=1e-12)
    assert firing.on[0] == pytest.approx(np.array([[1e-3, 21e-3]]) + DELAY, abs=1e-12)
    assert firing.driven_until(0) == pytest.approx([9e-3 + DELAY + LINE], abs=1e-12)
    (only,) = firing.held.pulses
    assert (only.line, only.duty) == ("a", pytest.approx(0.3, rel=1e-4))


def test_what_the_switch_gets_is_what_its_on_times_say(tmp_path: Path) -> None:
    firing = fired(tmp_path, lined(tmp_path, 'channels = "0-7"'), pulse("0", "1 ms"))
    edges = [t for t, _ in firing.levels[0][1:]]
    assert edges == pytest.approx(firing.switched(0).ravel().tolist())
    assert [level for _, level in firing.levels[0]] == [False, *[True, False] * 13]


def test_a_peak_of_one_gives_full_drive_to_another_that_is_held(tmp_path: Path) -> None:
    firing = fired(
        tmp_path, lined(tmp_path, 'channels = "0-7"'), pulse("0", "1 ms"), pulse("5", "12.5 ms", peak="4 ms")
    )
    # The line is off from 9 ms on for 0.7 ms of each 1 ms, and stays on while channel 5 is in its peak, from 12.5 to 16.5 ms.
    inside = [(a, b) for a, b in firing.switched(0) if a < 14e-3 < b]
    assert inside == [(pytest.approx(12.5e-3 + DELAY + LINE), pytest.approx(16.5e-3 + DELAY + LINE))]
    first, second = firing.held.pulses
    # 3 periods with 0.3 ms, half of one that is off, 4 ms in full, 4 periods with 0.3 ms, and half of one that is off.
    assert first.duty == pytest.approx(6.1 / 12, rel=1e-3)
    assert second.duty == pytest.approx(0.3, rel=1e-3)
    assert firing.driven_until(0)[0] == pytest.approx(9e-3 + DELAY + LINE)
    assert firing.on[5] == pytest.approx(np.array([[12.5e-3, 32.5e-3]]) + DELAY, abs=1e-12)


def test_a_pulse_whose_whole_hold_falls_into_peaks_of_others_is_on_all_the_time(tmp_path: Path) -> None:
    others = [pulse(str(c), f"{c * 7} ms") for c in (1, 2, 3)]
    firing = fired(tmp_path, lined(tmp_path, 'channels = "0-7"'), pulse("0", "1 ms"), *others)
    (first,) = (p for p in firing.held.pulses if p.channel == 0)
    assert first.duty == pytest.approx(1.0, abs=1e-12)
    assert firing.driven_until(0) == pytest.approx([21e-3 + DELAY])


def test_a_pulse_without_a_hold_is_never_chopped_by_its_line(tmp_path: Path) -> None:
    firing = fired(
        tmp_path, lined(tmp_path, 'channels = "0-7"'), pulse("0", "1 ms"), pulse("3", "11.3 ms", width="3 ms", peak="")
    )
    assert firing.switched(3) == pytest.approx(np.array([[11.3e-3 + LINE, 14.3e-3]]) + DELAY, abs=1e-12)


def test_a_line_leaves_other_channels_alone(tmp_path: Path) -> None:
    board_ = lined(tmp_path, 'channels = "0-7"')
    alone = fired(tmp_path, board_, pulse("9", "11 ms", width="3 ms", peak=""))
    firing = fired(tmp_path, board_, pulse("0", "1 ms"), pulse("9", "11 ms", width="3 ms", peak=""))
    assert firing.levels[9] == alone.levels[9]


def test_a_line_chops_faster_than_frames_could(tmp_path: Path) -> None:
    firing = fired(tmp_path, lined(tmp_path, 'channels = "0-7"'), pulse("0", "1 ms", frequency="20 kHz", duty="10 %"))
    assert firing.held.pulses[0].duty == pytest.approx(0.1, rel=1e-6)
    with pytest.raises(InputError, match="up to 11"):  # 5 frames of 17 us
        fired(tmp_path, lined(tmp_path, 'channels = "0-7"'), pulse("8", "1 ms", frequency="20 kHz", duty="10 %"))


def test_an_active_low_switch_is_high_while_its_line_is_off() -> None:
    levels = ((0.0, True), (1.0, False), (5.0, True))
    assert gated(levels, False, [(2.0, 3.0)], 9.0) == (
        (0.0, True),
        (1.0, False),
        (2.0, True),
        (3.0, False),
        (5.0, True),
    )


edges = st.lists(st.integers(0, 60), min_size=0, max_size=12, unique=True).map(
    lambda found: list(zip(*[iter(map(float, sorted(found)[: len(found) // 2 * 2]))] * 2, strict=True))
)


@settings(deadline=None)
@given(spans=edges, gaps=edges)
def test_what_is_left_without_gaps_is_on_where_spans_are_and_gaps_are_not(
    spans: list[tuple[float, float]], gaps: list[tuple[float, float]]
) -> None:
    left = without(spans, gaps)

    def inside(rows: list[tuple[float, float]], t: float) -> bool:
        return any(a < t < b for a, b in rows)

    for k in range(60):
        t = k + 0.5
        assert inside(left, t) == (inside(spans, t) and not inside(gaps, t))


def test_holds_of_two_kinds_on_one_line_are_refused_in_patterns_and_lists(tmp_path: Path) -> None:
    the_board = lined(tmp_path, 'channels = "0-7"')
    with pytest.raises(InputError, match="enable line a are held with 30 % at 1000 Hz and with 40 % at 1000 Hz"):
        fired(tmp_path, the_board, pulse("0", "1 ms"), pulse("1", "1 ms", duty="40 %"))
    fired(tmp_path, the_board, pulse("0", "1 ms"), pulse("9", "1 ms", duty="40 %"))  # not on the line
    path = tmp_path / "shot.csv"
    path.write_text(
        "channel,start,width,peak,hold,hold_frequency\n0,1 ms,20 ms,8 ms,30 %,1 kHz\n1,1 ms,20 ms,8 ms,30 %,2 kHz\n"
    )
    with pytest.raises(InputError, match="enable line a"):
        read_events(path, the_board)


@pytest.mark.parametrize(
    ("lines", "control", "more", "said"),
    [
        (['channels = "0-20"'], "", {}, "16-20 are not on this board"),
        (['channels = "0-7"', 'channels = "7-9"'], "", {}, "7 already hangs on a"),
        (['channels = "0-7"\nthrough = "output-enable"'], "", {}, "no controller pin drives output enable"),
        (
            ['channels = "0-6"\nthrough = "output-enable"'],
            PIN,
            {},
            "whole registers: 7 sit on outputs of the same ones",
        ),
        (
            ['channels = "0-7"\nthrough = "output-enable"'],
            PIN,
            {"held": False},
            "nothing turns off the switches of 0-7",
        ),
        (['channels = "0-7"\nthrough = "relay"'], "", {}, "through"),
    ],
)
def test_a_line_that_cannot_be_is_refused_with_its_place(
    tmp_path: Path, lines: list[str], control: str, more: dict[str, bool], said: str
) -> None:
    with pytest.raises(InputError, match=said) as err:
        lined(tmp_path, *lines, control=control, **more)
    assert all(p.line is not None for p in err.value.problems)


def test_the_assumed_delay_and_gates_of_a_line_are_listed(tmp_path: Path) -> None:
    found = {(a.part, a.quantity) for a in lined(tmp_path, 'channels = "0-7"').assumptions}
    assert {("enable line a", "delay"), ("enable line a", "its gates")} <= found


def test_registers_that_are_followed_flip_flop_by_flip_flop_refuse_a_chopping_line(tmp_path: Path) -> None:
    the_board = lined(tmp_path, 'channels = "0-7"')
    with pytest.raises(InputError, match="enable line a chops outputs behind the registers"):
        refuse_too_many(the_board, fired(tmp_path, the_board, pulse("0", "1 ms")))


def test_only_outputs_that_let_go_bring_an_enable_of_their_own_into_the_deck(tmp_path: Path) -> None:
    def netlist(through: str) -> str:
        the_board = lined(tmp_path, f'channels = "0-7"\nthrough = "{through}"', control=PIN)
        firing = fired(tmp_path, the_board, pulse("0", "1 ms"))
        return assemble(the_board, firing, NOMINAL, windows(the_board, firing)[0]).netlist

    assert "c0_oe" in netlist("output-enable")
    assert "c8_oe" not in netlist("output-enable")
    assert "c0_oe" not in netlist("gates")


HOLDS = (None, Hold(2e-3, 0.3, 1e3))
pulses_of_some = st.lists(
    st.builds(
        Pulse,
        channel=st.sampled_from([0, 1, 5, 8, 13]),
        start=st.floats(0.0, 0.02).map(lambda t: round(t, 6)),
        width=st.sampled_from([0.3e-3, 2.5e-3, 7.777e-3]),
        hold=st.sampled_from(HOLDS),
    ).filter(lambda p: p.hold is None or p.hold.peak < p.width),
    min_size=1,
    max_size=8,
)


@pytest.fixture(scope="module")
def some_boards(tmp_path_factory: pytest.TempPathFactory) -> list[Board]:
    """Boards with and without lines, ticks and bits that come late: outputs may be wrong, and yet nothing contradicts itself."""
    folder = tmp_path_factory.mktemp("boards")
    timers = ("", 'tick = "10 us"\nframe_gap = "3 us"\njitter = "5 us"', "spi_mode = 1")
    lines = ((), ('channels = "0-7"',), ('channels = "0-7"\nthrough = "output-enable"', 'channels = "8-11"'))
    return [lined(folder, *some, control=PIN, controller=timer) for timer in timers for some in lines]


@given(which=st.integers(0, 8), pulses=pulses_of_some)
@settings(max_examples=60, deadline=None)
def test_whatever_is_fired_pulses_cover_what_switches_do_and_end_their_full_drive_within(
    some_boards: list[Board], which: int, pulses: list[Pulse]
) -> None:
    the_board = some_boards[which]
    firing = fire(the_board, Pattern(Path("some.toml"), "some", None, by_start(pulses)))
    slack = LINE * 1.01
    for c in the_board.channels:
        on, switched, until = firing.on[c.number], firing.switched(c.number), firing.driven_until(c.number)
        assert np.all(np.diff(switched.ravel()) > 0)
        assert np.all(np.diff(on.ravel()) > 0)
        assert len(until) == len(on)
        assert np.all((until > on[:, 0]) & (until <= on[:, 1] + slack))
        for start, stop in switched:
            assert np.any((start >= on[:, 0]) & (stop <= on[:, 1] + slack))
    assert all(p.duty is None or 0 <= p.duty <= 1 + 1e-9 for p in firing.held.pulses)
