"""Plungers fitted to currents from an independent solution of their equations by SciPy."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.integrate import solve_ivp

from boardsim.parts.motion import damping_of_bounce
from boardsim.parts.plunger import PlungerCoil
from boardsim.verdict.fit import Fit, Fitted, fit
from boardsim.verdict.overlay import Course, Overlay, lay_over
from boardsim.verdict.trace import Trace

Floats = NDArray[np.float64]
TRAVEL, MASS, RATE, CONTACT, BOUNCE = 4e-3, 10e-3, 150.0, 300e-6, 0.2
VOLTS, OHMS, OPEN, CLOSED, LOSS = 24.0, 16.0, 12e-3, 26e-3, 3200.0
ON, OFF, END = 1e-3, 17e-3, 27e-3


def current(
    preload: float, ohms: float = OHMS, opened: float = OPEN, closed: float = CLOSED
) -> tuple[Floats, Floats, Floats]:
    """Times [s], terminal current [A] and position [m] of a plunger on a source of 24 V that goes back to 0 V.

    d(flux)/dt = across, i_L = flux (1/L_o + (1/L_c - 1/L_o) x/s), force = flux^2/2 (1/L_o - 1/L_c)/s: Fitzgerald, Electric Machinery,
    chapter 3. A stop is a spring and a damper that push.
    """
    stiff = MASS * (math.pi / CONTACT) ** 2
    dash = 2 * damping_of_bounce(BOUNCE) * math.pi / CONTACT * MASS

    def inner(flux: Floats, x: Floats) -> Floats:
        return flux * (1 / opened + (1 / closed - 1 / opened) * x / TRAVEL)

    def law(t: float, y: Floats, u: float) -> list[float]:
        flux, x, v = y
        across = (u - ohms * inner(flux, x)) * LOSS / (ohms + LOSS)
        f = flux**2 / 2 * (1 / opened - 1 / closed) / TRAVEL - preload - RATE * x
        for deep, speed, sign in ((-x, -v, 1.0), (x - TRAVEL, v, -1.0)):
            if deep > 0:
                f += sign * max(min(stiff * deep + dash * speed, 2.5 * stiff * deep), 0.0)
        return [across, v, f / MASS]

    y = np.array([0.0, -preload / stiff, 0.0])
    parts = []
    for a, b, u in ((0.0, ON, 0.0), (ON, OFF, VOLTS), (OFF, END, 0.0)):
        at = np.linspace(a, b, max(2, int((b - a) / 10e-6)))
        found = solve_ivp(law, (a, b), y, args=(u,), method="LSODA", rtol=1e-8, atol=1e-12, max_step=3e-5, t_eval=at)
        y = found.y[:, -1]
        parts.append((found.t[1:], found.y[0, 1:], found.y[1, 1:], np.full(len(at) - 1, u)))
    t, flux, x, u = (np.concatenate(column) for column in zip(*parts, strict=True))
    core = (u - ohms * inner(flux, x)) / (ohms + LOSS)
    return t, inner(flux, x) + core, x


def record(preload: str, ohms: str, opened: str, closed: str) -> PlungerCoil:
    motion = {
        "travel": "4 mm",
        "mass": "10 g",
        "spring_preload": preload,
        "spring_rate": "150 N/m",
        "restitution": "20 %",
        "contact": "300 us",
    }
    return PlungerCoil.model_validate(
        {
            "kind": "plunger",
            "resistance": ohms,
            "inductance": opened,
            "closed_inductance": closed,
            "core_loss": "3.2 kohm",
            "motion": motion,
        }
    )


def overlaid(t: Floats, i: Floats, noise: float, points: int, with_voltage: bool = True) -> Overlay:
    """A noisy trace of a current, laid over a computed pulse that does not matter to the fit beyond its edges."""
    u = np.where((t > ON) & (t <= OFF), VOLTS, 0.0)
    at = np.linspace(0.0, END, points)
    random = np.random.default_rng(4)
    seen = np.interp(at, t, i) + noise * i.max() * random.standard_normal(points)
    volts = np.where((at > ON) & (at < OFF), VOLTS, 0.0) + noise * VOLTS * random.standard_normal(points)
    trace = Trace(Path("made-up.csv"), at, seen, volts if with_voltage else None)
    return lay_over(trace, Course(t, i, u, ON, OFF), at=ON)


def number(found: Fit, name: str) -> Fitted:
    return next(n for n in found.numbers if n.name == name)


@pytest.mark.slow
@pytest.mark.parametrize("start", [("18 ohm", "10 mH", "22 mH"), ("14 ohm", "15 mH", "34 mH")])
def test_resistance_and_both_inductances_come_back_from_noise_of_one_percent(start: tuple[str, str, str]) -> None:
    t, i, x = current(preload=1.0)
    assert x.max() > TRAVEL  # it arrives
    found = fit(record("1 N", *start), overlaid(t, i, 0.01, 5000))
    assert found.follows
    assert found.moved > 1.0
    for name, true in (("resistance", OHMS), ("inductance", OPEN), ("closed_inductance", CLOSED)):
        n = number(found, name)
        assert n.told == "fitted"
        assert n.value == pytest.approx(true, rel=0.01)
        assert abs(n.value - true) < 4 * n.error, n


def test_a_plunger_that_never_moves_does_not_tell_its_closed_inductance() -> None:
    t, i, x = current(preload=40.0)
    assert x.max() < 0.01 * TRAVEL
    found = fit(record("40 N", "18 ohm", "10 mH", "26 mH"), overlaid(t, i, 0.01, 2000))
    closed = number(found, "closed_inductance")
    assert (closed.told, closed.value) == ("left", pytest.approx(26e-3))
    assert "nothing moves" in closed.why
    assert math.isinf(closed.error)
    for name, true in (("resistance", OHMS), ("inductance", OPEN)):
        assert number(found, name).value == pytest.approx(true, rel=0.01)
        assert abs(number(found, name).value - true) < 4 * number(found, name).error
