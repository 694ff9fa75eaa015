"""What turning one channel off does, read from its waveforms: peak at the switch, energies, pull-in and release."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from boardsim.board.reader import Board, Channel
from boardsim.circuit.deck import Deck
from boardsim.circuit.packages import of_package
from boardsim.engine.waves import Waves
from boardsim.firing.schedule import Firing
from boardsim.parts.base import Corner, Stamp
from boardsim.parts.rules import BreakdownRule
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Envelope, Floats, Reading
from boardsim.verdict.readings import Key, SignalTable, our_name
from boardsim.verdict.watch import Extremes, Integrals, Slices

_RESOLVED = 1e-6  # of the coil's energy
SLICES = 3000  # from turn-off to the end; a fast clamp's release is a tenth of it
_BEFORE = 0.05  # share of the time after the turn-off that is shown before it


@dataclass(frozen=True)
class TurnOff:
    """One channel turned off once, in one corner.

    Attributes
    ----------
    corner : str
    peak : float
        Highest voltage at the switch from the turn-off on. [V]
    clamp_energy, switch_energy : float
        Taken by clamp and switch from the turn-off to the end of the run; the switch's includes what its
        capacitances hold then. [J]
    pulls_in : float or None
        From turn-on until the coil current reaches the pull-in current; None if that was not given or not reached. [s]
    let_go : float or None
        From turn-off until the coil current stays below the release current; None likewise. [s]
    charge : float
        Time integral of the coil current from the turn-off on: what tells a slow release from a fast one where no
        release current was given. [C]
    coil_energy : float
        L I^2 / 2 of the coil at the turn-off, which its clamp has to deal with. [J]
    v_switch, i_coil : Envelope
        Around the turn-off; times count from it.
    """

    corner: str
    peak: float
    clamp_energy: float
    switch_energy: float
    pulls_in: float | None
    let_go: float | None
    charge: float
    coil_energy: float
    v_switch: Envelope
    i_coil: Envelope

    def readings(self, label: str) -> tuple[Reading, ...]:
        """The numbers on which a run and its repeat must agree."""
        found = [
            Reading("peak voltage at the switch after turn-off", label, self.peak, "V", self.peak),
            Reading("energy into the clamp after turn-off", label, self.clamp_energy, "J", self.coil_energy),
            Reading("energy into the switch after turn-off", label, self.switch_energy, "J", self.coil_energy),
            Reading("coil current times time after turn-off", label, self.charge, "C", self.charge),
        ]
        for quantity, value in (("time to pull in", self.pulls_in), ("time to let go", self.let_go)):
            if value is not None:
                found.append(Reading(quantity, label, value, "s", value))
        return tuple(found)


@dataclass
class Crossings:
    """When a signal first reaches a level, and since when it has stayed below it; ends interpolated.

    Attributes
    ----------
    level : float
        [unit of the signal]
    first, below_since : float or None
        None where it never has, or does not. [s]
    """

    level: float
    first: float | None = None
    below_since: float | None = None
    _began: bool = False

    def feed(self, t: Floats, y: Floats) -> None:
        """Times and values, both (m,); each stretch begins with the last point of the one before."""
        reached = np.flatnonzero(y >= self.level)
        if not len(reached):
            self.below_since = self.below_since if self._began else float(t[0])
            self._began = True
            return
        self._began = True
        first, last = int(reached[0]), int(reached[-1])
        if self.first is None:
            self.first = float(t[0]) if first == 0 else self._between(t, y, first - 1)
        self.below_since = None if last == len(t) - 1 else self._between(t, y, last)

    def _between(self, t: Floats, y: Floats, k: int) -> float:
        """Where the straight line between points k and k + 1 is at the level. [s]"""
        return float(t[k] + (self.level - y[k]) / (y[k + 1] - y[k]) * (t[k + 1] - t[k]))


def from_time(start: float, t: Floats, rows: Floats) -> tuple[Floats, Floats] | None:
    """A stretch of signals from a time on; None where it ends before.

    Parameters
    ----------
    start : float
        [s]
    t : (m,) array
        [s]
    rows : (n, m) array

    Returns
    -------
    tuple of (k,) and (n, k) arrays, or None
        The first point is at `start` itself, interpolated, where that lies inside.
    """
    if t[-1] <= start:
        return None
    k = int(np.searchsorted(t, start, side="right"))
    if k == 0:
        return t, rows
    at_start = rows[:, k - 1] + (start - t[k - 1]) / (t[k] - t[k - 1]) * (rows[:, k] - rows[:, k - 1])
    return np.concatenate([[start], t[k:]]), np.column_stack([at_start, rows[:, k:]])


class ReleaseWatch:
    """Takes the readings of a turn-off from runs of a board's only channel, and keeps the last of each corner.

    Attributes
    ----------
    found : dict of corner name to TurnOff
        Empty as long as nothing was turned off.
    """

    def __init__(self, board: Board, firing: Firing):
        (self.channel,) = board.channels
        self.board, self.firing = board, firing
        self.found: dict[str, TurnOff] = {}

    def __call__(self, waves: Waves, deck: Deck) -> tuple[Reading, ...]:
        """Read one run's last pulse; nothing where the register does not turn the channel on and off twice."""
        spans = self.firing.on[self.channel.number]
        if len(spans) != 2 or spans[0, 0] <= deck.window.start or spans[-1, 1] >= deck.window.stop:
            return ()
        found = take_turn_off(waves, deck, self.channel, float(spans[-1, 0]), float(spans[-1, 1]))
        self.found[deck.corner.name] = found
        return found.readings(self.channel.label)

    def peak_limit(self) -> float | None:
        """What the channel's switch is rated for, after derating. [V]"""
        rule = breakdown_rule(self.channel)
        if rule is None or rule.rating.value is None:
            return None
        return rule.rating.value * Bench(self.board, "", ()).derating(rule.rating.derating)


