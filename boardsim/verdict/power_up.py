"""What flows before the first enabled frame, read from the waveforms of a boot."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from boardsim.board.bridges import forwards
from boardsim.board.reader import Board, Channel
from boardsim.circuit.boot import Boot
from boardsim.circuit.deck import Deck
from boardsim.engine.waves import Waves
from boardsim.errors import NoConvergence
from boardsim.parts.base import Assumption, Corner
from boardsim.parts.clocked import level_points
from boardsim.verdict.findings import Envelope, Floats, Reading
from boardsim.verdict.readings import Key, SignalTable, our_name
from boardsim.verdict.release import Crossings, from_time
from boardsim.verdict.watch import Extremes, Integrals, Slices

SLICES = 1600  # across a picture
_AT_REST = (
    0.05  # [V], within which a rail that is off has to begin; the supply's rounded bend alone leaves some millivolts
)
_RELEASE_SHARE = 0.1  # of the settled current: where no release current was given
_SHOWN = {
    "v_rail": "coil rail",
    "v_logic": "logic rail",
    "v_enable": "output enable",
    "v_clear": "clear",
    "enabled": "outputs enabled",
    "i_total": "all coils together",
}


@dataclass(frozen=True)
class Uncommanded:
    """What one channel carried while nothing had been commanded.

    Attributes
    ----------
    peak, at : float
        Highest current of the coil [A], and when [s]; after a reset while it is still fed though it has to be off.
    energy : float
        That the coil took at its own terminals, from switch-on or the reset on; what it gives back is not counted off. [J]
    last : float
        Current when the first enabled frame came; after a reset 0 where it is no longer fed. [A]
    fed : float
        After a reset: how long the coil is still fed; infinite where only the first enabled frame ends that. [s]
    """

    peak: float
    at: float
    energy: float
    last: float
    fed: float = 0.0


@dataclass(frozen=True)
class BootReading:
    """One boot in one corner.

    Attributes
    ----------
    corner : str
    channels : mapping of channel to Uncommanded
    cleared_until : float or None
        Since when clear is surely high; None where it is tied, infinite where it never is. [s]
    waves : mapping of quantity to Envelope
    """

    corner: str
    channels: Mapping[int, Uncommanded]
    cleared_until: float | None
    waves: Mapping[str, Envelope]


class BootWatch:
    """Takes the readings of a boot from its runs, and keeps the last of each corner.

    Attributes
    ----------
    found : dict of corner name to BootReading
    """

    def __init__(self, board: Board, boot: Boot):
        self.board, self.boot = board, boot
        self.found: dict[str, BootReading] = {}

    def __call__(self, waves: Waves, deck: Deck) -> tuple[Reading, ...]:
        """Read one run.

        Raises
        ------
        NoConvergence
            If a rail that is off does not begin at 0 V.
        """
        taken = take_boot(waves, deck, self.board, self.boot)
        self.found[deck.corner.name] = taken
        found = []
        for c in forwards(self.board):
            mine = taken.channels[c.number]
            full = settled(self.board, c, deck.corner)
            held = c.coil.held(full, deck.corner)
            if self.boot.reset is None:
                found.append(Reading("highest current before the first frame", c.label, mine.peak, "A", full))
            else:
                fed = min(mine.fed, self.boot.until - self.boot.reset)
                found.append(Reading("time fed after the reset", c.label, fed, "s", self.board.power_up.reset_off.typ))
            found.append(Reading("energy before the first frame", c.label, mine.energy, "J", held))
            found.append(Reading("current at the first frame", c.label, mine.last, "A", full))
        if taken.cleared_until is not None and np.isfinite(taken.cleared_until):
            found.append(Reading("end of clear", "chain", taken.cleared_until, "s", taken.cleared_until))
        return tuple(found)


def settled(board: Board, channel: Channel, corner: Corner) -> float:
    """The coil's current once it has settled, from the supply's voltage, the winding and a charging resistor alone. [A]"""
    fed = corner.take(board.charging.resistance, "charging") if board.charging is not None else 0.0
    return float(corner.take(board.supply.voltage, "supply") / (channel.coil.ohms(corner, board.around) + fed))


def take_boot(waves: Waves, deck: Deck, board: Board, boot: Boot) -> BootReading:
    """Read a boot's waveforms.

    Raises
    ------
    NoConvergence
        If a rail that is off does not begin at 0 V: the search for the operating point went wrong.

    Notes
    -----
    From switch-on the coil's own current counts. After a reset what a coil still holds from its last pulse runs down through
    its clamp, whatever the outputs do: there it counts how long the coil is fed. It is fed while it carries a current that
    counts and the voltage across it drives that current on; once its switch has turned off, the clamp's voltage opposes it.
    The moment at which one turns into the other lies on the steep flank of that voltage, and hardly depends on where points are.
    """
    watch = _Watch(deck, board, boot)
    table = SignalTable(deck, tuple(our_name(name) for name in waves.names), watch.keys)
    for block in waves.blocks():
        watch.feed(block[:, 0], table.values(block))
    return watch.reading()


class _Watch:
    """Everything that is read of one boot, block by block."""

    def __init__(self, deck: Deck, board: Board, boot: Boot):
        self.deck, self.boot = deck, boot
        self.numbers = [c.number for c in forwards(board)]  # of every coil once
        shown = [name for name in _SHOWN if (None, name) in deck.signals]
        self.keys: tuple[Key, ...] = (
            *((c, "i_coil") for c in self.numbers),
            *((c, "v_coil") for c in self.numbers),
            *((None, name) for name in shown),
        )
        n = len(self.numbers)
        self.shown = {name: 2 * n + k for k, name in enumerate(shown)}
        self.peak, self.taken = Extremes(n), Integrals(n)
        self.last = np.zeros(n)
        self.counts = np.array([harmless(board, c, deck.corner) for c in forwards(board)])[:, None]
        self.fed = [Crossings(0.0) for _ in self.numbers]
        self.slices = Slices(np.linspace(0.0, boot.duration, SLICES + 1), len(shown))
        self.rails, self.highs = np.array(level_points(board.chain.register_, "high")).T
        corner = deck.corner
        self.full = {"v_rail": corner.take(board.supply.voltage, "supply"), "v_logic": board.logic.level(corner)}
        self.clear = Crossings(0.0) if "v_clear" in self.shown else None

    def feed(self, t: Floats, y: Floats) -> None:
        """Take a stretch of waveforms.

        Parameters
        ----------
        t : (m,) array
            [s]
        y : (n, m) array
            Rows in the order of `keys`.

        Raises
        ------
        NoConvergence
            If a rail that is off does not begin at 0 V.
        """
        if t[0] == 0.0 and self.boot.reset is None:
            for name, full in self.full.items():
                begun = float(y[self.shown[name], 0])
                if abs(begun) > _AT_REST * full:
                    raise NoConvergence(f"ngspice began with a {_SHOWN[name]} of {begun:.4g} V that is still off")
        self.slices.feed(t, y[list(self.shown.values())])
        if self.clear is not None:
            bound = np.interp(y[self.shown["v_logic"]], self.rails, self.highs)
            # Without a rail nothing is high, whatever the line's rounding errors say.
            over = np.where(bound > _AT_REST * self.full["v_logic"], y[self.shown["v_clear"]] - bound, -1.0)
            self.clear.feed(t, over)
        begins = self.boot.since if self.boot.reset is None else self.boot.reset
        n = len(self.numbers)
        if (part := between(begins, self.boot.until, t, y[: 2 * n])) is not None:
            current, volts = part[1][:n], part[1][n:]
            self.taken.feed(part[0], np.maximum(current * volts, 0.0))
            if self.boot.reset is None:
                self._uncommanded(part[0], np.abs(current))
            else:
                self._after_reset(part[0], current, volts)

    def _uncommanded(self, t: Floats, current: Floats) -> None:
        """Currents that nothing commanded: times (m,) [s], and (n, m). [A]"""
        self.peak.feed(t, current)
        self.last = current[:, -1]

    def _after_reset(self, t: Floats, current: Floats, volts: Floats) -> None:
        """Which coils are still fed: times (m,) [s], currents [A] and voltages [V] of the coils (n, m)."""
        driven = np.minimum(current / self.counts - 1, volts / self.full["v_rail"])
        for one, y in zip(self.fed, driven, strict=True):
            one.feed(t, y)
        if (late := between(self.boot.since, self.boot.until, t, np.where(driven >= 0, current, 0.0))) is not None:
            self._uncommanded(*late)

    def reading(self) -> BootReading:
        """What was found once every block was fed."""
        until = None
        if self.clear is not None:
            until = self.clear.first if self.clear.first is not None else np.inf
        return BootReading(
            self.deck.corner.name,
            {
                c: Uncommanded(
                    float(self.peak.high[k]),
                    float(self.peak.high_at[k]),
                    float(self.taken.total[k]),
                    float(self.last[k]),
                    self._fed(k),
                )
                for k, c in enumerate(self.numbers)
            },
            until,
            {
                name: Envelope(
                    _SHOWN[name],
                    self.deck.units[None, name],
                    self.slices.edges,
                    self.slices.low[k],
                    self.slices.high[k],
                )
                for k, name in enumerate(self.shown)
            },
        )

    def _fed(self, k: int) -> float:
        """How long after a reset a coil is still fed. [s]"""
        if self.boot.reset is None:
            return 0.0
        ended = self.fed[k].below_since
        return np.inf if ended is None else ended - self.boot.reset


def between(start: float, stop: float, t: Floats, rows: Floats) -> tuple[Floats, Floats] | None:
    """A stretch of signals from one time to another; None where it has no part of it.

    Parameters
    ----------
    start, stop : float
        [s]
    t : (m,) array
        [s]
    rows : (n, m) array

    Returns
    -------
    tuple of (k,) and (n, k) arrays, or None
        Ends that lie inside are interpolated.
    """
    part = from_time(start, t, rows)
    if part is None or part[0][0] >= stop:
        return None
    t, rows = part
    k = int(np.searchsorted(t, stop, side="left"))
    if k == len(t):
        return t, rows
    at_stop = rows[:, k - 1] + (stop - t[k - 1]) / (t[k] - t[k - 1]) * (rows[:, k] - rows[:, k - 1])
    return np.append(t[:k], stop), np.column_stack([rows[:, :k], at_stop])


def harmless(board: Board, channel: Channel, corner: Corner) -> float:
    """The uncommanded current from which on it counts: a share of the current that the coil lets go at. [A]

    Notes
    -----
    A coil that carries less than its release current lets go of what it holds, and cannot pick it up either. Where no
    release current was given a tenth of the settled current stands for it (`release_assumed` lists it).
    """
    release = channel.coil.harmless
    amperes = release.min if release is not None else _RELEASE_SHARE * settled(board, channel, corner)
    return float(board.power_up.harmless.typ * amperes)


def release_assumed(board: Board) -> Iterator[Assumption]:
    """What stands for release currents that were not given."""
    for channel in board.channels:
        if channel.coil.harmless is None:
            why = "not given; of a coil that lets go late, from memory"
            yield Assumption(
                f"coil {channel.coil_name}", channel.coil.harmless_name, "10 % of the settled current", why
            )
