"""Latching actuators that others measured, and a reservoir's recharging, through the whole tool."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from reference_boards import board_text, pattern_text, pulse, read_files, run_board
from scipy.integrate import solve_ivp

from boardsim.board.reader import read_board
from boardsim.engine.run import Engine
from boardsim.errors import InputError
from boardsim.scenarios.fire import fire_pattern
from boardsim.verdict.findings import Finding

DIODE = '{ kind = "diode", to = "rail", diode = "perfect-diode" }'


def flip(folder: Path, supply: str, coil: str, width: str) -> Finding:
    """The finding on the current of one pulse."""
    board, pattern = read_files(
        folder,
        board_text(supply=supply, coil=f'kind = "latching"\n{coil}', clamp=DIODE),
        pattern_text(pulse("1 ms", width)),
    )
    result = fire_pattern(board, pattern, folder / "kept")
    assert result.proven
    return next(f for f in result.findings if f.check == "flip" and f.unit == "A")


@pytest.mark.engine
@pytest.mark.parametrize(("series", "measured", "verdict"), [("1 mohm", 53e-3, "pass"), ("27 ohm", 41e-3, "fail")])
def test_a_small_flip_dot_coil_flips_at_its_own_current_and_not_behind_27_ohm(
    tmp_path: Path, series: str, measured: float, verdict: str
) -> None:
    """83.6 ohm at 4.5 V: 53 mA measured, and it flips; with 27 ohm more 41 mA measured, and it does not.

    Source: https://www.mattscode.com/2014/03/flipping-back-to-basics-current-situation/. The threshold of the record, 47 mA,
    is the middle between the two, and any between them gives the same verdicts; inductance and time are invented. Tolerance: half of
    the last digit that was measured, and 1 mA for the meter's own resistance (0.8 mA at 53 mA, by Ohm's law on the source's figures).
    """
    coil = (
        'resistance = "83.6 ohm"\ninductance = "20 mH"\nflips_at = "47 mA"\nflips_after = "1 ms"\nholds_below = "5 mA"'
    )
    found = flip(tmp_path, f'voltage = "4.5 V", resistance = "{series}"', coil, "10 ms")
    assert found.verdict == verdict
    assert found.value == pytest.approx(measured, abs=1e-3)
    ohms = 83.6 + float(series.split()[0]) * (1e-3 if "mohm" in series else 1)
    assert found.value == pytest.approx(
        4.5 / ohms, rel=5e-3
    )  # Ohm's law; 83.6 / 200 of core loss, and 1 mohm of switch


@pytest.mark.engine
def test_a_latching_valve_draws_what_its_resistance_and_the_added_one_let(tmp_path: Path) -> None:
    """0.9 ohm of the closing coil and 3.9 ohm added: 24 V / 4.8 ohm = 5.0 A.

    Source: https://openthings.io/how-to-control-orbit-62035-valve/. Inductance and threshold are invented. 1 %: the source's figure
    has two digits.
    """
    coil = 'resistance = "0.9 ohm"\ninductance = "1 mH"\nflips_at = "3 A"\nflips_after = "1 ms"\nholds_below = "0.3 A"'
    found = flip(tmp_path, 'voltage = "24 V", resistance = "3.9 ohm"', coil, "5 ms")
    assert found.verdict == "pass"
    assert found.value == pytest.approx(5.0, rel=0.01)


@pytest.mark.engine
def test_a_reservoir_recharges_with_r_c(engine: Engine, tmp_path: Path) -> None:
    """v(t) = V - (V - v_0) exp(-t / R C): what it lacks falls to 1/e in each R C (any textbook). 0.5 %: of the coil's last microamperes."""
    text = board_text(
        supply='voltage = "24 V", resistance = "1 mohm", internal_load = "1 Gohm"',
        coil='resistance = "24 ohm"\ninductance = "1 mH"',
        clamp=DIODE,
        bulk='{ capacitance = "100 uF", esr = "1 mohm" }\ncharging = { resistance = "220 ohm" }',
    )
    run = run_board(engine, tmp_path, text, pattern_text(pulse("1 ms", "3 ms"), duration="60 ms"))
    begin = 6e-3
    times = begin + np.array([0.5, 1.0, 2.0]) * 22e-3
    lacks = 24.0 - run.at(np.array([begin, *times]), "v_rail")
    assert lacks[0] > 10
    np.testing.assert_allclose(lacks[1:] / lacks[0], [math.exp(-0.5), math.exp(-1), math.exp(-2)], rtol=5e-3)
    on = run.at(3.9e-3, "i_charging"), run.at(3.9e-3, "v_charging")
    assert on[1] / on[0] == pytest.approx(220.0)
    assert on[1] == pytest.approx(24.0 - float(run.at(3.9e-3, "v_rail")), rel=1e-3)


