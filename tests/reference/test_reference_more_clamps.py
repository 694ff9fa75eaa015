"""Snubber, resistor with diode, active clamp and the Zener in an array's common pin against circuits that SciPy solves.

The equations are written here from Kirchhoff's laws and from the parts' printed figures; nothing of the program's own models,
decks or readings is used for them.
"""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from reference_boards import (
    NO_LOSS,
    PERFECT_SWITCH,
    SHORT,
    STIFF,
    Run,
    board_text,
    pattern_text,
    pulse,
    run_board,
)  # fmt: skip
from scipy.integrate import quad, solve_ivp
from test_reference_release import (
    COIL,
    CONSTANT,
    I_0,
    R_ALL,
    RELEASE,
    L,
    R,
    V,
    constant_voltage_energy,
    constant_voltage_time,
    turned_off,
)  # fmt: skip

from boardsim.circuit.deck import Settings
from boardsim.engine.run import Engine

pytestmark = pytest.mark.engine
BULK = '{ capacitance = "1000 uF", esr = "10 mohm", esl = "0.1 nH" }'

# --------------------------------------------------------------------------------------------------- snubber


def swung(farads: float, r_s: float, r: float, henries: float, i_0: float, v: float, stop: float) -> tuple[float, ...]:
    """Peak at the switch [V], time until the current stays below the release current [s], heat in the resistor [J].

    u is the capacitor's voltage less the rail's: L di/dt = -(R + R_s) i - u, C du/dt = i, from i_0 and -V on.
    """

    def slope(_t: float, y: np.ndarray) -> list[float]:
        i, u = float(y[0]), float(y[1])
        return [-((r + r_s) * i + u) / henries, i / farads, r_s * i * i]

    out = solve_ivp(slope, (0.0, stop), [i_0, -v, 0.0], rtol=1e-9, atol=1e-12, max_step=stop / 5000)
    i, u, heat = out.y
    over = np.flatnonzero(np.abs(i) >= RELEASE)
    since = out.t[min(over[-1] + 1, len(i) - 1)] if len(over) else 0.0
    return float(np.max(v + u + r_s * i)), float(since), float(heat[-1])


@pytest.mark.parametrize(
    ("across", "farads", "ohms"), [("coil", 10e-6, 50.0), ("switch", 10e-6, 50.0), ("coil", 47e-6, 5.0)]
)
def test_a_snubber_swings_as_a_second_solver_says(tmp_path: Path, across: str, farads: float, ohms: float) -> None:
    clamp = f'{{ kind = "snubber", across = "{across}", capacitance = "{farads:g} F", resistance = "{ohms:g} ohm" }}'
    row = turned_off(tmp_path, clamp)
    peak, lets_go, heat = swung(farads, ohms, R_ALL, L, I_0, V, 20e-3)
    # 1 %: a settled current lacks 0.1 %, the gate takes some tenths of a microsecond, and two runs may differ by 1 %.
    assert row.peak == pytest.approx(peak, rel=1e-2)
    assert row.let_go == pytest.approx(lets_go, rel=1e-2)
    # What goes into the clamp is the resistor's heat and what the capacitor is charged to: from -V (or 0) to 0 (or V).
    stored = 0.5 * farads * V**2 * (1 if across == "switch" else -1)
    assert row.clamp_energy == pytest.approx(heat + stored, rel=2e-2)  # 2 %: twice the current's


