"""What the outputs make of held pulses: the pulse as it was commanded beside the stretches in which its switch is on."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from boardsim.board.matrix import Line
from boardsim.board.reader import Board
from boardsim.firing.hold import FrameChop, Hold, Span, chopped, joined
from boardsim.firing.pattern import Pulse

if TYPE_CHECKING:
    from boardsim.firing.enable import LineChop

Floats = NDArray[np.float64]
_SAME = 1e-12  # [s], as far as times of pulses are told apart


@dataclass(frozen=True)
class Commanded:
    """Pulses of a channel that run together, most often one.

    Attributes
    ----------
    start, stop : float
        [s]
    driven : tuple of (start, stop)
        When the firmware has the output on. [s]
    full : tuple of (start, stop)
        When it asks for full drive: in the peaks of those that are held, and all of those that are not. [s]
    hold : Hold or None
        Of the first of them that is held.
    """

    start: float
    stop: float
    driven: tuple[Span, ...]
    full: tuple[Span, ...]
    hold: Hold | None = None

    def with_(self, later: Commanded) -> Commanded:
        """This one and a later one that runs into it."""
        driven, full = ((*a, *b) for a, b in ((self.driven, later.driven), (self.full, later.full)))
        stop = max(self.stop, later.stop)
        return Commanded(self.start, stop, tuple(joined(driven)), tuple(joined(full)), self.hold or later.hold)

    def edges(self) -> Iterator[tuple[float, bool]]:
        """When the firmware turns the output on and off, the end of the pulse last. [s]"""
        for on, off in self.driven:
            yield on, True
            yield off, False
        if self.driven[-1][1] < self.stop:  # ends in a pause of the chop: the firmware says so all the same
            yield self.stop, False


def commanded(pulse: Pulse, chop: FrameChop | None) -> Commanded:
    """A pulse as the firmware commands it; `chop` is None where it is not held by register frames."""
    driven: Iterable[Span] = ((pulse.start, pulse.stop),)
    if pulse.hold is not None and chop is not None:
        driven = chopped(pulse.start, pulse.stop, pulse.hold, chop)
    full = pulse.stop if pulse.hold is None else pulse.start + pulse.hold.peak
    return Commanded(pulse.start, pulse.stop, tuple(driven), ((pulse.start, full),), pulse.hold)


def run_together(
    timed: Iterable[tuple[Pulse, Pulse, Commanded]],
) -> tuple[dict[int, list[Commanded]], tuple[Pulse, ...]]:
    """Of pulses as asked, as timed and as commanded: those of each channel, the overlapping joined; and the first that overlap."""
    merged: list[Pulse] = []
    found: dict[int, list[Commanded]] = {}
    for pulse, p, one in timed:  # by start
        if p.width == 0:
            continue
        mine = found.setdefault(p.channel, [])
        if mine and one.start <= mine[-1].stop:
            merged.append(pulse)
            mine[-1] = mine[-1].with_(one)
        else:
            mine.append(one)
    return found, tuple(merged)


def changes_of(together: Mapping[int, Sequence[Commanded]]) -> list[tuple[float, int, bool]]:
    """Changes that are due, by time."""
    changes = [(t, c, on) for c, mine in together.items() for p in mine for t, on in p.edges()]
    return sorted(changes, key=lambda e: (e[0], e[2], e[1]))


@dataclass(frozen=True)
class HeldPulse:
    """A held pulse at its switch.

    Attributes
    ----------
    channel : int
    start, stop : float
        When its hold begins, at the end of its peak as it was asked for, or at the frame that ends it; and when it ends. [s]
    hold : Hold
        As it was asked for.
    period : float
        Of the chop. [s]
    duty : float or None
        Share of the whole periods in it for which the switch is on; None where it is shorter than one period. [1]
    line : str
        The enable line that chops it; empty where register frames do.
    """

    channel: int
    start: float
    stop: float
    hold: Hold
    period: float
    duty: float | None
    line: str = ""


@dataclass(frozen=True)
class Asked:
    """A held pulse at its output, as the firmware asks for it; `period` is that of its chop. [s]"""

    start: float
    stop: float
    hold: Hold
    period: float
    line: str = ""


@dataclass(frozen=True)
class Held:
    """What is known of a firing whose pulses are held.

    Attributes
    ----------
    switched : mapping of channel to (n, 2) array
        When the switch of each channel that is held is on, chop by chop. [s]
    driven_until : mapping of channel or line to (n,) array
        Of each of its pulses, when its full drive ends. [s]
    pulses : tuple of HeldPulse
    chops : tuple of FrameChop
        Those that were counted in register frames.
    lines : tuple of LineChop
        Those of enable lines.
    peaks : mapping of channel to (n, 2) array
        When each held pulse's peak begins and ends. [s]
    let_go : mapping of output to (levels, off)
        Of outputs that a line makes let go of their switch: what the register holds, as (time, level), and when it lets go,
        as (start, stop). [s]
    """

    switched: Mapping[int, Floats] = field(default_factory=dict)
    driven_until: Mapping[int, Floats] = field(default_factory=dict)
    pulses: tuple[HeldPulse, ...] = ()
    chops: tuple[FrameChop, ...] = ()
    lines: tuple[LineChop, ...] = ()
    let_go: Mapping[int, tuple[tuple[tuple[float, bool], ...], tuple[Span, ...]]] = field(default_factory=dict)
    peaks: Mapping[int, Floats] = field(default_factory=dict)


def as_commanded(switched: Floats, pulses: Sequence[Span]) -> Floats:
    """On-times of which those that lie in one commanded pulse, at the output, are one. (n, 2) [s]

    A pulse that does not begin with its output is left alone: something else is wrong with it.
    """
    ends = switched[:, 1].copy()
    kept = np.ones(len(switched), dtype=bool)
    for start, stop in pulses:
        first = int(np.searchsorted(switched[:, 0], start - _SAME))
        last = int(np.searchsorted(switched[:, 1], stop + _SAME)) - 1
        if first <= last and abs(switched[first, 0] - start) <= _SAME:
            ends[first] = stop
            kept[first + 1 : last + 1] = False
    whole: Floats = np.column_stack([switched[:, 0], ends])[kept]
    return whole


def held_pulses(
    board: Board,
    switched: Mapping[int, Floats],
    on: Mapping[int, Floats],
    asked: Mapping[int, Sequence[Asked]],
    chops: tuple[FrameChop, ...] = (),
    lines: tuple[LineChop, ...] = (),
    let_go: Mapping[int, tuple[tuple[tuple[float, bool], ...], tuple[Span, ...]]] | None = None,
) -> Held:
    """What is known of the pulses of channels that are held.

    Parameters
    ----------
    switched : mapping of channel to (n, 2) array
        When each switch is on. [s]
    on : mapping of channel to (n, 2) array
        Its pulses, as `as_commanded` has them. [s]
    asked : mapping of channel to sequence of Asked
        The held pulses of each; none for one that others' holds take off.
    """
    until = {c: _first_ends(switched[c], on[c]) for c in asked}
    found = []
    peaks: dict[int, list[Span]] = {}
    for channel, mine in asked.items():
        starts = on[channel][:, 0]
        for p in mine:
            k = int(np.searchsorted(starts, p.start - _SAME))
            if k == len(starts) or abs(starts[k] - p.start) > _SAME:
                continue
            # A line may give it full drive for longer, for the sake of others: what that makes of its duty is to be seen.
            begins = p.start + p.hold.peak if p.line else float(until[channel][k])
            peaks.setdefault(channel, []).append((p.start, min(begins, p.stop)))
            if begins < p.stop - _SAME:
                duty = duty_within(switched[channel], begins, p.stop, p.period)
                found.append(HeldPulse(channel, begins, p.stop, p.hold, p.period, duty, p.line))
    ends = dict(until)
    for line in (d for d in board.drivers if isinstance(d, Line)):
        if any(c in until for c in line.channels):
            ends[line.number] = np.concatenate([until.get(c, on[c][:, 1]) for c in line.channels])
    return Held(
        {c: switched[c] for c in asked},
        ends,
        tuple(found),
        chops,
        lines,
        let_go or {},
        {c: np.array(rows) for c, rows in peaks.items()},
    )


def _first_ends(switched: Floats, on: Floats) -> Floats:
    """Of every pulse the end of the first stretch in which its switch is on. (n,) [s]"""
    if not len(switched):
        return on[:, 1]
    first = np.minimum(np.searchsorted(switched[:, 0], on[:, 0] - _SAME), len(switched) - 1)
    ends: Floats = switched[first, 1]
    return ends


def duty_within(switched: Floats, start: float, stop: float, period: float) -> float | None:
    """Share of the whole periods from `start` on for which a switch is on; None where not one ends by `stop`. [s] -> [1]"""
    whole = int((stop - start) / period * (1 + 1e-9) + 1e-9)
    if whole < 1:
        return None
    end = start + whole * period
    rows = switched[np.searchsorted(switched[:, 1], start) : np.searchsorted(switched[:, 0], end)]
    inside = np.minimum(rows[:, 1], end) - np.maximum(rows[:, 0], start)
    return float(inside.sum() / (whole * period))
