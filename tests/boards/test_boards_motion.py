"""Boards whose plungers come back or arrive too late, and the same boards repaired."""

from __future__ import annotations

from itertools import pairwise
from pathlib import Path

import pytest

from boardsim.board.reader import read_board
from boardsim.firing.pattern import Pattern, Pulse, read_pattern
from boardsim.firing.registers import frame_time
from boardsim.scenarios.fire import fire_pattern
from boardsim.verdict.findings import Finding, Result

pytestmark = pytest.mark.engine

HERE = Path(__file__).parent


def fired(folder: str, board: str, keep: Path) -> Result:
    read = read_board(HERE / folder / f"{board}.toml")
    result = fire_pattern(read, read_pattern(HERE / folder / "pattern.toml", read), keep / "kept")
    assert result.proven
    return result


def found(result: Result, check: str, quantity: str) -> Finding:
    return next(f for f in result.findings if (f.check, f.quantity) == (check, quantity))


CASES = {
    "f07_slow_release": ("return", "position when fired again"),
    "f17_late_actuation": ("stroke", "time to arrive"),
}


@pytest.mark.parametrize("folder", CASES)
def test_the_bad_board_fails_for_its_reason_and_no_other_and_the_repaired_one_keeps_every_limit(
    tmp_path: Path, folder: str
) -> None:
    bad, repaired = fired(folder, "bad", tmp_path), fired(folder, "repaired", tmp_path)
    assert {(f.check, f.quantity) for f in bad.findings if f.verdict == "fail"} == {CASES[folder]}
    assert {f.verdict for f in bad.findings} <= {"fail", "tight", "pass"}
    assert repaired.verdict in ("pass", "tight")
    assert {f.verdict for f in repaired.findings} <= {"tight", "pass"}
    shown = next(c for c in bad.closeups if c.finding[:2] == CASES[folder])
    assert {p.unit for p in shown.panels} == {"m", "m/s", "A"}  # position and speed beside the current

    if folder == "f17_late_actuation":
        # The plunger does the same on both: what is late is the frame, 48 bits at 20 kHz and 0.5 us of latch against 48 at 2 MHz.
        late, timely = (found(r, *CASES[folder]) for r in (bad, repaired))
        frames = [frame_time(read_board(HERE / folder / f"{b}.toml").chain) for b in ("bad", "repaired")]
        assert frames == [pytest.approx(48 / 20e3 + 0.5e-6), pytest.approx(48 / 2e6 + 0.5e-6)]
        # 1 %: what two runs may differ by, of the time that the plunger takes.
        assert late.value - timely.value == pytest.approx(frames[0] - frames[1], abs=0.01 * timely.value)
        assert "2.40 ms pass until its output is on" in late.sentence
        assert "try: a faster clock or fewer registers in the chain" in late.sentence


CLAMPS = {
    "diode": 'kind = "diode", diode = "fast-2a"',
    "resistor and diode": 'kind = "resistor-diode", diode = "fast-2a", resistance = "24 ohm", power = "2 W"',
    "diode and Zener": 'kind = "diode-zener", diode = "fast-2a", zener = "20v-5w"',
}


def test_a_plain_diode_lets_a_plunger_come_back_latest(tmp_path: Path) -> None:
    """Common practice: a plain diode releases slowest, and the more volts take the current down the sooner a plunger is back."""
    text = (HERE / "f07_slow_release" / "bad.toml").read_text(encoding="utf-8").replace("24 V +/- 5 %", "24 V")
    times = []
    for clamp in CLAMPS.values():
        (tmp_path / "board.toml").write_text(text.replace('kind = "diode", diode = "fast-2a"', clamp), encoding="utf-8")
        board = read_board(tmp_path / "board.toml")
        pulses = (Pulse(0, 1e-3, 12e-3), Pulse(0, 40e-3, 12e-3))
        result = fire_pattern(board, Pattern(board.path, "two", None, pulses), tmp_path / "kept", pictured=False)
        assert result.proven
        times.append(found(result, "return", "time to return").value)
    assert times == sorted(times, reverse=True)
    assert min(a / b for a, b in pairwise(times)) > 1.03  # apart by more than two runs may differ
