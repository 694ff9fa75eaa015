"""Every single pulse of a signal: its peak, how long it lasts, and its integral, block by block."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from boardsim.verdict.findings import Floats

FAINT = 0.01  # of the highest value so far: what is below is between pulses


@dataclass(frozen=True)
class OnePulse:
    """One pulse of a signal.

    Attributes
    ----------
    start, at : float
        When it begins, and when it is highest. [s]
    peak : float
        [unit of the signal]
    lasting : float
        From its first to its last crossing of the share of its peak. [s]
    total : float
        Its time integral. [unit of the signal times s]
    """

    start: float
    at: float
    peak: float
    lasting: float
    total: float


@dataclass
class Pulses:
    """Every stretch in which a signal is above a faint share of the highest value it has had so far.

    The steps into and out of a stretch count whole: with few points that errs on the safe side.

    Attributes
    ----------
    share : float
        Of its own peak, above which a pulse counts as lasting. [1]
    """

    share: float
    found: list[OnePulse] = field(default_factory=list)
    _high: float = 0.0
    _times: list[Floats] = field(default_factory=list)
    _values: list[Floats] = field(default_factory=list)

    def feed(self, t: Floats, y: Floats) -> None:
        """Times [s] and values, both (m,); each stretch begins with the last point of the one before."""
        self._high = max(self._high, float(y.max()))
        near = y > FAINT * self._high
        if not near[0]:
            self._close()
        if not near.any():
            return
        starts = np.flatnonzero(near & ~np.concatenate([[False], near[:-1]])).tolist()
        ends = np.flatnonzero(near & ~np.concatenate([near[1:], [False]])).tolist()
        for a, b in zip(starts, ends, strict=True):
            goes_on = a == 0 and bool(self._times)
            if not goes_on:
                self._close()
            lo, hi = (1 if goes_on else max(a - 1, 0)), min(b + 2, len(t))
            self._times.append(t[lo:hi].copy())
            self._values.append(np.maximum(y[lo:hi], 0.0))
            if b < len(t) - 1:
                self._close()

    def _close(self) -> None:
        if self._times:
            self.found.append(self._measured())
        self._times, self._values = [], []

    def _measured(self) -> OnePulse:
        t, y = np.concatenate(self._times), np.concatenate(self._values)
        k = int(y.argmax())
        peak = float(y[k])
        above = np.flatnonzero(y >= self.share * peak)
        first, last = int(above[0]), int(above[-1])
        begin = self._crossing(t, y, first - 1, peak) if first > 0 else float(t[0])
        end = self._crossing(t, y, last, peak) if last < len(t) - 1 else float(t[-1])
        return OnePulse(float(t[0]), float(t[k]), peak, end - begin, float(np.trapezoid(y, t)))

    def _crossing(self, t: Floats, y: Floats, k: int, peak: float) -> float:
        """Where the straight line between points k and k + 1 is at the share of the peak. [s]"""
        rise = y[k + 1] - y[k]
        return float(t[k] + (self.share * peak - y[k]) / rise * (t[k + 1] - t[k])) if rise else float(t[k])

    def all(self) -> list[OnePulse]:
        """The pulses so far, with one that had not ended."""
        return [*self.found, *([self._measured()] if self._times else [])]
