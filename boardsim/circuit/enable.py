"""Outputs that let go of their switches while output enable is high, in a deck."""

from __future__ import annotations

from boardsim.board.matrix import Line
from boardsim.board.reader import Board, Channel
from boardsim.circuit.logic import LOGIC
from boardsim.parts.base import Corner, Stamp
from boardsim.parts.clocked import held, output_pin
from boardsim.parts.elements import GROUND, Drive

Points = tuple[tuple[float, float], ...]
"""Straight lines: times [s], levels."""


def logic_source(board: Board, corner: Corner) -> Stamp:
    """A stiff logic rail as a node, for outputs that are more than a source of known voltage."""
    volts = board.logic.level(corner)
    return Stamp(elements=(Drive("logic", LOGIC, GROUND, ((0.0, volts), (1.0, volts))),))


def letting_go(board: Board, driver: Channel | Line, bit: Points, enabled: Points) -> Stamp:
    """An output whose bits are known, and which drives its switch only while it is enabled.

    Parameters
    ----------
    bit, enabled : tuple of (time, level)
        0 to 1. [s], [1]

    Notes
    -----
    While it is not enabled nothing but the switch's own resistors turns the switch off: its gate falls with R C of the pull-down and
    the gate's capacitances, which takes far longer than a driven edge, and the switch heats by it. The leakage of an output that
    has let go, microamperes, is left out: in a pull-down of 10 kohm it makes a tenth of a volt.
    """
    name, on = f"{driver.stem}_q", f"{driver.stem}_oe"
    sources = (Drive(held(driver.output), held(driver.output), GROUND, bit), Drive(on, on, GROUND, enabled))
    pin = output_pin(
        board.chain.register_, name, name, driver.output, LOGIC, enabled=on, loads_rail=bool(board.logic.derived)
    )
    return Stamp(elements=(*sources, *pin))
