"""Rows and columns of coils in the deck: each line once, and every coil from its row to its column."""

from __future__ import annotations

from typing import TYPE_CHECKING

from boardsim.board.matrix import Crossing, Line
from boardsim.board.reader import Board, Channel
from boardsim.circuit.deck import PlacedRule
from boardsim.circuit.drivers import add_driver
from boardsim.parts.base import Corner, Stamp
from boardsim.parts.clamp import in_series
from boardsim.parts.elements import Ammeter, current
from boardsim.parts.rules import IdleRule, SneakRule

if TYPE_CHECKING:
    from boardsim.circuit.assemble import Assembly


def add_line(parts: Assembly, board: Board, corner: Corner, line: Line, driven: Stamp, rail: str) -> None:
    """A row or a column behind what drives its pin: its switch and its clamp, which lie at the line's own node.

    A clamp beside coils leads from ground into a row and from a column into the rail: the way that the coils' current takes
    once both switches are off, and which returns their energy to the rail.
    """
    place, label, node = line.number, line.label, _node(line)
    parts.add(driven, place, board.chain.register_.title or "register", label)
    add_driver(parts, corner, line, node, node, rail)


def add_crossing(parts: Assembly, board: Board, corner: Corner, channel: Channel, crossing: Crossing) -> None:
    """A coil from its row to its column, behind its diode where it has one, with its leads at the column's end."""
    k, name, label = channel.number, channel.stem, channel.label
    begin, end = _node(crossing.row), _node(crossing.column)
    if crossing.diode is not None:
        meter = Ammeter(f"{name}_x", begin, f"{name}_xi")
        diode = crossing.diode.stamp(f"{name}_xd", "series diode", f"{name}_xi", f"{name}_a", current(meter), corner)
        parts.add(in_series((meter,), diode), k, crossing.diode.title or "series diode", label)
        begin = f"{name}_a"
    coil_end = end if channel.leads is None else f"{name}_k"
    coil = channel.coil.stamp(name, channel.coil_name, begin, coil_end, corner, board.around)
    parts.add(coil, k, channel.coil_name, label)
    parts.rules += [
        PlacedRule(SneakRule(rule.check, rule.quantity, rule.limit, rule.share), k, channel.coil_name, label)
        for rule in coil.rules
        if isinstance(rule, IdleRule)
    ]
    if channel.leads is not None:
        parts.add(channel.leads.stamp(f"{name}_lead", coil_end, end, corner, board.around), k, "leads", label)
    for line in channel.drivers:  # what a coil's findings hang on is also what was assumed of its lines
        parts.assumed[k].update(parts.assumed.get(line.number, {}))


def _node(line: Line) -> str:
    """Where all of a line's coils meet its switch."""
    return f"{line.stem}_d"
