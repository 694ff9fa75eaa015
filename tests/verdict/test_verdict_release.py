"""Crossings and stretches are found wherever blocks are cut, and a reading that cannot be taken is none."""

from __future__ import annotations

import numpy as np
import pytest

from boardsim.verdict.findings import Floats
from boardsim.verdict.release import Crossings, from_time, resolved

T = np.array([0.0, 1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 7.0])
# Reaches 1 at 0.5; falls below it at 2.5, is back at 3.5, and stays below from 5.25 on.
Y = np.array([0.0, 2.0, 1.5, 0.5, 1.5, 1.25, 0.25, 0.0])


def in_blocks(t: Floats, y: Floats, size: int) -> list[tuple[Floats, Floats]]:
    """As waveforms come: each block begins with the last point of the one before."""
    return [(t[max(a - 1, 0) : a + size], y[..., max(a - 1, 0) : a + size]) for a in range(0, len(t), size)]


@pytest.mark.parametrize("size", range(1, 9))
def test_the_first_rise_and_the_last_fall_are_found_in_blocks_of_any_size(size: int) -> None:
    watch = Crossings(1.0)
    for t, y in in_blocks(T, Y, size):
        watch.feed(t, y)
    assert watch.first == pytest.approx(0.5)
    assert watch.below_since == pytest.approx(5.25)


@pytest.mark.parametrize("size", [1, 3, 8])
def test_a_level_that_is_never_reached_has_no_rise_and_is_below_from_the_start(size: int) -> None:
    watch = Crossings(3.0)
    for t, y in in_blocks(T, Y, size):
        watch.feed(t, y)
    assert (watch.first, watch.below_since) == (None, 0.0)


@pytest.mark.parametrize("size", [1, 2, 8])
def test_a_signal_that_ends_at_or_above_its_level_has_not_let_go(size: int) -> None:
    watch = Crossings(1.0)
    for t, y in in_blocks(T[:6], Y[:6], size):
        watch.feed(t, y)
    assert watch.below_since is None


def test_a_signal_that_begins_above_its_level_has_reached_it_at_once() -> None:
    watch = Crossings(1.0)
    watch.feed(np.array([2.0, 3.0]), np.array([2.0, 0.0]))
    assert (watch.first, watch.below_since) == (2.0, 2.5)


@pytest.mark.parametrize("start", [-1.0, 0.0, 0.25, 1.0, 6.5, 6.999, 7.0, 8.0])
@pytest.mark.parametrize("size", range(1, 9))
def test_a_stretch_holds_the_integral_from_its_start_on_however_blocks_are_cut(start: float, size: int) -> None:
    total = 0.0
    for t, y in in_blocks(T, np.stack([Y, -Y]), size):
        part = from_time(start, t, y)
        if part is not None:
            assert part[0][0] >= start
            assert part[1] == pytest.approx(np.stack([np.interp(part[0], T, Y), -np.interp(part[0], T, Y)]))
            total += float(np.trapezoid(part[1][0], part[0]))
    fine = np.linspace(min(max(start, 0.0), 7.0), 7.0, 700_001)
    assert total == pytest.approx(float(np.trapezoid(np.interp(fine, T, Y), fine)), abs=1e-4)


def test_what_a_run_rounds_away_is_no_energy_and_what_a_part_takes_is() -> None:
    assert resolved(-1.63e-9, 9.6e-3) == 0.0
    assert resolved(1.63e-9, 1e-3) == 1.63e-9
    assert resolved(-5e-3, 9.6e-3) == -5e-3  # far from noise: it is wrong, and has to be seen
