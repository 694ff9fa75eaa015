"""Single pulses: how high, how long, how much; and what a part stands for as long as one lasts."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from boardsim.verdict.pulses import Pulses
from boardsim.verdict.surges import rated_for
from boardsim.verdict.watch import Floats

SHARP = np.array([0.0, 1.0, 2.0, 3.0, 4.0])


def fed(t: Floats, y: Floats, share: float, *cuts: int) -> Pulses:
    watch = Pulses(share)
    edges = [0, *cuts, len(t) - 1]
    for a, b in itertools.pairwise(edges):
        watch.feed(t[a : b + 1], y[a : b + 1])
    return watch


def exponential(n: int = 20001) -> tuple[Floats, Floats]:
    """2 A with a time constant of 1 ms, from 1 ms on."""
    t = np.linspace(0, 20e-3, n)
    return t, np.where(t < 1e-3, 0.0, 2.0 * np.exp(-(t - 1e-3) / 1e-3))


def test_an_exponential_lasts_as_long_as_the_logarithm_says_and_holds_its_charge() -> None:
    (pulse,) = fed(*exponential(), 0.1).all()
    assert pulse.peak == pytest.approx(2.0)
    assert pulse.at == pytest.approx(1e-3, abs=2e-6)
    assert pulse.lasting == pytest.approx(1e-3 * np.log(10), rel=2e-3)
    assert pulse.total == pytest.approx(2e-3, rel=1.2e-2)  # but for the last hundredth of its peak
    (half,) = fed(*exponential(), 0.5).all()
    assert half.lasting == pytest.approx(1e-3 * np.log(2), rel=2e-3)


def test_a_half_sine_lasts_for_most_of_its_base() -> None:
    t = np.linspace(0, 10e-3, 5001)
    y = np.where((t > 1e-3) & (t < 9.3e-3), np.sin(np.pi * (t - 1e-3) / 8.3e-3), 0.0)
    (pulse,) = fed(t, y, 0.1).all()
    assert pulse.lasting == pytest.approx(8.3e-3 * (1 - 2 * np.arcsin(0.1) / np.pi), rel=1e-3)
    assert pulse.total == pytest.approx(2 / np.pi * 8.3e-3, rel=1e-3)


@pytest.mark.parametrize("cuts", [(), (700,), (999, 1001), (1000, 1500, 2000, 9000), tuple(range(1, 20000, 37))])
def test_where_the_blocks_are_cut_does_not_matter(cuts: tuple[int, ...]) -> None:
    whole, parts = fed(*exponential(), 0.1).all(), fed(*exponential(), 0.1, *cuts).all()
    (one,), (other,) = whole, [p for p in parts if p.peak > 0.1]
    for name in ("peak", "at", "lasting", "total"):
        assert getattr(other, name) == pytest.approx(getattr(one, name), rel=1e-6), name


def test_two_pulses_are_two_and_what_is_negative_does_not_count() -> None:
    t = np.linspace(0, 8, 8001)
    y = np.select([(t > 1) & (t < 2), (t > 3) & (t < 5), (t > 6) & (t < 7)], [3.0, 1.0, -9.0], 0.0)
    found = fed(t, y, 0.5, 2500, 4000).all()
    assert [(round(p.peak, 3), round(p.lasting, 2)) for p in found] == [(3.0, 1.0), (1.0, 2.0)]


def test_a_pulse_that_has_not_ended_counts() -> None:
    (pulse,) = fed(SHARP, np.array([0.0, 0.0, 1.0, 1.0, 1.0]), 0.5).all()
    assert pulse.lasting == pytest.approx(2.5)


def test_a_signal_that_is_nothing_has_no_pulses() -> None:
    assert fed(SHARP, np.zeros(5), 0.5).all() == []


POINTS = ((1e-3, 45.0), (2e-3, 35.0), (5e-3, 30.0))  # Vishay 88503 (29 Apr 2020), a rectifier of 1 A


@pytest.mark.parametrize(("length", "amperes"), POINTS)
def test_a_printed_point_is_met(length: float, amperes: float) -> None:
    assert rated_for(POINTS, length)[0] == amperes


def test_between_two_points_the_rating_is_straight_on_logarithmic_scales() -> None:
    # Half way between 1 and 2 ms on a logarithmic scale lies the geometric mean of both lengths, and of both ratings.
    rating, how = rated_for(POINTS, 1e-3 * np.sqrt(2))
    assert rating == pytest.approx(np.sqrt(45.0 * 35.0))
    assert how == "between its ratings for 1.00 ms and 2.00 ms"


def test_a_shorter_pulse_has_the_first_rating_and_a_longer_one_less_than_the_last() -> None:
    assert rated_for(POINTS, 1e-6)[0] == 45.0
    rating, how = rated_for(POINTS, 20e-3)
    assert rating == pytest.approx(15.0)
    assert "beyond its rating for 5.00 ms" in how


def test_no_pulse_is_too_long_for_what_the_part_stands_for_ever() -> None:
    assert rated_for(((1e-6, 2.0),), 1e-3, 0.3) == (0.3, "what it stands however long")


def test_ratings_never_rise_with_length() -> None:
    lengths = np.geomspace(1e-6, 1.0, 200)
    ratings = [rated_for(POINTS, float(t), 1.0)[0] for t in lengths]
    assert ratings == sorted(ratings, reverse=True)
