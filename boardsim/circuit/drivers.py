"""What switches a coil or a line of a matrix, in the deck: the switch, its clamp, and what a package has once."""

from __future__ import annotations

from typing import TYPE_CHECKING

from boardsim.board.matrix import Line
from boardsim.board.reader import Channel
from boardsim.parts.base import Corner, Stamp
from boardsim.parts.elements import GROUND

if TYPE_CHECKING:
    from boardsim.circuit.assemble import Assembly


def add_driver(parts: Assembly, corner: Corner, driver: Channel | Line, load: str, end: str, rail: str) -> None:
    """A switch behind its pin, and its clamp.

    Parameters
    ----------
    load, end : str
        The node between switch and coil, and where a clamp across the coil is tied: that node, or the coil's own end.
    rail : str
        Node of the coil rail.
    """
    place, label, stage = driver.number, driver.label, f"{driver.stem}_s"
    switch, clamp, low = driver.switch, driver.clamp, driver.switch.side == "low"
    name = switch.part.title or "switch"
    package = driver.package if isinstance(driver, Channel) else driver.package or label
    parts.add(switch.stamp(stage, f"{driver.stem}_q", load, corner, rail), place, name, label, package)
    if clamp.across == "coil":
        held = (end, rail) if low else (GROUND, end)
    else:
        held = (load, GROUND) if low else (rail, load)
    far = parts.add_common(driver, held[1], corner)
    stamp = clamp.stamp(f"{driver.stem}_c", held[0], far, corner, switch.control(stage))
    parts.add(stamp, place, f"{clamp.kind} clamp", label, driver.package or label)
    if clamp.holds_switch:
        parts.add(Stamp(rules=switch.linear(corner)), place, name, label, package)
