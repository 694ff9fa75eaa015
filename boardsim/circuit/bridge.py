"""A coil between two legs: which of the two channels brings what, and what the board's sum of coil currents counts of it."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import replace
from typing import TYPE_CHECKING

from boardsim.board.reader import Board, Channel
from boardsim.parts.base import Corner, Stamp
from boardsim.parts.elements import GROUND, Drive, Probe, Signal, VoltageLaw, scaled, voltage
from boardsim.parts.rules import IdleRule, LatchRule, ReleaseRule, Rule

if TYPE_CHECKING:
    from boardsim.circuit.assemble import Assembly

_DRAWN = "i_drawn"  # what a coil carries, whichever way
_MOVES = ("m", "m/s")


def add_bridge_channel(
    parts: Assembly, board: Board, corner: Corner, channel: Channel, driven: Stamp, rail: str
) -> None:
    """One channel of a full bridge behind what drives its pin: its leg, and the coil as it is seen from there.

    Parameters
    ----------
    parts : Assembly
    board : Board
        With both channels of the bridge on it: a leg that nothing drives would leave its end of the coil open.
    corner : Corner
    channel : Channel
        The one that drives the coil forwards brings the coil itself and its leads; the other reads them the other way round.
    driven : Stamp
    rail : str
        Node.

    Raises
    ------
    TypeError
        If the other channel of the bridge is missing.
    """
    if channel.opposite not in {c.number for c in board.channels}:
        raise TypeError(f"{channel.label} is one half of a full bridge, and the other half is not on the board")
    k, label = channel.number, channel.label
    name = f"c{k}"
    parts.add(driven, k, board.chain.register_.title or "register", label)
    forth = k if channel.forwards else channel.opposite
    back = channel.opposite if channel.forwards else k
    start, end = f"c{forth}_d", f"c{back}_d"  # where the legs' middles are
    inner = start if channel.leads is None else f"c{forth}_k"
    coil = channel.coil.stamp(f"c{forth}", channel.coil_name, inner, end, corner, board.around)
    coil = replace(coil, rules=tuple(_of_two(coil.rules, channel)))
    if channel.forwards:
        parts.add(
            _with_size(coil, f"c{forth}", inner, channel.coil.ohms(corner, board.around)),
            k,
            channel.coil_name,
            label,
        )
        if channel.leads is not None:
            # Out and back as one pair: which way round its current is counted is of no matter.
            parts.add(channel.leads.stamp(f"{name}_lead", inner, start, corner, board.around), k, "leads", label)
    else:
        parts.add(_turned(coil), k, channel.coil_name, label)
    leg = channel.switch.resting if _never_on(driven) else channel.switch.stamp
    switch = leg(f"{name}_s", f"{name}_q", f"{name}_d", corner, rail)
    parts.add(switch, k, channel.switch.part.title or "switch", label)


def _never_on(driven: Stamp) -> bool:
    """Whether what drives a pin is known to stay low all the time."""
    drives = [e for e in driven.elements if isinstance(e, Drive)]
    return bool(drives) and all(volts == 0.0 for e in drives for _, volts in e.points)


def _with_size(coil: Stamp, name: str, a: str, winding: float) -> Stamp:
    """The coil with a node for the magnitude of its current, so that coils driven either way do not cancel in a sum.

    What flows through the winding's resistance from `a`, [ohm], is all of the coil's current: the core loss lies behind it.
    """
    node = f"{name}_size"
    law = VoltageLaw(node, node, GROUND, f"abs(V({a})-V({name}_w))/{winding!r}")
    return replace(coil, elements=(*coil.elements, law), probes=(*coil.probes, Probe(_DRAWN, voltage(node), "A")))


def _turned(coil: Stamp) -> Stamp:
    """The same coil, which stands in the deck already, seen from its other end: what it moves is the same from either."""
    probes = tuple(p if p.unit in _MOVES else replace(p, signal=scaled(-1.0, p.signal)) for p in coil.probes)
    return replace(coil, elements=(), probes=(*probes, Probe(_DRAWN, (), "A")), assumptions=())


def _of_two(rules: tuple[Rule, ...], channel: Channel) -> Iterator[Rule]:
    """The coil's rules for one of its two channels: the other's current is commanded too, and left over like its own."""
    others = () if channel.opposite is None else (channel.opposite,)
    for rule in rules:
        if isinstance(rule, IdleRule):
            if channel.forwards:  # once for the coil
                yield replace(rule, besides=others)
        elif isinstance(rule, ReleaseRule):
            yield replace(rule, besides=others)
        elif isinstance(rule, LatchRule):
            if channel.forwards or rule.check == "flip":  # what nobody commands is told of once
                yield replace(rule, besides=others, starts=rule.starts if channel.forwards else -rule.starts)
        else:
            yield rule


def drawn(signals: Mapping[tuple[int | None, str], Signal]) -> Iterator[Signal]:
    """What each coil counts for in the current of all coils together: once, and by magnitude where it goes both ways."""
    for (channel, quantity), signal in signals.items():
        if quantity == "i_coil":
            yield signals.get((channel, _DRAWN), signal)
