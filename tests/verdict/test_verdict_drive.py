"""The drive of a switch at the ends of its pulses against what its current then needs."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from boardsim.board.reader import read_board
from boardsim.circuit.deck import PlacedRule
from boardsim.parts.rules import DriveRule, Limit
from boardsim.verdict.bench import Bench
from boardsim.verdict.drive import judge_drive
from boardsim.verdict.findings import Finding

FRUIT_SORTER = Path(__file__).parents[2] / "netlists" / "fruit-sorter" / "board.toml"

# TI ULN2803A SLRS049H (Feb 2017), section 6.5: V_I(on) of 2.4 V, 2.7 V and 3.0 V at most for 200, 250 and 300 mA.
NEEDS = ((0.2, 2.4), (0.25, 2.7), (0.3, 3.0))


def judged(needs: tuple[tuple[float, float], ...], *samples: tuple[float, float, float]) -> list[Finding]:
    """Samples are (time, input voltage, current) at the ends of pulses."""
    limit = Limit(None, "V", None, "library: a datasheet", "input voltage for the on-state")
    rule = DriveRule(
        "under-drive", "v_in", "i_d", needs, limit, "destroy", "input voltage of the switch", "a higher rail"
    )
    columns = np.array(samples).T
    bench = Bench(read_board(FRUIT_SORTER), "supply low, coils cold", ())
    return list(judge_drive(rule, PlacedRule(rule, 3, "sink-array-8", "lane 3"), (*columns,), bench))


def test_the_pulse_that_falls_shortest_of_its_need_decides() -> None:
    (found,) = judged(NEEDS, (0.01, 3.3, 0.2), (0.02, 2.9, 0.29), (0.03, 3.3, 0.3))
    assert (found.verdict, found.at) == ("fail", pytest.approx(0.02))
    assert found.limit == pytest.approx(2.94)  # straight between 2.7 V at 250 mA and 3.0 V at 300 mA
    assert "for its 290 mA is 2.94 V; try: a higher rail" in found.sentence


def test_a_current_above_every_printed_need_has_no_limit() -> None:
    (found,) = judged(NEEDS, (0.01, 5.0, 0.2), (0.02, 5.0, 0.35))
    assert (found.verdict, found.limit, found.at) == ("limit-missing", None, pytest.approx(0.02))
    assert "no input voltage for the on-state of sink-array-8 was given above 300 mA" in found.sentence


def test_a_weak_drive_below_the_printed_needs_decides_before_a_missing_one() -> None:
    (found,) = judged(NEEDS, (0.01, 2.0, 0.25), (0.02, 5.0, 0.35))
    assert (found.verdict, found.at) == ("fail", pytest.approx(0.01))


def test_without_any_printed_need_nothing_passes() -> None:
    (found,) = judged(((0.0, 1.0),), (0.01, 5.0, 0.1))
    assert found.verdict == "limit-missing"


def test_a_pulse_that_carries_nothing_asks_for_nothing() -> None:
    assert judged(NEEDS, (0.01, 5.0, 0.0)) == []
