"""What a coil moves between two stops, pulse by pulse: when it arrives, how fast, how far it gets, when it is back."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from boardsim.firing.schedule import Firing
from boardsim.verdict.findings import Floats

IN = 0.9  # share of the travel from which it counts as held in: rebounds of the last moments stay above, from memory
BACK = 0.02  # share of the travel below which it counts as back at its rest, from memory


@dataclass(frozen=True)
class Travelled:
    """One pulse of a channel, and what it moved.

    Attributes
    ----------
    on, off, until : float
        When the pulse begins and ends, and when the next begins, or the run ends. [s]
    last : bool
        Whether no other pulse follows.
    hits : tuple of (time, speed)
        Every arrival at the far stop until then. [s], [m/s]
    farthest : float
        [m]
    began, ended, left : float
        Position when the pulse begins, when it ends, and when the next begins. [m]
    back : float or None
        Since when it has been back at its rest; None where it is not when the next pulse begins. [s]
    commanded : float or None
        When the firmware meant it to begin, before timer and register frame; None where nobody knows. [s]
    jitter : float
        How much later still everything may be. [s]
    """

    on: float
    off: float
    until: float
    last: bool
    hits: tuple[tuple[float, float], ...]
    farthest: float
    began: float
    ended: float
    left: float
    back: float | None
    commanded: float | None = None
    jitter: float = 0.0

    @property
    def until_on(self) -> float:
        """How long after its command the output turns on at the latest; 0 where no command is known. [s]"""
        return 0.0 if self.commanded is None else self.on - self.commanded + self.jitter


def commands(firing: Firing, channel: int) -> dict[float, float]:
    """When the pulses of a channel were asked for, by the time at which its output turns on.

    Parameters
    ----------
    firing : Firing
        Of a capture nobody knows what was meant: nothing.
    channel : int

    Returns
    -------
    dict of float to float
        [s]
    """
    return {m.start: m.pulse.start for m in firing.moved if m.pulse.channel == channel}


def arrival(points: Floats, travel: float) -> tuple[float, float]:
    """When and how fast a mass meets its stop, told from its approach.

    Parameters
    ----------
    points : (3, n) array
        Time [s], position [m] and speed [m/s] of the last two points before the stop, or the last one, and of the first beyond it.
    travel : float
        Where the stop is. [m]

    Returns
    -------
    tuple of float
        [s], [m/s]

    Notes
    -----
    The point beyond has been slowed by the stop already, the more the longer the step: a straight line to it makes the blow too
    soft, by a fifth and more of its energy where a step is as long as the contact. So the mass goes on from the last free point with the
    acceleration a that it had between the last two: v^2 = v_1^2 + 2 a (s - x_1), t = t_1 + 2 (s - x_1) / (v_1 + v). Torricelli's
    equation; exact for a force that stays what it was for one step.

    Examples
    --------
    >>> import numpy as np
    >>> arrival(np.array([[0.0, 1.0, 1.6], [0.0, 0.5, 1.0], [0.0, 1.0, 0.2]]), 0.78)
    (1.2489995996796797, 1.2489995996796797)
    """
    t, x, v = points[:, -2]
    way = travel - x
    free = points.shape[1] > 2 and points[1, 0] < travel
    a = (v - points[2, 0]) / (t - points[0, 0]) if free else 0.0
    square = v * v + 2 * a * way
    if v > 0 and square > 0:
        speed = float(np.sqrt(square))
        return float(t + 2 * way / (v + speed)), speed
    share = way / (points[1, -1] - x)  # not under way yet: nothing but the line is known
    return tuple(float(points[row, -2] + share * (points[row, -1] - points[row, -2])) for row in (0, 2))  # type: ignore[return-value]


@dataclass
class Strokes:
    """Follows a position and a speed block by block.

    Attributes
    ----------
    travel : float
        From stop to stop. [m]
    on : (n, 2) array
        When the channel is turned on and off. [s]
    start, stop : float
        Of the run. [s]
    commanded : mapping of float to float
        From `commands`. [s]
    jitter : float
        How much later still edges may come. [s]
    """

    travel: float
    on: Floats
    start: float
    stop: float
    commanded: Mapping[float, float] = field(default_factory=dict)
    jitter: float = 0.0
    _hits: list[tuple[float, float]] = field(default_factory=list)
    _downs: list[float] = field(default_factory=list)
    _at: dict[float, float] = field(default_factory=dict)
    _far: dict[int, float] = field(default_factory=dict)
    _before: Floats | None = None
    _last: float = float("nan")

    def __post_init__(self) -> None:
        self.on = self.on[(self.on[:, 0] >= self.start) & (self.on[:, 0] < self.stop)]
        self._edges = np.array([*self.on[:, 0], self.stop])

    def feed(self, t: Floats, x: Floats, v: Floats) -> None:
        """Times [s], positions [m] and speeds [m/s], all (m,); each stretch begins with the last point of the one before."""
        if not len(self.on):
            return
        held = self._before if self._before is not None else np.empty((3, 0))
        rows = np.concatenate([held, np.stack([t, x, v])], axis=1)
        for k in np.flatnonzero((rows[1, :-1] < self.travel) & (rows[1, 1:] >= self.travel)):
            if k >= held.shape[1] or not held.shape[1]:
                self._hits.append(arrival(rows[:, max(k - 1, 0) : k + 2], self.travel))
        self._before, self._last = rows[:, -2:-1], float(x[-1])
        rest = BACK * self.travel
        for k in np.flatnonzero((x[:-1] > rest) & (x[1:] <= rest)):
            self._downs.append(float(t[k] + (rest - x[k]) / (x[k + 1] - x[k]) * (t[k + 1] - t[k])))
        for at in (*self._edges, *self.on[:, 1]):
            if t[0] <= at <= t[-1]:
                self._at[float(at)] = float(np.interp(at, t, x))
        pulse = np.searchsorted(self._edges, t, side="right") - 1
        for k in np.unique(pulse[pulse >= 0]):
            self._far[int(k)] = max(self._far.get(int(k), -np.inf), float(x[pulse == k].max()))

    def all(self) -> tuple[Travelled, ...]:
        """Pulse by pulse."""
        found = []
        for k, (on, off) in enumerate(self.on):
            until = float(self._edges[k + 1])
            hits = tuple(hit for hit in self._hits if on <= hit[0] < until)
            left = self._at.get(until, self._last)
            downs = [at for at in self._downs if off <= at < until]
            rest = BACK * self.travel
            back = None if left > rest else downs[-1] if downs else float(off)
            far = self._far.get(k, float("nan"))
            began, ended = self._at[float(on)], self._at.get(float(off), left)
            last, asked = k == len(self.on) - 1, self.commanded.get(float(on))
            found.append(
                Travelled(float(on), float(off), until, last, hits, far, began, ended, left, back, asked, self.jitter)
            )
        return tuple(found)


def energy(mass: float, speed: float) -> float:
    """What a blow brings: m v^2 / 2. [kg], [m/s] -> [J]"""
    return 0.5 * mass * speed**2
