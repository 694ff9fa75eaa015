"""Latching coils: whether every pulse leaves its coil in the state that it commands, and whether anything else flips it."""

from __future__ import annotations

import itertools
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from boardsim.circuit.deck import PlacedRule
from boardsim.parts.rules import LatchRule
from boardsim.quantities import in_units
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding, Floats
from boardsim.verdict.watch import Dips

_DRAINED = 0.98  # share of the idle rail below which a pulse counts as begun before the reservoir was full: words only
_RISING = 0.98  # share of a pulse's highest current above which it was still growing at the end: words only


@dataclass(frozen=True)
class Thrown:
    """One pulse of a channel, and what its coil saw of it until the next pulse in either direction.

    Attributes
    ----------
    on, off, until : float
        When the pulse begins and ends, and when the next one begins, or the run ends. [s]
    peak, peak_at : float
        Highest current in the direction of the pulse [A], and when. [s]
    above, since : float
        Longest stretch without a break at or above the current that flips it, and its beginning. [s]
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
    above: float
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
    _peaks: dict[int, tuple[float, float]] = field(default_factory=dict)
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
        for at in self._begins[(self._begins >= t[0]) & (self._begins <= t[-1])]:
            k = int(np.searchsorted(self._begins, at)) + 1
            self._rails[k] = float(np.interp(at, t, rail))
            self._peaks[k] = float(np.interp(at, t, i)), float(at)  # however few points lie in its window
        window = np.searchsorted(self._begins, t, side="right")
        for k in np.unique(window):
            here = np.flatnonzero(window == k)
            top = here[int(i[here].argmax())]
            if k not in self._peaks or i[top] > self._peaks[int(k)][0]:
                self._peaks[int(k)] = float(i[top]), float(t[top])
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
        for k, (on, until) in enumerate(itertools.pairwise([*self._begins, self.stop]), 1):
            if self._signs[k] < 0:
                continue
            own = self.ways[0]
            off = min(float(own[own[:, 0] == on, 1][0]), self.stop)
            since, above = self._longest(float(on), float(until))
            already = bool(self.starts) and self._state(float(on)) > 0
            there = already or above >= self.after
            last = max(((at, s) for at, s in self.flips if on < at <= until), default=None)
            lost = last[0] if there and last is not None and last[1] < 0 else None
            peak, peak_at = self._peaks[k]
            found.append(
                Thrown(float(on), off, float(until), peak, peak_at, above, since, self._rails[k], already, lost)
            )
        return tuple(found)

    def _state(self, at: float) -> int:
        """As far as it is known at a time: by what it was at first, and by what has surely flipped it since."""
        return max(((t, s) for t, s in self.flips if t <= at), default=(0.0, self.starts))[1]

    def _longest(self, on: float, until: float) -> tuple[float, float]:
        """Beginning and length of the longest stretch of enough current between two times. [s]"""
        parts = [(max(d.start, on), min(d.start + d.lasting, until)) for d in self._forth.all()]
        start, end = max(parts, key=lambda part: part[1] - part[0], default=(on, on))
        return (start, end - start) if end > start else (on, 0.0)


def judge_latch(rule: LatchRule, placed: PlacedRule, throws: Throws, bench: Bench) -> Iterator[Finding]:
    """Of all pulses of a channel the one that is farthest from flipping its coil, or comes nearest to failing; or what flips it besides.

    Notes
    -----
    A pulse flips the coil where |i| >= I_f lasts for t_f without a break before the next pulse begins; after its end counts too, as
    long as the current lasts. Two readings are held against the two limits, since either may be near its own. A pulse that
    finds the coil where it sends it has nothing to do, where the state is known.
    """
    if rule.check == "stray-flip":
        yield _strays(rule, placed, throws, bench)
        return
    pulses = throws.all()
    if not pulses:
        return
    working = [p for p in pulses if not p.already]
    if working:
        yield _current(rule, placed, working, throws, bench)
        reached = [p for p in working if p.above > 0]
        if reached:
            yield _time(rule, placed, reached, throws, bench)
    yield from _kept(rule, placed, pulses, bench)


def _current(rule: LatchRule, placed: PlacedRule, pulses: Sequence[Thrown], throws: Throws, bench: Bench) -> Finding:
    p, bound = min(pulses, key=lambda one: one.peak), rule.at.value
    margin = None if bound is None else (p.peak - bound) / bound
    said = f"{placed.label}: in its pulse at {_pulse(p)} the coil current reaches {in_units(p.peak, 'A')}; "
    if bound is None or margin is None:
        said += f"no current that flips {placed.part} was given to hold it against"
    else:
        said += f"{placed.part} flips at {in_units(bound, 'A')}"
    if margin is not None and margin < 0:
        drained = _drained(p, throws)
        short = _others(sum(one.peak < throws.level for one in pulses), len(pulses))
        said += f", and stays where it was{drained}{short}; try: "
        still = p.peak_at >= p.off - (1 - _RISING) * (p.off - p.on)
        said += (
            "a longer pause before it, in which the reservoir recharges, fewer in a row, or a larger reservoir"
            if drained
            else ""
        )
        said += ", or " if drained and still else ""
        said += "a longer pulse" if still else "" if drained else "a higher voltage, or a coil of less resistance"
    return bench.finding(
        placed, rule.at, "highest current of a pulse that has to flip", p.peak, margin, p.peak_at, said, worse="low"
    )


def _time(rule: LatchRule, placed: PlacedRule, pulses: Sequence[Thrown], throws: Throws, bench: Bench) -> Finding:
    p, bound = min(pulses, key=lambda one: one.above), rule.after.value
    margin = None if bound is None else (p.above - bound) / bound
    said = (
        f"{placed.label}: in its pulse at {_pulse(p)} the coil current stays at {in_units(throws.level, 'A')} or above for "
        f"{in_units(p.above, 's')}; "
    )
    if bound is None or margin is None:
        said += f"how long {placed.part} takes to flip was not given to hold it against"
    else:
        said += f"{placed.part} takes {in_units(bound, 's')} to flip"
    if bound is not None and margin is not None and margin < 0:
        drained = _drained(p, throws)
        short = _others(sum(one.above < throws.after for one in pulses), len(pulses))
        said += f", and may stay where it was{drained}{short}; try: "
        if p.since + p.above < p.off:  # a longer pulse would add nothing
            said += "a larger reservoir, a longer pause before it, in which the reservoir recharges, or fewer together"
        else:
            said += f"a pulse that is longer by at least {in_units(bound - p.above, 's')}"
            said += (
                ", or a longer pause before it, in which the reservoir recharges"
                if drained
                else ", or a higher voltage"
            )
    return bench.finding(
        placed, rule.after, "time at the current that flips it", p.above, margin, p.since, said, worse="low"
    )


def _kept(rule: LatchRule, placed: PlacedRule, pulses: Sequence[Thrown], bench: Bench) -> Iterator[Finding]:
    """Pulses whose coil flips back before the next one; and how many there are that had nothing to do, where no other finding says it."""
    count, lost = len(pulses), [p for p in pulses if p.lost is not None]
    said = f"{placed.label}: "
    if lost:
        p = lost[0]
        at = p.lost or 0.0
        said += (
            f"its pulse at {_pulse(p)} puts {placed.part} where it should be, and a current the other way flips it back at "
            f"{in_units(at, 's', 4)}; try: find where that current comes from in the close-up"
        )
    elif all(p.already for p in pulses):
        at = pulses[0].on
        said += f"{count} {'pulse finds' if count == 1 else 'pulses find'} {placed.part} where {'it sends' if count == 1 else 'they send'} it, and it stays there"
    else:
        return
    limit = replace(rule.at, value=float(count), unit="1", name="pulses", source="the pattern")
    found = bench.finding(
        placed,
        limit,
        "pulses that leave it as commanded",
        float(count - len(lost)),
        -len(lost) / count,
        at,
        said,
        worse="low",
    )
    yield replace(found, verdict="fail" if lost else "pass", shape="count", channels=(placed.channel or 0,))


def _strays(rule: LatchRule, placed: PlacedRule, throws: Throws, bench: Bench) -> Finding:
    limit, what = rule.holds, "current against its state while nobody drives it"
    bound = limit.value
    said = f"{placed.label}: while nobody drives it, its coil carries up to {in_units(throws.wrong, 'A')} against its state"
    said += f" at {in_units(throws.wrong_at, 's', 4)}; " if throws.wrong else "; "
    remedy = "; try: a diode in the way of that current, or find who else is on at that time in the close-up"
    if throws.strays and rule.at.value is not None:
        at = throws.strays[0]
        said += f"{in_units(rule.at.value, 'A')} for {in_units(throws.after, 's')} flip {placed.part}, which happens at {in_units(at, 's', 4)}"
        held = rule.at if bound is None else limit
        margin = min((held.value or 0.0) - throws.wrong, -1e-3 * throws.wrong) / (held.value or 1.0)
        return bench.finding(placed, held, what, throws.wrong, margin, throws.wrong_at, said + remedy)
    margin_ = None if bound is None else (bound - throws.wrong) / bound
    if bound is None or margin_ is None:
        said += f"no current that never flips {placed.part} was given to hold it against"
    else:
        said += f"{placed.part} is sure to stay where it is below {in_units(bound, 'A')}" + (
            remedy if margin_ < 0 else ""
        )
    return bench.finding(placed, limit, what, throws.wrong, margin_, throws.wrong_at, said)


def _pulse(p: Thrown) -> str:
    return f"{in_units(p.on, 's', 4)} ({in_units(p.off - p.on, 's')} long)"


def _drained(p: Thrown, throws: Throws) -> str:
    """That the reservoir was not full, for people; nothing where it was."""
    if p.rail >= _DRAINED * throws.full:
        return ""
    return f"; the coil rail stood at {in_units(p.rail, 'V')} when the pulse began, of {in_units(throws.full, 'V')} before the first"


def _others(short: int, count: int) -> str:
    """How many pulses fall short, where several do."""
    return f"; so it is with {short} of its {count} pulses" if short > 1 else ""
