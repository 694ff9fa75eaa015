"""Waveforms around the moment of a finding: the quantity with its limit, the cause beside it, and who was on.

A second pass over the waveforms, once the findings are known; thinned so that the lowest and the highest value of every
slice of time stay.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from boardsim.board.reader import Board
from boardsim.circuit.deck import Deck
from boardsim.engine.waves import Waves
from boardsim.firing.schedule import Firing
from boardsim.verdict.findings import Envelope, Finding, Floats
from boardsim.verdict.readings import Key, SignalTable, our_name
from boardsim.verdict.watch import Slices

SLICES = 800  # across a close-up; about as many as it has pixels
_TAUS = 3.0  # L/R times to look at on either side of a moment
_CAUSES: Mapping[str, tuple[Key, ...]] = {
    "pull-in": ((None, "v_rail"),),
    "overlap": ((None, "i_total"),),
    "rail-sag": ((None, "i_total"), (None, "i_supply")),
    "supply-ceiling": ((None, "i_total"), (None, "v_rail")),
}
"""What is shown beside a board's reading, by its check; beside a channel's own it is the coil current."""
_WORDS = {
    "v_rail": "coil rail at the board",
    "i_total": "all coils together",
    "i_supply": "out of the supply",
    "i_coil": "coil current",
    "v_coil": "voltage across the coil",
}


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
    """

    title: str
    unit: str
    waves: tuple[Envelope, ...]
    limit: float | None = None
    marked: tuple[float, float] | None = None
    mean: float | None = None


@dataclass(frozen=True)
class Closeup:
    """What the picture of one finding is drawn from.

    Attributes
    ----------
    finding : tuple of str
        Key of the finding.
    corner : str
        In which the waveforms were taken.
    start, stop : float
        The stretch shown. [s]
    panels : tuple of Panel
        The quantity with its limit first, then what causes it; empty for a finding that no waveform belongs to.
    on, asked : mapping of channel to (n, 2) array
        When the channels were on that are on at any time of the stretch, and when they were commanded to be. [s]
    labels : mapping of channel to str
    """

    finding: tuple[str, str, str, str]
    corner: str
    start: float
    stop: float
    panels: tuple[Panel, ...]
    on: Mapping[int, Floats]
    asked: Mapping[int, Floats]
    labels: Mapping[int, str]


@dataclass
class _Cut:
    """A stretch under way: which signals, and their slices so far."""

    finding: Finding
    start: float
    stop: float
    causes: tuple[Key, ...]
    watch: Slices = field(init=False)
    energy: float = 0.0
    sign: float = 1.0

    def __post_init__(self) -> None:
        self.watch = Slices(np.linspace(self.start, self.stop, SLICES + 1), 1 + len(self.causes))

    @property
    def subject(self) -> tuple[Key, ...]:
        return tuple((self.finding.channel, q) for q in self.finding.probes)

    def feed(self, t: Floats, y: Mapping[Key, Floats]) -> None:
        keys = (*self.subject, *self.causes)
        t, rows = _between(t, np.stack([y[key] for key in keys]), self.start, self.stop)
        f, probes = self.finding, len(self.subject)
        subject = np.prod(rows[:probes], axis=0) if probes else np.zeros_like(t)
        if f.shape == "energy" and f.at is not None:
            power = np.where(t >= f.at, np.maximum(subject, 0.0), 0.0)
            subject = self.energy + np.concatenate([[0.0], np.cumsum(0.5 * (power[1:] + power[:-1]) * np.diff(t))])
            self.energy = float(subject[-1])  # the next stretch begins with this one's last point
        elif f.shape == "value" and f.at is not None and t[0] <= f.at <= t[-1]:
            self.sign = -1.0 if float(np.interp(f.at, t, subject)) * f.value < 0 else 1.0
        self.watch.feed(t, np.vstack([subject, rows[probes:]]))

    def panels(self, units: Mapping[Key, str]) -> tuple[Panel, ...]:
        f, edges = self.finding, self.watch.edges
        seen = np.isfinite(self.watch.low).all(axis=0)
        if not seen.all():
            return ()  # the run ended before the stretch did

        def wave(row: int, label: str, unit: str) -> Envelope:
            return Envelope(label, unit, edges, self.watch.low[row], self.watch.high[row])

        own = wave(0, f.quantity, f.unit)
        marked = None if f.at is None or f.shape == "mean" else (f.at, self.sign * f.value)
        if f.shape == "energy":
            marked = (self.stop, f.value)
        beside: dict[str, list[Envelope]] = {}
        for row, (_, quantity) in enumerate(self.causes, 1):
            unit = units[self.causes[row - 1]]
            beside.setdefault(unit, []).append(wave(row, _WORDS.get(quantity, quantity), unit))
        title = f.quantity[0].upper() + f.quantity[1:]
        limit = None if f.limit is None else self.sign * f.limit
        first = Panel(title, f.unit, (own,), limit, marked, f.value if f.shape == "mean" else None)
        if f.shape == "value" and f.unit in beside:
            first = replace(first, waves=(own, *beside.pop(f.unit)))
        more = [Panel(waves[0].label.capitalize(), unit, tuple(waves)) for unit, waves in beside.items()]
        return (first, *more)


