"""A half bridge without dead time, and the same with it; a coil between two legs, thrown back too early and in time."""

from __future__ import annotations

import math
import shutil
from pathlib import Path

import pytest
from test_boards_clamps import HERE, broken, fired

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


def test_both_directions_at_once_are_found_with_what_follows_from_it(tmp_path: Path) -> None:
    """What is left at 4 ms, and at 5 ms of it: Ohm's law with the chain's time constants.

    V / R (1 - exp(-t R / L)) after 3 ms, 0.97 A; then 1 ms through both high transistors, exp(-R / L 1 ms) of it, 0.29 A.
    """
    result = fired("f15_both_directions", "board", tmp_path, "bad")
    found = broken(result)
    assert set(found) == {
        ("overlap", "directions of one coil on at once"),
        ("overlap", "coil current when fired again"),
        ("pull-in", "coil current at the end of a pulse"),
    }
    left, pulled = (
        found["overlap", "coil current when fired again"],
        found["pull-in", "coil current at the end of a pulse"],
    )
    assert (left.channel, pulled.channel) == (4, 0)
    assert "the other way" in left.sentence
    tau = 20e-3 / 24
    # 2 %: 10 mohm a switch at 60 mohm of supply and cable, and the high transistors' 0.1 ohm each while both are on.
    assert left.value == pytest.approx(1.0 * (1 - math.exp(-3e-3 / tau)), rel=0.02)
    assert pulled.value == pytest.approx(left.value * math.exp(-1e-3 / tau), rel=0.02)


def test_one_direction_at_a_time_breaks_nothing(tmp_path: Path) -> None:
    result = fired("f15_both_directions", "board", tmp_path, "repaired")
    assert broken(result) == {}
    assert {f.channel for f in result.findings if f.check == "pull-in"} == {0, 4}  # each in its own direction
    (total,) = (f for f in result.findings if f.check == "most-current")
    assert total.value == pytest.approx(1.0, rel=0.02)  # 24 V / 24 ohm, of one coil once


def test_both_ends_of_a_drivers_supply_count_and_a_gate_that_only_touches_its_threshold_is_resolved(
    tmp_path: Path,
) -> None:
    """12 V less and more 60 %: 4.8 V, and 19.2 V, at which the low gate is lifted past its threshold for a few nanoseconds."""
    text = (HERE / "f15_shoot_through" / "repaired.toml").read_text(encoding="utf-8")
    (tmp_path / "board.toml").write_text(text.replace('supply = "12 V"', 'supply = "12 V +/- 60 %"'), encoding="utf-8")
    shutil.copy(HERE / "f15_shoot_through" / "pattern.toml", tmp_path)
    result = fired(str(tmp_path), "board", tmp_path)  # which asks for every corner to be proven
    found = broken(result)
    drive, rating = (
        found["under-drive", "gate drive of the high transistor"],
        found["overvoltage", "gate-source voltage of the low transistor"],
    )
    assert drive.value == pytest.approx(4.8, rel=0.01)
    assert rating.value == pytest.approx(19.2, rel=0.01)
    touched = found["shoot-through", "dead time left at the gates"]
    assert -20e-9 < touched.value < 0
    assert not [f for f in result.findings if f.verdict == "unproven"]
