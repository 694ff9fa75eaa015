"""The deck as plain `ngspice -b` runs it by itself, against what the program reads from the engine's waveforms."""

from __future__ import annotations

import re
import shutil
import subprocess
from pathlib import Path

import pytest
from reference_boards import board_text, pattern_text, pulse, read_files

from boardsim.circuit.assemble import assemble, windows
from boardsim.circuit.deck import Settings
from boardsim.engine.run import Engine
from boardsim.firing.schedule import fire
from boardsim.parts.base import NOMINAL
from boardsim.verdict.readings import take_readings

pytestmark = pytest.mark.engine

NARROW = {
    "switch": '{ part = "n-logic-60v", gate = "100 ohm", pulldown = "10 kohm" }',
    "clamp": '{ kind = "diode-zener", diode = "fast-2a", zener = "24v-5w" }',
}
# Its high transistor's voltages lie between two nodes each.
BRIDGE = {
    "switch": '{ kind = "half-bridge", high = "IRF9540N", low = "n-logic-60v", gate = "10 ohm", driver = { supply = "12 V", dead_time = "1 us" } }',
    "clamp": '{ kind = "none" }',
}


def board_of(stage: dict[str, str]) -> str:
    return board_text(
        supply='voltage = "24 V", resistance = "20 mohm", current_ceiling = "10 A"', parts="",
        cable='{ gauge = "16 AWG", length = "1.8 m" }', bulk='{ capacitance = "470 uF", esr = "40 mohm" }',
        coil='resistance = "16 ohm"\ninductance = "12 mH"', channels="0-1", **stage,
    )  # fmt: skip


def measures_of(output: str) -> dict[str, tuple[float, float]]:
    """The .meas lines that ngspice printed: name -> (value, time)."""
    number = r"([-+.\deE]+)"
    found = re.findall(rf"^(\w+)\s*=\s*{number}\s+at=\s*{number}", output, re.MULTILINE)
    return {name: (float(value), float(at)) for name, value, at in found}


@pytest.mark.parametrize(
    ("stage", "names"), [(NARROW, set()), (BRIDGE, {"c0_v_ds_max", "c1_v_ds_max", "c0_v_gs_max", "c1_v_gs_max"})]
)
def test_plain_ngspice_prints_the_same_readings(
    engine: Engine, tmp_path: Path, stage: dict[str, str], names: set[str]
) -> None:
    program = shutil.which("ngspice")
    assert program is not None, "the program ngspice itself is missing (Debian: apt-get install ngspice)"
    fired = pattern_text(pulse("1 ms", "8 ms", "0-1"), pulse("9.3 ms", "4 ms", "1"), duration="18 ms")
    board, pattern = read_files(tmp_path, board_of(stage), fired)
    firing = fire(board, pattern)
    deck = assemble(board, firing, NOMINAL, windows(board, firing)[0])
    settings = Settings("gear", 5e-5, 300e-6)
    with engine.run(deck, settings) as waves:
        readings = take_readings(waves, deck, firing)

    (tmp_path / "board.cir").write_text(deck.text(settings), encoding="utf-8")
    # ngspice writes thousands of lines of progress to stderr: caught, never shown.
    done = subprocess.run(
        [program, "-b", "board.cir"], cwd=tmp_path, capture_output=True, text=True, timeout=60, check=False,
    )  # fmt: skip
    assert done.returncode == 0
    printed = measures_of(done.stdout)
    expected = {}
    for extremes, how in ((readings.high, "max"), (readings.low, "min")):
        for (channel, quantity), reading in extremes.items():
            expected[f"{'board' if channel is None else f'c{channel}'}_{quantity}_{how}"] = reading
    assert len(printed) == len(deck.measures) >= 9
    assert names <= set(printed)
    # par('...') of a sum brings a source of its own, which moves the points: what is left is the run's own tolerance, tenfold.
    moved = 10 * settings.reltol if names else 2e-6
    for name, (value, at) in printed.items():
        # Same program text, same points: what differs is that .meas prints six or seven digits.
        assert value == pytest.approx(expected[name][0], rel=moved), name
        if not names:
            assert at == pytest.approx(expected[name][1], rel=2e-6, abs=1e-9), name