@pytest.mark.parametrize(("volts", "r", "farads", "ohms"), [(110.0, 110.0, 0.1e-6, 7.56), (110.0, 1100.0, 1e-9, 75.6)])
def test_the_published_rule_for_contacts_peaks_as_a_second_solver_says(
    engine: Engine, tmp_path: Path, volts: float, r: float, farads: float, ohms: float
) -> None:
    """Paktron's rule: 0.1 uF, 7.56 ohm at 1 A, 1 nF, 75.6 ohm at 0.1 A, both at 110 V; with a coil of a 1 ms time constant."""
    henries = r * 1e-3
    text = board_text(
        supply=f'voltage = "{volts:g} V", {STIFF}', coil=f'resistance = "{r:g} ohm"\ninductance = "{henries:g} H"\n{NO_LOSS}',
        clamp=f'{{ kind = "snubber", across = "switch", capacitance = "{farads:g} F", resistance = "{ohms:g} ohm" }}', bulk=BULK,
        parts=PERFECT_SWITCH.format(breakdown="5 kV"),
    )  # fmt: skip
    run = run_board(
        engine, tmp_path, text, pattern_text(pulse("10 us", "9 ms"), duration="9.5 ms"), Settings("gear", 1e-5, 2e-6)
    )
    off = run.on()[1]
    start = float(run.at(off, "i_coil", 0))
    peak, _, _ = swung(farads, ohms, r, henries, start, volts, 0.4e-3)
    # 2 %: the switch's own capacitance, 65 pF at 1 kV and more below, lies beside 1 nF: its share of the energy is up to 3 %.
    assert run.signal("v_ds", 0)[run.t >= off].max() == pytest.approx(peak, rel=2e-2)
    assert peak > 3 * volts  # what a contact stands, and a transistor seldom


def test_charging_a_snubber_costs_its_resistor_half_c_v_squared_at_every_edge(engine: Engine, tmp_path: Path) -> None:
    """Charging a capacitor through any resistor turns C V^2 / 2 into heat. The switch carries up to V / R_s more for it."""
    farads, ohms = 1e-6, 24.0
    text = board_text(
        supply=f'voltage = "24 V", {STIFF}', coil=f'resistance = "2.4 kohm"\ninductance = "0.1 H"\n{NO_LOSS}', bulk=BULK,
        clamp=f'{{ kind = "snubber", capacitance = "{farads:g} F", resistance = "{ohms:g} ohm" }}',
        parts=PERFECT_SWITCH.format(breakdown="5 kV"),
    )  # fmt: skip
    run = run_board(engine, tmp_path, text, pattern_text(pulse("10 us", "1 ms"), duration="1.011 ms"))
    off = run.on()[1]
    heat = np.trapezoid(
        run.signal("v_snubber resistor", 0) * run.signal("i_snubber resistor", 0) * (run.t < off), run.t
    )
    # 1 %: while the gate turns on, 0.1 us of the 24 us that charging takes, the switch takes its share.
    assert heat == pytest.approx(0.5 * farads * 24.0**2, rel=1e-2)
    assert run.signal("i_d", 0).max() == pytest.approx(1.0, rel=2e-2)


# ---------------------------------------------------------------------------------------- resistor and diode


@pytest.mark.parametrize("ohms", [16.0, 60.0])
def test_a_resistor_with_a_diode_lets_go_as_a_second_solver_says(tmp_path: Path, ohms: float) -> None:
    """L di/dt = -(R + R_x) i - V_F with a diode of 0.8 V at 0.1 A and 1.0 V at 2 A, silicon (emission coefficient 1.75)."""
    diode = """
[parts.plain]
kind = "diode"
forward = [{ voltage = "0.8 V", current = "0.1 A" }, { voltage = "1.0 V", current = "2 A" }]
capacitance = "25 pF"
recovery = "1 ns"
"""
    thermal = 1.75 * 0.025693
    r_d = (0.2 - thermal * math.log(20)) / 1.9

    def forward(i: float) -> float:
        return 0.8 + thermal * math.log(i / 0.1) + r_d * (i - 0.1)

    row = turned_off(
        tmp_path,
        f'{{ kind = "resistor-diode", diode = "plain", resistance = "{ohms:g} ohm" }}',
        coil=COIL + NO_LOSS + diode,
    )

    def fall(_t: float, y: np.ndarray) -> list[float]:
        i = max(float(y[0]), 1e-6)
        return [-((R + ohms) * i + forward(i)) / L, (forward(i) + ohms * i) * i]

    def gone(_t: float, y: np.ndarray) -> float:
        return float(y[0]) - 1e-3

    def let_go(_t: float, y: np.ndarray) -> float:
        return float(y[0]) - RELEASE

    gone.terminal = True  # type: ignore[attr-defined]
    out = solve_ivp(fall, (0.0, 5e-3), [I_0, 0.0], rtol=1e-9, atol=1e-12, events=(let_go, gone))
    # 1 %, as for the resistor alone.
    assert row.let_go == pytest.approx(float(out.t_events[0][0]), rel=1e-2)
    assert row.peak == pytest.approx(V + forward(I_0) + ohms * I_0, rel=1e-2)
    assert row.clamp_energy == pytest.approx(float(out.y[1, -1]), rel=1e-2)


