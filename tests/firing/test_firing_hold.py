"""Pulses that are held: how register frames count a chop, what the outputs do, and what counts as one pulse."""

from __future__ import annotations

from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from firing_boards import board
from hypothesis import given, settings
from hypothesis import strategies as st
from matrix_boards import board as matrix

from boardsim.board.reader import Board
from boardsim.errors import InputError, QuantityError
from boardsim.firing.csv_events import read_events
from boardsim.firing.hold import FrameChop, Hold, chopped, fewest_frames, frame_chop
from boardsim.firing.pattern import Pattern, read_pattern
from boardsim.firing.schedule import Firing, fire
from boardsim.verdict.firmware import judge_firmware, last_latch

# Two registers at 1 MHz, 1 us of latch time: 16 us + 1 us, and a pause of 3 us, counted by hand.
SLOT = 20e-6
DELAY = 17e-6 + 44e-9  # one frame, and the propagation of the library's 74HC595
GAP = 'frame_gap = "3 us"'

HELD = 'peak = "8 ms"\nhold = "{duty}"\nhold_frequency = "{frequency}"'


def read(tmp_path: Path, the_board: Board, *pulses: str) -> Pattern:
    path = tmp_path / "held.toml"
    path.write_text("\n".join(f"[[pulses]]\n{p}" for p in pulses))
    return read_pattern(path, the_board)


def held(
    channels: str = "0", start: str = "1 ms", width: str = "20 ms", duty: str = "30 %", frequency: str = "1 kHz"
) -> str:
    chop = HELD.format(duty=duty, frequency=frequency)
    return f'channels = "{channels}"\nstart = "{start}"\nwidth = "{width}"\n{chop}'


def fired(tmp_path: Path, *pulses: str, controller: str = GAP) -> tuple[Board, Firing]:
    the_board = board(tmp_path, controller=controller)
    return the_board, fire(the_board, read(tmp_path, the_board, *pulses))


def test_a_period_holds_as_many_frames_as_fit_by_hand() -> None:
    # 1 kHz is 1000 us; of 20 us each 50 frames, of which 15 are 30 %.
    assert frame_chop(Hold(8e-3, 0.3, 1e3), SLOT) == FrameChop(SLOT, 50, 15)
    # 3 kHz is 333.3 us: 16.7 frames, so 17 of 20 us: 340 us, 2.94 kHz; 30 % of 17 is 5.1, so 5: 29.4 %.
    found = frame_chop(Hold(8e-3, 0.3, 3e3), SLOT)
    assert (found.frames, found.on) == (17, 5)
    assert (found.period, found.duty) == (pytest.approx(340e-6), pytest.approx(5 / 17))


def test_too_few_frames_in_a_period_are_refused_with_the_highest_frequency_that_works() -> None:
    # 10 % takes 5 frames (4 x 0.1 rounds to none, 5 x 0.1 to one): 100 us, 10 kHz.
    assert fewest_frames(0.1) == 5
    with pytest.raises(
        QuantityError, match=r"room for 3 register frames of 20.0 us.*needs at least 5.*up to 10\.0 kHz"
    ):
        frame_chop(Hold(8e-3, 0.1, 16e3), SLOT)
    assert frame_chop(Hold(8e-3, 0.1, 10e3), SLOT).on == 1


@settings(deadline=None)
@given(duty=st.floats(0.01, 0.99), frequency=st.floats(10, 2e4), start=st.floats(0, 0.1))
def test_a_chop_never_asks_for_edges_closer_than_a_frame_and_keeps_its_duty(
    duty: float, frequency: float, start: float
) -> None:
    hold = Hold(5e-3, duty, frequency)
    try:
        chop = frame_chop(hold, SLOT)
    except QuantityError:
        assert 1 / frequency < (fewest_frames(duty) + 0.5) * SLOT
        return
    assert abs(chop.duty - duty) <= 0.5 / chop.frames + 1e-9
    stop = start + hold.peak + 7 * chop.period
    spans = list(chopped(start, stop, hold, chop))
    assert spans[0][0] == start
    assert -1e-11 <= spans[0][1] - start - hold.peak <= SLOT + 1e-11
    pauses = [b[0] - a[1] for a, b in pairwise(spans)]
    assert all(pause == pytest.approx((chop.frames - chop.on) * SLOT, abs=1e-10) for pause in pauses)
    assert all(b - a == pytest.approx(chop.on * SLOT, abs=1e-10) for a, b in spans[1:-1])


