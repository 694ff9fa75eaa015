"""Register outputs that channels share: who is on where rows and columns cross, and which image of the outputs that takes."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from numpy.typing import NDArray

from boardsim.board.reader import Board, Channel

Floats = NDArray[np.float64]
Levels = Mapping[int, Sequence[tuple[float, bool]]]
"""What each register output does: (time, level), the first at 0. [s]"""


class Images:
    """The firmware's image of its outputs while channels are commanded on and off: a bit stays as long as any of its channels
    is wanted.
    """

    def __init__(self, board: Board):
        self._bits = {c.number: c.bits for c in board.channels}
        self._users: dict[int, int] = {}
        self._wanted: set[int] = set()
        self.image = 0

    def changed(self, channel: int, on: bool) -> int:
        """The image once a channel is commanded on, or off."""
        if on == (channel in self._wanted):
            return self.image
        self._wanted ^= {channel}
        for bit in self._bits[channel]:
            users = self._users[bit] = self._users.get(bit, 0) + (1 if on else -1)
            self.image = self.image | 1 << bit if users else self.image & ~(1 << bit)
        return self.image


def active_levels(board: Board) -> dict[int, bool]:
    """The level at which each register output that drives a switch turns it on."""
    return {d.output: d.switch.active == "high" for d in board.drivers}


def ghost_of(channel: Channel, wanted: Mapping[int, bool]) -> tuple[int, ...]:
    """The commanded channels that turn on a channel of a matrix which is not commanded: one along each of its lines.

    None where a line of it has no commanded channel: then something else is wrong with its outputs.
    """
    if channel.crossing is None:
        return ()
    lines = (channel.crossing.row, channel.crossing.column)
    found = [next((n for n in line.channels if wanted.get(n)), None) for line in lines]
    return tuple(sorted({n for n in found if n is not None})) if None not in found else ()


def channel_times(board: Board, levels: Levels, active: Mapping[int, bool], end: float) -> dict[int, Floats]:
    """When every channel is on: while all of its outputs are active, until `end`. [s]"""
    spans = {output: on_times(levels[output], level, end) for output, level in active.items()}
    return {c.number: overlap([spans[output] for output in c.outputs]) for c in board.channels}


def line_times(board: Board, on: Mapping[int, Floats]) -> dict[int, Floats]:
    """The on-times of the channels along each line, by their start. (n, 2) [s]"""
    none = np.empty((0, 2))
    return {
        line.number: np.unique(np.concatenate([on.get(n, none) for n in line.channels]), axis=0) for line in board.lines
    }


def overlap(spans: Sequence[Floats]) -> Floats:
    """The times that lie in a span of each of several lists.

    Parameters
    ----------
    spans : sequence of (n, 2) array
        Rows (on, off), by time, of one list apart from each other. [s]

    Returns
    -------
    (m, 2) array
        [s]

    Examples
    --------
    >>> overlap([np.array([[0.0, 3.0], [5.0, 9.0]]), np.array([[2.0, 6.0]])]).tolist()
    [[2.0, 3.0], [5.0, 6.0]]
    """
    found = spans[0]
    for others in spans[1:]:
        rows: list[tuple[float, float]] = []
        mine, theirs, i, k = found.tolist(), others.tolist(), 0, 0
        while i < len(mine) and k < len(theirs):
            start, stop = max(mine[i][0], theirs[k][0]), min(mine[i][1], theirs[k][1])
            rows += [(start, stop)] if start < stop else []
            i, k = (i + 1, k) if mine[i][1] < theirs[k][1] else (i, k + 1)
        found = np.array(rows, dtype=np.float64).reshape(-1, 2)
    return found


def on_times(levels: Sequence[tuple[float, bool]], active: bool, end: float) -> Floats:
    """On-times of a channel, whose switch is on at output level `active`, until `end` [s]: rows (on, off), (n, 2). [s]"""
    rows: list[tuple[float, float]] = []
    since: float | None = None
    for t, level in levels:
        if (level == active) and since is None:
            since = t
        elif (level != active) and since is not None:
            rows.append((since, t))
            since = None
    if since is not None:
        rows.append((since, end))
    return np.array(rows, dtype=np.float64).reshape(-1, 2)
