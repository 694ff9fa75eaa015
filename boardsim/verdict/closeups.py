"""Waveforms around the moment of a finding: the quantity with its limit, the cause beside it, and who was on.

A second pass over the waveforms, once the findings are known; thinned so that the lowest and the highest value of every
slice of time stay.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from boardsim.board.reader import Board
from boardsim.circuit.deck import Deck
from boardsim.engine.waves import Waves
from boardsim.firing.schedule import Firing
from boardsim.parts.rules import BreakdownRule
from boardsim.verdict.cutting import RunningEnergy, between
from boardsim.verdict.findings import Envelope, Finding, Floats
from boardsim.verdict.leg_closeups import LegCut, leg_rule
from boardsim.verdict.motion_closeups import MotionCut, motion_rule, worst_motions
from boardsim.verdict.readings import Key, SignalTable, our_name
from boardsim.verdict.stretch import Stretch, channels_in_question, count_on, package_members, stretch_of
from boardsim.verdict.watch import HYSTERESIS, Slices

SLICES = 800  # across a close-up; about as many as it has pixels
_BOARD_CAUSES: Mapping[str, tuple[Key, ...]] = {
    "overlap": ((None, "i_total"),),
    "rail-sag": ((None, "i_supply"), (None, "i_total")),
    "supply-ceiling": ((None, "i_total"), (None, "v_rail")),
    "logic-sag": ((None, "v_rail"), (None, "i_total")),
    "uncommanded-edge": ((None, "v_logic"), (None, "v_rail"), (None, "i_total")),
    "regulator": ((None, "v_logic"), (None, "i_total")),
    "boost": ((None, "v_bank"), (None, "i_total")),
}
"""What is shown beside a reading of the whole board, by its check."""
_WORDS = {
    "v_rail": "coil rail at the board",
    "v_logic": "logic rail",
    "clear_share": "clear line as a share of its high level",
    "i_total": "all coils together",
    "i_supply": "out of the supply",
    "i_coil": "coil current",
    "v_coil": "voltage across the coil",
    "v_ds": "voltage at the switch",
    "i_d": "current of the switch",
    "v_gs": "gate voltage of the switch",
    "i_ground": "all outputs of the package",
    "v_reservoir": "reservoir",
    "v_bank": "bank of coils",
}
_SEVERAL = {"A": "currents", "V": "voltages"}


@dataclass(frozen=True)
class Panel:
    """One pair of axes of a close-up.

    Attributes
    ----------
    title, unit : str
    waves : tuple of Envelope
        The first is the one that the panel is about.
    limit : float or None
        [unit]
    marked : (time, value) or None
        The reading. [s], [unit]
    mean : float or None
        The reading, where it is a mean over the stretch. [unit]
    levels : tuple of float
        What each wave is seen against, where that is no limit. [unit]
    """

    title: str
    unit: str
    waves: tuple[Envelope, ...]
    limit: float | None = None
    marked: tuple[float, float] | None = None
    mean: float | None = None
    levels: tuple[float, ...] = ()


@dataclass(frozen=True)
class Closeup:
    """What the picture of one finding is drawn from.

    Attributes
    ----------
    finding : tuple of str
        Key of the finding.
    corner : str
        In which the waveforms were taken; empty where there are none.
    start, stop : float
        The stretch shown. [s]
    panels : tuple of Panel
        The quantity with its limit first, then what causes it; no quantity with a limit where no waveform holds the
        reading, and nothing at all where the finding has no moment either.
    on, asked : mapping of channel to (n, 2) array
        When the channels were on that are on at any time of the stretch, and when they were commanded to be; only
        what touches the stretch, or was commanded so shortly before it that an output may still follow. [s]
    labels : mapping of channel to str
        Of these channels, and of those that the finding is about.
    who : tuple of int
        The channels that the finding is about; empty for a part of the whole board.
    hits : tuple of (time, speed)
        When what a coil moves meets its stop. [s], [m/s]
    """

    finding: tuple[str, str, str, str]
    corner: str
    start: float
    stop: float
    panels: tuple[Panel, ...]
    on: Mapping[int, Floats]
    asked: Mapping[int, Floats]
    labels: Mapping[int, str]
    who: tuple[int, ...] = ()
    hits: tuple[tuple[float, float], ...] = ()

    @property
    def speeds(self) -> Envelope | None:
        """The speed of what a coil moves, where that is shown. [m/s]"""
        return next((p.waves[0] for p in self.panels if p.unit == "m/s"), None)

    @property
    def shows_reading(self) -> bool:
        """Whether a panel shows the reading itself."""
        return any(p.marked is not None or p.mean is not None for p in self.panels)


def wants_closeup(finding: Finding) -> bool:
    """Whether a finding gets a picture of its own: it is broken, or close to it."""
    return finding.verdict in ("fail", "tight")


def take_closeups(
    waves: Waves | None, deck: Deck | None, board: Board, firing: Firing, findings: Iterable[Finding], corner: str
) -> tuple[Closeup, ...]:
    """Cut out of a run what the pictures of its broken and tight findings show.

    Parameters
    ----------
    waves : Waves or None
        Of one run of `deck`; None where no run came to an end: then only who was on is shown.
    deck : Deck or None
    findings : iterable of Finding
        Of this run, and those that need no waveform.
    corner : str
        For the result.

    Returns
    -------
    tuple of Closeup
        In the order of the findings; then what the picture of motion shows, of every kind of coil that moves something.
    """
    if waves is None:
        deck = None
    findings = list(findings)
    wanted = [f for f in findings if wants_closeup(f)]
    wanted += [f for f in worst_motions(findings, deck) if not wants_closeup(f)]
    cuts = [_cut_of(f, deck, board, firing) for f in wanted]
    if waves is not None and deck is not None:
        _feed(cuts, waves, deck)
    asked = _commanded(firing)
    return tuple(_closeup(cut, board, firing, asked, deck, corner) for cut in cuts)


def _cut_of(f: Finding, deck: Deck | None, board: Board, firing: Firing) -> _AnyCut:
    """The cut that shows a finding."""
    if (leg := leg_rule(f, deck)) is not None:
        return _LegCut(f, leg, firing, SLICES)
    if (motion := motion_rule(f, deck)) is not None:
        return _MotionCut(f, motion, firing, SLICES)
    return _Cut(f, stretch_of(f, board, firing), _causes(f, board, deck), _breakdown(f, deck))


@dataclass
class _Cut:
    """A stretch under way: which signals, and their slices so far."""

    finding: Finding
    stretch: Stretch
    causes: tuple[Key, ...]
    breakdown: float
    slices: Slices = field(init=False)
    energy: RunningEnergy | None = None
    sign: float = 1.0

    def __post_init__(self) -> None:
        f = self.finding
        self.slices = Slices(np.linspace(*self.stretch, SLICES + 1), 1 + len(self.causes))
        if f.shape == "energy" and f.at is not None:
            self.energy = RunningEnergy(f.at, HYSTERESIS * self.breakdown)

    @property
    def subject(self) -> tuple[Key, ...]:
        return tuple((_place(self.finding), q) for q in self.finding.probes)

    def feed(self, t: Floats, y: Mapping[Key, Floats]) -> None:
        """Times (m,) [s] and the values of every signal (m,)."""
        rows = np.stack([y[key] for key in (*self.subject, *self.causes)])
        t, rows = between(t, rows, *self.stretch)
        f, probes = self.finding, len(self.subject)
        subject = np.prod(rows[:probes], axis=0) if probes else np.zeros_like(t)
        if self.energy is not None:
            subject = self.energy.feed(t, rows[0], rows[1])
        elif f.shape == "value" and f.at is not None and t[0] <= (at := self.inside(f.at)) <= t[-1]:
            # A reading that is a magnitude may be that of a negative value.
            self.sign = -1.0 if float(np.interp(at, t, subject)) * f.value < 0 else 1.0
        self.slices.feed(t, np.vstack([subject, rows[probes:]]))

    def inside(self, at: float) -> float:
        """A time, or the end of the stretch that is nearest: a run goes on a little beyond its window. [s]"""
        return min(max(at, self.stretch.start), self.stretch.stop)

    def panels(self, deck: Deck) -> tuple[Panel, ...]:
        if not np.isfinite(self.slices.low).all():
            return ()  # the run ended before the stretch did: half a waveform would pass for a whole one
        beside: dict[str, list[Envelope]] = {}
        for row, key in enumerate(self.causes, 1):
            unit = deck.units[key]
            beside.setdefault(unit, []).append(self._wave(row, _WORDS.get(key[1].partition(",")[0], key[1]), unit))
        first: tuple[Panel, ...] = ()
        if self.finding.probes:
            alike = beside.pop(self.finding.unit, []) if self.finding.shape == "value" else []
            first = (self._first(alike),)
        return (*first, *(Panel(_title(waves), unit, tuple(waves)) for unit, waves in beside.items()))

    def _first(self, alike: Sequence[Envelope]) -> Panel:
        """The quantity that was read, with its limit and the reading, and causes of the same unit."""
        f = self.finding
        named = f.quantity if f.shape == "energy" or len(f.probes) > 1 else _WORDS.get(f.probes[0], f.quantity)
        waves = (self._wave(0, re.sub(r"^(peak|average) ", "", named), f.unit), *alike)
        limit = None if f.limit is None else self.sign * f.limit
        if f.shape == "mean":
            return Panel(_title(waves), f.unit, waves, limit, mean=f.value)
        marked = None
        if f.at is not None:
            at = self.energy.end if self.energy is not None else f.at
            marked = (self.inside(at), self.sign * f.value)
        return Panel(_title(waves), f.unit, waves, limit, marked)

    def _wave(self, row: int, label: str, unit: str) -> Envelope:
        return Envelope(label, unit, self.slices.edges, self.slices.low[row], self.slices.high[row])


class _LegCut(LegCut):
    """A leg's, with its panels."""

    def panels(self, deck: Deck) -> tuple[Panel, ...]:
        found = self.waves()
        if found is None:
            return ()
        gates, through = found
        return (
            Panel("Gate voltages", "V", gates, levels=self.rule.turn_on),
            Panel(_title([through]), "A", (through,)),
        )


