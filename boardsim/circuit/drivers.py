"""What switches a coil or a line of a matrix, in the deck: the switch, its clamp, and what a package has once."""

from __future__ import annotations

import itertools
from typing import TYPE_CHECKING

from boardsim.board.matrix import Line
from boardsim.board.reader import Board, Channel
from boardsim.errors import InputError
from boardsim.firing.schedule import Firing
from boardsim.parts.base import Corner, Stamp
from boardsim.parts.elements import GROUND
from boardsim.quantities import in_units

if TYPE_CHECKING:
    from boardsim.circuit.assemble import Assembly


def refuse_too_short(board: Board, firing: Firing) -> None:
    """Refuse pulses and pauses that are too short for what models of switches are made for.

    Raises
    ------
    InputError
        With the shortest of all.
    """
    found = [
        (again - t, t, driver)
        for driver in board.drivers
        if driver.switch.steady_for() > 0
        for (t, was), (again, level) in itertools.pairwise(_changes(firing.levels[driver.output]))
        if was != level and again - t < driver.switch.steady_for()
    ]
    if found:
        gap, t, driver = min(found, key=lambda f: f[0])
        raise InputError(
            f"{driver.label}: its output changes at {in_units(t, 's', 4)} and changes back {in_units(gap, 's')} later; the model of its "
            f"{driver.switch.kind} holds for pulses and pauses of {in_units(driver.switch.steady_for(), 's')} or more, seven times "
            "the gate driver's delay and dead time; lengthen the pulse or pause, or take a driver with less delay and dead time"
        )


def _changes(levels: tuple[tuple[float, bool], ...]) -> tuple[tuple[float, bool], ...]:
    """Only the edges: what an output is at first has been so for long."""
    return tuple(now for before, now in itertools.pairwise(levels) if before[1] != now[1])


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
