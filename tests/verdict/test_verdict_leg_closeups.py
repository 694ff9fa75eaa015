"""What the close-up of a leg is cut from: made-up gates and currents, no ngspice."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from boardsim.board.reader import read_board
from boardsim.circuit.assemble import assemble, windows
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.firing.schedule import fire
from boardsim.parts.base import NOMINAL
from boardsim.parts.rules import ShootThroughRule
from boardsim.verdict.findings import Finding
from boardsim.verdict.leg_closeups import LegCut, leg_rule

FOLDER = Path(__file__).parents[1] / "boards" / "f15_shoot_through"
RULE = ShootThroughRule("shoot-through", ("v_gs", "v_gs_low"), ("i_d", "i_d_low"), (2.0, 1.5), 1e-6, "given")


def finding(at: float | None, value: float = -0.1e-6) -> Finding:
    return Finding(
        "shoot-through", "dead time", "p", 0, "gate 0", value, 0.0, "s", -0.1, at, "destroy", "fail", "", shape="value"
    )


def test_a_leg_is_shown_for_two_dead_times_around_the_moment_and_within_the_run() -> None:
    board = read_board(FOLDER / "bad.toml")
    firing = fire(board, Pattern(board.path, "p", 5e-3, (Pulse(0, 1e-3, 1e-3),)))
    assert LegCut(finding(2e-3), RULE, firing, 10).stretch == pytest.approx((2e-3 - 2e-6, 2e-3 + 2.1e-6))
    assert LegCut(finding(0.5e-6), RULE, firing, 10).stretch.start == 0.0
    assert LegCut(finding(firing.duration), RULE, firing, 10).stretch.stop == firing.duration
    deck = assemble(board, firing, NOMINAL, windows(board, firing)[0])
    assert leg_rule(finding(2e-3), deck) is not None
    assert leg_rule(finding(None), deck) is None
    assert leg_rule(finding(2e-3), None) is None


def test_what_flows_through_both_counts_while_both_gates_are_on_only() -> None:
    """The high gate falls through 2 V at 2.5 us, the low one rises through 1.5 V at 1.5 us; 3 A and 5 A flow all the time."""
    board = read_board(FOLDER / "bad.toml")
    firing = fire(board, Pattern(board.path, "p", 5e-3, (Pulse(0, 1e-3, 1e-3),)))
    cut = LegCut(finding(2e-6), RULE, firing, 40)
    t = np.linspace(0, 5e-6, 501)
    high, low = np.where(t < 2.5e-6, 10.0, 0.0), np.where(t < 1.5e-6, 0.0, 10.0)
    cut.feed(t, dict(zip(cut.causes, (high, low, np.full(501, 3.0), np.full(501, 5.0)), strict=True)))
    found = cut.waves()
    assert found is not None
    through = found[1]
    middle = 0.5 * (through.edges[1:] + through.edges[:-1])
    inside = (middle > 1.7e-6) & (middle < 2.3e-6)
    outside = (middle < 1.3e-6) | (middle > 2.7e-6)
    assert (through.low[inside] == 3.0).all()
    assert (through.high[outside] == 0.0).all()
    assert [wave.label for wave in found[0]] == ["high transistor, on from 2.00 V", "low transistor, on from 1.50 V"]
