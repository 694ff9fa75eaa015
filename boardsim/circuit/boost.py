"""A boosted bank in a deck, and when its switch is closed."""

from __future__ import annotations

from typing import TYPE_CHECKING

from boardsim.board.reader import Board
from boardsim.circuit.deck import PlacedRule, Window
from boardsim.firing.held import Held
from boardsim.firing.hold import joined
from boardsim.parts.base import Corner

if TYPE_CHECKING:
    from boardsim.circuit.assemble import Assembly

BANK = LABEL = "bank"
OPEN = ((0.0, 0.0), (1.0, 0.0))
"""The switch of a bank none of whose channels is fired with a peak. [s], [1]"""


def closed_points(board: Board, held: Held, window: Window) -> tuple[tuple[float, float], ...]:
    """The bank's switch as straight lines, 1 while it is closed: in the peaks of its channels. [s], [1]"""
    if board.boost is None:
        return OPEN
    edge = board.boost.switch_edge.typ
    peaks = joined([(float(a), float(b)) for c in board.boosted for a, b in held.peaks.get(c, ())])
    points = [(0.0, 0.0)]
    for start, stop in peaks:
        for at, level in ((start, 1.0), (stop, 0.0)):
            t = max(at - window.start, points[-1][0] + 1e-12)
            points += [(t, 1.0 - level), (t + edge, level)]
    span = window.stop - window.start
    return (*points, (max(span, points[-1][0]) + edge, points[-1][1]))


def add_boost(
    parts: Assembly, board: Board, corner: Corner, rail: str, closed: tuple[tuple[float, float], ...]
) -> None:
    """The reservoir with its switch and diode; nothing on a board without one."""
    if board.boost is None:
        return
    stamp = board.boost.stamp(rail, BANK, corner, closed)
    part = board.boost.title or "boost"
    parts.add(stamp, None, part, LABEL)
    parts.rules.append(PlacedRule(board.boost.reserve(board.boosted), None, part, LABEL))
