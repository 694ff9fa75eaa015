"""Stretches cut out of waveforms, block by block: exact at both ends, and the energy of one event within them."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from boardsim.verdict.watch import Floats


def between(t: Floats, rows: Floats, start: float, stop: float) -> tuple[Floats, Floats]:
    """Cut a stretch out of waveforms.

    Parameters
    ----------
    t : (m,) array
        Rising. [s]
    rows : (n, m) array
    start, stop : float
        [s]

    Returns
    -------
    times : (k,) array
        From `start` to `stop`, both among them where they lie between points (interpolated). [s]
    values : (n, k) array
    """
    inside = (t >= start) & (t <= stop)
    ends = [end for end in (start, stop) if t[0] < end < t[-1] and end not in t[inside]]
    times = np.concatenate([t[inside], ends])
    at_ends = np.array([np.interp(ends, t, row) for row in rows]).reshape(len(rows), len(ends))
    order = np.argsort(times, kind="stable")
    return times[order], np.hstack([rows[:, inside], at_ends])[:, order]


@dataclass
class RunningEnergy:
    """The energy of one avalanche while it goes on, counted as `Avalanches` counts it.

    E(t) = integral of max(v i, 0) from the avalanche's first point on, with the steps into and out of it whole; it stays
    at its value when the avalanche has ended.

    Attributes
    ----------
    at : float
        The avalanche's first point. [s]
    level : float
        The voltage below which it has ended. [V]
    energy : float
        So far. [J]
    end : float
        The last point that counts, so far. [s]
    """

    at: float
    level: float
    energy: float = 0.0
    end: float = field(init=False)
    _begun: bool = False
    _over: bool = False

    def __post_init__(self) -> None:
        self.end = self.at

    def feed(self, t: Floats, v: Floats, i: Floats) -> Floats:
        """Times [s], voltages [V] and currents [A], all (m,); the energy at these times (m,). [J]"""
        near = (v >= self.level) & (i > 0) & (t >= self.at)
        if self._over or not (self._begun or near.any()):
            return np.full(len(t), self.energy)
        first = 0 if self._begun else int(near.argmax())
        self._begun = True
        past = np.flatnonzero(~near[first:])
        stop = first + int(past[0]) if len(past) else len(t) - 1  # the point to which the last step leads
        self._over = len(past) > 0
        power = np.maximum(v * i, 0.0)
        steps = 0.5 * (power[1:] + power[:-1]) * np.diff(t)
        place = np.arange(len(steps))
        steps[(place < first - 1) | (place >= stop)] = 0.0
        running: Floats = self.energy + np.concatenate([[0.0], np.cumsum(steps)])
        self.energy, self.end = float(running[-1]), float(t[stop])
        return running
