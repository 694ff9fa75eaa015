"""Waveforms -> readings: one pass over the blocks feeds every watch that the deck's rules and ports ask for."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

import numpy as np
import scipy.sparse

from boardsim.circuit.deck import Deck
from boardsim.circuit.logic import LOGIC
from boardsim.engine.waves import Waves
from boardsim.errors import NoConvergence
from boardsim.firing.schedule import Firing
from boardsim.parts.rules import (
    BreakdownRule,
    CeilingRule,
    DipRule,
    DriveRule,
    EnergyRule,
    FallRule,
    FloorRule,
    HeatRule,
    HoldRule,
    IdleRule,
    LatchRule,
    MeanRule,
    MotionRule,
    PullInRule,
    PulseRule,
    ReleaseRule,
    ReserveRule,
    Rule,
    ShootThroughRule,
    SneakRule,
)
from boardsim.verdict.boost import peaks_begin
from boardsim.verdict.bridges import Leg, fired_again
from boardsim.verdict.findings import Envelope, Floats
from boardsim.verdict.hold import Valleys, held_spans
from boardsim.verdict.pulses import OnePulse, Pulses
from boardsim.verdict.sneak import Growth
from boardsim.verdict.strokes import Strokes, Travelled, commands
from boardsim.verdict.throws import Throws
from boardsim.verdict.watch import (
    Avalanche,
    Avalanches,
    Dip,
    Dips,
    Extremes,
    Falls,
    Integrals,
    Samples,
    Slices,
    TimeAbove,
)

Key = tuple[int | None, str]
PulseKey = tuple[int | None, tuple[str, ...], float]

SLICES = 1600  # across a picture; more than it has pixels
ENERGY_SHARE = 0.5  # an energy does not depend on it; this one also tells how long the pulse is to its half
AT_CEILING = 0.99  # share of the ceiling from which the supply counts as being at it (its bend is rounded)


@dataclass(frozen=True)
class PortReading:
    """What the passivity audit found at one part; `deciding` is the largest energy its channel's coil held. [J]"""

    channel: int | None
    name: str
    drop: float
    spread: float
    through: float
    holds: float
    deciding: float


@dataclass(frozen=True)
class Readings:
    """Everything that the rules of a deck ask of its waveforms.

    Attributes
    ----------
    high, low : mapping of (channel, quantity) to (value, time)
    means : mapping of (channel, quantities) to the average over the window
    dips : list of Dip, below the level of the rail rule
    lowest : (value, time) of the rail
    ceiling : (time at the ceiling, since when)
    pull_in, release : mapping of channel to (times, currents)
        At the ends of pulses, or of the peaks of those that are held; when fired again.
    avalanches : mapping of (channel, voltage) to list of Avalanche
    drive : mapping of (channel, drive, current) to (times, drives, currents), at the ends of pulses
    guarded : tuple of Dip
        Below the level plus the guard band.
    points : int
        Without those in stretches in which a clocked line sets them: a finer run has no more of these.
    pulses : mapping of (channel, quantities, share) to tuple of OnePulse
        Share of its peak above which a pulse counts as lasting.
    idle : mapping of channel to (times, currents)
        Of channels that are off, before everything and after it.
    falls : mapping of FallRule to two tuples of Dip
        Below its level, and below its level plus the guard band.
    framed : float or None
        Lowest logic rail at the beginning and the latch edge of any register frame; None where it is no node, or no frame is known. [V]
    at_ends : mapping of (channel, quantity) to (times, values), at the ends of pulses
        What must reach a limit in every pulse, on boards whose logic rail moves: the best pulse then does not speak for all.
    motions : mapping of channel to tuple of Travelled
        What its coil moved, pulse by pulse.
    legs : mapping of channel to Leg
        What the two transistors of a bridge's leg do.
    sneaks : mapping of channel to Growth
        What others drive through its coil, of channels of a matrix.
    valleys : mapping of channel to Valleys
        Of its coil's current while its pulses are held.
    reserve : (times, voltages) of a boost's reservoir when peaks of its bank begin; None without one
    throws : mapping of channel to Throws
        Which of its pulses flip its latching coil.
    """

    high: Mapping[Key, tuple[float, float]]
    low: Mapping[Key, tuple[float, float]]
    means: Mapping[tuple[int | None, tuple[str, ...]], float]
    dips: tuple[Dip, ...]
    ceiling: tuple[float, float | None]
    pull_in: Mapping[int, tuple[Floats, Floats]]
    release: Mapping[int, tuple[Floats, Floats]]
    avalanches: Mapping[tuple[int, str], tuple[Avalanche, ...]]
    drive: Mapping[tuple[int, str, str], tuple[Floats, Floats, Floats]]
    ports: tuple[PortReading, ...]
    guarded: tuple[Dip, ...]
    points: int
    envelopes: Mapping[str, Envelope]
    pulses: Mapping[PulseKey, tuple[OnePulse, ...]] = field(default_factory=dict)
    idle: Mapping[int, tuple[Floats, Floats]] = field(default_factory=dict)
    falls: Mapping[FallRule, tuple[tuple[Dip, ...], tuple[Dip, ...]]] = field(default_factory=dict)
    framed: float | None = None
    at_ends: Mapping[tuple[int, str], tuple[Floats, Floats]] = field(default_factory=dict)
    motions: Mapping[int, tuple[Travelled, ...]] = field(default_factory=dict)
    legs: Mapping[int, Leg] = field(default_factory=dict)
    sneaks: Mapping[int, Growth] = field(default_factory=dict)
    valleys: Mapping[int, Valleys] = field(default_factory=dict)
    reserve: tuple[Floats, Floats] | None = None
    throws: Mapping[int, Throws] = field(default_factory=dict)