def test_the_output_of_a_held_pulse_is_full_in_its_peak_and_chopped_afterwards(tmp_path: Path) -> None:
    _, firing = fired(tmp_path, held())
    rows = firing.switched(0)
    # On at 1 ms; its peak ends at 9 ms, which is frame 450 of 20 us; off for 35 frames, on for 15, and so on to 21 ms.
    on = [1e-3, *(9e-3 + k * 1e-3 + 700e-6 for k in range(12))]
    off = [9e-3, *(10e-3 + k * 1e-3 for k in range(12))]
    assert rows == pytest.approx(np.column_stack([on, off]) + DELAY, abs=1e-12)
    assert firing.frames == 26


def test_a_held_pulse_is_one_pulse_whose_drive_ends_with_its_peak(tmp_path: Path) -> None:
    the_board, firing = fired(tmp_path, held(), held(start="40 ms"))
    assert firing.on[0] == pytest.approx(np.array([[1e-3, 21e-3], [40e-3, 60e-3]]) + DELAY, abs=1e-12)
    assert firing.driven_until(0) == pytest.approx(np.array([9e-3, 48e-3]) + DELAY, abs=1e-12)
    assert [m.stop - m.start for m in firing.moved] == pytest.approx([20e-3, 20e-3])
    assert firing.merged == firing.lost_pauses == ()
    assert [h.duty for h in firing.held.pulses] == pytest.approx([0.3, 0.3])
    assert firing.channels_on(15.2e-3) == (0,)  # in a pause of the chop
    assert judge_firmware(the_board, firing) == []


def test_a_pulse_that_ends_in_a_pause_of_its_chop_ends_when_it_was_commanded_to(tmp_path: Path) -> None:
    the_board, firing = fired(tmp_path, held(width="20.3 ms"))
    assert firing.on[0][0, 1] == pytest.approx(21.3e-3 + DELAY)
    assert firing.switched(0)[-1, 1] == pytest.approx(21e-3 + DELAY)
    assert last_latch(the_board, firing) == pytest.approx(21.3e-3 + 17e-6)


def test_all_channels_are_chopped_together_at_the_cost_of_one(tmp_path: Path) -> None:
    # Sixteen channels, each 0.37 ms after the one before: their edges fall on one beat of frames, and all keep their duty.
    _, firing = fired(tmp_path, held("0-15") + '\nstagger = "0.37 ms"')
    assert {round(h.duty, 9) for h in firing.held.pulses if h.duty is not None} == {0.3}
    assert len(firing.held.pulses) == 16


def test_plain_pulses_that_need_frames_between_move_the_edges_of_a_chop_by_less_than_a_frame(tmp_path: Path) -> None:
    plain = 'channels = "1"\nstart = "9.001 ms"\nwidth = "0.4 ms"\nrepeat = 12\nevery = "0.777 ms"'
    _, firing = fired(tmp_path, held(), plain)
    alone = fired(tmp_path, held())[1]
    moved = firing.switched(0) - alone.switched(0)
    assert moved.min() >= -1e-12
    assert 1e-6 < moved.max() < SLOT
    assert len(firing.on[1]) == 12


def test_a_pulse_that_is_held_and_one_that_runs_into_it_are_told_as_overlapping_once(tmp_path: Path) -> None:
    plain = 'channels = "0"\nstart = "15 ms"\nwidth = "10 ms"'
    _, firing = fired(tmp_path, held(), plain)
    assert [p.start for p in firing.merged] == [15e-3]
    assert firing.on[0] == pytest.approx(np.array([[1e-3, 25e-3]]) + DELAY, abs=1e-12)


def test_channels_may_be_held_in_different_ways_at_once(tmp_path: Path) -> None:
    _, firing = fired(tmp_path, held("0"), held("3", start="2 ms", duty="50 %", frequency="500 Hz"))
    assert len(firing.on[0]) == len(firing.on[3]) == 1
    assert [h.duty for h in firing.held.pulses] == pytest.approx([0.3, 0.5])
    assert [h.period for h in firing.held.pulses] == pytest.approx([1e-3, 2e-3])


