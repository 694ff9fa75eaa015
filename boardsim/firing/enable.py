"""What enable lines make of outputs: held channels are chopped together, by a timer, beside the registers."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from boardsim.board.enable import EnableLine
from boardsim.firing.held import Commanded
from boardsim.firing.hold import Hold, Span, joined
from boardsim.firing.lines import on_times

Edges = tuple[tuple[float, bool], ...]
"""(time, level), the first at 0. [s]"""


@dataclass(frozen=True)
class LineChop:
    """What an enable line does.

    Attributes
    ----------
    line : EnableLine
    hold : Hold
        The one duty and frequency of its channels.
    off : tuple of (start, stop)
        When it has its channels off. [s]
    """

    line: EnableLine
    hold: Hold
    off: tuple[Span, ...]


def line_chop(
    line: EnableLine, together: Mapping[int, Sequence[Commanded]], latched: Mapping[tuple[int, float], float]
) -> LineChop | None:
    """What an enable line does while its channels are fired; None where none of them is held.

    Parameters
    ----------
    together : mapping of channel to sequence of Commanded
    latched : mapping of (channel, time) to time
        When each commanded edge reaches its output. [s]

    Notes
    -----
    The line chops while one of its channels is held and none is in its peak or fired without a hold: what would take one off takes
    off all. So a channel that is held gets full drive again during the peaks of others. The timer begins each
    stretch with an off-time.
    """
    held: list[Span] = []
    full: list[Span] = []
    hold: Hold | None = None
    for channel in line.channels:
        for p in together.get(channel, ()):
            start, stop = latched[channel, p.start], latched[channel, p.stop]
            full += [(a - p.start + start, b - p.start + start) for a, b in p.full]
            if p.hold is not None:
                held.append((start, stop))
                hold = hold or p.hold
    if hold is None:
        return None
    off: list[Span] = []
    delay = line.delay.typ
    for start, stop in without(joined(held), joined(full)):
        k = 0
        while (begin := start + k * hold.period) < stop:
            off.append((begin + delay, min(begin + (1 - hold.duty) * hold.period, stop) + delay))
            k += 1
    return LineChop(line, hold, tuple(off))


def without(spans: Sequence[Span], gaps: Sequence[Span]) -> list[Span]:
    """What of some spans lies in no gap, both by time and each apart from its like. [s]

    Examples
    --------
    >>> without([(0.0, 4.0), (5.0, 6.0)], [(1.0, 2.0), (3.0, 5.5)])
    [(0.0, 1.0), (2.0, 3.0), (5.5, 6.0)]
    """
    found: list[Span] = []
    k = 0
    for start, stop in spans:
        while k < len(gaps) and gaps[k][1] <= start:
            k += 1
        i = k
        while i < len(gaps) and gaps[i][0] < stop:
            if start < gaps[i][0]:
                found.append((start, gaps[i][0]))
            start = max(start, gaps[i][1])
            i += 1
        if start < stop:
            found.append((start, stop))
    return found


def gated(levels: Sequence[tuple[float, bool]], active: bool, off: Sequence[Span], end: float) -> Edges:
    """What a switch gets of a register output, which turns it on at level `active`, while an enable line has it off.

    Parameters
    ----------
    levels : sequence of (time, level)
        The first at 0. [s]
    off : sequence of (start, stop)
        [s]
    end : float
        Of the run. [s]
    """
    on = [(float(a), float(b)) for a, b in on_times(levels, active, end)]
    edges = [(0.0, not active)]
    for a, b in without(on, off):
        edges += [(a, active), (b, not active)] if b < end else [(a, active)]
    return tuple(edges if len(edges) < 2 or edges[1][0] > 0 else edges[1:])