class SignalTable:
    """Signals of a deck as rows of a matrix over the saved vectors; all of them, or those of `keys`."""

    def __init__(self, deck: Deck, names: tuple[str, ...], keys: Iterable[Key] | None = None):
        column = {name: i for i, name in enumerate(names)}
        self.row = {key: i for i, key in enumerate(deck.signals if keys is None else keys)}
        entries = [(k, i, column[v]) for key, i in self.row.items() for k, v in deck.signals[key]]
        data, rows, columns = zip(*entries, strict=True)
        self.matrix = scipy.sparse.csr_matrix((data, (rows, columns)), shape=(len(self.row), len(names)))

    def values(self, block: Floats) -> Floats:
        """(signals, points)"""
        return np.asarray(self.matrix @ block.T)


def take_readings(waves: Waves, deck: Deck, firing: Firing) -> Readings:
    """Read a window's waveforms.

    Parameters
    ----------
    waves : Waves
        Of one run of `deck`.
    deck : Deck
    firing : Firing
        For the times of switching; absolute, as are all times of the result. [s]

    Raises
    ------
    NoConvergence
        If the waveforms hold values that are no numbers, or begin with a rail that the supply cannot have made.
    """
    names = tuple(our_name(name) for name in waves.names)
    table = SignalTable(deck, names)
    row, start, stop = table.row, deck.window.start, deck.window.stop
    rules = [(p.channel, p.rule) for p in deck.rules]

    extremes = Extremes(len(row))
    mean_keys = list(dict.fromkeys(key for c, r in rules for key in _averaged(c, r)))
    integrals = Integrals(len(mean_keys))
    dip_rule = next((r for _, r in rules if isinstance(r, DipRule)), None)
    dips = Dips(dip_rule.limit.value if dip_rule and dip_rule.limit.value is not None else -np.inf)
    guarded = Dips(dips.level * (1 + dip_rule.guard) if dip_rule else -np.inf)
    ceiling_rule = next((r for _, r in rules if isinstance(r, CeilingRule)), None)
    ceiling = TimeAbove(AT_CEILING * ceiling_rule.limit.value if ceiling_rule and ceiling_rule.limit.value else np.inf)
    pull_in = {
        c: Samples(_within(firing.driven_until(c), start, stop))
        for c, r in rules
        if isinstance(r, PullInRule) and c is not None
    }
    release = {
        c: Samples(_within(fired_again(firing, c, r.besides), start, stop))
        for c, r in rules
        if isinstance(r, ReleaseRule) and c is not None
    }
    moving_parts = {
        c: (Strokes(r.travel, firing.on[c], start, stop, commands(firing, c), firing.jitter), r)
        for c, r in rules
        if isinstance(r, MotionRule) and r.check == "stroke" and c is not None
    }
    idle = {
        c: Samples(_at_rest(np.concatenate([firing.spans(k) for k in (c, *r.besides)]), start, stop))
        for c, r in rules
        if isinstance(r, IdleRule) and c is not None
    }
    sneaks = {c: Growth(firing.spans(c)) for c, r in rules if isinstance(r, SneakRule) and c is not None}
    valleys = {
        c: Valleys(held_spans(firing, c, start, stop)) for c, r in rules if isinstance(r, HoldRule) and c is not None
    }
    throws = {
        c: Throws.of(r, firing.spans(c), [firing.spans(k) for k in r.besides], stop)
        for c, r in rules
        if isinstance(r, LatchRule) and r.check == "flip" and c is not None
    }
    drive = {
        (c, quantity): Samples(_within(firing.driven_until(c), start, stop))
        for c, r in rules
        if isinstance(r, DriveRule) and c is not None
        for quantity in (r.quantity, r.current)
    }
    moving = (None, "i_regulator") in row
    reserves = [
        (Samples(_within(peaks_begin(firing, r.channels), start, stop)), r)
        for _, r in rules
        if isinstance(r, ReserveRule)
    ]
    at_ends = {
        (c, r.quantity): Samples(_within(firing.driven_until(c), start, stop))
        for c, r in rules
        if moving and isinstance(r, FloorRule) and not r.any_time and c is not None
    }
    avalanches = {
        (c, r.voltage): (Avalanches(r.breakdown), r) for c, r in rules if isinstance(r, BreakdownRule) and c is not None
    }
    legs = {c: (Leg(r.turn_on), r) for c, r in rules if isinstance(r, ShootThroughRule) and c is not None}
    asked = dict.fromkeys(pulse_key(c, r) for c, r in rules)
    pulses = {of: Pulses(of[2]) for of in asked if of is not None}
    fallen = {r: _below(r) for _, r in rules if isinstance(r, FallRule)}
    framed = Samples(_ends_of_frames(firing, start, stop)) if moving else None
    falls = Falls(len(deck.ports))
    shown = {"rail": (None, "v_rail"), "total": (None, "i_total"), "supply": (None, "i_supply")}
    slices = Slices(np.linspace(start, stop, SLICES + 1), len(shown))
    points = waves.points

    for block in waves.blocks():
        if not np.isfinite(block).all():
            raise NoConvergence("ngspice's waveforms hold values that are no numbers")
        t = block[:, 0] + start
        y = table.values(block)
        if t[0] == start:
            _refuse_false_start(float(y[row[None, "v_rail"], 0]), float(y[row[None, "i_total"], 0]), deck, moving)
            if moving:
                _refuse_false_logic(float(y[row[None, "v_logic"], 0]), deck)
        extremes.feed(t, y)
        if mean_keys:
            integrals.feed(t, np.stack([np.prod([y[row[c, q]] for q in qs], axis=0) for c, qs in mean_keys]))
        for dip in (dips, guarded):
            dip.feed(t, y[row[None, "v_rail"]])
        ceiling.feed(t, y[row[None, "i_supply"]])
        if framed is not None:
            framed.feed(t, y[row[None, "v_logic"]])
        for fall, both in fallen.items():
            for dip in both:
                dip.feed(t, y[row[None, fall.quantity]])
        for samples in (pull_in, release, idle):
            for c, sample in samples.items():
                sample.feed(t, y[row[c, "i_coil"]])
        for c, growth in sneaks.items():
            growth.feed(t, y[row[c, "i_coil"]])
        for c, valley in valleys.items():
            valley.feed(t, y[row[c, "i_coil"]])
        for sample, reserved in reserves:
            sample.feed(t, y[row[None, reserved.quantity]])
        for c, throw in throws.items():
            throw.feed(t, y[row[c, "i_coil"]], y[row[None, "v_rail"]])
        for (c, quantity), sample in (*drive.items(), *at_ends.items()):
            sample.feed(t, y[row[c, quantity]])
        for (c, _), (watch, rule) in avalanches.items():
            watch.feed(t, y[row[c, rule.voltage]], y[row[c, rule.current]])
        for c, (strokes, motion) in moving_parts.items():
            strokes.feed(t, y[row[c, motion.quantity]], y[row[c, motion.speed]])
        for c, (leg, shoot) in legs.items():
            leg.feed(t, *(y[[row[c, q] for q in qs]] for qs in (shoot.gates, shoot.currents)))
        for (channel, qs, _), watched in pulses.items():
            watched.feed(t, np.prod([y[row[channel, q]] for q in qs], axis=0))
        _feed_falls(falls, deck, row, t, y)
        slices.feed(t, y[[row[key] for key in shown.values()]])
        points -= sum(int(np.sum((t > a) & (t <= b))) for a, b in deck.clocked)

    span = stop - start
    held: dict[int | None, float] = {}
    for i, (channel, _, port) in enumerate(deck.ports):
        if port.energy is not None and channel is not None:
            held[channel] = max(held.get(channel, 0.0), float(falls.most[i]))
        elif port.store and channel is not None:
            energy = 0.5 * port.store[1] * _largest(extremes, row[channel, port.store[0]]) ** 2
            held[channel] = max(held.get(channel, 0.0), energy)
    held |= {line: max(held.get(c, 0.0) for c in along) for line, along in deck.lines.items()}
    held[None] = max(held.values(), default=0.0)
    return Readings(
        {k: (float(extremes.high[i]), float(extremes.high_at[i])) for k, i in row.items()},
        {k: (float(extremes.low[i]), float(extremes.low_at[i])) for k, i in row.items()},
        {k: float(integrals.total[i]) / span for i, k in enumerate(mean_keys)},
        tuple(dips.all()),
        (ceiling.total, ceiling.first),
        {c: (s.times, s.values) for c, s in pull_in.items()},
        {c: (s.times, s.values) for c, s in release.items()},
        {key: tuple(w.all()) for key, (w, _) in avalanches.items()},
        {
            (c, r.quantity, r.current): (
                drive[c, r.quantity].times,
                drive[c, r.quantity].values,
                drive[c, r.current].values,
            )
            for c, r in rules
            if isinstance(r, DriveRule) and c is not None
        },
        tuple(
            PortReading(
                c,
                f"{label} {p.part}" if c is not None else p.part,
                float(falls.drop[i]),
                float(falls.spread[i]),
                float(falls.through[i]),
                p.holds,
                held.get(c, 0.0),
            )
            for i, (c, label, p) in enumerate(deck.ports)
        ),
        tuple(guarded.all()),
        points,
        {
            name: Envelope(name, deck.units[key], slices.edges, slices.low[i], slices.high[i])
            for i, (name, key) in enumerate(shown.items())
        },
        {key: tuple(watched.all()) for key, watched in pulses.items()},
        {c: (s.times, s.values) for c, s in idle.items()},
        {rule: (tuple(own.all()), tuple(near.all())) for rule, (own, near) in fallen.items()},
        float(framed.values.min()) if framed is not None and len(framed.values) else None,
        {key: (sample.times, sample.values) for key, sample in at_ends.items()},
        {c: strokes.all() for c, (strokes, _) in moving_parts.items()},
        {c: leg for c, (leg, _) in legs.items()},
        sneaks,
        valleys,
        next(((s.times, s.values) for s, _ in reserves), None),
        throws,
    )


