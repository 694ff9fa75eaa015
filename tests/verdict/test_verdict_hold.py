"""Pulses that are held: the lowest current while they are, what stands in for a hold current, and the duty that was reached."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from firing_boards import board

from boardsim.board.reader import Board
from boardsim.circuit.deck import PlacedRule
from boardsim.errors import QuantityError
from boardsim.firing.held import Held
from boardsim.firing.hold import Hold
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.firing.schedule import Firing, fire
from boardsim.parts.base import NOMINAL
from boardsim.parts.coil import Coil
from boardsim.parts.rules import HoldRule, MotionRule
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding
from boardsim.verdict.hold import (
    Valleys,
    assumptions_of_holds,
    duty_for,
    held_spans,
    judge_chops,
    judge_hold,
    told_of_holds,
)

HOLD = Hold(8e-3, 0.3, 1e3)


def held_firing(the_board: Board, *channels: int) -> Firing:
    pulses = tuple(Pulse(c, 0.001, 0.02, HOLD) for c in channels)
    return fire(the_board, Pattern(Path("held.toml"), "held", None, pulses))


def coil(**fields: str) -> Coil:
    return Coil.model_validate({"resistance": "24 ohm", "inductance": "20 mH", **fields})


def hold_rule(one: Coil) -> HoldRule:
    (rule,) = (r for r in one.stamp("c0", "valve", "a", "b", NOMINAL, None).rules if isinstance(r, HoldRule))
    return rule


def judged(the_board: Board, rule: HoldRule, lowest: float) -> Finding:
    firing = held_firing(the_board, 0)
    valleys = Valleys(held_spans(firing, 0, 0.0, firing.duration))
    t = np.linspace(0.0, firing.duration, 2001)
    valleys.feed(t, np.where((t > 15e-3) & (t < 16e-3), lowest, 0.8))
    placed = PlacedRule(rule, 0, "valve", "needle 0")
    (found,) = judge_hold(rule, placed, valleys, firing, Bench(the_board, "some corner", ()))
    return found


@pytest.mark.parametrize("size", [3, 10, 1000])
def test_valleys_are_the_lowest_values_within_their_spans_however_they_are_fed(size: int) -> None:
    spans = np.array([[1.05, 2.0], [3.0, 4.45]])
    valleys = Valleys(spans)
    t = np.linspace(0.0, 5.0, 501)
    y = np.abs(t - 2.5) + 0.1 * np.cos(40 * t)
    for k in range(0, 500, size):
        valleys.feed(t[k : k + size + 1], y[k : k + size + 1])
    fine = np.linspace(0.0, 5.0, 500001)
    for k, (a, b) in enumerate(spans):
        within = (fine >= a) & (fine <= b)
        assert valleys.lowest[k] == pytest.approx(np.interp(fine, t, y)[within].min(), abs=1e-6)
        assert a <= valleys.at[k] <= b
        assert valleys.first[k] == pytest.approx(np.interp(a, t, y))


def test_a_current_below_the_hold_current_fails_and_says_when_and_what_to_try(tmp_path: Path) -> None:
    found = judged(board(tmp_path), hold_rule(coil(hold="0.4 A")), 0.35)
    assert (found.verdict, found.check, found.worse) == ("fail", "hold", "low")
    assert found.value == pytest.approx(0.35)
    assert found.limit == pytest.approx(0.4)
    assert 15e-3 <= (found.at or 0.0) <= 16e-3
    assert "stays in above 400 mA; try: a hold of " in found.sentence


def test_a_current_that_stays_above_passes_and_one_close_to_it_is_tight(tmp_path: Path) -> None:
    rule = hold_rule(coil(hold="0.4 A"))
    assert judged(board(tmp_path), rule, 0.5).verdict == "pass"
    assert judged(board(tmp_path), rule, 0.42).verdict == "tight"


def test_the_upper_end_of_a_hold_current_counts() -> None:
    assert hold_rule(coil(hold="0.3 to 0.4 A")).limit.value == pytest.approx(0.4)


def test_without_a_hold_current_the_release_current_counts_and_is_listed(tmp_path: Path) -> None:
    rule = hold_rule(coil(release="0.1 to 0.2 A"))
    assert rule.limit.value == pytest.approx(0.2)
    assert rule.limit.source.startswith("assumed: no hold current given")
    the_board = board(tmp_path)
    valve = replace(the_board.channel(0), coil=coil(release="0.1 to 0.2 A"), coil_name="valve")
    changed = replace(the_board, channels=(valve, *the_board.channels[1:]))
    (only,) = assumptions_of_holds(changed, held_firing(changed, 0))
    assert (only.part, only.quantity, only.value) == ("coil valve", "hold current", "200 mA")
    assert assumptions_of_holds(changed, held_firing(changed, 1)) == ()


def test_without_both_the_limit_is_missing(tmp_path: Path) -> None:
    found = judged(board(tmp_path), hold_rule(coil()), 0.35)
    assert (found.verdict, found.limit) == ("limit-missing", None)


def test_of_a_coil_whose_motion_is_described_its_position_speaks_unless_a_hold_current_is_given() -> None:
    class Moving(Coil):
        def more_rules(self) -> tuple[MotionRule, ...]:
            return (MotionRule("held-in", "position", "speed", 1e-3, 1e-3, hold_rule(coil()).limit),)

    fields = {"resistance": "24 ohm", "inductance": "20 mH", "release": "0.1 A"}
    rules = Moving.model_validate(fields).stamp("c0", "valve", "a", "b", NOMINAL, None).rules
    assert not any(isinstance(r, HoldRule) for r in rules)
    rules = Moving.model_validate({**fields, "hold": "0.2 A"}).stamp("c0", "valve", "a", "b", NOMINAL, None).rules
    assert any(isinstance(r, HoldRule) for r in rules)


@pytest.mark.parametrize(
    ("fields", "said"),
    [
        ({"hold": "0.6 A", "pull_in": "0.5 A"}, "hold must not be larger than pull_in"),
        ({"hold": "0.05 A", "release": "0.1 A"}, "hold must not be smaller than release"),
    ],
)
def test_a_hold_current_that_contradicts_the_others_is_refused(fields: dict[str, str], said: str) -> None:
    with pytest.raises((QuantityError, ValueError), match=said):
        coil(**fields)


def test_no_duty_is_advised_where_none_follows() -> None:
    assert duty_for(1.0, 0.3, 0.005, 0.2) is None  # all but empty in each pause
    assert duty_for(1.0, 0.3, 0.2, 1.1) is None  # more than full drive gives


def test_the_duty_that_a_chop_reached_is_judged_as_a_pulse_is(tmp_path: Path) -> None:
    the_board = board(tmp_path)
    firing = held_firing(the_board, 0, 3)
    (found,) = judge_chops(the_board, firing)
    assert found.value == pytest.approx(
        abs(18 / 59 - 0.3) / 0.3
    )  # of 17 us each 58.8 frames in 1 ms: 59, 17.7 of them on: 18
    assert (found.check, found.verdict) == ("pulse-timing", "pass")
    off = replace(firing.held.pulses[1], duty=0.36)
    worse = replace(firing, held=replace(firing.held, pulses=(firing.held.pulses[0], off)))
    (found,) = judge_chops(the_board, worse)
    assert found.value == pytest.approx(0.2)
    assert (found.label, found.verdict) == ("channel 3", "limit-missing")  # nobody gave pulse_error
    assert list(judge_chops(the_board, replace(firing, held=Held()))) == []
    # Frames that may come 15 us late change the on-time of a period of 59 x 17 us by as much.
    (found,) = judge_chops(the_board, replace(firing, jitter=15e-6))
    assert found.value == pytest.approx((18 / 59 - 0.3 + 15 / (59 * 17)) / 0.3)


def test_the_report_says_how_many_frames_a_period_has(tmp_path: Path) -> None:
    the_board = board(tmp_path)
    said = " ".join(told_of_holds(the_board, held_firing(the_board, 0)))
    assert "59 register frames, one every 17.0 us, fit into a chop's period of 1.00 ms" in said
    assert "18 of 59, 30.5%" in said
