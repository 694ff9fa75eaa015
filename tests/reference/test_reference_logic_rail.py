"""A logic rail that hangs on the coil rail, against its own equations: SciPy, energy balance, and data sheets' formulas."""

from __future__ import annotations

import math
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest
from reference_boards import NO_LOSS, Floats, Run, board_text, pattern_text, pulse, run_board
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from boardsim.board.reader import library_part
from boardsim.engine.run import Engine
from boardsim.parts.register import Register
from boardsim.verdict.logic_supply import clock_charge, edge_dip

DIODE = '{ kind = "diode", diode = "perfect-diode" }'
V, R_SOURCE, R_COIL, L_COIL, C_BULK, ESR_BULK = 9.0, 0.5, 2.0, 8e-3, 470e-6, 0.05
V_SET, C_OUT, ESR_OUT, LOAD, OWN, R_OUT = 5.0, 220e-6, 0.03, 0.15, 6e-3, 0.02
LINEAR = 'kind = "linear-regulator", dropout = "1.2 V"'
BUCK = 'kind = "buck-regulator", efficiency = "80 %", max_duty = "90 %", drop = "0.2 V"'


def run_regulator(
    engine: Engine,
    folder: Path,
    kind: str,
    more: str = "",
    reverse: str = "blocks",
    source: float = R_SOURCE,
    farads: float = C_OUT,
) -> Run:
    """One coil of 2 ohm on a supply of 0.5 ohm takes the coil rail from 9 V to 7 V."""
    text = board_text(
        supply=f'voltage = "{V} V", resistance = "{source} ohm"',
        coil=f'resistance = "{R_COIL} ohm"\ninductance = "{L_COIL} H"\n{NO_LOSS}',
        clamp=DIODE,
        bulk=f'{{ capacitance = "{C_BULK} F", esr = "{ESR_BULK} ohm", esl = "1 nH" }}',
    )
    own = (
        f'logic = {{ {kind}, voltage = "{V_SET} V", load = "{LOAD} A", capacitance = "{farads} F", esr = "{ESR_OUT} ohm", '
        f'quiescent = "{OWN} A", resistance = "{R_OUT} ohm", reverse = "{reverse}"{more} }}'
    )
    assert 'logic = { voltage = "5 V" }' in text
    return run_board(
        engine, folder, text.replace('logic = { voltage = "5 V" }', own), pattern_text(pulse("1 ms", "30 ms"))
    )


@dataclass(frozen=True)
class Regulated:
    """The same circuit written down by itself: sharp corners, no cable, no gate, an ideal switch. `law` is f(v_in)."""

    buck: bool
    dropout: float
    ceiling: float = math.inf

    def output(self, v_in: float, v_cap: float) -> tuple[float, float]:
        """Current out of the regulator, and its own voltage. [A], [V]"""
        target = min(V_SET, 0.9 * v_in - 0.2 if self.buck else v_in - self.dropout)
        # Kirchhoff at the output: (target - v) / r = i, i = I_load + (v - v_cap) / esr.
        i = (target - v_cap + LOAD * ESR_OUT) / (R_OUT + ESR_OUT)
        i = min(max(i, 0.0), self.ceiling)
        return i, v_cap + (i - LOAD) * ESR_OUT + R_OUT * i

    def rail(self, v_bulk: float, i_coil: float, v_cap: float) -> float:
        """Kirchhoff at the coil rail. [V]"""

        def left(v: float) -> float:
            i, volts = self.output(v, v_cap)
            taken = volts * i / (0.8 * v) if self.buck else i
            return (V - v) / R_SOURCE - (v - v_bulk) / ESR_BULK - i_coil - taken - OWN

        return float(brentq(left, 0.5, V + 1.0, xtol=1e-12))

    def solve(self, times: Floats) -> tuple[Floats, Floats]:
        """Coil rail and logic rail at these times after turn-on. [V]"""

        def slope(_: float, y: Floats) -> list[float]:
            v = self.rail(*y)
            i, _volts = self.output(v, y[2])
            return [(v - y[0]) / ESR_BULK / C_BULK, (v - R_COIL * y[1]) / L_COIL, (i - LOAD) / C_OUT]

        idle = self.rail_at_rest()
        start = [idle, 0.0, V_SET - R_OUT * LOAD]
        solved = solve_ivp(slope, (0.0, times[-1]), start, "Radau", times, rtol=1e-8, atol=1e-10, max_step=1e-4)
        rail = np.array([self.rail(*y) for y in solved.y.T])
        logic = [y[2] + (self.output(v, y[2])[0] - LOAD) * ESR_OUT for v, y in zip(rail, solved.y.T, strict=True)]
        return rail, np.array(logic)

    def rail_at_rest(self) -> float:
        """Without a coil: P = v i goes into the regulator. [V]"""
        taken = (lambda v: V_SET * LOAD / (0.8 * v)) if self.buck else (lambda v: LOAD)
        return float(brentq(lambda v: (V - v) / R_SOURCE - taken(v) - OWN, 1.0, V))