class _MotionCut(MotionCut):
    """A motion's, with its panels: where the stop is, or the limit of a position, and what the pulse's current does."""

    def panels(self, deck: Deck) -> tuple[Panel, ...]:
        found = self.waves()
        if found is None:
            return ()
        position, speed, current = found
        place = self.finding.unit == "m"
        marked = self.marked
        return (
            Panel("Position", "m", (position,), self.finding.limit, marked)
            if place
            else Panel("Position; dashed: the stop", "m", (position,), levels=(self.rule.travel,)),
            Panel("Speed", "m/s", (speed,), marked=None if place else marked),
            Panel("Coil current", "A", (current,)),
        )


_AnyCut = _Cut | _LegCut | _MotionCut


def _place(f: Finding) -> int | None:
    """Under which a finding's waveforms are found."""
    return f.channel if f.channel is not None else f.place


def _title(waves: Sequence[Envelope]) -> str:
    name = waves[0].label if len(waves) == 1 else _SEVERAL.get(waves[0].unit, waves[0].label)
    return name[:1].upper() + name[1:]


def _causes(f: Finding, board: Board, deck: Deck | None) -> tuple[Key, ...]:
    """What is shown beside a finding; nothing beside one that has neither waveform nor moment."""
    if deck is None or (f.at is None and not f.probes):
        return ()
    causes: tuple[Key, ...]
    who = channels_in_question(f, board)
    if f.check in ("pull-in", "flip"):
        causes = ((None, "v_rail"),)
    elif f.place is not None:
        causes = ((f.place, "i_d"), (f.place, "v_ds"))
    elif package_members(f, board):  # their sum, where there is one; who is on says the rest
        causes = ((None, f"i_ground, {f.label}"),)
    elif len(who) == 1 and f.shape != "count":
        causes = ((who[0], "i_coil"), (who[0], "v_ds")) if f.unit in ("A", "J") else ((who[0], "i_coil"),)
    else:
        causes = _BOARD_CAUSES.get(f.check, ((None, "i_total"), (None, "i_supply")))
    mine = [(_place(f), q) for q in f.probes] if len(f.probes) == 1 else []  # of a product neither is shown
    return tuple(key for key in causes if key in deck.signals and key not in mine)


