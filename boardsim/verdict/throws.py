"""What a latching coil sees of every pulse: the current that lasts, the states that it takes, and what disturbs it."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from boardsim.parts.rules import LatchRule
from boardsim.verdict.findings import Floats
from boardsim.verdict.watch import Dips

_FINE = 1e-9  # share of its highest, to which a lasting current is found


@dataclass(frozen=True)
class Thrown:
    """One pulse of a channel, and what its coil saw of it until the next pulse in either direction.

    Attributes
    ----------
    on, off, until : float
        When the pulse begins and ends, and when the next one begins, or the run ends. [s]
    peak, peak_at : float
        Highest current in the direction of the pulse [A], and when. [s]
    lasting, since : float
        Highest current that lasts without a break for as long as a flip takes [A], and from when it does. [s]
    rail : float
        Coil rail when the pulse begins. [V]
    already : bool
        Whether the coil was known to be where the pulse sends it.
    lost : float or None
        When the coil flips back before the next pulse, though it was where this one sends it. [s]
    """

    on: float
    off: float
    until: float
    peak: float
    peak_at: float
    lasting: float
    since: float
    rail: float
    already: bool
    lost: float | None


@dataclass
class Throws:
    """Follows the current of a latching coil, counted in the direction of one channel, block by block.

    Attributes
    ----------
    level, after : float
        Current that flips it [A] and how long it has to last [s]; infinite where not known.
    starts : int
        State before the first pulse: 1, -1, or 0 where nobody knows.
    ways : tuple of (n, 2) array
        When the coil is driven this channel's way, and the other way. [s]
    stop : float
        End of the run. [s]
    wrong, wrong_at : float
        Highest current against the coil's state while nobody drives it [A], and when [s]; of either sign as long as the
        state is not known.
    full : float
        Coil rail when the run begins. [V]
    """

    level: float
    after: float
    starts: int
    ways: tuple[Floats, Floats]
    stop: float
    wrong: float = 0.0
    wrong_at: float = 0.0
    full: float = float("nan")
    _forth: Dips = field(init=False)
    _back: Dips = field(init=False)
    _courses: dict[int, list[Floats]] = field(default_factory=dict)
    _done: dict[int, tuple[float, float, float, float]] = field(default_factory=dict)
    _rails: dict[int, float] = field(default_factory=dict)

    @staticmethod
    def of(rule: LatchRule, own: Floats, others: Sequence[Floats], stop: float) -> Throws:
        """What is watched for a rule, of a channel that is on at `own` times and `others` that drive its coil the other way."""
        level = np.inf if rule.at.value is None else rule.at.value
        after = np.inf if rule.after.value is None else rule.after.value
        back = np.concatenate([*others, np.empty((0, 2))])
        return Throws(level, after, rule.starts, (own, back[np.argsort(back[:, 0])]), stop)

    def __post_init__(self) -> None:
        self._forth, self._back = Dips(-self.level), Dips(-self.level)
        begins = np.unique(np.concatenate([way[:, 0] for way in self.ways]))
        # Window 0 is what comes before every pulse, window k what follows the k-th beginning.
        self._begins = begins[begins < self.stop]
        self._signs = np.array([self.starts, *(1 if at in self.ways[0][:, 0] else -1 for at in self._begins)])

    def feed(self, t: Floats, i: Floats, rail: Floats) -> None:
        """Times [s], currents [A] and the coil rail [V], all (m,); each stretch begins with the last point of the one before."""
        if np.isnan(self.full):
            self.full = float(rail[0])
        # What counts is at or above the level, a dip is below it: the two differ in a single point.
        self._forth.feed(t, -i)
        self._back.feed(t, i)
        edges = self._begins[(self._begins >= t[0]) & (self._begins <= t[-1])]
        for at in edges:
            self._rails[int(np.searchsorted(self._begins, at)) + 1] = float(np.interp(at, t, rail))
        # A window's course begins and ends with a point at its very edge, however few lie within.
        times = np.union1d(t, edges)
        course = np.stack([times, np.interp(times, t, i)])
        for k in np.unique(np.searchsorted(self._begins, times, side="right")):
            if k and self._signs[k] > 0:
                until = self._begins[k] if k < len(self._begins) else np.inf
                self._courses.setdefault(int(k), []).append(
                    course[:, (times >= self._begins[k - 1]) & (times <= until)]
                )
        for k in [k for k in self._courses if k < len(self._begins) and self._begins[k] <= t[-1]]:
            self._done[k] = self._seen(k)
        window = np.searchsorted(self._begins, t, side="right")
        signs = self._signs[window]
        against = np.where(signs == 0, np.abs(i), -signs * i)
        against = np.where(self._driven(t), 0.0, against)
        k = int(against.argmax())
        if against[k] > self.wrong:
            self.wrong, self.wrong_at = float(against[k]), float(t[k])

    @property
    def flips(self) -> tuple[tuple[float, int], ...]:
        """When which state was surely reached: (time, 1 or -1), by time; once for every stretch of current that was long enough. [s]"""
        found = [
            (d.start + self.after, s)
            for s, dips in ((1, self._forth), (-1, self._back))
            for d in dips.all()
            if d.lasting >= self.after
        ]
        return tuple(sorted(found))

    @property
    def strays(self) -> tuple[float, ...]:
        """When it surely flips against what was last commanded, or before anything was, while nobody drives it. [s]"""
        found = []
        for at, sign in self.flips:
            commanded = self._signs[int(np.searchsorted(self._begins, at, side="right"))]
            if sign != commanded and not self._driven(np.array([at]))[0]:
                found.append(at)
        return tuple(found)

    def _driven(self, t: Floats) -> NDArray[np.bool_]:
        """Whether it is driven, either way, at times (m,). [s]"""
        one, other = (np.searchsorted(way.ravel(), t, side="right") % 2 == 1 for way in self.ways)
        driven: NDArray[np.bool_] = one | other
        return driven

    def all(self) -> tuple[Thrown, ...]:
        """This channel's pulses, one by one."""
        found = []
        own, flips = self.ways[0], self.flips
        times = np.array([at for at, _ in flips])
        for k, (on, until) in enumerate(itertools.pairwise([*self._begins, self.stop]), 1):
            if self._signs[k] < 0:
                continue
            off = min(float(own[np.searchsorted(own[:, 0], on), 1]), self.stop)
            peak, peak_at, lasting, since = self._done.get(k) or self._seen(k, keep=True)
            # Its state as far as it is known: what it was at first, and what has surely flipped it since.
            before, after = (int(np.searchsorted(times, at, side="right")) for at in (on, until))
            already = bool(self.starts) and (flips[before - 1][1] if before else self.starts) > 0
            there = already or lasting >= self.level
            lost = flips[after - 1][0] if there and after > before and flips[after - 1][1] < 0 else None
            found.append(
                Thrown(float(on), off, float(until), peak, peak_at, lasting, since, self._rails[k], already, lost)
            )
        return tuple(found)

    def _seen(self, k: int, *, keep: bool = False) -> tuple[float, float, float, float]:
        """Highest current of a window and when, the highest that lasts for a flip and since when; its course is then let go."""
        t, i = np.concatenate(self._courses[k] if keep else self._courses.pop(k), axis=1)
        top = int(i.argmax())
        return float(i[top]), float(t[top]), *lasting_current(t, i, self.after)


