"""What the clamps of a package take at one time: which stretches count together, and what a missing rating leaves."""

from __future__ import annotations

from pathlib import Path
from types import SimpleNamespace
from typing import Any

import pytest

from boardsim.board.reader import read_board
from boardsim.circuit.deck import PlacedRule
from boardsim.parts.rules import Limit, TogetherRule
from boardsim.verdict.avalanche import judge_together
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding
from boardsim.verdict.watch import Avalanche

BOARD = Path(__file__).parents[2] / "netlists" / "bean-planter" / "board.toml"


def judged(
    events: dict[int, list[tuple[float, float, float]]], whole: float | None, one: float | None, within: float = 0.0
) -> list[Finding]:
    """Events as (start, lasting, energy) per channel. [s], [s], [J]"""
    limits = [Limit(value, "J", "energy", "sheet", name) for value, name in ((whole, "whole"), (one, "one"))]
    rule = TogetherRule("overvoltage", limits[0], limits[1], "less at once", (0, 1, 2), within=within)
    readings: Any = SimpleNamespace(
        avalanches={
            (c, "v_ds"): tuple(Avalanche(t, lasts, e, 0.1, 50.0) for t, lasts, e in events.get(c, []))
            for c in (0, 1, 2)
        }
    )
    bench = Bench(read_board(BOARD), "corner", ())
    return list(judge_together(rule, PlacedRule(rule, None, "part", "package 1"), readings, bench))


def test_stretches_that_overlap_count_as_one_and_others_do_not() -> None:
    events = {0: [(0.0, 2e-3, 4e-3)], 1: [(1e-3, 2e-3, 3e-3)], 2: [(10e-3, 1e-3, 50e-3)]}
    (found,) = judged(events, 10e-3, 5e-3)
    assert found.value == pytest.approx(7e-3)
    assert found.verdict == "pass"
    assert judged({2: [(10e-3, 1e-3, 50e-3)]}, 10e-3, 5e-3) == []


def test_energies_that_come_before_the_chip_has_cooled_add_up() -> None:
    """Three clamps one after the other, and the first again: of the windows of 10 ms the first to hold 12 mJ counts."""
    events = {0: [(0.0, 1e-3, 4e-3), (14e-3, 1e-3, 4e-3)], 1: [(5e-3, 1e-3, 3e-3)], 2: [(9e-3, 1e-3, 5e-3)]}
    (found,) = judged(events, 11e-3, 1.0, within=10e-3)
    assert (found.value, found.at) == (pytest.approx(12e-3), 0.0)
    assert found.verdict == "fail"
    assert "3 outputs, within 10.0 ms" in found.sentence
    assert judged(events, 11e-3, 1.0) == []
    assert judged({0: events[0]}, 11e-3, 1.0, within=1.0) == []  # one clamp alone has a rating of its own


@pytest.mark.parametrize(
    ("whole", "one", "verdict"),
    [
        (6e-3, None, "fail"),
        (7.2e-3, 1e-3, "tight"),
        (None, 9e-3, "pass"),  # what one stands with the others idle, all of them stand together
        (None, 6e-3, "limit-missing"),
        (None, None, "limit-missing"),
    ],
)
def test_without_a_rating_of_the_package_only_what_one_output_stands_passes(
    whole: float | None, one: float | None, verdict: str
) -> None:
    (found,) = judged({0: [(0.0, 2e-3, 4e-3)], 1: [(1e-3, 2e-3, 3e-3)]}, whole, one)
    assert found.verdict == verdict
    assert found.consequence == "destroy"
