"""A coil fed from a reservoir in its peak, against an independent solution of the same equations by SciPy.

While the switch is closed: C dv/dt = (u - v) / r, L di/dt = u - (R_s + R) i, with u the voltage behind the capacitor's series
resistance r, (V - u) / R_c = (u - v) / r + i (Kirchhoff). While it is open: (R_c + r) C dv/dt = V - v.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from reference_boards import NO_LOSS, STIFF, board_text, pattern_text, pulse, run_board
from scipy.integrate import solve_ivp

from boardsim.circuit.deck import Settings
from boardsim.engine.run import Engine

pytestmark = pytest.mark.engine

V, FARADS, ESR, CHARGING, SWITCH = 48.0, 470e-6, 0.1, 470.0, 0.05
OHMS, HENRIES = 24.0, 24e-3
BOOST = f"""
[boost]
channels = "0"
voltage = "{V} V"
capacitance = "{FARADS} F"
esr = "{ESR} ohm"
charging = "{CHARGING} ohm"
switch_resistance = "{SWITCH} ohm"
diode = "perfect-diode"
"""


def closed(_: float, y: np.ndarray) -> list[float]:
    v, i = y
    u = (V / CHARGING + v / ESR - i) / (1 / CHARGING + 1 / ESR)
    return [(u - v) / ESR / FARADS, (u - (SWITCH + OHMS) * i) / HENRIES]


def recovered(v: float, pause: float) -> float:
    return V - (V - v) * float(np.exp(-pause / ((CHARGING + ESR) * FARADS)))


def test_reservoir_and_coil_follow_the_equations_through_two_peaks(engine: Engine, tmp_path: Path) -> None:
    text = board_text(
        supply=f'voltage = "24 V", {STIFF}',
        coil=f'resistance = "{OHMS} ohm"\ninductance = "{HENRIES} H"\n{NO_LOSS}\nhold = "0.1 A"',
        clamp='{ kind = "diode", diode = "perfect-diode" }',
        limits=BOOST,
    )
    held = (
        f'{pulse("1 ms", "3 ms")}\npeak = "2 ms"\nhold = "50 %"\nhold_frequency = "1 kHz"\nrepeat = 2\nevery = "30 ms"'
    )
    run = run_board(engine, tmp_path, text, pattern_text(held), Settings("gear", 1e-5, 50e-6))
    v = V
    for begin, end in run.firing.held.peaks[0]:
        assert run.at(begin, "v_reservoir") == pytest.approx(v, rel=2e-3)
        found = solve_ivp(closed, (0.0, end - begin), [v, 0.0], rtol=1e-9, atol=1e-12, method="LSODA")
        v, i = (float(y) for y in found.y[:, -1])
        # Within 1 %: the switch of the run closes in 100 ns, the transistor has 1 mohm, and neither is in the equations.
        assert run.at(end, "v_reservoir") == pytest.approx(v, rel=0.01)
        assert run.at(end, "i_coil", 0) == pytest.approx(i, rel=0.01)
        assert V - v > 3.0  # the peak takes a good part of it, and leaves it above the coil rail
        v = recovered(v, 30e-3 - (end - begin))
    # Open, the bank has the coil rail less its diode: what is held is fed from there.
    first = run.firing.switched(0)[1]
    assert run.at(float(first.mean()), "v_bank") == pytest.approx(24.0, abs=0.1)
