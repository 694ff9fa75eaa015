"""Coils whose iron saturates, against an independent solution of the same law and against what must be so."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from reference_boards import (
    NO_LOSS,
    PERFECT_DIODE,
    PERFECT_SWITCH,
    STIFF,
    board_text,
    crossing,
    pattern_text,
    pulse,
    read_files,
    run_board,
)  # fmt: skip
from scipy.integrate import solve_ivp
from scipy.interpolate import CubicHermiteSpline, PchipInterpolator
from test_reference_clamp import CONSTANT_ZENER
from test_reference_motion import END, FRICTION, LOSS, MASS, MOTION, OFF, ON, PLUNGER, PRELOAD, TRAVEL, Course, forces
from test_reference_motion import run as run_alone

from boardsim.circuit.deck import Settings
from boardsim.engine.run import Engine
from boardsim.parts.base import NOMINAL, Corner
from boardsim.parts.coil import Coil
from boardsim.parts.elements import Stored
from boardsim.parts.plunger import PlungerCoil
from boardsim.parts.saturation import Curve
from boardsim.scenarios.fire import fire_pattern

pytestmark = pytest.mark.engine

OHMS, HENRIES, VOLTS, CLAMP = 16.0, 12e-3, 24.0, 24.0
BOARD = board_text(
    supply=f'voltage = "24 V", {STIFF}',
    coil=f'resistance = "16 ohm"\ninductance = "12 mH"\n{NO_LOSS}\n'
    'saturation = { current = "1.5 A", flux_left = "60 %", air_core = "0.8 mH" }',
    clamp='{ kind = "diode-zener", diode = "perfect-diode", zener = "constant" }',
    parts=PERFECT_SWITCH.format(breakdown="500 V") + PERFECT_DIODE + CONSTANT_ZENER.format(volts=CLAMP),
    bulk='{ capacitance = "1000 uF", esr = "10 mohm" }',
)
PATTERN = pattern_text(pulse("0.5 ms", "5 ms"), duration="8 ms")


def flux(c: Curve, j: float) -> float:
    """Flux linkage over the iron's own current. [A] -> [Wb]"""
    m = c.henries - c.air
    return c.air * j + m * j * c.flux / (c.flux + m * j)


def current(c: Curve, j: float) -> float:
    """The coil's current over that of the iron. [A] -> [A]"""
    return (1 - c.knee) / c.henries * flux(c, j) + c.knee * j


def solved(c: Curve, start: float, volts: float, until: float) -> tuple[np.ndarray, np.ndarray, float]:
    """Time, current and charge at the end, by SciPy: R i + d(lambda)/dt = v, with the iron's own current j as the state, in which
    nothing has to be inverted; ends where the current does. [s], [A], [C]
    """
    m = c.henries - c.air

    def law(t: float, y: np.ndarray) -> list[float]:
        slope = c.air + m * (c.flux / (c.flux + m * y[0])) ** 2
        return [(volts - OHMS * current(c, y[0])) / slope, current(c, y[0])]

    def over(t: float, y: np.ndarray) -> float:
        return float(y[0] + (1.0 if volts > 0 else 0.0))

    over.terminal = True  # type: ignore[attr-defined]
    found = solve_ivp(law, (0, until), [start, 0.0], method="Radau", rtol=1e-9, atol=1e-12, events=over, max_step=1e-5)
    return found.t, np.array([current(c, j) for j in found.y[0]]), float(found.y[1, -1])


def test_a_saturating_coil_rises_and_lets_go_as_an_independent_solution_says(engine: Engine, tmp_path: Path) -> None:
    run = run_board(engine, tmp_path, BOARD, PATTERN, Settings("gear", 1e-5, 10e-6))
    part = read_files(tmp_path, BOARD, PATTERN)[0].channels[0].coil
    c = part.curve(NOMINAL)
    assert c is not None
    on, off = run.on()
    t, i, _ = solved(c, 0.0, VOLTS, 4e-3)
    for at in (0.2e-3, 0.4e-3, 0.6e-3, 0.8e-3, 1.2e-3, 2e-3, 4e-3):
        assert float(run.at(on + at, "i_coil", 0)) == pytest.approx(float(np.interp(at, t, i)), rel=0.01), at
    # Saturation shows: without it the current at 1 ms would be 1.5 A (1 - exp(-1 ms 16 ohm / 12 mH)) = 1.105 A.
    assert float(run.at(on + 1e-3, "i_coil", 0)) > 1.05 * VOLTS / OHMS * (1 - math.exp(-1e-3 * OHMS / HENRIES))

    # Let go from 1.5 A into 24 V beyond the rail: the iron's current from which it starts is found by halving.
    low, high = 0.0, 100.0
    for _ in range(60):
        low, high = ((low + high) / 2, high) if current(c, (low + high) / 2) < 1.5 else (low, (low + high) / 2)
    t, _, charge = solved(c, low, -CLAMP, 3e-3)
    released = crossing(run.t, run.signal("i_coil", 0), 1e-3 * 1.5, off) - off
    assert released == pytest.approx(t[-1], rel=0.01)
    after = run.t >= off
    power = run.signal("v_clamp Zener", 0) * run.signal("i_clamp Zener", 0)
    taken = float(np.trapezoid(power[after], run.t[after]))
    assert taken == pytest.approx(CLAMP * charge, rel=0.01)
    # What the clamp takes is what the field held less what the winding burnt, and the field held less than L i^2 / 2.
    assert taken < part.held(1.5, NOMINAL) < 0.8 * 0.5 * HENRIES * 1.5**2