CASES = {
    "linear, in dropout": (LINEAR.replace("1.2 V", "2.6 V"), "", Regulated(buck=False, dropout=2.6)),
    "linear, at its ceiling while it recovers": (
        LINEAR.replace("1.2 V", "3 V"),
        ', current_ceiling = "0.4 A"',
        Regulated(buck=False, dropout=3.0, ceiling=0.4),
    ),
    "buck, in regulation": (BUCK, "", Regulated(buck=True, dropout=0.0)),
}


@pytest.mark.engine
@pytest.mark.parametrize("case", CASES)
def test_both_rails_follow_scipy_through_a_dip(engine: Engine, tmp_path: Path, case: str) -> None:
    """Tolerance 0.2 %: the deck's corners are rounded over 1 mV, its cable has 0.3 mohm, and the gate takes 10 nC."""
    kind, more, alone = CASES[case]
    run = run_regulator(engine, tmp_path, kind, more)
    on = run.on()[0]
    times = np.linspace(0.0, 28e-3, 57)
    rail, logic = alone.solve(times)
    assert run.at(on + times[1:], "v_rail") == pytest.approx(rail[1:], rel=2e-3)
    assert run.at(on + times[1:], "v_logic") == pytest.approx(logic[1:], rel=2e-3)
    if not alone.buck:
        assert min(logic) < 4.7  # the dip is there


@pytest.mark.engine
def test_a_capacitor_that_nothing_fills_or_empties_feeds_the_load_alone(engine: Engine, tmp_path: Path) -> None:
    """C dv/dt = -I while the regulator's input is too low: 10 mF lose 15 mV in a millisecond. 1 %: the gate draws from it too."""
    run = run_regulator(engine, tmp_path, LINEAR.replace("1.2 V", "3.5 V"), farads=10e-3)
    on = run.on()[0]
    a, b = on + 5e-3, on + 28e-3
    assert np.abs(run.at(np.linspace(a, b, 50), "i_regulator")).max() < 1e-3  # the divider's 10 kohm
    fallen = float(run.at(a, "v_logic") - run.at(b, "v_logic"))
    assert fallen == pytest.approx(LOAD / 10e-3 * (b - a), rel=1e-2)


@pytest.mark.engine
def test_a_diode_from_output_to_input_drags_the_logic_rail_down_with_the_coil_rail(
    engine: Engine, tmp_path: Path
) -> None:
    """10 mF would hold the output within 0.4 V; a junction of 0.7 V at 0.1 A and 0.9 V at 1 A lets it be 1 V above the input."""
    ends = {}
    for reverse in ("blocks", "conducts"):
        run = run_regulator(engine, tmp_path, LINEAR, "", reverse, source=4.0, farads=10e-3)
        at = run.on()[1] - 1e-4
        ends[reverse] = float(run.at(at, "v_logic")), float(run.at(at, "v_rail"))
    logic, rail = ends["blocks"]
    assert rail < 3.5
    assert logic > 4.5
    logic, rail = ends["conducts"]
    assert 0.6 < logic - rail < 1.0