def _ends_of_frames(firing: Firing, start: float, stop: float) -> Floats:
    """When register frames begin and when their latch edge comes, in a window. [s]"""
    begins = np.array([at for at, _ in firing.sent])
    return _within(np.sort(np.concatenate([begins, begins + firing.frame_time])), start, stop)


def _below(rule: FallRule) -> tuple[Dips, Dips]:
    """What is watched for a rule: below its level, and below that plus the guard band; nothing without a level."""
    level = -np.inf if rule.limit.value is None else rule.limit.value
    return Dips(level), Dips(level * (1 + rule.guard))


def pulse_key(channel: int | None, rule: Rule) -> PulseKey | None:
    """Under which key the pulses that a rule asks for are kept; None for a rule that asks for none."""
    match rule:
        case PulseRule():
            return (channel, rule.quantities, rule.share)
        case EnergyRule():
            return (channel, rule.quantities, ENERGY_SHARE)
        case _:
            return None


def _averaged(channel: int | None, rule: Rule) -> list[tuple[int | None, tuple[str, ...]]]:
    """Of which products of quantities a rule wants the average."""
    match rule:
        case MeanRule():
            return [(channel, rule.quantities)]
        case HeatRule():
            wanted = (*rule.powers, *(() if rule.growing is None else (rule.growing,)))
            return [(c, pair) for c in rule.channels or (channel,) for pair in wanted]
        case _:
            return []


