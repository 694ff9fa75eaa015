"""From commanded pulses to latched edges: when the controller sends which register frame, and what the outputs do."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from boardsim.board.enable import on_lines
from boardsim.board.reader import Board
from boardsim.firing.bus import Recorded
from boardsim.firing.held import Held, changes_of, commanded, run_together
from boardsim.firing.hold import frame_chop, slot_time
from boardsim.firing.lines import Images, active_levels, ghost_of, line_times
from boardsim.firing.outputs import outputs_of
from boardsim.firing.pattern import Pattern, Pulse, snapped
from boardsim.firing.registers import ChainState, frame_time, last_bit, shift_in
from boardsim.parts.controller import Controller
from boardsim.quantities import in_units

Floats = NDArray[np.float64]

_SETTLE = 5.0  # L/R times to look at after the last edge


def settling_time(board: Board) -> float:
    """How long to look after the last edge, so that what a turn-off does to its switch is in the run. [s]"""
    coils = [c.coil for c in board.channels]
    return max(_SETTLE * coil.inductances[1] / coil.resistance.min + coil.return_time for coil in coils)


@dataclass(frozen=True)
class MovedPulse:
    """A commanded pulse, what the controller's timer made of it, and what the latch made of that.

    Attributes
    ----------
    pulse : Pulse
        As asked for.
    start, stop : float
        When the output turns on and off. [s]
    swallowed : bool
        Whether no output shows it: both edges fell on one latch, or on one tick.
    rounded : Pulse or None
        As the timer has it; None where that is as asked for.
    """

    pulse: Pulse
    start: float
    stop: float
    swallowed: bool
    rounded: Pulse | None = None

    @property
    def timed(self) -> Pulse:
        """As the timer has it."""
        return self.rounded or self.pulse


@dataclass(frozen=True)
class WrongOutput:
    """From this time on a channel's output does not do what was commanded. [s]

    `by` are the channels of a matrix that were commanded and together turn on one that was not, across their lines.
    """

    channel: int
    at: float
    commanded: bool
    by: tuple[int, ...] = ()


@dataclass(frozen=True)
class Firing:
    """What the outputs do.

    Attributes
    ----------
    duration : float
        Until when a run looks. [s]
    levels : mapping of output to tuple of (time, level)
        Every output that a channel is wired to, as its switch gets it, from (0, initial level) on; times are latch edges plus
        propagation, or edges of an enable line. [s]
    on : mapping of channel to (n, 2) array
        When the channel's switch is turned on and off; of a matrix, when row and column both are. A pulse that is held counts as
        one, from its start to its end. [s]
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
    jitter : float
        How much later than here a frame may start, each by itself. [s]
    recorded : Recorded or None
        The bus as it was captured, where it was: then nothing but the outputs tells what was commanded.
    sent : tuple of (time, image)
        When the controller starts each register frame, and the image that it sends. [s]
    span : str
        Whose time it is that averages are taken over, such as "the pattern's".
    lines : mapping of line to (n, 2) array
        The on-times of all channels along each row and column of a matrix: when it carries current. [s]
    held : Held
        What is known of pulses that are held, such as when their switches are on.
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
    jitter: float = 0.0
    recorded: Recorded | None = None
    sent: tuple[tuple[float, int], ...] = ()
    span: str = "the pattern's"
    lines: Mapping[int, Floats] = field(default_factory=dict)
    held: Held = field(default_factory=Held)

    def spans(self, place: int) -> Floats:
        """On-times of a channel; of a line those of the channels along it, which overlap where several are on. (n, 2) [s]"""
        return self.lines[place] if place in self.lines else self.on[place]

    def driven_until(self, place: int) -> Floats:
        """When the full drive of each pulse of a channel or line ends: its peak's, of one that is held. (n,) [s]"""
        ends: Floats = self.held.driven_until[place] if place in self.held.driven_until else self.spans(place)[:, 1]
        return ends

    def switched(self, channel: int) -> Floats:
        """When a channel's switch is on, chop by chop where it is held. (n, 2) [s]"""
        return self.held.switched[channel] if channel in self.held.switched else self.on[channel]

    @property
    def averaged_over(self) -> str:
        """What averages are taken over, for people."""
        return f"over {self.span} {in_units(self.duration, 's')}"

    @property
    def goes_on(self) -> bool:
        """Whether averages take what is fired once for something that goes on, since nobody said how long to look."""
        return self.span.endswith(" own")

    def channels_on(self, t: float) -> tuple[int, ...]:
        """The channels that are on at a time."""
        return tuple(c for c, spans in self.on.items() if np.any((spans[:, 0] <= t) & (t < spans[:, 1])))