# ----------------------------------------------------------------------------------------------- active clamp

ACTIVE = """
[parts.steep]
kind = "zener"
voltage = "36 V"
test_current = "5 mA"
impedance = "10 ohm"
leakage = "1 nA"
capacitance = "20 pF"
[parts.small]
kind = "diode"
forward = [{ voltage = "0.7 V", current = "10 mA" }, { voltage = "0.9 V", current = "200 mA" }]
capacitance = "4 pF"
recovery = "1 ns"
"""


def active(engine: Engine, folder: Path) -> Run:
    text = board_text(
        supply=f'voltage = "24 V", {STIFF}', coil=COIL + NO_LOSS, cable=SHORT, bulk=BULK,
        clamp='{ kind = "active", zener = "steep", diode = "small" }',
        switch='{ part = "perfect", gate = "220 ohm", pulldown = "4.7 kohm" }', parts=PERFECT_SWITCH.format(breakdown="500 V") + ACTIVE,
    )  # fmt: skip
    fired = pattern_text(pulse("10 us", "6 ms"), duration="8 ms")
    return run_board(engine, folder, text, fired, Settings("gear", 1e-5, 10e-6))


def test_an_active_clamp_holds_and_shares_as_a_second_solver_says(engine: Engine, tmp_path: Path) -> None:
    """V_DS = V_Z + V_F + V_GS with I_Z = V_GS / R_pulldown + V_GS / (R_gate + R_out); L di/dt = V - R i - V_DS."""
    run = active(engine, tmp_path)
    off = run.on()[1]
    after = run.t >= off
    start = float(run.at(off, "i_coil", 0))
    parameters = (
        run.deck.netlist
    )  # V_GS(I) is the transistor's own: the gate voltage at which the run holds it is read once
    assert "VDMOS" in parameters.upper()
    held = float(run.at(off + 50e-6, "v_gs", 0))
    r_out = 28.0  # of the library's 74HC595, datasheet typical
    thermal = 1.75 * 0.025693
    r_d = (0.2 - thermal * math.log(20)) / 0.19

    def zener_current(v_gs: float) -> float:
        return v_gs / 4700.0 + v_gs / (220.0 + r_out)

    def drain(v_gs: float) -> float:
        i = zener_current(v_gs)
        zener = 36.0 + (10.0 - 0.025693 / 5e-3) * (i - 5e-3) + 0.025693 * math.log(i / 5e-3)
        return zener + 0.7 + thermal * math.log(i / 0.01) + r_d * (i - 0.01) + v_gs

    # 2 %: of the output's resistance the library prints a typical figure.
    assert run.at(off + 50e-6, "i_clamp Zener", 0) == pytest.approx(zener_current(held), rel=2e-2)
    level = drain(held)
    # 0.5 %: while the current falls the gate's voltage falls by less than 0.1 V.
    assert run.at(off + 50e-6, "v_ds", 0) == pytest.approx(level, rel=5e-3)

    def energy(a: str, b: str) -> float:
        return float(np.trapezoid((run.signal(a, 0) * run.signal(b, 0))[after], run.t[after]))

    # Infineon, TLE8108EM data sheet rev. 1.0 (2011-03-23), p. 12, eq. (1): of all that the low side takes, I_Z's share is the
    # clamp's; the rest is the switch's. 1 %: V_DS falls with V_GS by that much.
    whole = constant_voltage_energy(start, level)
    lasts = constant_voltage_time(start, level - V)
    small = zener_current(held)
    assert energy("v_ds", "i_d") == pytest.approx(whole - level * small * lasts, rel=1.5e-2)
    assert energy("v_clamp Zener", "i_clamp Zener") == pytest.approx(36.0 * small * lasts, rel=4e-2)
    # The gate takes V_GS I_Z from the clamp and gives it to its network: what stays in the transistor's gate is nothing.
    assert abs(energy("v_gs", "i_g")) < 1e-3 * whole
    time_below = run.t[after][np.flatnonzero(run.signal("i_coil", 0)[after] < RELEASE)[0]] - off
    assert time_below == pytest.approx(constant_voltage_time(start, level - V, RELEASE), rel=1e-2)


