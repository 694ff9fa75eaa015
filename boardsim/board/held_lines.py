"""How far the registers' logic rail may fall before a line that is held no longer counts as held."""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass

from boardsim.board.reader import Board
from boardsim.parts.controller import Controller
from boardsim.parts.register import EdgeTimes, Register
from boardsim.quantities import in_units

_SAME = 1e-9  # share by which two voltages may differ and still be one


@dataclass(frozen=True)
class HeldLine:
    """A line of the chain that a falling rail can make an edge of.

    Attributes
    ----------
    name : str
        "clock", "latch" or "clear".
    rests : str
        "high" or "low".
    lost_below : float or None
        Rail below which the line's level is no longer surely what it is held at; None where that is not known. [V]
    floor : float
        Lowest rail at which something is known: the lowest printed one, or `lost_below`. [V]
    lasting : float
        Shortest pulse that the register surely takes, there; 0 where it is not printed. [s]
    unknown : str
        Why it is not known; what is missing.
    """

    name: str
    rests: str
    lost_below: float | None
    floor: float
    lasting: float
    unknown: str = ""


def held_lines(board: Board) -> tuple[HeldLine, ...]:
    """Clock and latch, and clear where a controller pin holds it, each at the level at which it rests.

    Notes
    -----
    The latch rests low, clear high, and the clock low in SPI modes 0 and 1, else high. A register takes at most V_IL for low and at least V_IH for high, and both move with its own rail v (`LogicFamily`); the level
    on a line moves with the rail of whoever drives it. A low line stays at the controller's highest low level, whatever its
    supply: it is lost where V_IL(v) falls below that. A high one stays at the lowest voltage of the controller's own supply
    less its drop, or at v less its drop where both share the rail: it is lost where that is below V_IH(v), which with a supply
    of its own a fall of v never brings about. What lies between V_IL and V_IH counts as either, so that the line may have an
    edge. Between printed supplies levels are straight lines, so that a crossing is exact; below the lowest nothing is known.
    Ignores what the ground pin's inductance adds, and noise that lines pick up from each other.
    """
    controller = board.controller or Controller()
    clear = board.chain.clear
    rests = {"clock": "high" if board.spi_mode >= 2 else "low", "latch": "low"}
    if clear is not None and clear.pin:
        rests["clear"] = "high"
    return tuple(_held(board, controller, name, at) for name, at in rests.items())


def least_pulse(register: Register, name: str, volts: float) -> float:
    """The shortest pulse on a line that a register surely takes at a rail; 0 where it is not printed. [V] -> [s]"""
    times: EdgeTimes | None = register.timing(volts)
    if times is None:
        return 0.0
    widths = {"clock": times.clock_width, "latch": times.latch_width, "clear": times.clear_width}
    return widths[name] or 0.0


def _held(board: Board, controller: Controller, name: str, at: str) -> HeldLine:
    register: Register = board.chain.register_
    top, printed = board.logic.voltage.min, [level[0] for level in register.switching_levels()]
    if register.family is None:
        return HeldLine(name, at, None, top, 0.0, "no logic family of the registers was given")
    given = controller.high_drop if at == "high" else controller.low_output
    if given is None:
        key = "high_drop" if at == "high" else "low_output"
        return HeldLine(name, at, None, top, 0.0, f"[controller] {key} was not given")
    floor = min(printed[0], top)
    volts = _lost_below(board, controller, at, floor)
    if volts is not None:
        return HeldLine(name, at, volts, volts, least_pulse(register, name, volts))
    said = f"levels of its inputs are given from {in_units(printed[0], 'V')} on only"
    return HeldLine(name, at, None, floor, least_pulse(register, name, floor), said)


def _lost_below(board: Board, controller: Controller, which: str, floor: float) -> float | None:
    """The highest rail, from `floor` to its lowest set voltage, below which a level is lost; None where there is none. [V]"""
    register: Register = board.chain.register_
    top = board.logic.voltage.min

    def spare(volts: float) -> float:
        levels = register.input_levels(volts)
        if levels is None:
            return math.nan
        if which == "low":
            assert controller.low_output is not None
            return levels[0] - controller.low_output.max
        assert controller.high_drop is not None
        own = controller.voltage
        return (volts if own is None else own.min) - controller.high_drop.max - levels[1]

    breaks = [v for v, _, _ in register.switching_levels() if floor < v < top]
    points = [top, *reversed(breaks), floor]
    for above, below in itertools.pairwise(points):
        high, low = spare(above), spare(below)
        if math.isnan(high) or high < -_SAME:
            return above  # lost at its set voltage already, which the chain's own levels say
        if low < -_SAME:
            return below + (above - below) * -low / (high - low)
    return None