@pytest.mark.engine
def test_the_current_that_lasts_on_a_reservoir_is_that_of_a_second_solver(tmp_path: Path) -> None:
    """L di/dt = v - R i, C du/dt = (V - v) / R_c - i with v = u + R_s (that current into C), by SciPy; of the samples the best window's least.

    0.5 %: 1 mohm of switch, the core loss of 4.8 kohm, the cable's inductance and the register's edges are left out.
    """
    board, pattern = read_files(
        tmp_path,
        board_text(
            supply='voltage = "24 V", resistance = "1 mohm", internal_load = "1 Gohm"',
            coil='kind = "latching"\nresistance = "24 ohm"\ninductance = "12 mH"\nflips_at = "0.6 A"\nflips_after = "2 ms"\nholds_below = "50 mA"',
            clamp=DIODE,
            bulk='{ capacitance = "100 uF", esr = "0.3 ohm", esl = "1 nH" }\ncharging = { resistance = "220 ohm" }',
        ),
        pattern_text(pulse("1 ms", "4 ms")),
    )
    result = fire_pattern(board, pattern, tmp_path / "kept")
    assert result.proven
    (found,) = (f for f in result.findings if f.check == "flip")

    def rail(i: float, u: float) -> float:
        """Where the charging resistor's current and the capacitor's make up the coil's: (V - v) / 220 = i + (v - u) / 0.3."""
        return (24 / 220 - i + u / 0.3) / (1 / 220 + 1 / 0.3)

    def law(t: float, y: tuple[float, float]) -> list[float]:
        v = rail(*y)
        return [(v - 24 * y[0]) / 12e-3, (v - y[1]) / 0.3 / 100e-6]

    t = np.linspace(0.0, 4e-3, 40_001)
    up = solve_ivp(law, (0.0, 4e-3), [0.0, 24.0], t_eval=t, rtol=1e-9, atol=1e-12).y[0]
    later = np.linspace(0.0, 4e-3, 40_001)[1:]
    course = np.concatenate(
        [up, up[-1] * np.exp(-later * 24 / 12e-3)]
    )  # through a diode of 30 mV, which takes 1 % of it at most
    n = 20_000  # of 0.1 us: 2 ms. The current rises once and falls once: a window's least is at one of its ends.
    assert found.value == pytest.approx(float(np.minimum(course[:-n], course[n:]).max()), rel=5e-3)
    assert found.verdict == "fail"


def test_a_logic_rail_that_hangs_behind_the_charging_resistor_is_refused(tmp_path: Path) -> None:
    text = board_text(supply='voltage = "24 V"', coil='resistance = "24 ohm"\ninductance = "1 mH"', clamp=DIODE)
    text = text.replace("bulk =", 'charging = { resistance = "220 ohm" }\nbulk =').replace(
        'logic = { voltage = "5 V" }',
        'logic = { kind = "linear-regulator", voltage = "5 V", dropout = "1.2 V", load = "20 mA", capacitance = "10 uF", current_ceiling = "0.5 A" }',
    )
    (tmp_path / "board.toml").write_text(text, encoding="utf-8")
    with pytest.raises(InputError, match="give logic a supply of its own"):
        read_board(tmp_path / "board.toml")