def _breakdown(f: Finding, deck: Deck | None) -> float:
    """Where the model of a finding's switch conducts; minus infinity where there is none. [V]"""
    placed = deck.rules if deck is not None else ()
    mine = [p.rule for p in placed if p.channel == _place(f) and isinstance(p.rule, BreakdownRule)]
    found = [r.breakdown for r in mine if r.voltage in f.probes] or [r.breakdown for r in mine]
    return found[0] if found else -np.inf


def _feed(cuts: Sequence[_AnyCut], waves: Waves, deck: Deck) -> None:
    """Give every cut its share of the waveforms."""
    cuts = [c for c in cuts if c.subject or c.causes]
    keys = tuple(dict.fromkeys(key for c in cuts for key in (*c.subject, *c.causes)))
    if not keys:
        return
    table = SignalTable(deck, tuple(our_name(name) for name in waves.names), keys)
    for block in waves.blocks():
        t = block[:, 0] + deck.window.start
        here = [c for c in cuts if c.stretch.start <= t[-1] and c.stretch.stop >= t[0]]
        if here:
            values = table.values(block)
            y = {key: values[table.row[key]] for key in keys}
            for cut in here:
                cut.feed(t, y)


def _commanded(firing: Firing) -> Mapping[int, Floats]:
    asked: dict[int, list[tuple[float, float]]] = {}
    for p in firing.asked:
        asked.setdefault(p.channel, []).append((p.start, p.stop))
    return {c: np.array(rows) for c, rows in asked.items()}