@pytest.mark.parametrize(
    ("keys", "said"),
    [
        ('peak = "8 ms"', "hold and hold_frequency are missing"),
        ('peak = "8 ms"\nhold = "30 %"', "hold_frequency is missing"),
        (HELD.format(duty="30 %", frequency="40 kHz"), r"up to 25\.0 kHz through the chain"),
        (HELD.format(duty="100 %", frequency="1 kHz"), "a hold of 100 % is full drive"),
        (HELD.format(duty="30 to 40 %", frequency="1 kHz"), "hold is commanded and has no tolerance"),
        (HELD.format(duty="30 %", frequency="1 kHz").replace("8 ms", "20 ms"), "not within the pulse of 20.0 ms"),
        (HELD.format(duty="30 %", frequency="1 kHz").replace("8 ms", "0 s"), "not within the pulse of 20.0 ms"),
        (HELD.format(duty="130 %", frequency="1 kHz"), "hold"),
    ],
)
def test_a_hold_that_cannot_be_is_refused_with_its_line(tmp_path: Path, keys: str, said: str) -> None:
    the_board = board(tmp_path, controller=GAP)
    with pytest.raises(InputError, match=said) as err:
        read(tmp_path, the_board, f'channels = "0"\nstart = "1 ms"\nwidth = "20 ms"\n{keys}')
    assert err.value.problems[0].line is not None


def test_more_chops_than_are_worth_a_run_are_refused(tmp_path: Path) -> None:
    the_board = board(tmp_path, controller=GAP)
    with pytest.raises(InputError, match="more than 1000000 chops"):
        read(tmp_path, the_board, held(width="1000 s", frequency="10 kHz"))


def test_a_list_of_events_says_what_is_held_in_columns_of_their_own(tmp_path: Path) -> None:
    the_board = board(tmp_path, controller=GAP)
    path = tmp_path / "shot.csv"
    path.write_text(
        "channel,start [ms],width [ms],peak [ms],hold [%],hold_frequency\n0,1,20,8,30,1 kHz\n1,1,20,,,\n",
        encoding="utf-8",
    )
    first, second = read_events(path, the_board).pulses
    assert first.hold == Hold(pytest.approx(8e-3), pytest.approx(0.3), 1e3)
    assert second.hold is None


@pytest.mark.parametrize(
    ("line", "said"),
    [
        ("0,1,20,8,30,40 kHz", r"up to 25\.0 kHz"),
        ("0,1,20,8,,1 kHz", "hold is missing"),
        ("0,1,20,8,30,1 kHz +/- 5 %", "a commanded number has no tolerance"),
    ],
)
def test_a_held_event_that_cannot_be_is_refused_with_its_line(tmp_path: Path, line: str, said: str) -> None:
    the_board = board(tmp_path, controller=GAP)
    path = tmp_path / "shot.csv"
    path.write_text(f"channel,start [ms],width [ms],peak [ms],hold [%],hold_frequency\n{line}\n", encoding="utf-8")
    with pytest.raises(InputError, match=said) as err:
        read_events(path, the_board)
    assert err.value.problems[0].line == 2


def test_row_and_column_of_a_held_channel_are_chopped_together_and_asked_at_the_end_of_its_peak(tmp_path: Path) -> None:
    the_board = matrix(tmp_path)
    path = tmp_path / "held.toml"
    path.write_text(f"[[pulses]]\n{held('0')}\n[[pulses]]\nchannels = '2'\nstart = '40 ms'\nwidth = '5 ms'")
    firing = fire(the_board, read_pattern(path, the_board))
    (only,) = firing.held.pulses
    assert only.duty == pytest.approx(0.3, rel=0.05)
    assert len(firing.switched(0)) > 10
    for line in the_board.channel(0).drivers:
        assert firing.spans(line.number)[0] == pytest.approx(firing.on[0][0])
        assert firing.driven_until(line.number)[0] == pytest.approx(firing.switched(0)[0, 1])
        levels = [t for t, _ in firing.levels[line.output][1 : 1 + 2 * len(firing.switched(0))]]
        assert levels == pytest.approx(firing.switched(0).ravel().tolist())