def test_the_audit_counts_the_field_s_own_energy(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    board, pattern = read_files(tmp_path, BOARD, PATTERN)
    assert fire_pattern(board, pattern, tmp_path / "kept").proven
    # Had it held half as much, the clamp would have got more than there was.
    true = Coil.stored

    def half(self: Coil, corner: Corner) -> Stored:
        found = true(self, corner)
        assert found is not None
        return Stored(found.quantities, lambda flux: found.law(flux) / 2)

    monkeypatch.setattr(Coil, "stored", half)
    result = fire_pattern(board, pattern, tmp_path / "kept")
    assert not result.proven
    assert any(
        "coil" in e.subject and e.criterion == "passivity" for c in result.audit for e in c.entries if not e.passed
    )


SATURATION = {"current": "1 A", "flux_left": "85 %", "air_core": "3 mH"}
ROWS = [(0.0, 12e-3), (1e-3, 13.5e-3), (3e-3, 18e-3), (5e-3, 30e-3)]  # [m], [H]
TABLED = {
    **{k: v for k, v in PLUNGER.items() if k not in ("inductance", "closed_inductance")},
    "over_travel": [{"position": f"{x * 1e3:g} mm", "inductance": f"{h * 1e3:g} mH"} for x, h in ROWS],
}
KINDS = {
    "saturating": {**PLUNGER, "saturation": SATURATION},
    "from a table": TABLED,
    "from a table, saturating": {**TABLED, "saturation": SATURATION},
}


def solve(kind: str) -> Course:
    """A stroke by SciPy. 1/L is its own interpolant where there is a table, the iron's current a fine table of the curve."""
    if "table" in kind:
        x, h = np.array(ROWS).T
        slopes = PchipInterpolator(x, 1 / h).derivative()(x)
        chords = np.diff(1 / h) / np.diff(x)
        slopes[0], slopes[-1] = (3 * chords[0] - slopes[1]) / 2, (3 * chords[-1] - slopes[-2]) / 2
        inside = CubicHermiteSpline(x, 1 / h, slopes)
        steeper = inside.derivative()
    else:
        inside = CubicHermiteSpline([0, TRAVEL], [1 / 12e-3, 1 / 30e-3], [(1 / 30e-3 - 1 / 12e-3) / TRAVEL] * 2)
        steeper = inside.derivative()

    def gap(x: float) -> float:
        near = min(max(x, 0.0), TRAVEL)
        return float(inside(near) + steeper(near) * (x - near))

    if "saturating" in kind:
        curve = PlungerCoil.model_validate(KINDS[kind]).curve(NOMINAL)
        assert curve is not None
        j = np.concatenate([[0.0], np.geomspace(1e-6, 1e3, 200_000)])
        linkage = flux(curve, j)
        more = curve.knee * (j - linkage / curve.henries)
    else:
        linkage, more = np.array([0.0, 1.0]), np.zeros(2)

    def amperes(y: float, x: float) -> float:
        return y * gap(x) + math.copysign(float(np.interp(abs(y), linkage, more)), y)

    def law(t: float, y: np.ndarray, u: float) -> list[float]:
        across = (u - OHMS * amperes(y[0], y[1])) * LOSS / (OHMS + LOSS)
        pull = -(y[0] ** 2) / 2 * float(steeper(min(max(y[1], 0.0), TRAVEL)))
        return [across, y[2], (pull + forces(y[1], y[2])) / MASS]

    y = np.array([0.0, -PRELOAD / (MASS * (math.pi / 100e-6) ** 2), 0.0])
    parts = []
    for a, b, u in ((0.0, ON, 0.0), (ON, OFF, 24.0), (OFF, END, 0.0)):
        found = solve_ivp(law, (a, b), y, args=(u,), method="LSODA", rtol=1e-8, atol=1e-12, max_step=1e-5)
        y = found.y[:, -1]
        parts.append((found.t, found.y))
    t = np.concatenate([p[0] for p in parts])
    linked, x, v = np.concatenate([p[1] for p in parts], axis=1)
    return Course(t, np.array([amperes(f, p) for f, p in zip(linked, x, strict=True)]), x, v)


@pytest.mark.parametrize("kind", [*KINDS])
def test_a_full_stroke_of_a_plunger_with_iron_and_gap_as_they_are(engine: Engine, kind: str) -> None:
    ours, theirs = run_alone(PlungerCoil.model_validate(KINDS[kind]), engine), solve(kind)
    for at in (2e-3, 3e-3, 6e-3, 10e-3, 15e-3, 20e-3, 25e-3, 26.5e-3, 27e-3, 30e-3):
        assert ours.at("current", at) == pytest.approx(theirs.at("current", at), rel=0.01, abs=0.01 * 1.5), at
        assert ours.at("position", at) == pytest.approx(theirs.at("position", at), rel=0.01, abs=0.01 * TRAVEL), at
    assert theirs.position.max() > TRAVEL
    (when, speed), (when_there, speed_there) = ours.arrival, theirs.arrival
    assert when - ON == pytest.approx(when_there - ON, rel=0.01)
    assert speed == pytest.approx(speed_there, rel=0.01)
    assert ours.at("position", END) == pytest.approx(0.0, abs=0.01 * TRAVEL)


@pytest.mark.parametrize("kind", [*KINDS])
def test_until_the_plunger_arrives_what_went_in_is_heat_and_what_field_and_motion_hold(
    engine: Engine, tmp_path: Path, kind: str
) -> None:
    # First law, before a stop is hit. It holds only if the force is the slope of the field's energy.
    given = KINDS[kind]
    text = BOARD.replace(
        BOARD[BOARD.index("[coils.coil]") : BOARD.index("[parts.perfect]")], f"[coils.coil]\n{toml(given)}\n"
    )
    run = run_board(engine, tmp_path, text, pattern_text(pulse("0.5 ms", "30 ms")), Settings("gear", 2e-6, 5e-6))
    x = run.signal("position", 0)
    arrived = int(np.argmax(x >= 0.98 * TRAVEL))
    assert 0 < arrived < len(x) / 2
    v, i, inner = (run.signal(q, 0)[:arrived] for q in ("v_coil", "i_coil", "i_l"))
    t, speed = run.t[:arrived], run.signal("speed", 0)[:arrived]
    heat = OHMS * i**2 + (v - OHMS * i) * (i - inner) + FRICTION * np.tanh(speed / 2e-3) * speed
    stored = PlungerCoil.model_validate(given).stored(NOMINAL)
    held = stored.law(*(run.signal(q, 0)[:arrived] for q in stored.quantities))
    kept = np.concatenate([[0.0], np.cumsum(np.diff(t) * ((v * i - heat)[1:] + (v * i - heat)[:-1]) / 2)])
    for share in (0.5, 0.7, 0.9, 0.97):
        k = int(np.argmax(x >= share * TRAVEL))
        assert kept[k] == pytest.approx(held[k] - held[0], rel=3e-3), share
    # Of what is not heat some has become motion: the field alone does not explain it.
    assert held[-1] - stored.law(run.signal("flux", 0)[:arrived], x[:arrived], 0 * x[:arrived])[-1] > 0.05 * held[-1]


@pytest.mark.parametrize("friction", ["0 N", "0.05 N"])
def test_a_coil_whose_plunger_lies_at_its_stop_turns_off_at_any_tolerance(
    engine: Engine, tmp_path: Path, friction: str
) -> None:
    # ngspice took pivots for the moving parts that picosecond steps made worthless: it gave up at the edge.
    given = {**PLUNGER, "motion": {**MOTION, "friction": friction}}
    text = BOARD.replace(
        BOARD[BOARD.index("[coils.coil]") : BOARD.index("[parts.perfect]")], f"[coils.coil]\n{toml(given)}\n"
    )
    for settings in (Settings("gear", 1.5e-4, 50e-6), Settings("gear", 2e-5, 50e-6), Settings("gear", 2.5e-6, 20e-6)):
        run = run_board(engine, tmp_path, text, pattern_text(pulse("0.5 ms", "30 ms"), duration="32 ms"), settings)
        assert float(run.at(30e-3, "position", 0)) == pytest.approx(TRAVEL, rel=0.01)
        assert abs(float(run.at(32e-3, "i_coil", 0))) < 1e-3


def toml(record: Any) -> str:
    """A coil's fields as lines of a board file; tables in one line."""

    def written(value: Any) -> str:
        if isinstance(value, dict):
            return "{ " + ", ".join(f"{k} = {written(v)}" for k, v in value.items()) + " }"
        if isinstance(value, list):
            return "[" + ", ".join(written(v) for v in value) + "]"
        return f'"{value}"'

    return "\n".join(f"{k} = {written(v)}" for k, v in record.items())


@pytest.mark.parametrize("kind", [*KINDS])
def test_the_dip_of_the_current_is_there_with_motion_and_not_with_the_plunger_blocked(
    engine: Engine, kind: str
) -> None:
    # Rule of the trade: no motion, no dip (nsfcontrols.co.uk, operating speed of solenoids; Yudell and Van de Ven 2015).
    for held, dips in ((MOTION, True), ({**MOTION, "spring_preload": "50 N"}, False)):
        course = run_alone(PlungerCoil.model_validate({**KINDS[kind], "motion": held}), engine)
        on = (course.t > ON + 1e-4) & (course.t < OFF - 1e-4)
        assert bool((np.diff(course.current[on]) < -1e-6).any()) is dips
