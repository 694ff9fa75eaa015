"""When the close-up of a finding looks: around the moment, with what leads to it; all of the pattern where there is none."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from boardsim.board.reader import Board
from boardsim.firing.schedule import Firing
from boardsim.verdict.findings import Finding, Floats

_TAUS = 3.0  # L/R times to look at on either side of a moment
_AROUND = 10.0  # pauses to look at on either side of one that got lost


class Stretch(NamedTuple):
    """From when to when. [s]"""

    start: float
    stop: float


def channels_in_question(finding: Finding, board: Board) -> tuple[int, ...]:
    """The channels that a finding is about; those of a package for a sum over it, none for a part of the whole board."""
    if finding.channel is not None:
        return (finding.channel,)
    if members := package_members(finding, board):
        return members
    if finding.place is not None:  # a row or column is all who lie along it
        return next((line.channels for line in board.lines if line.number == finding.place), ())
    if finding.channels or finding.probes or finding.at is None:
        return finding.channels
    # The worst pulse of all is a finding of the whole board, and is named by its channel.
    return tuple(c.number for c in board.channels if c.label == finding.label)


def package_members(finding: Finding, board: Board) -> tuple[int, ...]:
    """The channels of the package that a finding is about; none where it is about something else."""
    if finding.channel is not None or finding.place is not None:
        return ()
    return tuple(c.number for c in board.channels if c.package and c.package == finding.label)


def stretch_of(finding: Finding, board: Board, firing: Firing) -> Stretch:
    """When to look.

    Notes
    -----
    The time scale of a coil is L/R, the longest that its tolerances allow; three of them bring a current to within
    5 % of where it goes. A pulse, a pause between pulses and a count have scales of their own. The stretch is
    never empty, and never leaves the run.
    """
    if finding.at is None:
        return Stretch(0.0, firing.duration)
    asked = _around_pulses(finding, board, firing) if not finding.probes else None
    start, stop = asked or _around_moment(finding, finding.at, board, firing)
    start, stop = max(start, 0.0), min(stop, firing.duration)
    if start >= stop:  # a moment at the very end of the run
        start, stop = max(stop - _reach(finding, board), 0.0), firing.duration
    return Stretch(start, stop)


def _reach(f: Finding, board: Board) -> float:
    return _TAUS * max(
        c.coil.inductances[1] / c.coil.resistance.min for c in board.channels if f.channel in (None, c.number)
    )


def _around_moment(f: Finding, at: float, board: Board, firing: Firing) -> Stretch:
    reach = _reach(f, board)
    start, stop = at - reach, at + reach
    if f.lasting is not None:
        start, stop = start - f.lasting, stop + f.lasting
    place = f.channel if f.channel is not None else f.place
    spans = np.empty((0, 2)) if place is None else firing.spans(place)
    before, after = spans[spans[:, 0] < at], spans[spans[:, 0] > at]
    if f.shape == "energy":
        # The coil is empty in less than it takes to fill; what comes after the next turn-on is another event.
        start, stop = at - reach / 2, at + reach
        stop = min(stop, float(after[0, 0])) if len(after) else stop
    elif f.check in ("pull-in", "flip") and len(before):
        start = float(before[-1, 0]) - 0.1 * (at - float(before[-1, 0]))
    elif f.check == "overlap" and len(before):
        start = float(before[-1, 1]) - reach / 3  # the turn-off that the coil has not got over
    return Stretch(start, stop)


def _around_pulses(f: Finding, board: Board, firing: Firing) -> Stretch | None:
    """Around the commanded pulses that a finding without a waveform is about; None where there are none."""
    if f.shape == "count":
        return _while_on(f, board, firing)
    who = channels_in_question(f, board)
    mine = [p for p in firing.asked if p.channel in who]
    this = next((p for p in mine if p.start == f.at), None)
    if this is None:
        return None
    before = max((p for p in mine if p.start < this.start), key=lambda p: p.stop, default=None)
    if before is not None and any(p.channel in who and p.start == f.at for p in firing.lost_pauses):
        # The pause is what it is about: much shorter than the pulses on either side of it.
        half = _AROUND * max(this.start - before.stop, firing.frame_time)
        return Stretch(this.start - half, this.start + half)
    start, stop = this.start, this.stop
    if f.check == "overlap" and before is not None:
        start, stop = before.start, max(before.stop, stop)
    for moved in firing.moved:
        if moved.pulse == this:
            start, stop = min(start, moved.start), max(stop, moved.stop)
    margin = 0.3 * (stop - start)
    return Stretch(start - margin, stop + margin)


def _while_on(f: Finding, board: Board, firing: Firing) -> Stretch:
    """As long as one more channel is on than may be, or as many as ever."""
    assert f.at is not None  # a count is found at a time
    times, counts = count_on(f.channels, firing)
    bound = f.value if f.limit is None or f.limit >= f.value else f.limit + 1
    enough = counts >= bound
    here = int(np.searchsorted(times, f.at, side="right")) - 1
    below = np.flatnonzero(~enough)
    first, last = below[below < here], below[below > here]
    reach = _reach(f, board)
    start = float(times[first[-1] + 1]) if len(first) else 0.0
    stop = float(times[last[0]]) if len(last) else firing.duration
    return Stretch(start - reach, stop + reach)


def count_on(channels: tuple[int, ...], firing: Firing) -> tuple[Floats, Floats]:
    """How many of some channels are on.

    Returns
    -------
    times, counts : (n,) array
        From each time on [s] so many, until the next; the first is at 0. Changes at one time count as one: outputs
        change together on a latch edge.
    """
    spans = [firing.on[c] for c in channels if len(firing.on.get(c, ()))]
    rows = np.concatenate(spans) if spans else np.empty((0, 2))
    changes = np.concatenate([rows[:, 0], rows[:, 1], [0.0]])
    steps = np.concatenate([np.ones(len(rows)), -np.ones(len(rows)), [0.0]])
    times, place = np.unique(changes, return_inverse=True)
    total = np.zeros(len(times))
    np.add.at(total, place, steps)
    return times, np.cumsum(total)