def _closeup(
    cut: _AnyCut, board: Board, firing: Firing, asked: Mapping[int, Floats], deck: Deck | None, corner: str
) -> Closeup:
    f, (start, stop) = cut.finding, cut.stretch
    panels = cut.panels(deck) if deck is not None and (f.probes or cut.causes) else ()
    named = (f.corner or corner) if panels else f.corner
    if f.shape == "count" and isinstance(cut, _Cut):
        panels = (_count(f, firing, cut), *panels)
    if f.at is None and not f.probes:
        return Closeup(f.key, named, start, stop, (), {}, {}, {})
    late = 2 * firing.frame_time  # an output may follow its command by as much: who is on here was commanded before
    on, commanded = (
        {c: rows for c, spans in every.items() if len(rows := _touching(spans, start - before, stop))}
        for every, before in ((firing.on, 0.0), (asked, late))
    )
    who = channels_in_question(f, board)
    in_view = {*on, *(c for c, spans in commanded.items() if len(_touching(spans, start, stop)))}
    in_view |= set(who) if len(who) == 1 else set()
    if members := package_members(f, board):
        in_view &= set(members)  # the others' coils are no part of the sum
        on, commanded = ({c: rows for c, rows in every.items() if c in members} for every in (on, commanded))
    labels = {c.number: c.label for c in board.channels if c.number in in_view}
    hits = cut.hits if isinstance(cut, MotionCut) and panels else ()
    return Closeup(f.key, named, start, stop, panels, on, commanded, labels, who, hits)


def _touching(spans: Floats, start: float, stop: float) -> Floats:
    rows: Floats = spans[(spans[:, 0] <= stop) & (spans[:, 1] >= start)]
    return rows


def _count(f: Finding, firing: Firing, cut: _Cut) -> Panel:
    """How many channels are on, as steps."""
    times, counts = count_on(f.channels, firing)
    until = np.append(times[1:], firing.duration)
    t, y = np.column_stack([times, until]).ravel(), np.repeat(counts, 2)[None, :]
    t, y = between(t, y, *cut.stretch)
    slices = Slices(cut.slices.edges, 1)
    slices.feed(t, y)
    wave = Envelope(f.quantity, "1", slices.edges, slices.low[0], slices.high[0])
    marked = None if f.at is None else (cut.inside(f.at), f.value)
    return Panel(_title([wave]), "1", (wave,), f.limit, marked)