def _refuse_false_start(rail: float, total: float, deck: Deck, regulator: bool = False) -> None:
    """Refuse a run that does not begin at rest: ngspice's search for the operating point can end far off without a word.

    A supply feeds the rail through resistances and takes nothing back: the rail is nowhere above the supply's own
    voltage, and where no coil draws anything it is at it (Kirchhoff). 1 %, to leave room for leakages; 10 % where a regulator
    draws its current all the time.
    """
    least = 0.9 if regulator else 0.99
    volts = max(deck.rest.values(), default=None)  # the supply's
    if volts is not None and (rail > 1.01 * volts or (abs(total) < 1e-3 and rail < least * volts)):
        raise NoConvergence(f"ngspice began with a rail of {rail:.4g} V, which a supply of {volts:.4g} V does not make")


def _refuse_false_logic(volts: float, deck: Deck) -> None:
    """Refuse a run whose logic rail begins above what its regulator is set to: that would hide a dip. [V]

    One that begins too low is in plain view as a dip of its own.
    """
    highest = deck.rest.get(LOGIC)
    if highest is not None and volts > 1.01 * highest:
        raise NoConvergence(f"ngspice began with a logic rail of {volts:.4g} V, which is set to {highest:.4g} V")


def our_name(name: str) -> str:
    """ngspice's name of a vector as decks save it: "l1#branch" -> "i(l1)"."""
    return f"i({name.removesuffix('#branch')})" if name.endswith("#branch") else name


