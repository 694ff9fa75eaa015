"""Captures of the bus as patterns: what the firmware really sent, from a logic analyser or a firmware test."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Annotated, Literal

import numpy as np
from pydantic import Field, ValidationError

from boardsim.board.ranges import write_labels
from boardsim.board.reader import Board, problems_of
from boardsim.board.toml_file import Keys, TomlFile
from boardsim.errors import InputError, Problem
from boardsim.firing.bus import LINES, Line, Recorded, Replayed, disabled_in, measured, replay
from boardsim.firing.lines import active_levels, channel_times, line_times
from boardsim.firing.pattern import MOST_PULSES, Pattern, Pulse, by_start, snapped
from boardsim.firing.schedule import Firing, settling_time
from boardsim.firing.vcd import Dump, read_dump
from boardsim.parts.record import Name, Record, name_from
from boardsim.quantities import POSITIVE_TIME, TIME, Quantity, in_units

_ENOUGH_SAMPLES = 4  # per clock period, common practice


class Signals(Record):
    """Which signal of the dump is which line of the bus: full names, or ends of names that only one signal has."""

    data: str = Field(description="serial data into the first register")
    clock: str = Field(description="shift clock; registers shift on its rising edge")
    latch: str = Field(description="storage clock; outputs change on its rising edge")
    enable: str | None = Field(None, description="output enable, on while low; always enabled if absent")
    clear: str | None = Field(None, description="clear of the shift stages, while low; never cleared if absent")


class CaptureFile(Record):
    """A recorded bus in place of a pattern."""

    name: Name | None = None
    capture: str = Field(description="value change dump (IEEE 1364), relative to this file")
    signals: Signals
    start: Annotated[Quantity, TIME] | None = Field(None, description="time in the dump from which on to look")
    stop: Annotated[Quantity, TIME] | None = Field(None, description="time in the dump until which to look")
    duration: Annotated[Quantity, TIME] | None = Field(
        None,
        description="look at least this long, all off after the stretch: averages are taken over it; the stretch if absent",
    )
    sample_period: Annotated[Quantity, POSITIVE_TIME] | None = Field(
        None, description="of the analyser; the step of the dump's times if absent"
    )
    inverted: tuple[Literal["data", "clock", "latch", "enable", "clear"], ...] = Field(
        (), description="lines that the dump shows inverted against the registers' pins"
    )


def capture_of(file: TomlFile, board: Board) -> Pattern:
    """The pattern that a capture file stands for: its pulses are what the decoded outputs did.

    Raises
    ------
    InputError
        If the file, or the dump that it names, cannot be used; says where.

    Notes
    -----
    No timing of the tool's own comes in: outputs change with the recorded latch, enable and clear edges, later by the
    register's propagation. A stretch begins and ends with every channel off, so that no current comes from
    before it; where the dump itself ends with channels on, these are left on and named.
    """
    try:
        raw = CaptureFile.model_validate(file.data)
    except ValidationError as err:
        raise InputError(problems_of(err, file)) from None
    wanted = {line: name for line in LINES if (name := getattr(raw.signals, line)) is not None}
    problems = list(_mistakes(raw, wanted, file, board))
    if problems:
        raise InputError(problems)
    dump = read_dump(
        file.path.parent / raw.capture, wanted, lambda line, text: file.problem_at(("signals", line), text)
    )
    return _Decoding(raw, file, board, dump).pattern()


def _mistakes(raw: CaptureFile, wanted: Mapping[str, str], file: TomlFile, board: Board) -> Iterator[Problem]:
    if not raw.capture.strip():
        yield file.problem_at(("capture",), "names no file")
    for line, name in wanted.items():
        if not name.strip():
            yield file.problem_at(("signals", line), "names no signal")
    for key in ("start", "stop", "duration", "sample_period"):
        time: Quantity | None = getattr(raw, key)
        if time is not None and time.toleranced:
            yield file.problem_at((key,), "a time of the capture has no tolerance; leave it out")
    for line in raw.inverted:
        if line not in wanted:
            yield file.problem_at(("inverted",), f'"{line}" is not among the signals; leave it out, or name its signal')
    if raw.start is not None and raw.stop is not None and raw.stop.typ <= raw.start.typ:
        yield file.problem_at(("stop",), "is not after the start")
    if raw.sample_period is not None:
        yield from _too_coarse(raw.sample_period.typ, ("sample_period",), "the capture was sampled every", file, board)


def _too_coarse(period: float, keys: Keys, what: str, file: TomlFile, board: Board) -> Iterator[Problem]:
    """A clock is high and low for half of its period each: a step that is not shorter passes over edges."""
    clock = board.chain.clock
    half = 0.5 / clock.max
    if period >= half * (1 - 1e-9):
        yield file.problem_at(
            keys,
            f"{what} {in_units(period, 's')}, but a clock of {in_units(clock.max, 'Hz')} is high and low for "
            f"{in_units(half, 's')} each, so that edges are missed; capture at least every "
            f"{in_units(1 / clock.max / _ENOUGH_SAMPLES, 's')} (common practice), or mend [chain] clock",
        )


class _Decoding:
    """One capture on one board."""

    def __init__(self, raw: CaptureFile, file: TomlFile, board: Board, dump: Dump):
        self.raw, self.file, self.board, self.dump = raw, file, board, dump
        self.first = snapped(dump.first * dump.unit)
        self.last = snapped(dump.last * dump.unit)
        self.bus = {
            word: Line(np.round(s.times * dump.unit, 12), (s.levels == 1) ^ (word in raw.inverted))
            for word, s in dump.signals.items()
        }
        self.active = active_levels(board)
        self.delay = board.chain.register_.propagation.typ

    def refuse(self, keys: Keys, text: str) -> InputError:
        return InputError([self.file.problem_at(keys, text)])

    def pattern(self) -> Pattern:
        """Decode, and check that there is something to run.

        Raises
        ------
        InputError
            If the stretch is outside the capture, nothing is sent in it, or its ends cut something.
        """
        raw, dump = self.raw, self.dump
        if coarse := [*_too_coarse(dump.unit, ("capture",), "its times step by", self.file, self.board)]:
            raise InputError(coarse)
        start = raw.start.typ if raw.start is not None else self.first
        stop = raw.stop.typ if raw.stop is not None else self.last
        for key, time in (("start", start), ("stop", stop)):
            if not self.first <= time <= self.last:
                ends = " to ".join(in_units(t, "s", 6) for t in (self.first, self.last))
                raise self.refuse((key,), f"is outside the capture, which holds {ends}")
        if blind := [*self._blind()]:
            raise InputError(blind)
        for word in ("clock", "latch"):
            if not len(self.bus[word].edges(True)):
                text = f"never rises in {dump.path.name}: no frame reaches the outputs; is it the right signal, or inverted?"
                raise self.refuse(("signals", word), f'"{getattr(raw.signals, word)}" {text}')
        off = sum(1 << output for output, active in self.active.items() if not active)
        replayed = replay(self.bus, self.board.chain.outputs, off)
        count, begun = replayed.trailing
        if count and raw.stop is None:
            text = (
                f"ends within a register frame: {count} clock edges follow the last latch edge, from "
                f"{in_units(begun, 's', 9)} on; it is cut off, or was stopped too early; to look at what is whole, set a stop"
            )
            quiet = self._quiet(replayed, begun)
            text += "" if quiet is None else f' in {self.file.path.name}, such as "{quiet * 1e9:.0f} ns"'
            raise InputError([Problem(str(dump.path), dump.last_line, text)])
        return self._pattern(replayed, start, stop)

    def _blind(self) -> Iterator[Problem]:
        """Lines of which the capture does not tell the level while the registers act on it.

        A clock or latch that is high at its first level has risen since the capture's begin, or was high before: the edge may
        count or not. Whatever else has no level at a clock edge leaves open what the registers took.
        """
        clock = self.bus["clock"]
        rises = clock.edges(True)
        for word in ("clock", "latch", "data", "clear"):
            line = self.bus.get(word)
            if line is None:
                continue
            name, at = f'"{getattr(self.raw.signals, word)}"', float(line.times[0]) if len(line.times) else 0.0
            begin = "capture it from before the first clock edge on"
            if word in ("clock", "latch") and line.levels[:1].any() and at > self.first:
                text = f"{name} has no level before {in_units(at, 's', 6)}, so that nothing tells whether it rises then; {begin}"
            elif word != "clock" and len(blind := rises[line.before(rises) < 0]):
                text = f"{name} has no level yet at the clock edge of {in_units(float(blind[0]), 's', 6)}; {begin}"
            else:
                continue
            yield self.file.problem_at(("signals", word), text)

    def _pattern(self, replayed: Replayed, start: float, stop: float) -> Pattern:
        edges = self._edges(replayed, start)
        # What an edge of the capture does counts, though the dump may end before it has gone through the register.
        latest = snapped(stop - start) + (self.delay if self.raw.stop is None else 0.0)
        unfinished = self._on_at(edges, latest)
        if before := self._on_at(edges, 0.0):
            raise self._cut("start", before, replayed, start)
        if unfinished and self.raw.stop is not None:
            raise self._cut("stop", unfinished, replayed, stop)
        inside = {o: tuple(e for e in rows if e[0] <= latest) for o, rows in edges.items()}
        last = max((rows[-1][0] for rows in inside.values()), default=0.0)
        duration = latest if unfinished else max(snapped(stop - start), last + settling_time(self.board))
        if (asked := self.raw.duration) is not None:
            self._refuse_duration(asked.typ, snapped(stop - start), unfinished)
            duration = max(duration, asked.typ)
        on = channel_times(self.board, inside, self.active, duration)
        pulses = by_start(
            Pulse(number, float(a), snapped(float(b - a))) for number, rows in on.items() for a, b in rows.tolist()
        )
        if not pulses:
            text = "no channel is turned on in this stretch of the capture: are the signals the right ones, and inverted as told?"
            raise self.refuse(("capture",), text)
        if len(pulses) > MOST_PULSES:
            raise self.refuse(
                ("capture",), f"holds more than {MOST_PULSES} pulses; set start and stop to look at a part"
            )
        frames = replayed.frames.within(start, stop)
        sample = self.raw.sample_period
        recorded = Recorded(
            self.dump.path,
            start,
            max(self.dump.unit, sample.typ if sample is not None else 0.0),
            sample is not None,
            tuple(self.bus),
            frames,
            {what: found.within(start, stop) for what, found in measured(self.bus).items()},
            unfinished,
            disabled_in(self.bus.get("enable"), start, stop),
        )
        longest = float((frames.latched - frames.begun).max()) if len(frames.latched) else 0.0
        span = "the capture's own" if asked is None else "the capture's"
        sent = len(frames.latched)
        firing = Firing(
            duration,
            inside,
            on,
            (),
            (),
            (),
            (),
            sent,
            longest,
            pulses,
            recorded=recorded,
            span=span,
            lines=line_times(self.board, on),
        )
        name = self.raw.name or name_from(self.file.path.stem, "capture")
        return Pattern(self.file.path, name, None, pulses, firing, span)

    def _refuse_duration(self, asked: float, stretch: float, unfinished: tuple[int, ...]) -> None:
        """Refuse a duration that the capture contradicts. [s]

        Raises
        ------
        InputError
            If it is shorter than what was captured, or channels are on where that ends.
        """
        if asked < stretch * (1 - 1e-9):
            text = f"{in_units(asked, 's', 4)} is shorter than the stretch that is looked at, {in_units(stretch, 's', 4)}; set a stop"
            raise self.refuse(("duration",), text)
        if unfinished:
            labels = write_labels([self.board.channel(n).label for n in unfinished])
            verb = "is" if len(unfinished) == 1 else "are"
            raise self.refuse(("duration",), f"{labels} {verb} on where the capture ends: what follows is not known")

    def _edges(self, replayed: Replayed, start: float) -> dict[int, tuple[tuple[float, bool], ...]]:
        """Every watched output from the start on, its first entry at 0; propagation included. [s]"""
        rows: dict[int, list[tuple[float, bool]]] = {}
        watched = {o: 1 << o for o in self.active}
        (_, shown), *changes = replayed.words
        for output, mask in watched.items():
            rows[output] = [(0.0, bool(shown & mask))]
        for t, word in changes:
            changed = word ^ shown
            shown = word
            at = snapped(t + self.delay - start)
            for output, mask in watched.items():
                if changed & mask:
                    if at <= 0:
                        rows[output] = [(0.0, bool(word & mask))]
                    else:
                        rows[output].append((at, bool(word & mask)))
        return {o: tuple(found) for o, found in rows.items()}

    def _on_at(self, edges: Mapping[int, tuple[tuple[float, bool], ...]], at: float) -> tuple[int, ...]:
        """Channels that are on at a time from the start. [s]"""
        level = {o: [lvl for t, lvl in rows if t <= at][-1] for o, rows in edges.items()}
        return tuple(c.number for c in self.board.channels if all(level[o] == self.active[o] for o in c.outputs))

    def _cut(self, key: str, on: tuple[int, ...], replayed: Replayed, at: float) -> InputError:
        """A stretch that begins or ends while channels are on; names the nearest time at which none is."""
        labels = write_labels([self.board.channel(n).label for n in on])
        quiet = self._quiet(replayed, at)
        try_this = f'; nearest time with all off: "{quiet * 1e9:.0f} ns"' if quiet is not None else ""
        verb = "is" if len(on) == 1 else "are"
        return self.refuse((key,), f"{labels} {verb} on then, and what is cut there would not be judged{try_this}")

    def _quiet(self, replayed: Replayed, at: float) -> float | None:
        """The time nearest to another at which every channel is off, to the nanosecond; None if there is none. [s]"""
        mask = sum(1 << o for o in self.active)
        off = sum(1 << o for o, active in self.active.items() if not active)
        ends = [*(t for t, _ in replayed.words[1:]), self.last]
        spans = [
            (np.ceil((t + self.delay) * 1e9 - 1e-3) / 1e9, np.floor(end * 1e9 + 1e-3) / 1e9)
            for (t, word), end in zip(replayed.words, ends, strict=True)
            if (word & mask) == off
        ]
        near = [float(min(max(at, self.first, a), b)) for a, b in spans if max(a, self.first) <= b]
        return min(near, key=lambda t: abs(t - at), default=None)
