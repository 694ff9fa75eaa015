"""The lines between controller and chain as straight lines: what a controller puts on data, clock and latch."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from boardsim.board.schema import Chain
from boardsim.firing.registers import bits_on_the_wire, frame_time

Points = tuple[tuple[float, float], ...]
Frames = Sequence[tuple[float, int]]
"""When each register frame starts, and the image that is sent. [s]"""

EDGE = 2e-9  # [s], of the lines; shorter at clocks that leave no room for it


@dataclass(frozen=True)
class SerialLines:
    """Data, clock and latch as (time, level): levels 0 to 1, straight lines between. [s], [1]"""

    data: Points
    clock: Points
    latch: Points


def serial_lines(frames: Frames, chain: Chain, duration: float) -> SerialLines:
    """What the controller does on its three lines to send these frames.

    Parameters
    ----------
    frames : sequence of (start, image)
        A frame starts with its first clock edge. [s]
    chain : Chain
    duration : float
        Until when the lines are described. [s]

    Notes
    -----
    Bit i is on the data line half a period before its rising clock edge, at start + i / f; the clock falls half a period later.
    The latch rises at start + n / f + latch time (`frame_time`) and falls half a period later. Times are those of an edge's
    middle, where a CMOS input switches.
    """
    period = 1 / chain.clock.typ
    edge = min(EDGE, period / 16)
    data: list[tuple[float, bool]] = []
    clock: list[tuple[float, bool]] = []
    latch: list[tuple[float, bool]] = []
    for start, image in frames:
        for i, bit in enumerate(bits_on_the_wire(image, chain)):
            at = start + i * period
            data.append((at - period / 2, bool(bit)))
            clock += [(at, True), (at + period / 2, False)]
        up = start + frame_time(chain)
        latch += [(up, True), (up + period / 2, False)]
    return SerialLines(*(as_points(changes, duration, edge) for changes in (data, clock, latch)))


def busy(frames: Frames, chain: Chain) -> tuple[tuple[float, float], ...]:
    """The stretches in which lines change: from half a period before a frame's first clock edge to the latch's fall. [s]"""
    half = 0.5 / chain.clock.typ
    return tuple((start - half - EDGE, start + frame_time(chain) + half + EDGE) for start, _ in frames)


def as_points(changes: Sequence[tuple[float, bool]], duration: float, edge: float) -> Points:
    """Changes of level as straight lines; a change at the very start is moved to where its edge begins at 0 s."""
    points = [(0.0, 0.0)]
    if changes and changes[0][0] < 0:
        points = [(0.0, float(changes[0][1]))]
    for at, level in changes:
        last_at, last = points[-1]
        if float(level) == last:
            continue
        begin = max(at - edge / 2, last_at + 1e-12)
        points += [(begin, last), (begin + edge, float(level))]
    return (*points, (max(duration, points[-1][0]) + edge, points[-1][1]))
