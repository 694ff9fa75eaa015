"""A half bridge without dead time, and the same with it."""

from __future__ import annotations

from pathlib import Path

import pytest
from test_boards_clamps import broken, fired

pytestmark = pytest.mark.engine


def test_without_dead_time_both_transistors_conduct_at_once_and_nothing_else_is_broken(tmp_path: Path) -> None:
    found = broken(fired("f15_shoot_through", "bad", tmp_path))
    assert set(found) == {
        ("shoot-through", "dead time left at the gates"),
        ("overcurrent", "peak current of the low transistor"),
    }
    one = found["shoot-through", "dead time left at the gates"]
    assert one.consequence == "destroy"
    assert one.value < 0
    assert "try: a dead time of at least" in one.sentence


def test_with_dead_time_nothing_is_broken(tmp_path: Path) -> None:
    result = fired("f15_shoot_through", "repaired", tmp_path)
    assert broken(result) == {}
    (left,) = (f for f in result.findings if f.check == "shoot-through")
    assert 0 < left.value < 1.5e-6
