"""A P-MOSFET above its coil against closed forms, and a second solution of the same circuit by SciPy."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from reference_boards import (
    NO_LOSS,
    PERFECT_DIODE,
    PERFECT_SWITCH,
    STIFF,
    Run,
    board_text,
    crossing,
    pattern_text,
    pulse,
    run_board,
)
from scipy.integrate import solve_ivp

from boardsim.circuit.deck import Settings
from boardsim.engine.run import Engine

pytestmark = pytest.mark.engine

V, R, L = 24.0, 16.0, 12e-3
I_0 = V / R
# The N-channel part of the other tests turned over: 1 mohm, and a gate that 100 ohm empty within a microsecond.
PERFECT_P = PERFECT_SWITCH.replace("[parts.perfect]", "[parts.perfect-p]").replace('"n-mosfet"', '"p-mosfet"')
SWITCH = '{{ part = "perfect-p", gate = "1 ohm", pullup = "{pullup}"{more}, shifter = {{ {shifter} }} }}'
ZENER = """
[parts.constant]
kind = "zener"
voltage = "48 V"
test_current = "0.5 A"
impedance = "1 mohm"
leakage = "1 nA"
capacitance = "20 pF"
"""


def run(
    engine: Engine,
    tmp_path: Path,
    clamp: str,
    *,
    breakdown: str = "1 kV",
    pullup: str = "100 ohm",
    more: str = "",
    width: str = "5 ms",
    shifter: str = 'part = "perfect", gate = "10 ohm"',
) -> Run:
    text = board_text(
        supply=f'voltage = "24 V", {STIFF}',
        coil=f'resistance = "16 ohm"\ninductance = "12 mH"\n{NO_LOSS}',
        clamp=clamp,
        bulk='{ capacitance = "1000 uF", esr = "10 mohm", esl = "0.1 nH" }',
        switch=SWITCH.format(pullup=pullup, more=more, shifter=shifter),
        parts=PERFECT_SWITCH.format(breakdown="5 kV") + PERFECT_P.format(breakdown=breakdown) + PERFECT_DIODE + ZENER,
    )
    return run_board(engine, tmp_path, text, pattern_text(pulse("100 us", width)), Settings("gear", 1e-5, 50e-6))


def test_the_coils_current_rises_from_the_rail_and_freewheels_through_ground(engine: Engine, tmp_path: Path) -> None:
    """L di/dt = V - R i, then L di/dt = -R i - v_D(i) with the diode's exponential; SciPy's stiff solver."""
    found = run(engine, tmp_path, '{ kind = "diode", diode = "perfect-diode" }', width="2 ms")
    on, off = found.on()
    slope = 10e-3 / math.log(100.0)  # [V] per e-fold: 20 mV at 10 mA, 30 mV at 1 A

    def diode(i: float) -> float:
        return max(0.020 + slope * math.log(max(i, 1e-9) / 10e-3), 0.0)

    rising = solve_ivp(lambda t, i: (V - R * i) / L, (0.0, off - on), [0.0], method="LSODA", rtol=1e-9, atol=1e-12)
    peak = float(rising.y[0, -1])
    times = np.linspace(0.0, 3e-3, 200)
    falling = solve_ivp(
        lambda t, i: (-R * i - diode(float(i[0]))) / L, (0.0, 3e-3), [peak], "LSODA", times, rtol=1e-9, atol=1e-12
    )
    # 0.5 %: the switch and the supply take 2 mohm of 16 ohm, and the gate's 0.1 us of 750 us.
    assert found.at(off, "i_coil", 0) == pytest.approx(peak, rel=5e-3)
    assert np.abs(found.at(off + times, "i_coil", 0) - falling.y[0]).max() < 5e-3 * peak
    after = found.t > off + 10e-6
    # While it freewheels nothing comes from the rail, and across the switch lie the rail and the diode's voltage.
    assert np.abs(found.signal("i_d", 0)[after]).max() < 1e-3
    beyond = (found.signal("v_ds", 0) - found.signal("v_rail"))[after].max()
    assert beyond == pytest.approx(diode(peak), abs=2e-3)
    assert found.signal("v_ds", 0)[(found.t > on + 1e-4) & (found.t < off)].max() < 0.01


@pytest.mark.parametrize(
    ("clamp", "breakdown"), [('{ kind = "zener", zener = "constant" }', "1 kV"), ('{ kind = "avalanche" }', "48 V")]
)
def test_what_lies_across_the_switch_takes_the_energy_of_the_high_side_formula(
    engine: Engine, tmp_path: Path, clamp: str, breakdown: str
) -> None:
    """E = V_Z L/R [I - (V_Z - V)/R ln(1 + R I / (V_Z - V))]: Infineon, BTS5016SDA rev. 1.1 (2008-11-04), p. 11, section 5.3.1."""
    found = run(engine, tmp_path, clamp, breakdown=breakdown)
    _, off = found.on()
    v_z, i = 48.0, float(found.at(off, "i_coil", 0))
    assert i == pytest.approx(I_0 * (1 - math.exp(-5e-3 * R / L)), rel=2e-3)
    expected = v_z * L / R * (i - (v_z - V) / R * math.log1p(R * i / (v_z - V)))
    after = found.t >= off
    power = found.signal("v_ds", 0) * found.signal("i_coil", 0)  # the rail gives all that the coil carries
    # 2 %: the exponential's tenths of a volt, of which 24 V oppose the current.
    assert np.trapezoid(power[after], found.t[after]) == pytest.approx(expected, rel=2e-2)
    opposed = (v_z - V) / R
    time = L / R * math.log((i + opposed) / (0.01 * i + opposed))  # to a hundredth
    let_go = crossing(found.t, found.signal("i_coil", 0), 0.01 * i, off) - off
    assert let_go == pytest.approx(time, rel=2e-2)


@pytest.mark.parametrize(("series", "share"), [("", 1.0), (', series = "1 kohm"', 0.5), (', series = "3 kohm"', 0.25)])
def test_the_whole_rail_lies_on_the_gate_unless_it_is_divided(
    engine: Engine, tmp_path: Path, series: str, share: float
) -> None:
    """V_GS = V R_u / (R_u + R_s); 1 mohm of the level shifter does not count."""
    clamp = '{ kind = "diode", diode = "perfect-diode" }'
    found = run(engine, tmp_path, clamp, pullup="1 kohm", more=series, width="200 us")
    assert found.at(found.on()[1], "v_gs", 0) == pytest.approx(share * V, rel=2e-3)


def test_the_pull_up_alone_turns_it_off(engine: Engine, tmp_path: Path) -> None:
    """v_GS = V exp(-t / (R_u C)) down to where the channel no longer carries the coil's current.

    With the drain at the rail the gate sees C_iss and the gate-drain capacitance at small voltages, C_max: between 100 kohm
    times C_GS alone and 100 kohm times their sum.
    """
    clamp = '{ kind = "diode", diode = "perfect-diode" }'
    found = run(engine, tmp_path, clamp, pullup="100 kohm", width="400 us")
    _, off = found.on()
    v_gs = found.signal("v_gs", 0)
    below = found.t[(found.t > off) & (v_gs < 3.0)][0] - off
    # 3 nC over 30 V and C_rss = 30 pF: C_GS = 270 pF; C_GD is 100 pF on average and below 1 nF at small voltages.
    lower, upper = (1e5 * farads * math.log(V / 3.0) for farads in (270e-12, 1.3e-9))
    assert lower < below < upper


def test_a_gate_zener_takes_what_the_level_shifter_pulls_beyond_its_voltage(engine: Engine, tmp_path: Path) -> None:
    """Kirchhoff at the gate: (V - V_Z) / R_s flows down, V_Z / R_u of it through the pull-up, the rest through the Zener.

    12v-5w holds 12 V at 100 mA with 2.5 ohm: at 10 mA it is 0.3 V lower at most.
    """
    more = ', series = "1 kohm", zener = "12v-5w"'
    found = run(
        engine, tmp_path, '{ kind = "diode", diode = "perfect-diode" }', pullup="10 kohm", more=more, width="200 us"
    )
    off = found.on()[1]
    v_gs = float(found.at(off, "v_gs", 0))
    assert 11.7 < v_gs < 12.0
    through = (V - v_gs) / 1e3 - v_gs / 10e3
    assert found.at(off, "i_gate Zener", 0) == pytest.approx(through, rel=5e-3)
    assert found.at(off, "i_g", 0) == pytest.approx(0.0, abs=1e-5)  # the Zener's current is none of the gate's


def test_a_bipolar_level_shifter_leaves_its_saturation_voltage(engine: Engine, tmp_path: Path) -> None:
    """V_GS = (V - V_CE) R_u / (R_u + R_s), with V_CE from 0 to the 0.3 V that small transistors keep below at 12 mA."""
    clamp = '{ kind = "diode", diode = "perfect-diode" }'
    shifter = 'part = "npn-small", base = "2.2 kohm", pulldown = "100 kohm"'
    found = run(engine, tmp_path, clamp, pullup="1 kohm", more=', series = "1 kohm"', width="200 us", shifter=shifter)
    off = found.on()[1]
    v_ce = float(found.at(off, "v_ds_shifter", 0))
    assert 0.0 < v_ce < 0.3
    assert found.at(off, "v_gs", 0) == pytest.approx((V - v_ce) / 2, rel=2e-3)
    assert found.at(off, "i_d_shifter", 0) == pytest.approx((V - v_ce) / 2e3, rel=2e-3)
