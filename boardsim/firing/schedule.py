"""From commanded pulses to latched edges: when the controller sends which register frame, and what the outputs do."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from boardsim.board.reader import Board
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.firing.registers import ChainState, frame_time, shift_in

Floats = NDArray[np.float64]

_SETTLE = 5.0  # L/R times to look at after the last edge


@dataclass(frozen=True)
class MovedPulse:
    """A commanded pulse and what the latch made of it; `swallowed` if both edges fell on one latch. [s]"""

    pulse: Pulse
    start: float
    stop: float
    swallowed: bool


@dataclass(frozen=True)
class WrongOutput:
    """From this time on a channel's output does not do what was commanded. [s]"""

    channel: int
    at: float
    commanded: bool


@dataclass(frozen=True)
class Firing:
    """What the outputs do.

    Attributes
    ----------
    duration : float
        Until when a run looks. [s]
    levels : mapping of output to tuple of (time, level)
        Every output that a channel is wired to, from (0, initial level) on; times are latch edges plus
        propagation. [s]
    on : mapping of channel to (n, 2) array
        When the channel's switch is turned on and off. [s]
    moved : tuple of MovedPulse
    merged : tuple of Pulse
        Pulses that start while the same channel is still commanded on.
    lost_pauses : tuple of Pulse
        Pulses that are turned on by the same latch edge that should have ended the one before.
    wrong : tuple of WrongOutput
        The first wrong output of each channel.
    frames : int
        Register frames sent.
    frame_time : float
        [s]
    asked : tuple of Pulse
        Every pulse that the pattern commands, by start.
    sent : tuple of (time, image)
        When the controller starts each register frame, and the image that it sends. [s]
    """

    duration: float
    levels: Mapping[int, tuple[tuple[float, bool], ...]]
    on: Mapping[int, Floats]
    moved: tuple[MovedPulse, ...]
    merged: tuple[Pulse, ...]
    lost_pauses: tuple[Pulse, ...]
    wrong: tuple[WrongOutput, ...]
    frames: int
    frame_time: float
    asked: tuple[Pulse, ...] = ()
    sent: tuple[tuple[float, int], ...] = ()

    def channels_on(self, t: float) -> tuple[int, ...]:
        """The channels that are on at a time."""
        return tuple(c for c, spans in self.on.items() if np.any((spans[:, 0] <= t) & (t < spans[:, 1])))


def fire(board: Board, pattern: Pattern) -> Firing:
    """Send a pattern through the chain of registers.

    Notes
    -----
    The controller starts a register frame as soon as a change is asked for and the last frame is latched. A
    frame carries every change asked for until it starts; changes that come while a frame is under way wait for
    the next one. All changes of a frame appear together, at its latch edge.
    """
    chain = board.chain
    spent = frame_time(chain)
    delay = chain.register_.propagation.typ
    bit_of = {c.number: c.bit for c in board.channels}
    asked, merged = _changes(pattern)

    state = shift_in(ChainState(chain.outputs), 0, chain)  # all off before the pattern starts
    watched = {c.output: c for c in board.channels}
    active = {c.output: c.switch.active == "high" for c in board.channels}
    levels: dict[int, list[tuple[float, bool]]] = {o: [(0.0, bool(state.storage >> o & 1))] for o in watched}
    wanted: dict[int, bool] = dict.fromkeys(bit_of, False)
    latched: dict[tuple[int, float], float] = {}
    wrong: dict[int, WrongOutput] = {}
    _compare(state, wanted, board, 0.0, active, wrong)

    image, free, frames, i = 0, 0.0, 0, 0
    sent: list[tuple[float, int]] = []
    while i < len(asked):
        start = max(asked[i][0], free)
        while i < len(asked) and asked[i][0] <= start:
            at, channel, turn_on = asked[i]
            wanted[channel] = turn_on
            mask = 1 << bit_of[channel]
            image = image | mask if turn_on else image & ~mask
            latched[channel, at] = start + spent + delay
            i += 1
        free = start + spent
        frames += 1
        sent.append((start, image))
        before, state = state, shift_in(state, image, chain)
        changed = before.storage ^ state.storage
        for output in watched:
            if changed >> output & 1:
                levels[output].append((free + delay, bool(state.storage >> output & 1)))
        _compare(state, wanted, board, free + delay, active, wrong)

    moved = tuple(
        MovedPulse(p, a := latched[p.channel, p.start], b := latched[p.channel, p.stop], a == b)
        for p in pattern.pulses
        if (p.channel, p.start) in latched and (p.channel, p.stop) in latched
    )
    lost = tuple(Pulse(c, on, 0.0) for c, off, on in _pauses(asked) if latched[c, off] == latched[c, on])
    last = max([free + delay, *(p.stop for p in pattern.pulses)])
    tau = max(c.coil.inductance.max / c.coil.resistance.min for c in board.channels if c.coil.resistance.min > 0)
    # Also where a duration was asked for: what the last turn-off does to its switch comes after it.
    duration = max(pattern.duration or 0.0, last + _SETTLE * tau)
    on = {c.number: _spans(levels[c.output], active[c.output], duration) for c in board.channels}
    return Firing(
        duration,
        {o: tuple(v) for o, v in levels.items()},
        on,
        moved,
        merged,
        lost,
        tuple(wrong.values()),
        frames,
        spent,
        pattern.pulses,
        tuple(sent),
    )


def _changes(pattern: Pattern) -> tuple[list[tuple[float, int, bool]], tuple[Pulse, ...]]:
    """Commanded changes by time, overlapping pulses of a channel joined; and the pulses that overlapped."""
    merged: list[Pulse] = []
    spans: dict[int, list[tuple[float, float]]] = {}
    for p in pattern.pulses:  # by start
        mine = spans.setdefault(p.channel, [])
        if mine and p.start <= mine[-1][1]:
            merged.append(p)
            mine[-1] = (mine[-1][0], max(mine[-1][1], p.stop))
        else:
            mine.append((p.start, p.stop))
    changes = [(t, c, on) for c, ss in spans.items() for a, b in ss for t, on in ((a, True), (b, False))]
    return sorted(changes, key=lambda e: (e[0], e[2], e[1])), tuple(merged)


def _pauses(asked: list[tuple[float, int, bool]]) -> Iterator[tuple[int, float, float]]:
    """Every channel's times of being commanded off and on again."""
    off_at: dict[int, float] = {}
    for at, channel, on in asked:
        if not on:
            off_at[channel] = at
        elif channel in off_at:
            yield channel, off_at[channel], at


def _compare(
    state: ChainState,
    wanted: dict[int, bool],
    board: Board,
    at: float,
    active: dict[int, bool],
    wrong: dict[int, WrongOutput],
) -> None:
    """Hold what the outputs do against what the pattern meant for the coil on each of them."""
    for c in board.channels:
        on = bool(state.storage >> c.output & 1) == active[c.output]
        if on != wanted[c.number] and c.number not in wrong:
            wrong[c.number] = WrongOutput(c.number, at, wanted[c.number])


def _spans(levels: list[tuple[float, bool]], active: bool, end: float) -> Floats:
    """On-times of a channel as rows (on, off)."""
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
