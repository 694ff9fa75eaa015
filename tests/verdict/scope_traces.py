"""Made-up scope traces of coils that switch on and off a voltage: exact formulas, noise with a fixed seed."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from boardsim.verdict.overlay import Course
from boardsim.verdict.trace import Trace

Floats = NDArray[np.float64]
VOLTS, CLAMP, WIDTH = 24.0, 25.0, 6e-3


def exact(t: Floats, r: float, henries: float, on: float = 0.0, width: float = WIDTH) -> tuple[Floats, Floats]:
    """Current [A] and voltage [V] of a coil on a source, then against a clamp until its current is gone.

    i = V/R (1 - exp(-t R/L)), then with -V_c in place of V from where it was: OpenStax, University Physics vol. 2, 14.4.
    """
    off = on + width
    up = VOLTS / r * (1 - np.exp(-np.maximum(t - on, 0) * r / henries))
    last = VOLTS / r * (1 - np.exp(-width * r / henries))
    down = (last + CLAMP / r) * np.exp(-np.maximum(t - off, 0) * r / henries) - CLAMP / r
    i = np.where(t < off, up, np.maximum(down, 0))
    v = np.where(t < on, 0.0, np.where(t < off, VOLTS, np.where(down > 0, -CLAMP, 0.0)))
    return i, v


def course(r: float = 24.0, henries: float = 20e-3, on: float = 1e-3) -> Course:
    """As it was computed: from 0.4 ms before the turn-on to 3 ms after the turn-off."""
    t = np.linspace(on - 0.4e-3, on + WIDTH + 3e-3, 9401)
    i, v = exact(t, r, henries, on)
    return Course(t, i, v, on, on + WIDTH)


def trace(
    r: float = 24.0,
    henries: float = 20e-3,
    *,
    begins: float = 0.0,
    points: int = 3000,
    noise: float = 0.0,
    offset: float = 0.0,
    voltage: bool = True,
) -> Trace:
    """As it was measured: another clock, noise as a share of the peak, an offset of the current. [A]"""
    random = np.random.default_rng(7)
    t = np.linspace(begins - 1e-3, begins + WIDTH + 4e-3, points)
    i, v = exact(t, r, henries, begins)
    i = i + offset + noise * VOLTS / r * random.standard_normal(points)
    v = v + noise * VOLTS * random.standard_normal(points)
    return Trace(Path("made-up.csv"), t, i, v if voltage else None)