def lasting_current(t: Floats, i: Floats, after: float) -> tuple[float, float]:
    """The highest current that lasts without a break for a time.

    Parameters
    ----------
    t, i : (n,) array
        Times [s] and currents [A], straight lines between them.
    after : float
        [s]

    Returns
    -------
    current, since : float
        The largest I such that i >= I for that long, 0 where i > 0 is not [A]; and from when on it is [s].

    Notes
    -----
    How long i >= I lasts only grows as I falls, so that halving the interval finds it, to 1e-9 of the highest current. Unlike that time it
    moves no faster than the current itself where the current is flat: a reading that an audit can hold.

    Examples
    --------
    A triangle of 1 A and 4 ms is above half of it for 2 ms:

    >>> import numpy as np
    >>> lasting_current(np.array([0.0, 2e-3, 4e-3]), np.array([0.0, 1.0, 0.0]), 2e-3)
    (0.5, 0.001)
    """
    low, high = 0.0, float(i.max())
    lasts, since = _above(t, i, low)
    if lasts < after or high <= 0:
        return 0.0, float(t[0])
    while high - low > _FINE * float(i.max()):
        level = (low + high) / 2
        lasts, begin = _above(t, i, level)
        if lasts >= after:
            low, since = level, begin
        else:
            high = level
    return round(low, 9), since


def _above(t: Floats, i: Floats, level: float) -> tuple[float, float]:
    """How long a current stays at or above a level at most, and from when. [s]"""
    over = i >= level
    turns = np.flatnonzero(over[1:] != over[:-1])
    crossings = t[turns] + (level - i[turns]) / (i[turns + 1] - i[turns]) * (t[turns + 1] - t[turns])
    edges = [*([t[0]] if over[0] else []), *crossings, *([t[-1]] if over[-1] else [])]
    lengths = [(float(end - start), float(start)) for start, end in zip(edges[::2], edges[1::2], strict=True)]
    return max(lengths, key=lambda one: one[0], default=(0.0, float(t[0])))