def test_the_audits_ports_of_an_active_clamp_add_up_to_what_the_coil_and_the_output_give(
    engine: Engine, tmp_path: Path
) -> None:
    """Tellegen about drain and gate: V_load I_coil plus what the output gives equals all ports and the gate's resistors."""
    run = active(engine, tmp_path)
    t = run.t
    ports = [p for c, _, p in run.deck.ports if c == 0 and p.part != "coil"]
    into = sum(np.trapezoid(run.signal(v, 0) * run.signal(i, 0), t) for p in ports for v, i in p.pairs)
    columns = {name.lower(): y for name, y in run.columns.items()}
    # The coil's current goes into the load's node: voltage of the switch times it. The gate's network: from its own nodes.
    given = np.trapezoid(run.signal("v_ds", 0) * run.signal("i_coil", 0), t)
    pin, gate = columns["v(c0_q)"], run.signal("v_gs", 0)
    network = np.trapezoid((pin - gate) / 220.0 * gate - gate**2 / 4700.0, t)
    assert into == pytest.approx(given + network, abs=1e-7)  # of 18 mJ: both are sums over the same points
    without = into - np.trapezoid(run.signal("v_gs", 0) * run.signal("i_clamp Zener", 0), t)
    assert abs(without - given - network) > 1e-6  # and would not without the clamp's current into the gate


# --------------------------------------------------------------------------------- a Zener in the common pin


FORWARD = 1.7  # [V] of the clamp diode at 350 mA, typical: TI ULN2803A SLRS049H (Feb 2017); 0.03 V less at 200 mA


def commonly(engine: Engine, folder: Path, n: int) -> Run:
    text = board_text(
        supply=f'voltage = "12 V", {STIFF}', coil=f'resistance = "60 ohm"\ninductance = "30 mH"\n{NO_LOSS}', cable=SHORT, bulk=BULK,
        switch='{ part = "sink-array-8" }', parts=CONSTANT.format(volts=20.0), channels="0-6",
        clamp='{ kind = "array-zener", part = "sink-array-8", zener = "constant" }',
    )  # fmt: skip
    fired = pattern_text(pulse("10 us", "4 ms", f"0-{n - 1}"), duration="5 ms")
    return run_board(engine, folder, text, fired, Settings("gear", 2e-5, 20e-6))


@pytest.mark.parametrize("n", [1, 7])
def test_a_common_zener_takes_the_sum_of_all_outputs_that_turn_off(engine: Engine, tmp_path: Path, n: int) -> None:
    """n coils at constant voltage: n I_0 at first, n times V_Z times each coil's charge, by the diode's printed voltage."""
    run = commonly(engine, tmp_path, n)
    off = run.on()[1]
    after = run.t >= off
    start = float(run.at(off, "i_coil", 0))
    package = "sink-array-8 1"
    v_z, i_z = run.signal(f"v_common Zener, {package}"), run.signal(f"i_common Zener, {package}")
    # 3 %: the transistors turn off in a microsecond of the first 400, and their capacitances take a little.
    assert i_z[after].max() == pytest.approx(n * start, rel=3e-2)
    assert run.signal("v_ds", 0)[after].max() == pytest.approx(12.0 + 20.0 + FORWARD, rel=2e-2)

    def charge_of_one() -> float:
        # dq = i dt = -L i di / (R i + V_Z + V_F)
        return quad(lambda i: 0.03 * i / (60.0 * i + 20.0 + FORWARD), 1e-6, start)[0]

    energy = float(np.trapezoid((v_z * i_z)[after], run.t[after]))
    # 3 %: the same, and the Zener's 26 mV per e-fold below and above 0.5 A, 0.05 V of 20.
    assert energy == pytest.approx(n * 20.0 * charge_of_one(), rel=3e-2)
