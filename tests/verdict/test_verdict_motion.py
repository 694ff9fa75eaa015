"""What is read of a motion and how it is judged, on made-up courses whose every number follows from the laws of motion."""

from __future__ import annotations

import numpy as np
import pytest

from boardsim.verdict.findings import Floats
from boardsim.verdict.motion import Strokes, arrival

TRAVEL = 3e-3


def thrown(t: Floats, a: float, on: float, stop_after: float = np.inf) -> tuple[Floats, Floats]:
    """Position and speed of what a constant acceleration moves from rest, until a time after which it stands in the stop."""
    since = np.maximum(t - on, 0.0)
    x, v = a / 2 * since**2, a * since
    beyond = since > stop_after
    return np.where(beyond, TRAVEL * 1.003, x), np.where(beyond, 0.0, v)


@pytest.mark.parametrize("step", [20e-6, 100e-6, 170e-6])
@pytest.mark.parametrize("size", [2, 3, 7, 1000])
def test_a_blow_is_read_from_the_approach_whatever_the_steps_and_wherever_blocks_are_cut(
    step: float, size: int
) -> None:
    """v^2 = 2 a s and t = sqrt(2 s / a): Galilei's laws of falling bodies; the stop has taken all speed at the next point."""
    a, on = 100.0, 1e-3
    fall = np.sqrt(2 * TRAVEL / a)
    t = np.arange(0.0, 15e-3, step)
    x, v = thrown(t, a, on, fall)
    strokes = Strokes(TRAVEL, np.array([[on, 12e-3]]), 0.0, float(t[-1]))
    for k in range(0, len(t) - 1, size):
        strokes.feed(t[k : k + size + 1], x[k : k + size + 1], v[k : k + size + 1])
    (pulse,) = strokes.all()
    ((at, speed),) = pulse.hits
    # Exact but for rounding: the acceleration does not change before the stop.
    assert at - on == pytest.approx(fall, rel=1e-9)
    assert speed == pytest.approx(np.sqrt(2 * a * TRAVEL), rel=1e-9)


def test_a_mass_that_is_not_under_way_yet_is_read_from_the_line_between_two_points() -> None:
    at, speed = arrival(np.array([[0.0, 1.0], [0.0, 2.0], [0.0, 4.0]]), 1.0)
    assert (at, speed) == (0.5, 2.0)
