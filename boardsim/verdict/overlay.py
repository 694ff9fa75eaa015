"""A measured trace over the computed waveform of one pulse: where the pulse is in it, how far both are apart."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from boardsim.circuit.deck import Deck
from boardsim.engine.waves import Waves
from boardsim.errors import InputError
from boardsim.quantities import in_units
from boardsim.verdict.cutting import between
from boardsim.verdict.findings import Floats, Reading
from boardsim.verdict.readings import SignalTable, our_name
from boardsim.verdict.trace import FEWEST, Trace

UNITS: Mapping[str, str] = {"current": "A", "voltage": "V"}
_SIGNALS = {"current": "i_coil", "voltage": "v_coil"}
_HALF = 0.5  # of the swing: beyond it a pulse has begun
_FOOT, _KNEE = 0.05, 0.4  # shares of the swing between which a rising current tells where it began
_LEAST_SWING = 8.0  # times the noise; less is no pulse
_LEAST_SHARE = 0.02  # of the computed peak; less is no pulse of this coil
_LATE = 0.02  # share of the pulse that may be missing at its beginning


@dataclass(frozen=True)
class Course:
    """One pulse of one channel as it was computed.

    Attributes
    ----------
    t : (n,) array
        Rising; the pattern's time. [s]
    current, voltage : (n,) array
        Through the coil [A]; across it [V].
    on, off : float
        When its output turns it on and off. [s]
    """

    t: Floats
    current: Floats
    voltage: Floats
    on: float
    off: float

    @property
    def waves(self) -> dict[str, Floats]:
        """Both by their names: "current" [A], "voltage" [V]."""
        return {"current": self.current, "voltage": self.voltage}


@dataclass
class CourseWatch:
    """Cuts a pulse out of the runs of a deck, and keeps that of the last run.

    Attributes
    ----------
    channel : int
    start, stop : float
        What is cut out. [s]
    on, off : float
        When the output turns the channel on and off. [s]
    """

    channel: int
    start: float
    stop: float
    on: float
    off: float
    found: Course | None = None

    def __call__(self, waves: Waves, deck: Deck) -> tuple[Reading, ...]:
        """Cut, and read what a run and its repeat must agree on."""
        keys = [(self.channel, name) for name in _SIGNALS.values()]
        table = SignalTable(deck, tuple(our_name(name) for name in waves.names), keys)
        pieces: list[tuple[Floats, Floats]] = []
        for block in waves.blocks():
            t = block[:, 0] + deck.window.start
            if t[-1] >= self.start and t[0] <= self.stop:
                pieces.append(between(t, table.values(block), self.start, self.stop))
        t = np.concatenate([p[0] for p in pieces])
        rows = np.hstack([p[1] for p in pieces])
        new = np.concatenate([[True], np.diff(t) > 0])  # blocks share a point
        t, rows = t[new], rows[:, new]
        self.found = Course(t, rows[0], rows[1], self.on, self.off)
        charge = float(np.trapezoid(rows[0], t))
        peak, flux = float(np.abs(rows[0]).max()), float(np.trapezoid(np.abs(rows[1]), t))
        label = f"channel {self.channel}"
        return (
            Reading("peak coil current", label, peak, "A", peak),
            Reading("coil current times time", label, charge, "C", abs(charge)),
            Reading("coil voltage times time", label, flux, "V s", flux),
        )


@dataclass(frozen=True)
class Difference:
    """Measured less computed, of one quantity, from before the turn-on to the end of what both show.

    Attributes
    ----------
    quantity, unit : str
    t : (n,) array
        The pattern's time. [s]
    measured, computed : (n,) array
        At these times. [unit]
    largest, at : float
        The value of the largest magnitude [unit], and when [s].
    mean, rms : float
        Over time. [unit]
    peak : float
        Largest magnitude of what was computed, for shares. [unit]
    """

    quantity: str
    unit: str
    t: Floats
    measured: Floats
    computed: Floats
    largest: float
    at: float
    mean: float
    rms: float
    peak: float

    @property
    def share(self) -> float:
        """The largest difference as a share of the peak; 0 where nothing differs. [1]"""
        return abs(self.largest) / self.peak if self.peak else (math.inf if self.largest else 0.0)


@dataclass(frozen=True)
class Overlay:
    """A trace laid over a computed pulse.

    Attributes
    ----------
    course : Course
    shift : float
        What is added to the trace's times to get the pattern's. [s]
    begins : float
        Where the pulse begins in the trace's own time. [s]
    told_by : str
        What told it.
    differences : tuple of Difference
        Current first, where there is one.
    baseline : mapping of quantity to float
        Median of the trace before the pulse. [A], [V]
    """

    course: Course
    shift: float
    begins: float
    told_by: str
    differences: tuple[Difference, ...]
    baseline: Mapping[str, float] = field(default_factory=dict)


def lay_over(trace: Trace, course: Course, at: float | None = None) -> Overlay:
    """Align a trace with a computed pulse, and take the differences.

    Parameters
    ----------
    trace : Trace
    course : Course
    at : float
        When the output turns on, in the trace's own time; found in the trace if absent. [s]

    Raises
    ------
    InputError
        If the pulse is not found in the trace, has the other sign, or is not all in it.

    Notes
    -----
    The same feature of both waveforms is laid at one time: where the voltage across the coil passes half of its value or, without a
    voltage, where the current begins. That is the root of a parabola through the current's rise from 5 to 40 % of its swing (a noise
    of 1 % moves it by some thousandths of L/R), and not a crossing of some level, which a larger inductance would move.
    """
    begins, told_by = at, "as told"
    if begins is None:
        told_by = "voltage" if trace.voltage is not None else "current"
        begins = _begin(trace, course, told_by)
        shift = _begin(course, course, told_by) - begins
    else:
        shift = course.on - begins
    t = trace.t + shift
    _covers(trace, t, course)
    inside = (t >= course.t[0]) & (t <= course.t[-1])
    before = t < course.on
    baseline = {name: float(np.median(y[before])) for name, y in trace.waves.items() if before.sum() >= FEWEST // 4}
    found = tuple(
        _difference(name, t[inside], y[inside], np.interp(t[inside], course.t, course.waves[name]))
        for name, y in trace.waves.items()
    )
    return Overlay(course, shift, begins, told_by, found, baseline)


def _difference(quantity: str, t: Floats, measured: Floats, computed: Floats) -> Difference:
    apart = measured - computed
    k = int(np.argmax(np.abs(apart)))
    span = float(t[-1] - t[0])
    mean = float(np.trapezoid(apart, t)) / span
    rms = math.sqrt(float(np.trapezoid(apart**2, t)) / span)
    peak = float(np.abs(computed).max())
    return Difference(quantity, UNITS[quantity], t, measured, computed, float(apart[k]), float(t[k]), mean, rms, peak)


def _covers(trace: Trace, t: Floats, course: Course) -> None:
    """Refuse a trace that does not show all of the pulse, from before its turn-on to its turn-off."""
    width = course.off - course.on
    if t[0] > course.on + _LATE * width:
        raise InputError(
            f"{trace.path}: begins {in_units(float(t[0]) - course.on, 's')} after the pulse's turn-on; record from before it on (trigger "
            "delay), or say another moment with --at"
        )
    if t[-1] < course.off:
        raise InputError(
            f"{trace.path}: ends {in_units(float(t[-1]) - course.on, 's')} after the turn-on, and the pulse is on for {in_units(width, 's')}: "
            "record all of it, or choose a shorter pulse with --pulse"
        )
    count = int(((t >= course.on) & (t <= course.off)).sum())
    if count < FEWEST:
        raise InputError(
            f"{trace.path}: has {count} points while the coil is on, and it takes at least {FEWEST} to compare: record with a shorter time base"
        )


def _begin(wave: Trace | Course, course: Course, quantity: str) -> float:
    """Where a pulse begins, in the wave's own time. [s]

    Raises
    ------
    InputError
        If there is none, or it has the other sign.
    """
    y = wave.waves[quantity]
    t, unit = wave.t, UNITS[quantity]
    base = float(y[0]) if isinstance(wave, Course) else float(np.median(y[: max(3, len(y) // 100)]))
    away = y - base
    computed = float(np.abs(course.waves[quantity]).max())
    evenly = np.linspace(course.on, course.off, 999)[1:-1]  # the computed points crowd at edges
    settled = float(np.median(np.interp(evenly, course.t, course.waves[quantity])))
    noise = noise_of(y)
    # What a turn-off gives is a higher voltage than what the turn-on does: the computed one tells what to look for. Of a current not the
    # tallest spike.
    swing = abs(settled) if quantity == "voltage" else float(np.sort(np.abs(away))[-max(2, len(y) // 500)])
    where = f"{getattr(wave, 'path', 'computed waveform')}: {quantity}"
    span = f"from {in_units(float(y.min()), unit)} to {in_units(float(y.max()), unit)}"
    if swing < max(_LEAST_SWING * noise, _LEAST_SHARE * computed):
        raise InputError(
            f"{where}: no pulse found: it runs {span}, with {in_units(noise, unit)} of noise, where a peak of {in_units(computed, unit)} was "
            "computed; check the column and its scale, or say when it turns on with --at"
        )
    beyond = np.abs(away) >= _HALF * swing
    first = np.flatnonzero(beyond[:-1] & beyond[1:])  # two points: one is a spike
    if not len(first):
        raise InputError(
            f"{where}: no pulse found: it runs {span} and never stays beyond half of {in_units(swing, unit)}; check the column and its scale, or "
            "say when it turns on with --at"
        )
    k = int(first[0])
    if away[k] * settled < 0:
        remedy = "--current-scale" if quantity == "current" else "--voltage-scale"
        raise InputError(
            f"{where}: moves by {in_units(float(away[k]), unit)} where the computed one goes to {in_units(settled, unit)}: the wrong sign; turn the probe, or give "
            f"{remedy} with a minus. If the trace begins within a pulse, record from before it on"
        )
    rise = away * np.sign(away[k])
    if quantity == "voltage":
        level = _HALF * swing
        return float(np.interp(level, rise[k - 1 : k + 1], t[k - 1 : k + 1])) if k else float(t[0])
    return _root(t, rise, k, swing)


def noise_of(y: Floats) -> float:
    """Standard deviation of what changes from point to point, from the median of second differences. (n,) -> [unit of y]

    Notes
    -----
    1.4826 times the median magnitude of normal noise is its standard deviation; a second difference has sqrt(6) times that of its points.
    """
    return 1.4826 * float(np.median(np.abs(np.diff(y, 2)))) / math.sqrt(6) if len(y) > 2 else 0.0


def _root(t: Floats, rise: Floats, k: int, swing: float) -> float:
    """Where a current that passes half of its swing at point `k` began to rise. [s]"""
    below = np.flatnonzero(rise[: k + 1] < _FOOT * swing)
    foot = int(below[-1]) if len(below) else 0
    base = float(np.median(rise[:foot])) if foot >= 5 else 0.0
    up = np.flatnonzero(rise[foot : k + 1] >= _KNEE * swing)
    knee = foot + (int(up[0]) if len(up) else k - foot)
    if knee - foot < 4:  # a coarse trace: a straight line is all that it can give
        slope = (rise[k] - rise[foot]) / (t[k] - t[foot]) if k > foot else math.inf
        return float(t[foot] - (rise[foot] - base) / slope) if slope > 0 else float(t[foot])
    x = (t[foot + 1 : knee + 1] - t[foot]) / (t[knee] - t[foot])
    # Weights make it an integral over time, however the points lie.
    c, b, a = np.polyfit(x, rise[foot + 1 : knee + 1] - base, 2, w=np.sqrt(np.diff(t[foot : knee + 1])))
    roots = np.roots([c, b, a]) if c else np.array([-a / b])
    real = roots[np.isreal(roots)].real
    best = float(real[np.argmin(np.abs(real))]) if len(real) else 0.0
    return float(t[foot] + best * (t[knee] - t[foot])) if abs(best) < 1 else float(t[foot])
