"""A latching gate whose reservoir does not carry its pulse and is not full again for the next; the same with one that is and does."""

from __future__ import annotations

from pathlib import Path

import pytest
from test_boards_clamps import broken, fired

pytestmark = pytest.mark.engine


def test_a_small_reservoir_leaves_the_gate_where_it_was_and_nothing_else_is_broken(tmp_path: Path) -> None:
    result = fired("f16_under_pulsed", "bad", tmp_path)
    found = [f for f in result.findings if f.verdict == "fail"]
    assert sorted((f.check, f.channel or 0) for f in found) == [("flip", 0), ("flip", 4)]
    first, second = sorted(found, key=lambda f: f.channel or 0)
    assert "try: a larger reservoir" in first.sentence
    assert "when the pulse began, of 24.0 V before the first" in second.sentence


def test_a_larger_one_that_is_recharged_in_time_flips_it_both_ways(tmp_path: Path) -> None:
    result = fired("f16_under_pulsed", "repaired", tmp_path)
    assert broken(result) == {}
    flips = [f for f in result.findings if f.check == "flip"]
    assert {(f.channel, f.unit) for f in flips} == {(0, "A"), (4, "A")}
    assert {f.verdict for f in result.findings} <= {"tight", "pass"}
