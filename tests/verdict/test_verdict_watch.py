"""Readings do not depend on where the blocks of a waveform begin and end, and agree with a plain look at the whole."""

from __future__ import annotations

import itertools
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from boardsim.verdict.audit import refinement
from boardsim.verdict.findings import Reading
from boardsim.verdict.watch import HYSTERESIS, Avalanches, Dips, Extremes, Falls, Integrals, Samples, Slices, TimeAbove

values = st.lists(st.floats(-10, 10).map(lambda x: round(x, 3)), min_size=3, max_size=40)
cuts = st.lists(st.integers(1, 38), max_size=5)


def stretches(n: int, at: list[int]) -> list[slice]:
    """Blocks that share their border points."""
    borders = [0, *sorted({c for c in at if 0 < c < n - 1}), n - 1]
    return [slice(a, b + 1) for a, b in itertools.pairwise(borders)]


def both(
    y: list[float], at: list[int], make: Callable[[], Any], feed: Callable[[Any, Any, Any], None]
) -> tuple[Any, Any]:
    t, whole, split = np.arange(len(y), dtype=float), make(), make()
    series = np.array(y)
    feed(whole, t, series)
    for s in stretches(len(y), at):
        feed(split, t[s], series[s])
    return whole, split


@given(values, cuts)
def test_dips(y: list[float], at: list[int]) -> None:
    whole, split = both(y, at, lambda: Dips(0.5), lambda w, t, s: w.feed(t, s))
    rows = [[(d.start, d.lasting, d.lowest, d.at) for d in w.all()] for w in (whole, split)]
    np.testing.assert_allclose(*rows, atol=1e-9)
    # Straight lines between points: the time below the level in all, counted another way.
    fine = np.interp(np.linspace(0, len(y) - 1, 20_001), np.arange(len(y)), y)
    assert sum(d.lasting for d in whole.all()) == pytest.approx((fine < 0.5).mean() * (len(y) - 1), abs=0.02)
    assert (whole.lowest, whole.lowest_at) == (min(y), float(np.argmin(y)))


@given(values, cuts)
def test_time_above(y: list[float], at: list[int]) -> None:
    whole, split = both(y, at, lambda: TimeAbove(0.5), lambda w, t, s: w.feed(t, s))
    assert (whole.total, whole.first) == pytest.approx((split.total, split.first))
    fine = np.interp(np.linspace(0, len(y) - 1, 20_001), np.arange(len(y)), y)
    assert whole.total == pytest.approx((fine >= 0.5).mean() * (len(y) - 1), abs=0.02)


@given(values, cuts)
def test_extremes_integrals_and_samples(y: list[float], at: list[int]) -> None:
    whole, split = both(y, at, lambda: Extremes(2), lambda w, t, s: w.feed(t, np.stack([s, -s])))
    assert whole.high.tolist() == split.high.tolist() == [max(y), -min(y)]
    assert whole.high_at.tolist() == split.high_at.tolist()
    whole, split = both(y, at, lambda: Integrals(1), lambda w, t, s: w.feed(t, s[None, :]))
    assert whole.total == pytest.approx(split.total)
    times = np.array([0.25, 1.0, 1.75])
    whole, split = both(y, at, lambda: Samples(times), lambda w, t, s: w.feed(t, s))
    assert whole.values.tolist() == pytest.approx(np.interp(times, np.arange(len(y)), y))
    assert split.values.tolist() == pytest.approx(whole.values.tolist())


@given(values, cuts)
def test_falls(y: list[float], at: list[int]) -> None:
    def feed(w: Falls, t: Any, s: Any) -> None:
        w.feed(t, [[(s, np.ones_like(s))]], np.zeros((1, len(s))))

    whole, split = both(y, at, lambda: Falls(1), feed)
    total = np.concatenate([[0.0], np.cumsum((np.array(y)[1:] + np.array(y)[:-1]) / 2)])
    assert whole.drop[0] == pytest.approx(np.max(np.maximum.accumulate(total) - total), abs=1e-9)
    assert split.drop[0] == pytest.approx(whole.drop[0], abs=1e-9)


@given(values, cuts)
def test_avalanches(y: list[float], at: list[int]) -> None:
    whole, split = both(y, at, lambda: Avalanches(5.0), lambda w, t, s: w.feed(t, s, np.ones_like(s)))
    rows = [[(a.start, a.lasting, a.voltage) for a in w.all()] for w in (whole, split)]
    assert rows[0] == rows[1]
    # Stretches near breakdown that reach it, counted another way.
    near = "".join("B" if v >= 5.0 else "n" if v >= HYSTERESIS * 5.0 else " " for v in y).split()
    assert len(whole.all()) == sum("B" in stretch for stretch in near)
    assert all(a.energy <= b.energy + 1e-9 for a, b in zip(whole.all(), split.all(), strict=True))


def test_ripple_about_breakdown_is_one_avalanche() -> None:
    watch = Avalanches(60.0)
    t = np.linspace(0, 1e-3, 1001)
    v = np.full_like(t, 60.2)
    v[500] = 59.999
    watch.feed(t, v, np.ones_like(t))
    assert len(watch.all()) == 1
    assert watch.all()[0].energy == pytest.approx(60.2e-3, rel=1e-3)


@pytest.mark.parametrize("points", [5, 6, 7, 11, 101])
def test_the_avalanche_current_does_not_hang_on_where_the_points_lie(points: int) -> None:
    """The voltage rises evenly to breakdown while the current falls evenly to nothing: 57 V is reached with 3/60 of it."""
    watch = Avalanches(60.0)
    t = np.linspace(0, 1.0, points)
    watch.feed(t, 60.0 * t, 2.0 * (1 - t) + 1e-12)
    (one,) = watch.all()
    assert one.current == pytest.approx(2.0 * (1 - HYSTERESIS))


@given(values, cuts)
def test_slices_keep_every_spike(y: list[float], at: list[int]) -> None:
    edges = np.linspace(0, len(y) - 1, 8)
    whole, split = both(y, at, lambda: Slices(edges, 1), lambda w, t, s: w.feed(t, s[None, :]))
    np.testing.assert_allclose(whole.high, split.high)
    np.testing.assert_allclose(whole.low, split.low)
    assert whole.high.max() == max(y)
    assert whole.low.min() == min(y)
    assert np.isfinite(whole.low).all()


def test_a_reading_that_the_repeat_has_not_is_no_agreement() -> None:
    once = (Reading("time to let go", "gate 0", 1e-3, "s", 1e-3),)
    assert refinement((), (), (100, 200), "nominal", "pair", (once, once)).passed
    for pair in ((once, ()), ((), once)):
        assert not refinement((), (), (100, 200), "nominal", "pair", pair).passed