@pytest.mark.engine
@pytest.mark.parametrize(("kind", "expected"), [(LINEAR, LOAD + OWN), (BUCK, None)], ids=["linear", "buck"])
def test_what_the_input_draws_at_rest(engine: Engine, tmp_path: Path, kind: str, expected: float | None) -> None:
    """A linear regulator draws its output's current; a buck the output's power over efficiency and input voltage."""
    run = run_regulator(engine, tmp_path, kind)
    v = float(run.at(0.5e-3, "v_rail"))
    if expected is None:
        # The output's own resistance counts as the output's: 5 V at the regulator.
        expected = V_SET * LOAD / (0.8 * v) + OWN
    assert float(run.at(0.5e-3, "i_logic_in")) == pytest.approx(expected, rel=1e-3)


@pytest.mark.engine
def test_the_energy_into_a_buck_is_what_comes_out_over_its_efficiency(engine: Engine, tmp_path: Path) -> None:
    """Integrated over the whole dip: W_in = W_out / 0.8 + I_q integral v dt; the 20 mohm of its output within W_out."""
    run = run_regulator(engine, tmp_path, BUCK)
    v_in, i_in, v, i = (run.signal(q) for q in ("v_rail", "i_logic_in", "v_logic", "i_regulator"))
    taken = np.trapezoid(v_in * i_in, run.t)
    given = np.trapezoid((v + R_OUT * i) * i, run.t)
    own = np.trapezoid(v_in * OWN, run.t)
    assert taken == pytest.approx(given / 0.8 + own, rel=1e-3)
    assert float(v_in.min()) < 7.4
    assert float(i_in.max()) > 1.1 * float(run.at(0.5e-3, "i_logic_in"))  # the same power from less voltage


def test_the_power_of_a_clocked_register_is_that_of_its_data_sheet() -> None:
    """LG9: P_D = C_PD V^2 f_i (NXP 74HC595 rev. 6, table 7, note 6), 115 pF, 5 V and 8 MHz: 23.0 mW."""
    register = library_part("74HC595")
    assert isinstance(register, Register)
    assert clock_charge(register, 5.0) * 5.0 * 8e6 == pytest.approx(23.0e-3, rel=1e-9)


@pytest.mark.parametrize(("nanohenries", "close"), [(2.0, 0.35), (20.0, 0.5), (200.0, 0.5), (20000.0, 0.75)])
def test_the_first_dip_of_a_fed_capacitor_is_never_more_than_its_bound_and_near_it(
    nanohenries: float, close: float
) -> None:
    """Eight gates of 2 nF behind 130 ohm on 100 nF, fed through a trace: SciPy for L, C and the gates' RC.

    What is far below it: with 2 nH and 20 nH the gates' current has fallen by the time of the dip, and with 20 uH they share their
    charge with a capacitor that has fallen itself, V C_g / (C + C_g).
    """
    v, c, l_trace, tau = 5.0, 100e-9, nanohenries * 1e-9, 130.0 * 2e-9
    first, charge = 8 * v / 130.0, 8 * 2e-9 * v

    def slope(_: float, y: Floats) -> list[float]:
        taken = 8 * (y[1] - y[2]) / 130.0
        return [(v - y[1]) / l_trace, (y[0] - taken) / c, (y[1] - y[2]) / tau]

    stop = min(math.pi * math.sqrt(l_trace * c), 20 * tau)
    solved = solve_ivp(slope, (0.0, stop), [0.0, v, 0.0], rtol=1e-9, atol=1e-12, max_step=stop / 2000)
    dip = v - float(solved.y[1].min())
    bound = edge_dip(charge, first, c, l_trace)
    assert close * bound < dip <= bound