def fire(board: Board, pattern: Pattern) -> Firing:
    """Send a pattern through the chain of registers.

    Notes
    -----
    What was recorded has been through it already.

    Starts and widths are first rounded to the controller's tick. The controller starts a register frame as soon as a change
    is due and the last frame is latched and its pause over. A frame carries every change that is due until it starts;
    changes that come while a frame is under way wait for the next one. All changes of a frame appear together, at its latch
    edge. Jitter is left out here: it moves every edge by up to as much again, which `verdict` adds to what it finds.
    A pulse that is held is chopped after its peak: on a beat of register frames (`FrameChop`), or, behind an enable line,
    together with all others on that line (`line_chop`).

    Raises
    ------
    QuantityError
        If a pulse is to be chopped faster than frames can be sent; whoever reads patterns refuses such first.
    """
    if pattern.recorded is not None:
        return pattern.recorded
    chain, controller = board.chain, board.controller or Controller()
    spent = frame_time(chain)
    delay = chain.register_.propagation.typ
    image_of = Images(board)
    timed = [(p, on_ticks(p, controller.tick.typ)) for p in pattern.pulses]
    slot = slot_time(chain, controller)
    lined = on_lines(board)
    framed = (p.hold for p in pattern.pulses if p.channel not in lined)
    chops = {hold: frame_chop(hold, slot) for hold in framed if hold is not None}
    together, merged = run_together(
        [(p, t, commanded(t, None if t.hold is None or t.channel in lined else chops[t.hold])) for p, t in timed]
    )
    asked = changes_of(together)
    late = controller.spi_mode == 1

    state = shift_in(ChainState(chain.outputs), 0, chain)  # all off before the pattern starts
    if late:  # a second one: what the first left on the wire is known
        state = shift_in(state, 0, chain, last_bit(0, chain))
    active = active_levels(board)
    levels: dict[int, list[tuple[float, bool]]] = {o: [(0.0, bool(state.storage >> o & 1))] for o in active}
    wanted = {c.number: False for c in board.channels}
    latched: dict[tuple[int, float], float] = {}
    wrong: dict[int, WrongOutput] = {}
    _compare(state, wanted, board, 0.0, active, wrong)

    image, free, latch, frames, i = 0, 0.0, 0.0, 0, 0
    on_wire = last_bit(0, chain) if late else 0
    sent: list[tuple[float, int]] = []
    while i < len(asked):
        start = max(asked[i][0], free)
        while i < len(asked) and asked[i][0] <= start:
            at, channel, turn_on = asked[i]
            wanted[channel] = turn_on
            image = image_of.changed(channel, turn_on)
            latched[channel, at] = start + spent + delay
            i += 1
        latch = start + spent
        free = latch + controller.frame_gap.typ
        frames += 1
        sent.append((start, image))
        before, state = state, shift_in(state, image, chain, on_wire if late else None)
        on_wire = last_bit(image, chain) if late else 0
        changed = before.storage ^ state.storage
        for output in active:
            if changed >> output & 1:
                levels[output].append((latch + delay, bool(state.storage >> output & 1)))
        _compare(state, wanted, board, latch + delay, active, wrong)

    moved = tuple(_moved(timed, latched))
    asked_at = {(t.channel, t.start): p for p, t in reversed(timed)}  # of several on one tick the first
    lost = tuple(
        Pulse(c, asked_at[c, on].start, 0.0)
        for c, off, on in _pauses(asked)
        if latched[c, off] == latched[c, on] and (c, on) in asked_at  # not the pauses of a chop
    )
    last = max([latch + delay, *(p.stop for pair in timed for p in pair)])
    # Also where a duration was asked for: what the last turn-off does to its switch comes after it.
    duration = max(pattern.duration or 0.0, last + settling_time(board))
    outputs = outputs_of(board, levels, active, together, latched, chops, duration)
    return Firing(
        duration,
        outputs.levels,
        outputs.on,
        moved,
        merged,
        lost,
        tuple(wrong.values()),
        frames,
        spent,
        pattern.pulses,
        controller.jitter.max,
        sent=tuple(sent),
        span=pattern.span,
        lines=line_times(board, outputs.on),
        held=outputs.held,
    )


def on_ticks(pulse: Pulse, tick: float) -> Pulse:
    """A pulse as a timer of this tick has it: start and width each at the nearest tick, halves upwards.

    Parameters
    ----------
    tick : float
        [s]; 0 leaves the pulse as it is.

    Examples
    --------
    >>> on_ticks(Pulse(0, 1.4e-3, 2.6e-3), 1e-3)
    Pulse(channel=0, start=0.001, width=0.003, hold=None)
    """
    if tick <= 0:
        return pulse

    def nearest(t: float) -> float:
        return snapped(math.floor(snapped(t) / tick + 0.5 + 1e-9) * tick)

    return replace(pulse, start=nearest(pulse.start), width=nearest(pulse.width))


def _moved(timed: Sequence[tuple[Pulse, Pulse]], latched: Mapping[tuple[int, float], float]) -> Iterator[MovedPulse]:
    """What became of every pulse whose two edges were sent; one that is no tick long is not sent at all."""
    for pulse, t in timed:
        rounded = None if t == pulse else t
        if t.width == 0:
            yield MovedPulse(pulse, t.start, t.start, True, rounded)
        elif (t.channel, t.start) in latched and (t.channel, t.stop) in latched:
            a, b = latched[t.channel, t.start], latched[t.channel, t.stop]
            yield MovedPulse(pulse, a, b, a == b, rounded)


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
        on = all(bool(state.storage >> output & 1) == active[output] for output in c.outputs)
        if on != wanted[c.number] and c.number not in wrong:
            wrong[c.number] = WrongOutput(c.number, at, wanted[c.number], ghost_of(c, wanted) if on else ())
