"""Boards whose coils come on before the firmware runs, and the same boards repaired."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from boardsim.board.reader import read_board
from boardsim.scenarios.power_up import power_up
from boardsim.verdict.findings import Finding, Result
from boardsim.verdict.studies import PowerUp

pytestmark = pytest.mark.engine

HERE = Path(__file__).parent
F03, F04 = "f03_all_fire_at_power_up", "f04_floating_gate"


def looked_at(folder: str, board: str, keep: Path) -> Result:
    result = power_up(read_board(HERE / folder / f"{board}.toml"), keep / "kept")
    assert result.proven, result.notes
    return result


def broken(result: Result) -> dict[tuple[str, str], Finding]:
    return {(f.quantity, f.label): f for f in result.findings if f.verdict == "fail"}


def rows(result: Result) -> dict[str, int]:
    assert isinstance(result.study, PowerUp)
    return {row.name: row.count for row in result.study.rows}


def test_output_enable_tied_low_lets_unknown_contents_through_until_the_first_frame(tmp_path: Path) -> None:
    """74HC595s wake up with random latches, and clear empties the shift stage only (NXP 74HC595 rev. 6, table 3)."""
    result = looked_at(F03, "bad", tmp_path)
    assert {f.check for f in broken(result).values()} == {"uncommanded"}
    assert rows(result) == {
        "storage all ones": 2,
        "storage all zeros": 0,
        "storage random (random number 1)": 1,
        "storage with one coil of each build on": 1,
        "after a reset, every channel was on": 2,
    }
    assert {f.consequence for f in broken(result).values()} == {"destroy"}  # nothing but the first frame ends it


def test_current_and_energy_before_the_first_frame_are_those_of_a_coil_on_a_rising_rail(tmp_path: Path) -> None:
    """L di/dt + R i = v, solved by SciPy for 25.2 V that rise within 5 ms, the winding at 15 degC and 95 % of 60 ohm."""
    found = broken(looked_at(F03, "bad", tmp_path))["current before the first frame, storage all ones", "gate 0"]
    ohms = 0.95 * 60 * (1 - 0.00393 * 5)

    def slope(t: float, y: np.ndarray) -> list[float]:
        volts = 25.2 * min(t / 5e-3, 1.0)
        return [(volts - ohms * y[0]) / 90e-3, volts * y[0]]

    end = solve_ivp(slope, (0.0, 31e-3), [0.0, 0.0], rtol=1e-8, atol=1e-12, max_step=1e-4).y[:, -1]
    # 1 %: cable, supply and switch take 0.2 ohm of 56; the switch turns on 0.3 ms late, when the gate is at its threshold.
    assert found.value == pytest.approx(end[0], rel=1e-2)
    energy = float(found.sentence.split(" mJ")[0].split()[-1]) * 1e-3
    assert energy == pytest.approx(end[1], rel=2e-2)


def test_a_pulled_up_output_enable_keeps_every_coil_off(tmp_path: Path) -> None:
    result = looked_at(F03, "repaired", tmp_path)
    assert broken(result) == {}
    assert result.verdict == "pass"
    assert set(rows(result).values()) == {0}


def test_a_gate_without_pull_down_is_unknown_and_flagged_whatever_the_registers_hold(tmp_path: Path) -> None:
    result = looked_at(F04, "bad", tmp_path)
    counts = rows(result)
    assert counts["storage all zeros"] == 1
    assert counts["storage all ones, what floats drifts to off"] == 0
    one = broken(result)["current before the first frame, storage all zeros", "drum"]
    assert one.sentence.endswith("a pull-down at its gate, which floats while the outputs are not enabled")
    assert one.at is not None
    # The coil rail is up for 10 ms before the logic rail comes: the current flows with an unpowered register already.
    assert isinstance(result.study, PowerUp)
    total = result.study.waves["i_total"]
    assert float(np.interp(9e-3, total.edges[1:], total.high)) > 0.5


def test_a_pull_down_holds_the_gate_while_the_register_has_no_supply(tmp_path: Path) -> None:
    result = looked_at(F04, "repaired", tmp_path)
    assert broken(result) == {}
    assert result.verdict == "pass"


@pytest.mark.parametrize("nanofarads", [470, 1000])
def test_a_capacitor_at_output_enable_lags_behind_the_rail_and_lets_a_pulse_through(
    tmp_path: Path, nanofarads: int
) -> None:
    """10 kohm and 470 nF: 70 % of the rail after RC ln(1 / 0.3) = 5.7 ms; until then outputs count as enabled."""
    text = (HERE / F03 / "repaired.toml").read_text(encoding="utf-8")
    old = 'output_enable = { pull_up = "10 kohm", pin = true }'
    assert old in text
    new = old.replace('",', f'", capacitance = "{nanofarads} nF",')
    (tmp_path / "board.toml").write_text(text.replace(old, new), encoding="utf-8")
    result = power_up(read_board(tmp_path / "board.toml"), tmp_path / "kept")
    one = broken(result)["current before the first frame, storage all ones", "gate 0"]
    assert one.consequence == "misbehave"
    assert "it ends by itself" in one.sentence
    assert "a smaller capacitor or pull-up at output enable" in one.sentence
    # Half a millisecond later, since the logic rail takes 1 ms to rise, and 0.1 ms for the inputs' leakage and the gate. Then
    # the current only falls.
    assert one.at == pytest.approx(nanofarads * 1e-5 * np.log(1 / 0.3) + 0.5e-3, abs=0.15e-3 + 5e-9 * nanofarads)


@pytest.mark.parametrize("allowed", ["", 'reset_off = "8 ms"'])
def test_after_a_reset_a_slow_output_enable_goes_on_feeding_coils_and_is_held_against_what_a_reset_may_take(
    tmp_path: Path, allowed: str
) -> None:
    """The pin lets go of a line of 10 kohm and 470 nF: 70 % of the rail after RC ln(1 / 0.3) = 5.66 ms (R C by hand). Until then
    25.2 V lie at windings of 55.9 ohm (15 degC, 95 % of 60 ohm at 20 degC), settled before the reset: U^2 t / R each.
    """
    text = (HERE / F03 / "repaired.toml").read_text(encoding="utf-8")
    text = text.replace('pull_up = "10 kohm", pin', 'pull_up = "10 kohm", capacitance = "470 nF", pin')
    text = text.replace('first_frame = "30 ms"', f'first_frame = "30 ms"\n{allowed}')
    (tmp_path / "board.toml").write_text(text, encoding="utf-8")
    result = power_up(read_board(tmp_path / "board.toml"), tmp_path / "kept")
    found = [f for f in result.findings if f.quantity == "time fed after a reset, every channel was on"]
    assert [f.label for f in found] == ["gate 0", "gate 1"]
    seconds = 10e3 * 470e-9 * np.log(1 / 0.3)
    for f in found:
        assert f.value == pytest.approx(seconds, abs=0.3e-3)  # the gate's own 0.2 ms come on top
        energy = float(f.sentence.split(" mJ")[0].split()[-1]) * 1e-3
        # 4 %: before the end the gate takes 0.1 ms to empty; supply, cable and switch take 0.4 % of the voltage.
        assert energy == pytest.approx(25.2**2 / (0.95 * 60 * (1 - 0.00393 * 5)) * f.value, rel=4e-2)
        assert "its coil is fed for" in f.sentence
        assert f.verdict == ("pass" if allowed else "fail")
        assert f.consequence == "misbehave"
        assert not {"rails' order", "rails' rise", "time of the first frame"} & {*f.assumed}
        assert ("time that a reset may take" in f.assumed) == (not allowed)
        if not allowed:
            assert f.sentence.endswith(
                "a smaller capacitor or pull-up at output enable: it rises slowly once its pin lets go"
            )
    assert any("turn channels off" in a.quantity for a in result.assumptions) == (not allowed)


def test_after_a_reset_with_outputs_enabled_only_the_first_frame_ends_what_coils_take(tmp_path: Path) -> None:
    found = broken(looked_at(F03, "bad", tmp_path))["time fed after a reset, every channel was on", "gate 0"]
    assert found.value == pytest.approx(30e-3, rel=1e-3)  # first_frame of the board, and 2.5 us of frame
    assert found.consequence == "destroy"
    assert "hold output enable high with a pull_up" in found.sentence
    energy = float(found.sentence.split(" mJ")[0].split()[-1]) * 1e-3
    # 2 %: U^2 R / (R + r)^2, where cable and supply carry both coils and r is 0.3 ohm of 56.
    assert energy == pytest.approx(25.2**2 / (0.95 * 60 * (1 - 0.00393 * 5)) * 30e-3, rel=2e-2)


def test_the_command_leaves_what_other_questions_leave(tmp_path: Path) -> None:
    board = HERE / F04 / "repaired.toml"
    call = [
        sys.executable,
        "-m",
        "boardsim.cli",
        "power-up",
        str(board),
        "--random",
        "7",
        "--out",
        str(tmp_path / "out"),
    ]
    done = subprocess.run(call, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    assert "random number 7" in done.stdout
    files = {p.name for p in (tmp_path / "out").iterdir()}
    assert {"findings.json", "junit.xml", "power-up.png", "board.cir", "report.txt"} <= files
    found = json.loads((tmp_path / "out" / "findings.json").read_text(encoding="utf-8"))
    assert found["pattern"] == "power-up"
    assert [c["name"] for c in found["table"]["columns"]][:2] == ["registers hold", "storage"]
    assert "d_dff" in (tmp_path / "out" / "board.cir").read_text(encoding="utf-8")
