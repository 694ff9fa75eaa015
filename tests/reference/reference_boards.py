"""Small boards for the reference tests: board and pattern files as text, read as any user's files are, and run.

What a closed form leaves out is made small by the figures of the files, never by another path through the
program: a supply of 1 mohm, a cable of 1 m of 100 mm2, a core loss of 1 Gohm, a switch of 1 mohm, a diode of 30 mV.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from boardsim.board.reader import Board, read_board
from boardsim.circuit.assemble import assemble, windows
from boardsim.circuit.deck import Deck, Settings
from boardsim.engine.run import Engine
from boardsim.engine.waves import Waves
from boardsim.firing.pattern import Pattern, read_pattern
from boardsim.firing.schedule import Firing, fire
from boardsim.parts.base import NOMINAL, Corner
from boardsim.parts.elements import Signal

Floats = NDArray[np.float64]

FINE = Settings("gear", 1e-5, 100e-6)

# What a closed form takes as ideal.
STIFF = 'resistance = "1 mohm"'
SHORT = '{ area = "100 mm2", length = "1 m" }'
NO_LOSS = 'core_loss = "1 Gohm"'

# A switch whose resistance and capacitances do not count beside any coil of these tests; these stand at 1 kV, since
# books' volts are scaled up to that.
PERFECT_SWITCH = """
[parts.perfect]
kind = "n-mosfet"
breakdown = "{breakdown}"
threshold = "1.5 V"
on_resistance = [{{ value = "1 mohm", gate = "5 V" }}]
input_capacitance = "300 pF"
output_capacitance = "35 pF"
reverse_capacitance = "30 pF"
capacitance_voltage = "1 kV"
gate_drain_charge = "3 nC"
charge_voltage = "30 V"
"""
# A diode of 30 mV at 1 A, 2.2 mV per e-fold.
PERFECT_DIODE = """
[parts.perfect-diode]
kind = "diode"
forward = [{ voltage = "20 mV", current = "10 mA" }, { voltage = "30 mV", current = "1 A" }]
capacitance = "25 pF"
recovery = "1 ns"
"""


def board_text(
    *,
    supply: str,
    coil: str,
    clamp: str,
    cable: str = SHORT,
    bulk: str = '{ capacitance = "100 nF", esr = "10 ohm" }',
    switch: str = '{ part = "perfect", gate = "10 ohm" }',
    parts: str = PERFECT_SWITCH.format(breakdown="5 kV") + PERFECT_DIODE,
    channels: str = "0",
    logic: str = "5 V",
    limits: str = "",
) -> str:
    """The text of a board file; every argument is a TOML table or a part of one."""
    return f"""
supply = {{ {supply} }}
cable = {cable}
bulk = {bulk}
logic = {{ voltage = "{logic}" }}
[controller]
high_drop = "0.8 V"
low_output = "0.6 V"

[chain]
register = "74HC595"
count = 1
clock = "4 MHz"
[coils.coil]
{coil}
{parts}
[channels."{channels}"]
coil = "coil"
switch = {switch}
clamp = {clamp}
{limits}
"""


def pattern_text(*pulses: str, duration: str | None = None) -> str:
    """The text of a pattern file; each pulse is the inside of a table."""
    lines = [f'duration = "{duration}"'] if duration else []
    return "\n".join([*lines, *(f"[[pulses]]\n{p}" for p in pulses)]) + "\n"


def pulse(start: str, width: str, channels: str = "0") -> str:
    """One pulse as lines of TOML."""
    return f'channels = "{channels}"\nstart = "{start}"\nwidth = "{width}"'


def read_files(folder: Path, board: str, pattern: str) -> tuple[Board, Pattern]:
    """Write both files and read them back."""
    (folder / "board.toml").write_text(board, encoding="utf-8")
    (folder / "pattern.toml").write_text(pattern, encoding="utf-8")
    read = read_board(folder / "board.toml")
    return read, read_pattern(folder / "pattern.toml", read)


@dataclass(frozen=True)
class Run:
    """One run's waveforms in memory, by the deck's own quantities."""

    deck: Deck
    firing: Firing
    t: Floats
    columns: dict[str, Floats]

    def signal(self, quantity: str, channel: int | None = None) -> Floats:
        """A quantity of the deck, at `t`."""
        return self.combined(self.deck.signals[channel, quantity])

    def combined(self, signal: Signal) -> Floats:
        """A linear combination of saved vectors, at `t`."""
        return np.sum([k * self.columns[name] for k, name in signal], axis=0)

    def at(self, times: Floats | float, quantity: str, channel: int | None = None) -> Floats:
        """A quantity at given times, straight lines between points."""
        return np.interp(times, self.t, self.signal(quantity, channel))

    def on(self, channel: int = 0) -> tuple[float, float]:
        """When the channel's first pulse starts and ends at the register. [s]"""
        first = self.firing.on[channel][0]
        return float(first[0]), float(first[1])


def columns_of(waves: Waves) -> dict[str, Floats]:
    """All vectors of a run by the names that decks save them under, and "time"."""
    rows = np.concatenate([block if k == 0 else block[1:] for k, block in enumerate(waves.blocks())])
    names = [f"i({n.removesuffix('#branch')})" if n.endswith("#branch") else n for n in waves.names]
    return {name: rows[:, k] for k, name in enumerate(names)}


def run_board(
    engine: Engine,
    folder: Path,
    board: str,
    pattern: str,
    settings: Settings = FINE,
    corner: Corner = NOMINAL,
) -> Run:
    """Files -> board and pattern -> register frames -> deck -> waveforms."""
    read, fired = read_files(folder, board, pattern)
    firing = fire(read, fired)
    deck = assemble(read, firing, corner, windows(read, firing)[0])
    with engine.run(deck, settings) as waves:
        columns = columns_of(waves)
    return Run(deck, firing, columns.pop("time"), columns)


def run_plain(engine: Engine, netlist: str, duration: float) -> dict[str, Floats]:
    """Run the text of a plain circuit; vectors by name."""
    with engine.run_text(netlist, duration) as waves:
        return columns_of(waves)


def crossing(t: Floats, y: Floats, level: float, after: float) -> float:
    """When a falling signal first passes a level after a time (interpolated). [s]"""
    k = int(np.flatnonzero((t > after) & (y < level))[0])
    return float(t[k - 1] + (level - y[k - 1]) / (y[k] - y[k - 1]) * (t[k] - t[k - 1]))
