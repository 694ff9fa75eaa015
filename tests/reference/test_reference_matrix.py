"""A matrix of coils against independent solutions: nodal analysis of its resistances, and the differential equation of one coil.

Columns are switched by MOSFETs of 1 mohm and diodes drop 30 mV (`reference_boards`); rows hang on the library's source array,
whose two printed saturation points and one clamp point are put into the independent solutions as printed.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from reference_boards import PERFECT_DIODE, PERFECT_SWITCH, SHORT, Run, pattern_text, pulse, run_board
from scipy.integrate import solve_ivp

from boardsim.board.matrix import LINES_FROM
from boardsim.engine.run import Engine

pytestmark = pytest.mark.engine

VOLTS, OHMS, HENRIES = 24.0, 100.0, 50e-3
THERMAL = 1.380649e-23 * 298.15 / 1.602176634e-19  # [V], kT/q at 25 degC
ROW0, ROW1, COLUMN0, COLUMN1 = (LINES_FROM + k for k in range(4))

BOARD = f"""
supply = {{ voltage = "{VOLTS} V", resistance = "1 mohm" }}
cable = {SHORT}
bulk = {{ capacitance = "4700 uF", esr = "1 mohm" }}
logic = {{ voltage = "5 V" }}
[chain]
register = "74HC595"
count = 2
clock = "4 MHz"
[coils.coil]
resistance = "{OHMS} ohm"
inductance = "{HENRIES} H"
core_loss = "1 Gohm"
{PERFECT_SWITCH.format(breakdown="200 V")}{PERFECT_DIODE}
[channels."0-3"]
coil = "coil"
switch = {{ part = "perfect", gate = "10 ohm" }}
clamp = {{ kind = "diode", diode = "perfect-diode" }}
[channels."0-3".matrix]
rows = "0-1"
columns = "8-9"
row_switch = {{ part = "source-array-8" }}
row_clamp = {{ kind = "built-in" }}
"""
WITH_DIODES = BOARD + 'diode = "perfect-diode"\n'
FIRE_0 = pattern_text(pulse("0.1 ms", "4 ms"))


def perfect_diode(amperes: float) -> float:
    """20 mV at 10 mA and 30 mV at 1 A: ten millivolts for two decades. [A] -> [V]"""
    return 20e-3 + 10e-3 * np.log(max(amperes, 1e-9) / 10e-3) / np.log(100.0)


def nodal(driven: dict[str, float], with_diodes: bool) -> tuple[np.ndarray, dict[str, float]]:
    """Currents of the four coils and voltages of the open lines, by Kirchhoff's current law at each of these.

    A coil behind a diode that is not driven forward carries nothing; which these are is tried out.
    """
    ends = [("r0", "c0"), ("r0", "c1"), ("r1", "c0"), ("r1", "c1")]
    carrying = set(range(4))
    while True:
        open_lines = [n for n in ("r0", "r1", "c0", "c1") if n not in driven]
        matrix, right = 1e-12 * np.eye(len(open_lines)), np.zeros(len(open_lines))
        for k in carrying:
            for here, there in (ends[k], ends[k][::-1]):
                if here in open_lines:
                    i = open_lines.index(here)
                    matrix[i, i] += 1 / OHMS
                    if there in open_lines:
                        matrix[i, open_lines.index(there)] -= 1 / OHMS
                    else:
                        right[i] += driven[there] / OHMS
        volts = {**driven, **dict(zip(open_lines, np.linalg.solve(matrix, right), strict=True))}
        currents = np.array([(volts[a] - volts[b]) / OHMS if k in carrying else 0.0 for k, (a, b) in enumerate(ends)])
        against = {k for k in carrying if with_diodes and currents[k] < -1e-9}
        if not against:
            return currents, {n: volts[n] for n in open_lines}
        carrying -= against


@pytest.mark.parametrize("board", [BOARD, WITH_DIODES], ids=["bare", "diodes"])
def test_settled_currents_are_those_of_nodal_analysis(engine: Engine, tmp_path: Path, board: str) -> None:
    run = run_board(engine, tmp_path, board, FIRE_0)
    at = run.on()[1] - 1e-5  # eight time constants after the turn-on
    row = float(run.at(at, "v_out", ROW0))
    drop = perfect_diode(0.22) if board is WITH_DIODES else 0.0
    expected, open_lines = nodal({"r0": row - drop, "c0": float(run.at(at, "v_ds", COLUMN0))}, board is WITH_DIODES)
    found = np.array([float(run.at(at, "i_coil", k)) for k in range(4)])
    # 0.1 % of the fired coil's current: what is left of the exponential; leakages of junctions are some nanoamperes.
    np.testing.assert_allclose(found, expected, atol=1e-3 * expected[0])
    if board is BOARD:
        assert found[1] == pytest.approx(row / (3 * OHMS), rel=1e-3)  # one way of three coils in series
        assert found[3] == pytest.approx(-found[1], rel=1e-3)  # the middle one backwards
        assert float(run.at(at, "v_out", ROW1)) == pytest.approx(open_lines["r1"], rel=1e-3)
        assert float(run.at(at, "v_ds", COLUMN1)) == pytest.approx(open_lines["c1"], rel=1e-3)


def test_turn_on_follows_the_differential_equation(engine: Engine, tmp_path: Path) -> None:
    """L di/dt = V - V_source(i) - V_diode(i) - R i, the source as printed: 1.45 V at 100 mA, 1.6 V at 350 mA.

    Between and below the two points its voltage is taken as two junctions' logarithm and a resistance.
    """
    run = run_board(engine, tmp_path, WITH_DIODES, FIRE_0)
    resistance = (0.15 - 2 * THERMAL * np.log(3.5)) / 0.25

    def slope(_: float, y: np.ndarray) -> np.ndarray:
        i = max(float(y[0]), 1e-3)
        source = 1.45 + 2 * THERMAL * np.log(i / 0.1) + resistance * (i - 0.1)
        return np.array([(VOLTS - source - perfect_diode(i) - OHMS * float(y[0])) / HENRIES])

    times = HENRIES / OHMS * np.array([0.5, 1.0, 2.0, 4.0])
    solved = solve_ivp(slope, (0.0, times[-1]), [0.0], t_eval=times, rtol=1e-8, atol=1e-10)
    # 0.5 %: the array turns on within 1 us of 500 us; below a milliampere its voltage is not that of the formula.
    np.testing.assert_allclose(run.at(run.on()[0] + times, "i_coil", 0), solved.y[0], rtol=5e-3)


def test_turned_off_coils_return_their_energy_to_the_rail(engine: Engine, tmp_path: Path) -> None:
    """L di/dt = -(V + V_ground(i) + 2 V_diode(i)) - R i once both switches are off; the rail takes the integral of V i.

    The array's diode from ground as printed, 1.2 V at 350 mA, with the emission coefficient 1.75 that the house takes where
    one point leaves it open.
    """
    run = run_board(engine, tmp_path, WITH_DIODES, FIRE_0)
    begin = run.on()[1] + 20e-6  # the array stores carriers for some 5 us
    start = float(run.at(begin, "i_coil", 0))

    def slope(_: float, y: np.ndarray) -> np.ndarray:
        i = float(y[0])
        if i <= 1e-6:
            return np.zeros(2)
        ground = 1.2 + 1.75 * THERMAL * np.log(i / 0.35)
        return np.array([-(VOLTS + ground + 2 * perfect_diode(i) + OHMS * i) / HENRIES, VOLTS * i])

    span = 600e-6
    times = np.array([50e-6, 100e-6, 200e-6])
    solved = solve_ivp(slope, (0.0, span), [start, 0.0], t_eval=[*times, span], rtol=1e-8, atol=1e-12, max_step=1e-6)
    # 0.5 % of the current at the beginning: straight lines between the run's points.
    np.testing.assert_allclose(run.at(begin + times, "i_coil", 0), solved.y[0][:3], atol=5e-3 * start)
    assert returned(run, begin, span) == pytest.approx(float(solved.y[1][-1]), rel=1e-2)
    # All of the coil's energy but what resistance and diodes took: closed form without the diodes' 1.3 V.
    x = OHMS * start / VOLTS
    closed = VOLTS * HENRIES / OHMS * start * (1 - np.log1p(x) / x)
    assert returned(run, begin, span) == pytest.approx(closed, rel=0.08)


def returned(run: Run, begin: float, span: float) -> float:
    """Energy that the column's clamp delivers into the rail. [J]"""
    here = (run.t >= begin) & (run.t <= begin + span)
    power = run.signal("v_rail") * run.signal("i_clamp diode", COLUMN0)
    return float(np.trapezoid(power[here], run.t[here]))