def breakdown_rule(channel: Channel) -> BreakdownRule | None:
    """The rule that holds the voltage at a channel's switch against what it stands; None where it has none."""
    rules = channel.switch.stamp("s", "pin", "drain", Corner("any")).rules
    return next((r for r in rules if isinstance(r, BreakdownRule)), None)


def take_turn_off(waves: Waves, deck: Deck, channel: Channel, on: float, off: float) -> TurnOff:
    """Read the turn-off of a channel.

    Parameters
    ----------
    waves : Waves
        Of one run of `deck`.
    deck : Deck
    channel : Channel
    on, off : float
        When the register's output turns it on and off. [s]
    """
    watch = _TurnOffWatch(deck, channel, on, off)
    table = SignalTable(deck, tuple(our_name(name) for name in waves.names), watch.keys)
    for block in waves.blocks():
        watch.feed(block[:, 0] + deck.window.start, table.values(block))
    return watch.turn_off()


class _TurnOffWatch:
    """Everything that is read of one turn-off, block by block."""

    def __init__(self, deck: Deck, channel: Channel, on: float, off: float):
        self.deck, self.coil, self.on, self.off = deck, channel.coil, on, off
        # Of a matrix both lines' switches and clamps take the coil's energy; the voltage is the column's.
        drivers, corner = channel.drivers, deck.corner
        switch = [pair for d in drivers for pair in _pairs(d.number, d.switch.stamp("s", "a", "b", corner, "rail"))]
        clamp = [pair for d in drivers for pair in _pairs(d.number, d.clamp.stamp("c", "a", "b", corner))]
        for d in drivers:
            shared = d.clamp.common("p", "a", "b", corner)
            if shared is not None:  # the channel is alone on its board: what its package has once is all its own
                clamp += _pairs(None, of_package(shared, d.package or d.label))
        rule, place = breakdown_rule(channel), drivers[-1].number
        v_switch = (place, rule.voltage) if rule is not None else switch[-1][0]
        i_coil, i_l = (channel.number, "i_coil"), (channel.number, "i_l")
        self.keys: tuple[Key, ...] = tuple(
            dict.fromkeys([v_switch, i_coil, i_l, *(q for pair in (*switch, *clamp) for q in pair)])
        )
        row = {key: k for k, key in enumerate(self.keys)}
        self.v_switch, self.i_coil, self.i_l = row[v_switch], row[i_coil], row[i_l]
        self.ports = [[(row[v], row[i]) for v, i in pairs] for pairs in (clamp, switch)]

        pull_in, release = self.coil.pull_in, self.coil.release
        self.rise = Crossings(pull_in.max) if pull_in is not None else None
        self.fall = Crossings(release.min) if release is not None else None
        self.peak, self.taken = Extremes(1), Integrals(len(self.ports) + 1)
        stop = deck.window.stop
        before = max(off - _BEFORE * (stop - off), deck.window.start)
        self.slices = Slices(np.linspace(before, stop, SLICES + 1), 2)
        self.current = 0.0  # through the inductance at the turn-off [A]

    def feed(self, t: Floats, y: Floats) -> None:
        if self.rise is not None and (part := from_time(self.on, t, y)) is not None:
            self.rise.feed(part[0], part[1][self.i_coil])
        if (part := from_time(float(self.slices.edges[0]), t, y)) is not None:
            self.slices.feed(part[0], part[1][[self.v_switch, self.i_coil]])
        if (part := from_time(self.off, t, y)) is not None:
            self._feed_after(*part)

    def _feed_after(self, t: Floats, y: Floats) -> None:
        if t[0] == self.off:
            self.current = float(y[self.i_l, 0])
        self.peak.feed(t, y[[self.v_switch]])
        powers = [sum((y[v] * y[i] for v, i in pairs), np.zeros_like(t)) for pairs in self.ports]
        self.taken.feed(t, np.stack([*powers, y[self.i_coil]]))
        if self.fall is not None:
            self.fall.feed(t, np.abs(y[self.i_coil]))  # a coil that rings holds with either sign of its current

    def turn_off(self) -> TurnOff:
        into_clamp, into_switch, charge = (float(total) for total in self.taken.total)
        held = self.coil.held(self.current, self.deck.corner)
        edges = self.slices.edges - self.off
        v_switch, i_coil = (
            Envelope(label, unit, edges, self.slices.low[k], self.slices.high[k])
            for k, (label, unit) in enumerate((("voltage at the switch", "V"), ("coil current", "A")))
        )
        first = None if self.rise is None else self.rise.first
        since = None if self.fall is None else self.fall.below_since
        return TurnOff(
            self.deck.corner.name,
            float(self.peak.high[0]),
            resolved(into_clamp, held),
            resolved(into_switch, held),
            None if first is None else first - self.on,
            None if since is None else since - self.off,
            charge,
            held,
            v_switch,
            i_coil,
        )


def _pairs(channel: int | None, stamp: Stamp) -> list[tuple[Key, Key]]:
    """The voltages and currents whose products are the power into a stamp's ports, and into those of what is inside it."""
    inside = [pair for _, inner in stamp.inside for pair in _pairs(channel, inner)]
    return [*inside, *(((channel, v), (channel, i)) for port in stamp.ports for v, i in port.pairs)]


def resolved(energy: float, coil_energy: float) -> float:
    """An energy, or 0 where it is no more than what is left of the rounding of a run. [J]

    Notes
    -----
    What a gate gives back and what a run rounds away leave nanojoules of either sign. The audit vouches for a hundredth of the
    energy that decides; below a millionth of what the coil held nothing is told apart from zero.
    """
    return energy if abs(energy) >= _RESOLVED * coil_energy else 0.0
