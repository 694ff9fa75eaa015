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


def serial_lines(frames: Frames, chain: Chain, duration: float, spi_mode: int = 0, on_wire: int = 0) -> SerialLines:
    """What the controller does on its three lines to send these frames.

    Parameters
    ----------
    frames : sequence of (start, image)
        A frame starts with its first clock edge. [s]
    chain : Chain
    duration : float
        Until when the lines are described. [s]
    spi_mode : int
        Clock polarity and phase; registers take data on the rising edge in all of them.
    on_wire : int
        Level of the data line before the first frame.

    Notes
    -----
    In modes 0 and 3 bit i is on the data line half a period before its rising clock edge, at start + i / f. In modes 1 and 2
    data change at that very edge, just after it: in mode 1 to bit i, in mode 2 to bit i + 1, whose first is there before
    (Motorola SPI Block Guide V03.06, section 4.3). The clock rests high in modes 2 and 3.
    The latch rises at start + n / f + latch time (`frame_time`) and falls half a period later. Times are those of an edge's
    middle, where a CMOS input switches.
    """
    period = 1 / chain.clock.typ
    edge = min(EDGE, period / 16)
    rests_high = spi_mode >= 2
    data: list[tuple[float, bool]] = [(-1.0, bool(on_wire))]
    clock: list[tuple[float, bool]] = [(-1.0, rests_high)]
    latch: list[tuple[float, bool]] = []
    for start, image in frames:
        for i, bit in enumerate(bits_on_the_wire(image, chain)):
            at = start + i * period
            data.append((at + _changes(spi_mode, i, period, edge), bool(bit)))
            clock += [(at - period / 2, False), (at, True)] if rests_high else [(at, True), (at + period / 2, False)]
        up = start + frame_time(chain)
        latch += [(up, True), (up + period / 2, False)]
    return SerialLines(*(as_points(changes, duration, edge) for changes in (data, clock, latch)))


def _changes(spi_mode: int, bit: int, period: float, edge: float) -> float:
    """When a bit comes on the data line, from its rising clock edge. [s]"""
    if spi_mode == 1:
        return 2 * edge
    if spi_mode == 2 and bit > 0:
        return 2 * edge - period
    return -period / 2


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