def _within(times: Floats, start: float, stop: float) -> Floats:
    inside: Floats = times[(times >= start) & (times <= stop)]
    return inside


def _at_rest(on: Floats, start: float, stop: float) -> Floats:
    """The run's start and its end, where a channel is off then. [s]"""
    times = [t for t in (start, stop) if not np.any((on[:, 0] <= t) & (t <= on[:, 1]))]
    return np.array(times)


def _largest(extremes: Extremes, i: int) -> float:
    return float(max(abs(extremes.high[i]), abs(extremes.low[i])))


def _feed_falls(falls: Falls, deck: Deck, row: Mapping[Key, int], t: Floats, y: Floats) -> None:
    def voltage(i: int, channel: int | None, quantity: str) -> Floats:
        values: Floats = y[row[channel, quantity]]
        if not deck.ports[i][2].from_rest:
            return values
        return np.subtract(values, falls.rest.setdefault((i, quantity), float(values[0])))

    pairs, stored = [], np.zeros((len(deck.ports), len(t)))
    for i, (c, _, port) in enumerate(deck.ports):
        pairs.append([(voltage(i, c, v), y[row[c, a]]) for v, a in port.pairs])
        if port.energy is not None:
            stored[i] = port.energy.law(*(y[row[c, q]] for q in port.energy.quantities))
        elif port.store is not None:
            stored[i] = 0.5 * port.store[1] * voltage(i, c, port.store[0]) ** 2
    falls.feed(t, pairs, stored)
