"""The coil rail against its own equations: a load step, the steady divider, and a supply at its current ceiling."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from reference_boards import NO_LOSS, Floats, Run, board_text, pattern_text, pulse, run_board
from scipy.linalg import expm

from boardsim.circuit.deck import Settings
from boardsim.engine.run import Engine

pytestmark = pytest.mark.engine

DIODE = '{ kind = "diode", diode = "perfect-diode" }'

# Cable of 2 m of 1.5 mm2, from the formulas of reference works, not from the program:
# annealed copper 0.017241 ohm mm2/m at 20 degC (IEC 60028), out and back;
# two parallel wires, L = (mu0 l / pi) (arccosh(s/d) + 1/4) (Grover, from memory), axes two diameters apart.
R_CABLE = 0.017241 * 2 * 2 / 1.5
L_CABLE = 4e-7 * 2.0 * (math.acosh(2.0) + 0.25)
CABLE = '{ area = "1.5 mm2", length = "2 m" }'
V, R_SOURCE, R_COIL, R_SWITCH = 24.0, 0.05, 2.4, 1e-3


def run_step(engine: Engine, folder: Path, farads: float, esr: float, henries: float, max_step: float = 1e-6) -> Run:
    text = board_text(
        supply=f'voltage = "24 V", resistance = "{R_SOURCE} ohm"', cable=CABLE, clamp=DIODE,
        bulk=f'{{ capacitance = "{farads:g} F", esr = "{esr:g} ohm", esl = "0.1 nH" }}',
        coil=f'resistance = "{R_COIL} ohm"\ninductance = "{henries:g} H"\n{NO_LOSS}',
    )  # fmt: skip
    fired = pattern_text(pulse("20 us", "2 ms"), duration="2.1 ms")
    return run_board(engine, folder, text, fired, Settings("gear", 1e-5, max_step))


def stepped_rail(t: Floats, farads: float, esr: float, henries: float) -> Floats:
    """The rail after the coil is switched on at t = 0, from a matrix exponential. [V]

    States: cable current i, capacitor voltage u, coil current j. Rail v = u + esr (i - j).
    L_c di/dt = V - (R_s + R_c) i - v; C du/dt = i - j; L dj/dt = v - (R + R_on) j.
    """
    r = R_SOURCE + R_CABLE
    a = np.array([
        [-(r + esr) / L_CABLE, -1 / L_CABLE, esr / L_CABLE],
        [1 / farads, 0, -1 / farads],
        [esr / henries, 1 / henries, -(R_COIL + R_SWITCH + esr) / henries],
    ])  # fmt: skip
    steady = np.linalg.solve(a, [-V / L_CABLE, 0, 0])
    start = np.array([0.0, V, 0.0])
    dt = t[1] - t[0]
    step, state = expm(a * dt), expm(a * t[0]) @ (start - steady)
    rail = np.empty_like(t)
    for k in range(len(t)):
        i, u, j = state + steady
        rail[k] = u + esr * (i - j)
        state = step @ state
    return rail


@pytest.mark.parametrize(
    ("farads", "esr", "henries"),
    [
        pytest.param(10e-6, 0.02, 5e-6, id="ringing"),
        pytest.param(100e-6, 0.3, 20e-6, id="the capacitor's resistance decides"),
        pytest.param(470e-6, 0.04, 1e-3, id="slow coil, the divider decides"),
    ],
)
def test_rail_after_a_load_step_follows_its_differential_equations(
    engine: Engine, tmp_path: Path, farads: float, esr: float, henries: float
) -> None:
    run = run_step(engine, tmp_path, farads, esr, henries)
    on, off = run.on()
    t = np.arange(0.2e-6, off - on - 1e-6, 0.2e-6)
    expected = stepped_rail(t, farads, esr, henries)
    got = run.at(on + t, "v_rail")
    # 0.1 % of the rail: the gate needs some 0.1 us to turn on, which moves the edge by as much.
    assert got.min() == pytest.approx(expected.min(), rel=1e-3)
    assert t[got.argmin()] == pytest.approx(t[expected.argmin()], abs=2e-6) or henries == 1e-3
    np.testing.assert_allclose(got[25:], expected[25:], atol=0.1)  # every point from 5 us on


def test_settled_rail_is_the_divider_of_source_cable_switch_and_coil(engine: Engine, tmp_path: Path) -> None:
    run = run_step(engine, tmp_path, 100e-6, 0.3, 20e-6)
    _, off = run.on()
    current = V / (R_SOURCE + R_CABLE + R_COIL + R_SWITCH)
    # 1e-4: steady state; the supply's bend adds 1 uA.
    assert run.at(off - 10e-6, "v_rail") == pytest.approx(V - current * (R_SOURCE + R_CABLE), rel=1e-4)
    assert run.at(off - 10e-6, "i_supply") == pytest.approx(current + V / 10e3, rel=1e-3)  # and its internal load


def test_rail_of_a_supply_at_its_ceiling_is_discharged_by_what_the_coil_draws_beyond_it(
    engine: Engine, tmp_path: Path
) -> None:
    """C dv/dt = I_ceiling - v/R: towards I_ceiling R with R C, after the step across the capacitor's resistance."""
    top, farads, esr = 5.0, 10e-3, 1e-3
    text = board_text(
        supply=f'voltage = "24 V", resistance = "{R_SOURCE} ohm", current_ceiling = "{top} A"', cable=CABLE, clamp=DIODE,
        bulk=f'{{ capacitance = "{farads:g} F", esr = "{esr:g} ohm", esl = "0.1 nH" }}',
        coil=f'resistance = "{R_COIL} ohm"\ninductance = "20 uH"\n{NO_LOSS}',
    )  # fmt: skip
    fired = pattern_text(pulse("20 us", "60 ms"), duration="61 ms")
    # A looser bound on currents than the ladder's 0.1 uA: with 10 mF at 24 V, rounding of the charge alone is
    # 24 uA in a step of 1 ps, which Newton's method would never get below.
    run = run_board(engine, tmp_path, text, fired, Settings("gear", 1e-5, 50e-6, abstol=1e-4))
    on, _ = run.on()
    r = R_COIL + R_SWITCH
    t = np.linspace(1e-3, 59e-3, 30)
    # The supply is at its ceiling from about 0.5 V below its voltage on, reached within the first millisecond; the
    # charge that it gives before is 24 V - R_s I on the way to 5 A: 0.3 V early in the decay of 12 V.
    begin = float(run.at(on + t[0], "v_rail"))
    expected = r * top + (begin - r * top) * np.exp(-(t - t[0]) / ((r + esr) * farads))
    # 0.2 %: the ceiling's bend is rounded over a thousandth, and the supply's internal load takes 2 mA of 5 A.
    np.testing.assert_allclose(run.at(on + t, "v_rail"), expected, rtol=2e-3)
    early = (run.t > on + 2e-3) & (run.t < on + 3e-3)
    slope = np.polyfit(run.t[early], run.signal("v_bulk_c")[early], 1)[0]
    load = run.at(on + 2.5e-3, "i_coil", 0)
    # 0.5 %: the slope of 1 ms out of 24 ms is that of its middle but for 0.02 %; the load is read, not computed.
    assert farads * slope == pytest.approx(top - load, rel=5e-3)
