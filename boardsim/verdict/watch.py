"""Readings taken from waveforms block by block. Each watch is fed stretches that share their border point."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


@dataclass
class Extremes:
    """Highest and lowest value of each of n signals, with the time of each."""

    n: int
    high: Floats = field(init=False)
    high_at: Floats = field(init=False)
    low: Floats = field(init=False)
    low_at: Floats = field(init=False)

    def __post_init__(self) -> None:
        self.high, self.low = np.full(self.n, -np.inf), np.full(self.n, np.inf)
        self.high_at, self.low_at = np.zeros(self.n), np.zeros(self.n)

    def feed(self, t: Floats, y: Floats) -> None:
        """Times (m,) [s] and values (n, m)."""
        rows = np.arange(self.n)
        top, bottom = y.argmax(axis=1), y.argmin(axis=1)
        higher, lower = y[rows, top] > self.high, y[rows, bottom] < self.low
        self.high[higher], self.high_at[higher] = y[rows, top][higher], t[top][higher]
        self.low[lower], self.low_at[lower] = y[rows, bottom][lower], t[bottom][lower]


@dataclass
class Integrals:
    """Time integrals of n signals (trapezoid rule)."""

    n: int
    total: Floats = field(init=False)

    def __post_init__(self) -> None:
        self.total = np.zeros(self.n)

    def feed(self, t: Floats, y: Floats) -> None:
        """Times (m,) [s] and values (n, m)."""
        self.total += np.trapezoid(y, t, axis=1)


@dataclass
class Falls:
    """How far the running total of n powers, less what is stored, ever falls below its highest value.

    Attributes
    ----------
    drop : (n,) array
        Largest fall. [J]
    spread : (n,) array
        Sum of the differences between the trapezoid rule and midpoint products: what the energies are
        uncertain by for want of points. [J]
    through : (n,) array
        Sum of the energies that went in or out. [J]
    most : (n,) array
        The most that each has stored. [J]
    rest : dict
        First values, for parts that are counted from their rest.
    """

    n: int
    drop: Floats = field(init=False)
    spread: Floats = field(init=False)
    through: Floats = field(init=False)
    most: Floats = field(init=False)
    _total: Floats = field(init=False)
    _top: Floats = field(init=False)
    rest: dict[tuple[int, str], float] = field(default_factory=dict)
    _first: Floats | None = None

    def __post_init__(self) -> None:
        self.drop, self.spread, self._total = np.zeros(self.n), np.zeros(self.n), np.zeros(self.n)
        self._top, self.through, self.most = np.zeros(self.n), np.zeros(self.n), np.zeros(self.n)

    def feed(self, t: Floats, pairs: list[list[tuple[Floats, Floats]]], stored: Floats) -> None:
        """Times (m,) [s]; per part its pairs of voltage and current (m,); stored energies (n, m). [J]"""
        dt = np.diff(t)
        if self._first is None:
            self._first = stored[:, 0]
        self.most = np.maximum(self.most, stored.max(axis=1))
        for k, terminals in enumerate(pairs):
            step = np.zeros_like(dt)
            for v, i in terminals:
                p = v * i
                step += 0.5 * (p[1:] + p[:-1]) * dt
                self.spread[k] += abs(float(np.sum(np.diff(v) * np.diff(i) * dt))) / 4
            self.through[k] += float(np.sum(np.abs(step)))
            taken = self._total[k] + np.concatenate([[0.0], np.cumsum(step)])
            self._total[k] = taken[-1]
            lost = taken - (stored[k] - self._first[k])
            top = np.maximum.accumulate(np.concatenate([[self._top[k]], lost]))
            self.drop[k] = max(self.drop[k], float(np.max(top[1:] - lost)))
            self._top[k] = top[-1]


@dataclass(frozen=True)
class Dip:
    """A time below a level. [s], [V]"""

    start: float
    lasting: float
    lowest: float
    at: float


@dataclass
class Dips:
    """Every time that a signal spends below a level, ends interpolated."""

    level: float
    found: list[Dip] = field(default_factory=list)
    lowest: float = np.inf
    lowest_at: float = 0.0
    _open: Dip | None = None

    def feed(self, t: Floats, y: Floats) -> None:
        """Times and values, both (m,)."""
        k = int(y.argmin())
        if y[k] < self.lowest:
            self.lowest, self.lowest_at = float(y[k]), float(t[k])
        below = y < self.level
        if not below.any() and self._open is None:
            return
        turns = np.flatnonzero(below[1:] != below[:-1])
        crossings = t[turns] + (self.level - y[turns]) / (y[turns + 1] - y[turns]) * (t[turns + 1] - t[turns])
        if below[0] and self._open is None:
            self._open = Dip(float(t[0]), 0.0, float(y[0]), float(t[0]))
        edges = [0, *(turns + 1).tolist(), len(t)]
        for a, b, start in zip(edges, edges[1:], [float(t[0]), *crossings.tolist()], strict=False):
            if not below[a]:
                continue
            at = a + int(y[a:b].argmin())
            begin = self._open.start if self._open else start
            low, low_at = float(y[at]), float(t[at])
            if self._open and self._open.lowest <= low:
                low, low_at = self._open.lowest, self._open.at
            end = float(crossings[np.searchsorted(turns + 1, b)]) if b < len(t) else float(t[-1])
            self._open = Dip(begin, end - begin, low, low_at)
            if b < len(t):
                self.found.append(self._open)
                self._open = None

    def all(self) -> list[Dip]:
        """The dips so far, with one that had not ended."""
        return [*self.found, *([self._open] if self._open else [])]


@dataclass(frozen=True)
class Avalanche:
    """One stretch in breakdown. [s], [J], [A], [V]"""

    start: float
    lasting: float
    energy: float
    current: float
    voltage: float


HYSTERESIS = 0.95  # of the breakdown voltage, below which a stretch of avalanche has ended


@dataclass
class Avalanches:
    """Every stretch in which a switch takes current at or above its breakdown voltage.

    A stretch ends where the voltage falls well below breakdown or the current ends: ripple about the breakdown voltage
    makes one stretch, not many.
    """

    breakdown: float
    found: list[Avalanche] = field(default_factory=list)
    _open: Avalanche | None = None

    def feed(self, t: Floats, v: Floats, i: Floats) -> None:
        """Times, drain voltages and drain currents, all (m,)."""
        if v.max() < HYSTERESIS * self.breakdown:
            self._close()
            return
        near = (v >= HYSTERESIS * self.breakdown) & (i > 0)
        starts = np.flatnonzero(near & ~np.concatenate([[False], near[:-1]])).tolist()
        ends = np.flatnonzero(near & ~np.concatenate([near[1:], [False]])).tolist()
        if not near[0]:
            self._close()
        for a, b in zip(starts, ends, strict=True):
            # The steps into and out of the stretch count whole: with few points that errs on the safe side.
            lo, hi = max(a - 1, 0), min(b + 2, len(t))
            energy = float(np.trapezoid(np.maximum(v * i, 0)[lo:hi], t[lo:hi]))
            current = max(float(i[a : b + 1].max()), self._crossing(v, i, a - 1), self._crossing(v, i, b))
            one = Avalanche(float(t[a]), float(t[b] - t[a]), energy, current, float(v[a : b + 1].max()))
            if a == 0 and self._open is not None:
                first = self._open
                one = Avalanche(
                    first.start,
                    one.start + one.lasting - first.start,
                    first.energy + one.energy,
                    max(first.current, one.current),
                    max(first.voltage, one.voltage),
                )
            self._open = one
            if b < len(t) - 1:
                self._close()

    def _crossing(self, v: Floats, i: Floats, k: int) -> float:
        """The current at which the voltage passes the level between point k and the next; 0 if it does not. [A]

        The switch turns off while its voltage rises: the current at the first point in the stretch alone would be a
        matter of where the points lie.
        """
        level = HYSTERESIS * self.breakdown
        if not 0 <= k < len(v) - 1 or (v[k] < level) == (v[k + 1] < level):
            return 0.0
        return float(i[k] + (level - v[k]) / (v[k + 1] - v[k]) * (i[k + 1] - i[k]))

    def _close(self) -> None:
        if self._open is not None and self._open.voltage >= self.breakdown:
            self.found.append(self._open)
        self._open = None

    def all(self) -> list[Avalanche]:
        """The stretches so far, with one that had not ended."""
        at_end = [self._open] if self._open is not None and self._open.voltage >= self.breakdown else []
        return [*self.found, *at_end]


@dataclass
class Samples:
    """Values of one signal at given times (interpolated)."""

    times: Floats
    values: Floats = field(init=False)

    def __post_init__(self) -> None:
        self.values = np.full(len(self.times), np.nan)

    def feed(self, t: Floats, y: Floats) -> None:
        """Times and values, both (m,)."""
        here = (self.times >= t[0]) & (self.times <= t[-1])
        if here.any():
            self.values[here] = np.interp(self.times[here], t, y)


@dataclass
class TimeAbove:
    """How long a signal is at or above a level in all (ends interpolated), and since when."""

    level: float
    total: float = 0.0
    first: float | None = None

    def feed(self, t: Floats, y: Floats) -> None:
        """Times and values, both (m,)."""
        above = y >= self.level
        if not above.any():
            return
        over = np.maximum(y - self.level, 0.0)
        change = np.abs(np.diff(y))
        crossing = above[1:] != above[:-1]
        share = (above[1:] & above[:-1]).astype(np.float64)
        share[crossing] = np.maximum(over[1:], over[:-1])[crossing] / change[crossing]
        self.total += float(np.sum(np.diff(t) * share))
        if self.first is None:
            self.first = float(t[above.argmax()])


@dataclass
class Slices:
    """Lowest and highest value of n signals per slice of time; slices without a point are interpolated."""

    edges: Floats
    n: int
    low: Floats = field(init=False)
    high: Floats = field(init=False)

    def __post_init__(self) -> None:
        self.low = np.full((self.n, len(self.edges) - 1), np.inf)
        self.high = np.full((self.n, len(self.edges) - 1), -np.inf)

    def feed(self, t: Floats, y: Floats) -> None:
        """Times (m,) [s] and values (n, m)."""
        count = len(self.edges) - 1
        place = np.clip(np.searchsorted(self.edges, t, side="right") - 1, 0, count - 1)
        inner = np.flatnonzero((self.edges >= t[0]) & (self.edges <= t[-1]))
        for k in range(self.n):
            np.minimum.at(self.low[k], place, y[k])
            np.maximum.at(self.high[k], place, y[k])
            at_edges = np.interp(self.edges[inner], t, y[k])
            for side in (inner - 1, inner):
                ok = (side >= 0) & (side < count)
                np.minimum.at(self.low[k], side[ok], at_edges[ok])
                np.maximum.at(self.high[k], side[ok], at_edges[ok])
