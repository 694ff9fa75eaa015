"""Coils that move something, against an independent solution of the same equations and against what must be so."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.integrate import solve_ivp

from boardsim.circuit.build import Builder
from boardsim.circuit.deck import Deck, Settings, Window
from boardsim.engine.run import Engine
from boardsim.parts.base import NOMINAL
from boardsim.parts.coil import Coil
from boardsim.parts.elements import GROUND, Drive
from boardsim.parts.motion import damping_of_bounce
from boardsim.parts.moving_magnet import MovingMagnetCoil
from boardsim.parts.plunger import PlungerCoil

pytestmark = pytest.mark.engine

Floats = NDArray[np.float64]
TRAVEL, MASS, PRELOAD, RATE, FRICTION = 5e-3, 20e-3, 1.0, 200.0, 0.05
MOTION = {
    "travel": "5 mm",
    "mass": "20 g",
    "spring_preload": "1 N",
    "spring_rate": "200 N/m",
    "friction": "0.05 N",
    "restitution": "30 %",
    "contact": "100 us",
}
OHMS, OPEN, CLOSED, LOSS, FORCE = 16.0, 12e-3, 30e-3, 3200.0, 2.4
PLUNGER = {
    "kind": "plunger",
    "resistance": "16 ohm",
    "inductance": "12 mH",
    "closed_inductance": "30 mH",
    "core_loss": "3.2 kohm",
    "motion": MOTION,
}
MAGNET = {
    "kind": "moving-magnet",
    "resistance": "16 ohm",
    "inductance": "12 mH",
    "force_constant": "2.4 N/A",
    "core_loss": "3.2 kohm",
    "motion": MOTION,
}
ON, OFF, END = 1e-3, 26e-3, 60e-3


@dataclass
class Course:
    """Current [A], position [m] and speed [m/s] over time [s]."""

    t: Floats
    current: Floats
    position: Floats
    speed: Floats

    def at(self, quantity: str, t: float) -> float:
        return float(np.interp(t, self.t, getattr(self, quantity)))

    @property
    def arrival(self) -> tuple[float, float]:
        k = int(np.argmax(self.position >= TRAVEL))
        return float(self.t[k]), float(self.speed[k - 1])


def run(part: Coil, engine: Engine, volts: float = 24.0, end: float = END) -> Course:
    """The coil at a stiff source that goes to 24 V and back to 0 V: no switch, no clamp."""
    builder = Builder()
    drive = Drive(
        "s", "top", GROUND, ((0.0, 0.0), (ON, 0.0), (ON + 1e-6, volts), (OFF, volts), (OFF + 1e-6, 0.0), (end, 0.0))
    )
    stamp = part.stamp("c", "coil", "top", GROUND, NOMINAL, None)
    builder.add((drive, *stamp.elements))
    signals: Any = {(0, p.quantity): p.signal for p in stamp.probes}
    vectors = tuple(dict.fromkeys(name for signal in signals.values() for _, name in signal))
    deck = Deck(builder.netlist(), Window(0.0, end, ()), NOMINAL, vectors, signals, {}, (), (), (), {}, (), {})
    with engine.run(deck, Settings("gear", 2e-5, 50e-6)) as waves:
        names = [
            n if n == "time" else (f"i({n.removesuffix('#branch')})" if n.endswith("#branch") else n)
            for n in waves.names
        ]
        block = np.concatenate(list(waves.blocks()))
    column = dict(zip(names, block.T, strict=True))

    def signal(quantity: str) -> Floats:
        return np.sum([k * column[name] for k, name in signals[0, quantity]], axis=0)

    return Course(column["time"], signal("i_l"), signal("position"), signal("speed"))


def forces(x: float, v: float) -> float:
    """Spring, friction and stops, as they are described. [N]"""
    stiff = MASS * (math.pi / 100e-6) ** 2
    dash = 2 * damping_of_bounce(0.3) * math.pi / 100e-6 * MASS
    f = -PRELOAD - RATE * x - FRICTION * math.tanh(v / 2e-3)
    for deep, speed, sign in ((-x, -v, 1.0), (x - TRAVEL, v, -1.0)):
        if deep > 0:
            f += sign * max(min(stiff * deep + dash * speed, 2.5 * stiff * deep), 0.0)
    return f


def solve(plunger: bool, volts: float = 24.0, end: float = END) -> Course:
    """The same by SciPy: current i through R, (flux or inductance parallel to the core loss), x, v."""

    def gap(x: float) -> float:
        return 1 / OPEN + (1 / CLOSED - 1 / OPEN) * x / TRAVEL

    def law(t: float, y: Floats, u: float) -> list[float]:
        flux, x, v = y
        i = flux * gap(x) if plunger else flux / OPEN
        across = (u - OHMS * i) * LOSS / (OHMS + LOSS)  # winding and core loss divide what is left
        if plunger:
            force, rise = flux**2 / 2 * (1 / OPEN - 1 / CLOSED) / TRAVEL, across
        else:
            force, rise = FORCE * i, across - FORCE * v
        return [rise, v, (force + forces(x, v)) / MASS]

    y = np.array([0.0, -PRELOAD / (MASS * (math.pi / 100e-6) ** 2), 0.0])
    parts = []
    for a, b, u in ((0.0, ON, 0.0), (ON, OFF, volts), (OFF, end, 0.0)):
        found = solve_ivp(law, (a, b), y, args=(u,), method="LSODA", rtol=1e-9, atol=1e-13, max_step=5e-6)
        y = found.y[:, -1]
        parts.append((found.t, found.y))
    t = np.concatenate([p[0] for p in parts])
    flux, x, v = np.concatenate([p[1] for p in parts], axis=1)
    i = flux * (1 / OPEN + (1 / CLOSED - 1 / OPEN) * x / TRAVEL) if plunger else flux / OPEN
    return Course(t, i, x, v)


@pytest.mark.parametrize("kind", ["plunger", "moving-magnet"])
def test_a_full_stroke_with_impact_and_return(engine: Engine, kind: str) -> None:
    part = (PlungerCoil if kind == "plunger" else MovingMagnetCoil).model_validate(
        PLUNGER if kind == "plunger" else MAGNET
    )
    ours, theirs = run(part, engine), solve(kind == "plunger")
    for at in (3e-3, 6e-3, 10e-3, 15e-3, 20e-3, 25e-3, 27e-3, 30e-3):
        assert ours.at("current", at) == pytest.approx(theirs.at("current", at), rel=0.01, abs=0.01 * 1.5), at
        assert ours.at("position", at) == pytest.approx(theirs.at("position", at), rel=0.01, abs=0.01 * TRAVEL), at
    (when, speed), (when_there, speed_there) = ours.arrival, theirs.arrival
    assert when - ON == pytest.approx(when_there - ON, rel=0.01)
    assert speed == pytest.approx(speed_there, rel=0.01)
    assert ours.at("position", END) == pytest.approx(0.0, abs=0.01 * TRAVEL)


def test_the_current_dips_when_the_plunger_arrives_and_not_when_it_is_blocked(engine: Engine) -> None:
    # Rule of the trade: no motion, no dip (nsfcontrols.co.uk, operating speed of solenoids; Yudell and Van de Ven 2015).
    free = run(PlungerCoil.model_validate(PLUNGER), engine)
    blocked = run(PlungerCoil.model_validate({**PLUNGER, "motion": {**MOTION, "spring_preload": "50 N"}}), engine)
    for course, dips in ((free, True), (blocked, False)):
        on = (course.t > ON + 1e-4) & (course.t < OFF - 1e-4)
        rising = np.diff(course.current[on])
        assert bool((rising < -1e-6).any()) is dips
    # And a heavier load dips later (same source).
    loaded = run(PlungerCoil.model_validate({**PLUNGER, "motion": {**MOTION, "load": "0.2 N"}}), engine)
    assert loaded.arrival[0] > free.arrival[0]


def test_at_a_constant_flux_the_force_is_the_slope_of_the_field_s_energy(engine: Engine) -> None:
    # dW/dx at constant flux linkage, W = lambda^2 / (2 L): Principles of Electric Machines and Power Electronics, p. 103.
    # The plunger is held at its rest by a spring as strong as the force there: it just moves or just does not.
    current = 24.0 / OHMS
    force = 0.5 * (current * OPEN) ** 2 * (1 / OPEN - 1 / CLOSED) / TRAVEL
    for share, moves in ((1.02, False), (0.98, True)):
        motion = {**MOTION, "spring_preload": f"{share * force:.6f} N", "friction": "0 N", "spring_rate": "0 N/m"}
        course = run(PlungerCoil.model_validate({**PLUNGER, "motion": motion}), engine)
        assert bool(course.position.max() > 0.02 * TRAVEL) is moves


def test_the_force_constant_of_a_moving_coil_is_its_back_emf_constant(engine: Engine) -> None:
    # Gogue and Stupak, worked example: 3000 G, 200 turns, 2 in: 9.576 N/A and 9.576 V s/m. A voltage that makes R i + K v = V
    # settles, without spring, at the speed V / K - R (F / K) / K; here friction is left out: v -> V / K.
    k = 0.3 * 200 * math.pi * 2 * 0.0254
    assert k == pytest.approx(9.576, rel=1e-3)
    motion = {"travel": "1 m", "mass": "20 g", "spring_preload": "0.001 N"}
    part = MovingMagnetCoil.model_validate({**MAGNET, "force_constant": f"{k:.6f} N/A", "motion": motion})
    course = run(part, engine, volts=6.0)
    # Core loss and winding divide the voltage.
    assert course.speed.max() == pytest.approx(6.0 * LOSS / (LOSS + OHMS) / k, rel=2e-3)


def test_the_wrong_polarity_pushes_against_the_stop(engine: Engine) -> None:
    course = run(MovingMagnetCoil.model_validate({**MAGNET, "wired": "reversed"}), engine)
    assert course.position.max() < 0.001 * TRAVEL


@pytest.mark.parametrize("restitution", [0.05, 0.1, 0.3, 0.6, 0.9])
def test_a_stop_gives_back_the_share_of_the_speed_that_it_was_given(restitution: float) -> None:
    # A mass of 1 against a spring of 1 and a damper that push and never pull, nor harder than 2.5 springs, by SciPy, until their
    # force is gone.
    z = damping_of_bounce(restitution)

    def gone(t: float, y: list[float]) -> float:
        return y[0] + 2 * z * y[1]

    gone.terminal, gone.direction = True, -1  # type: ignore[attr-defined]
    found = solve_ivp(
        lambda t, y: [y[1], -min(gone(t, y), 2.5 * y[0])], (0, 10), [0.0, 1.0], events=gone, rtol=1e-10, atol=1e-12
    )
    assert -found.y[1, -1] == pytest.approx(restitution, rel=1e-4)
