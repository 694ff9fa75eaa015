"""Rules that the firmware has to keep: on-times, off-times, silence after the last frame."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from bus_writer import CAPTURE, BusWriter
from firing_boards import board, pattern

from boardsim.board.reader import Board, read_board
from boardsim.errors import InputError
from boardsim.firing.pattern import Pattern
from boardsim.firing.schedule import fire
from boardsim.firing.sources import read_source
from boardsim.verdict.findings import Finding
from boardsim.verdict.firmware import judge_firmware, last_latch, not_given

FRAME = 17e-6 + 44e-9  # of two registers at 1 MHz and 1 us of latch time, and the propagation


def ruled(folder: Path, coil: str = "", limits: str = "") -> Board:
    board(folder)
    path = folder / "board.toml"
    text = path.read_text().replace('inductance = "9 mH"\n', f'inductance = "9 mH"\n{coil}\n')
    path.write_text(text + (f"[limits]\n{limits}\n" if limits else ""))
    return read_board(path)


def judged(the_board: Board, the_pattern: Pattern) -> list[Finding]:
    return judge_firmware(the_board, fire(the_board, the_pattern))


@pytest.mark.parametrize(("width", "verdict"), [(0.0499, "tight"), (0.05, "tight"), (0.0501, "fail"), (0.04, "pass")])
def test_the_longest_on_time_of_every_channel_is_held_against_its_coils(
    tmp_path: Path, width: float, verdict: str
) -> None:
    the_board = ruled(tmp_path, 'longest_on = "50 ms"')
    first, second = judged(the_board, pattern((3, 0.01, 0.001), (3, 0.1, width), (5, 0.3, 0.002)))
    assert (first.check, first.channel, first.verdict) == ("on-time", 3, verdict)
    assert first.value == pytest.approx(width)
    assert first.at == pytest.approx(0.1 + FRAME)
    assert first.limit == 0.05
    assert (second.channel, second.verdict) == (5, "pass")


@pytest.mark.parametrize(("pause", "verdict"), [(0.02, "pass"), (0.0151, "tight"), (0.015, "tight"), (0.0149, "fail")])
def test_the_least_off_time_lies_between_two_pulses_of_one_channel(tmp_path: Path, pause: float, verdict: str) -> None:
    the_board = ruled(tmp_path, 'least_off = "15 ms"')
    pulses = [(3, 0.01, 0.01), (3, 0.02 + pause, 0.01), (3, 0.2, 0.01), (5, 0.021, 0.001)]
    (found,) = judged(the_board, pattern(*pulses))
    assert (found.check, found.channel, found.verdict) == ("off-time", 3, verdict)
    assert found.value == pytest.approx(pause)
    assert found.at == pytest.approx(0.02 + FRAME)
    assert found.worse == "low"


def test_pulses_that_run_together_count_as_one_on_time(tmp_path: Path) -> None:
    the_board = ruled(tmp_path, 'longest_on = "15 ms"')
    (found,) = judged(the_board, pattern((3, 0.01, 0.01), (3, 0.019, 0.01)))
    assert (found.verdict, found.value) == ("fail", pytest.approx(0.019))


def test_the_worse_end_of_a_limit_with_a_tolerance_counts(tmp_path: Path) -> None:
    the_board = ruled(tmp_path, 'longest_on = "50 ms +/- 20 %"\nleast_off = "10 ms +/- 20 %"')
    found = judged(the_board, pattern((3, 0.01, 0.041), (3, 0.062, 0.001)))
    assert [f.limit for f in found] == [pytest.approx(0.04), pytest.approx(0.012)]
    assert [f.verdict for f in found] == ["fail", "fail"]


def recorded(folder: Path, the_board: Board, made: BusWriter, end: int) -> Pattern:
    (folder / "bus.vcd").write_text(made.text(end, lines=("data", "clock", "latch", "enable")))
    (folder / "capture.toml").write_text(CAPTURE + 'enable = "enable"\n')
    return read_source(folder / "capture.toml", the_board)


@pytest.mark.parametrize(
    ("off_after", "end", "verdict", "value"),
    [
        (30, 200, "pass", 30e-3),
        (60, 200, "fail", 60e-3),
        (None, 200, "fail", 98.983e-3),  # still on when the capture ends
        (None, 120, "unproven", 18.983e-3),  # what comes after 20 ms is not known
    ],
)
def test_all_have_to_be_off_soon_after_the_firmware_falls_silent(
    tmp_path: Path, off_after: int | None, end: int, verdict: str, value: float
) -> None:
    the_board = ruled(tmp_path, limits='all_off = { within = "50 ms" }')
    made = BusWriter(16, 500, 1000)
    made.frame(10_000_000, {2})
    latched = made.frame(101_000_000, {2, 7})  # the last frame leaves two on: a time-out on the enable line has to help
    if off_after is not None:
        made.put(latched + off_after * 1_000_000, "enable", 1)
    (found,) = judged(the_board, recorded(tmp_path, the_board, made, end * 1_000_000))
    assert (found.check, found.verdict) == ("all-off", verdict)
    assert found.value == pytest.approx(value, abs=1e-6)
    assert found.at == pytest.approx(latched * 1e-9)
    assert found.channels == (2, 7)


def test_only_the_channels_that_the_rule_names_have_to_be_off(tmp_path: Path) -> None:
    the_board = ruled(tmp_path, limits='all_off = { within = "50 ms", channels = "8-15" }')
    made = BusWriter(16, 500, 1000)
    made.frame(10_000_000, {2, 9})
    made.frame(11_000_000, {2})
    (found,) = judged(the_board, recorded(tmp_path, the_board, made, 200_000_000))
    # The last frame itself turns 9 off: late by the propagation.
    assert (found.verdict, found.value, found.channels) == ("pass", pytest.approx(44e-9), (9,))


def test_a_pattern_that_turns_everything_off_is_silent_at_its_last_latch(tmp_path: Path) -> None:
    the_board = ruled(tmp_path, limits='all_off = { within = "1 ms" }')
    the_firing = fire(the_board, pattern((3, 0.01, 0.01)))
    (found,) = judge_firmware(the_board, the_firing)
    assert last_latch(the_board, the_firing) == pytest.approx(0.02 + 17e-6)
    assert (found.verdict, found.value) == ("pass", pytest.approx(44e-9))


def test_a_channel_that_is_never_turned_off_breaks_the_rule(tmp_path: Path) -> None:
    the_board = ruled(tmp_path, limits='all_off = { within = "1 ms" }')
    the_firing = fire(the_board, pattern((3, 0.01, 0.01)))
    stuck = replace(the_firing, on={**the_firing.on, 4: np.array([[0.012, the_firing.duration]])})
    (found,) = judge_firmware(the_board, stuck)
    assert (found.verdict, found.channels) == ("fail", (4,))
    assert "channel 4 is still on" in found.sentence


def test_rules_that_were_not_given_are_said_and_never_passed(tmp_path: Path) -> None:
    the_board = board(tmp_path)
    assert judged(the_board, pattern((3, 0.01, 0.01))) == []
    assert not_given(the_board).endswith("longest_on of needle, least_off of needle, most_current, all_off")
    given = ruled(
        tmp_path, 'longest_on = "1 s"\nleast_off = "1 ms"', 'most_current = "2 A"\nall_off = { within = "1 ms" }'
    )
    assert not_given(given) == ""


@pytest.mark.parametrize(
    ("limits", "expected"),
    [
        ('all_off = { within = "1 ms", channels = "3,99" }', "limits.all_off.channels: channel 99 is not on this board"),
        ('all_off = { within = "1 ms", channels = "x" }', "limits.all_off.channels: 'x' is not a range of numbers"),
        ("all_off = { }", 'limits.all_off: "within" is missing'),
        ('all_off = "1 ms"', '"all_off" must be a table'),
        ('most_current = "2 V"', "limits.most_current: '2 V' is in 'V', which does not measure a current"),
    ],
)  # fmt: skip
def test_a_rule_that_cannot_be_meant_is_refused_in_its_place(tmp_path: Path, limits: str, expected: str) -> None:
    with pytest.raises(InputError) as caught:
        ruled(tmp_path, limits=limits)
    assert any(expected in p.text and p.line for p in caught.value.problems), caught.value