def _between(t: Floats, rows: Floats, start: float, stop: float) -> tuple[Floats, Floats]:
    """Times (m,) and values (n, m) from `start` to `stop`, with values at both ends where those lie inside. [s]"""
    inside = (t >= start) & (t <= stop)
    ends = [end for end in (start, stop) if t[0] < end < t[-1]]
    times = np.concatenate([t[inside], ends])
    order = np.argsort(times, kind="stable")
    at_ends = np.array([[np.interp(end, t, row) for end in ends] for row in rows]).reshape(len(rows), len(ends))
    values = np.hstack([rows[:, inside], at_ends])
    return times[order], values[:, order]


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
    """
    wanted = [f for f in findings if wants_closeup(f)]
    cuts = [_cut(f, board, firing, deck) for f in wanted]
    if waves is not None and deck is not None:
        _feed(cuts, waves, deck)
    units = deck.units if deck is not None else {}
    return tuple(_closeup(cut, f, board, firing, units, corner) for f, cut in zip(wanted, cuts, strict=True))


def _cut(f: Finding, board: Board, firing: Firing, deck: Deck | None) -> _Cut:
    start, stop = _stretch(f, board, firing)
    causes = _CAUSES.get(f.check) if f.channel is None else None
    if causes is None:
        causes = ((f.channel, "i_coil"), (f.channel, "v_coil")) if f.unit == "A" else ((f.channel, "i_coil"),)
        if f.check == "pull-in":
            causes = _CAUSES["pull-in"]
        elif f.channel is None:
            causes = ((None, "i_total"), (None, "i_supply"))
    if deck is None:
        causes = ()
    else:
        causes = tuple(key for key in causes if key in deck.signals and key not in [(f.channel, q) for q in f.probes])
    return _Cut(f, start, stop, causes)


def _stretch(f: Finding, board: Board, firing: Firing) -> tuple[float, float]:
    """When to look: around the moment, with the pulse that leads to it; all of the pattern for what has no moment. [s]"""
    if f.at is None:
        return 0.0, firing.duration
    reach = _TAUS * max(
        c.coil.inductance.max / c.coil.resistance.min for c in board.channels if f.channel in (None, c.number)
    )
    start, stop = f.at - reach, f.at + reach
    if f.lasting is not None:
        start, stop = start - f.lasting, stop + f.lasting
    spans = firing.on.get(f.channel, np.empty((0, 2))) if f.channel is not None else np.empty((0, 2))
    before = spans[spans[:, 0] < f.at]
    if f.check == "pull-in" and len(before):
        start = before[-1, 0] - 0.1 * (f.at - before[-1, 0])
    elif f.check == "overlap" and f.probes and len(before):
        start = before[-1, 1] - reach / 3  # the turn-off that the coil has not got over
    elif f.shape == "energy":
        start, stop = f.at - reach / 2, f.at + 1.5 * reach
        after = spans[spans[:, 0] > f.at]
        stop = min(stop, after[0, 0]) if len(after) else stop
    return max(start, 0.0), min(stop, firing.duration)


def _feed(cuts: Sequence[_Cut], waves: Waves, deck: Deck) -> None:
    """Give every cut its share of the waveforms."""
    cuts = [c for c in cuts if c.finding.probes or c.causes]
    keys = tuple(dict.fromkeys(key for c in cuts for key in (*c.subject, *c.causes)))
    if not keys:
        return
    table = SignalTable(deck, tuple(our_name(name) for name in waves.names), keys)
    for block in waves.blocks():
        t = block[:, 0] + deck.window.start
        here = [c for c in cuts if c.start <= t[-1] and c.stop >= t[0]]
        if here:
            values = table.values(block)
            y = {key: values[table.row[key]] for key in keys}
            for cut in here:
                cut.feed(t, y)


def _closeup(cut: _Cut, f: Finding, board: Board, firing: Firing, units: Mapping[Key, str], corner: str) -> Closeup:
    panels: tuple[Panel, ...] = cut.panels(units) if f.probes or cut.causes else ()
    if f.shape == "count":
        panels = (_count(f, firing, cut), *panels[1:])
    elif not f.probes:
        panels = panels[1:]
    on = {c: spans for c, spans in firing.on.items() if _touches(spans, cut.start, cut.stop)}
    asked: dict[int, list[tuple[float, float]]] = {}
    for m in firing.moved:
        if m.pulse.start <= cut.stop and m.pulse.stop >= cut.start:
            asked.setdefault(m.pulse.channel, []).append((m.pulse.start, m.pulse.stop))
    labels = {c.number: c.label for c in board.channels if c.number in on or c.number in asked}
    named = f.corner or corner
    spans = {c: np.array(rows, dtype=np.float64) for c, rows in asked.items()}
    return Closeup(f.key, named, cut.start, cut.stop, panels, on, spans, labels)


def _touches(spans: Floats, start: float, stop: float) -> bool:
    return bool(np.any((spans[:, 0] <= stop) & (spans[:, 1] >= start)))


def _count(f: Finding, firing: Firing, cut: _Cut) -> Panel:
    """How many channels are on, as steps."""
    members = f.channels or tuple(firing.on)
    changes = sorted(
        (float(t), step) for c in members for span in firing.on[c] for t, step in zip(span, (1, -1), strict=True)
    )
    times = np.array([0.0, *np.repeat([t for t, _ in changes], 2), firing.duration])
    counts = np.concatenate([[0], np.cumsum([step for _, step in changes])])
    watch = Slices(cut.watch.edges, 1)
    watch.feed(times, np.repeat(counts, 2)[None, :].astype(np.float64))
    wave = Envelope(f.quantity, "1", watch.edges, watch.low[0], watch.high[0])
    marked = None if f.at is None else (f.at, f.value)
    return Panel(f.quantity[0].upper() + f.quantity[1:], "1", (wave,), f.limit, marked)
