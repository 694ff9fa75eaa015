"""Close-ups look where the cause of a finding lies, and never beyond the run."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from boardsim.board.reader import Board, read_board
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.firing.schedule import Firing, fire
from boardsim.verdict.findings import Finding
from boardsim.verdict.stretch import channels_in_question, count_on, stretch_of

FRUIT_SORTER = Path(__file__).parents[2] / "netlists" / "fruit-sorter" / "board.toml"
# 12 mH + 20 % over 16 ohm - 10 %, as the fruit sorter's board file gives them
TAU = 1.2 * 12e-3 / (0.9 * 16.0)


@pytest.fixture(scope="module")
def board() -> Board:
    # Without its timer's tick: what frames do to edges is told apart to microseconds here.
    return replace(read_board(FRUIT_SORTER), controller=None)


def fired(board: Board, *pulses: tuple[int, float, float]) -> Firing:
    made = tuple(sorted((Pulse(*p) for p in pulses), key=lambda p: (p.start, p.channel)))
    return fire(board, Pattern(Path("p.toml"), "made up", None, made))


def finding(check: str, at: float | None, probes: tuple[str, ...] = ("i_coil",), **changes: object) -> Finding:
    values: dict[str, object] = {
        "check": check,
        "quantity": "coil current",
        "part": "ejector",
        "channel": 0,
        "label": "lane 0",
        "value": 1.0,
        "limit": 0.5,
        "unit": "A",
        "margin": -1.0,
        "at": at,
        "consequence": "misbehave",
        "verdict": "fail",
        "sentence": "",
        "probes": probes,
    }
    return Finding(**{**values, **changes})  # type: ignore[arg-type]


def test_a_moment_is_shown_with_three_time_constants_on_either_side(board: Board) -> None:
    firing = fired(board, (0, 0.05, 0.05))
    start, stop = stretch_of(finding("overvoltage", 0.07), board, firing)
    assert 0.07 - start == pytest.approx(3 * TAU)
    assert stop - 0.07 == pytest.approx(3 * TAU)


@pytest.mark.parametrize("at", [0.0, 1e-9, 0.07, "end", "beyond"])
def test_a_stretch_is_never_empty_and_never_leaves_the_run(board: Board, at: float | str) -> None:
    firing = fired(board, (0, 0.05, 0.05))
    moment = {"end": firing.duration, "beyond": firing.duration + 1e-9}.get(str(at), at)
    start, stop = stretch_of(finding("overvoltage", float(moment)), board, firing)
    assert 0.0 <= start < stop <= firing.duration


def test_what_lasts_is_shown_for_longer_than_it_lasts(board: Board) -> None:
    firing = fired(board, (0, 0.1, 0.3))
    start, stop = stretch_of(finding("rail-sag", 0.2, ("v_rail",), channel=None, lasting=0.05), board, firing)
    assert start < 0.15
    assert stop > 0.25


def test_pull_in_is_shown_with_the_pulse_that_leads_to_it(board: Board) -> None:
    firing = fired(board, (0, 0.05, 0.02), (0, 0.2, 0.05))
    on, off = firing.on[0][1]
    start, stop = stretch_of(finding("pull-in", float(off)), board, firing)
    assert firing.on[0][0, 1] < start < on
    assert stop > off


def test_current_at_a_turn_on_is_shown_with_the_turn_off_before_it(board: Board) -> None:
    firing = fired(board, (0, 0.05, 0.02), (0, 0.075, 0.05))
    start, stop = stretch_of(finding("overlap", float(firing.on[0][1, 0])), board, firing)
    assert start < firing.on[0][0, 1]
    assert start > firing.on[0][0, 0]
    assert stop > firing.on[0][1, 0]


def test_the_energy_of_a_turn_off_is_shown_until_the_next_turn_on(board: Board) -> None:
    firing = fired(board, (0, 0.05, 0.02), (0, 0.0715, 0.05))
    at = float(firing.on[0][0, 1])
    start, stop = stretch_of(finding("overvoltage", at, ("v_ds", "i_d"), shape="energy"), board, firing)
    assert start < at
    assert stop == firing.on[0][1, 0]


def test_without_a_moment_the_whole_run_is_shown(board: Board) -> None:
    firing = fired(board, (0, 0.05, 0.02))
    assert stretch_of(finding("overpower", None, shape="mean"), board, firing) == (0.0, firing.duration)


def test_a_lost_pulse_is_shown_as_closely_as_it_is_short(board: Board) -> None:
    firing = fired(board, (0, 0.100001, 2e-6), (3, 0.1, 0.01))
    start, stop = stretch_of(finding("lost-pulse", 0.100001, ()), board, firing)
    assert start < 0.100001
    assert stop > 0.100003
    assert stop - start < 2e-4


def test_a_late_pulse_is_shown_with_what_the_output_made_of_it(board: Board) -> None:
    firing = fired(board, (0, 0.1, 1e-5))
    (moved,) = firing.moved
    start, stop = stretch_of(finding("pulse-timing", 0.1, (), channel=None), board, firing)
    assert start < 0.1
    assert stop > moved.stop > 0.1 + 1e-5
    assert stop - start < 1e-4


def test_pulses_that_run_together_are_shown_whole(board: Board) -> None:
    firing = fired(board, (0, 0.1, 0.05), (0, 0.12, 0.05), (0, 0.5, 0.01))
    start, stop = stretch_of(finding("overlap", 0.12, ()), board, firing)
    assert start < 0.1
    assert 0.17 < stop < 0.25


def test_a_lost_pause_is_shown_as_closely_as_it_is_short(board: Board) -> None:
    # The pause begins and ends while the frame of channel 5 is under way.
    firing = fired(board, (0, 0.1, 0.05), (5, 0.149999, 0.02), (0, 0.150002, 0.05))
    (lost,) = firing.lost_pauses
    start, stop = stretch_of(finding("overlap", lost.start, ()), board, firing)
    assert start < 0.15
    assert stop > 0.150002
    assert stop - start < 2e-4


def test_a_wrong_output_that_no_pulse_explains_is_shown_around_its_moment(board: Board) -> None:
    firing = fired(board, (0, 0.05, 0.02))
    start, stop = stretch_of(finding("wrong-output", 0.05, (), channel=9, label="lane 9"), board, firing)
    assert (start, stop) == pytest.approx((0.05 - 3 * TAU, 0.05 + 3 * TAU))


def test_too_many_at_once_are_shown_as_long_as_they_are_too_many(board: Board) -> None:
    firing = fired(board, (0, 0.1, 0.3), (1, 0.2, 0.3), (2, 0.25, 0.05), (0, 0.9, 0.01))
    of = finding("overlap", float(firing.on[2][0, 0]), (), channel=None, shape="count", channels=(0, 1, 2), value=3.0)
    too_many, most = (stretch_of(Finding(**{**of.__dict__, "limit": limit}), board, firing) for limit in (1.0, 2.0))
    assert too_many == pytest.approx((firing.on[1][0, 0] - 3 * TAU, firing.on[0][0, 1] + 3 * TAU))
    assert most == pytest.approx((firing.on[2][0, 0] - 3 * TAU, firing.on[2][0, 1] + 3 * TAU))


def test_a_count_over_the_whole_run_is_shown_over_the_whole_run(board: Board) -> None:
    firing = fired(board, (0, 0.0, 0.5), (1, 0.0, 0.5))
    of = finding("overlap", float(firing.on[0][0, 0]), (), channel=None, shape="count", channels=(0, 1), value=2.0)
    start, stop = stretch_of(Finding(**{**of.__dict__, "limit": 1.0}), board, firing)
    assert start == 0.0
    assert stop > 0.5


def test_counts_are_those_of_the_channels_asked_for(board: Board) -> None:
    firing = fired(board, (0, 0.1, 0.2), (1, 0.2, 0.2), (2, 0.15, 0.5))
    times, counts = count_on((0, 1), firing)
    assert times[0] == 0.0
    for t in np.linspace(0.0, 0.6, 601):
        now = sum(n in firing.channels_on(float(t)) for n in (0, 1))
        assert counts[np.searchsorted(times, t, side="right") - 1] == now


def test_no_channel_on_counts_nothing(board: Board) -> None:
    times, counts = count_on((7,), fired(board, (0, 0.1, 0.2)))
    assert (list(times), list(counts)) == ([0.0], [0.0])


def test_a_part_of_the_board_is_no_channel_though_it_has_a_channels_name(board: Board) -> None:
    named = finding("rail-sag", 0.1, ("v_rail",), channel=None, label="lane 0")
    assert channels_in_question(named, board) == ()
    assert channels_in_question(finding("pulse-timing", 0.1, (), channel=None), board) == (0,)
