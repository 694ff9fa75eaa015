"""What a coil moves between two stops, pulse by pulse: when it arrives, how hard, whether it stays and comes back."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from boardsim.circuit.deck import PlacedRule
from boardsim.parts.rules import Limit, MotionRule
from boardsim.quantities import in_units
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding, Floats

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
    """

    travel: float
    on: Floats
    start: float
    stop: float
    _hits: list[tuple[float, float]] = field(default_factory=list)
    _downs: list[float] = field(default_factory=list)
    _at: dict[float, float] = field(default_factory=dict)
    _far: dict[int, float] = field(default_factory=dict)
    _before: Floats | None = None

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
        self._before = rows[:, -2:-1]
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
            left = self._at.get(until, float("nan"))
            downs = [at for at in self._downs if off <= at < until]
            rest = BACK * self.travel
            back = None if left > rest else downs[-1] if downs else float(off)
            far = self._far.get(k, float("nan"))
            began, ended = self._at[float(on)], self._at.get(float(off), left)
            found.append(
                Travelled(float(on), float(off), until, k == len(self.on) - 1, hits, far, began, ended, left, back)
            )
        return tuple(found)


def judge_motion(rule: MotionRule, placed: PlacedRule, pulses: Sequence[Travelled], bench: Bench) -> Iterator[Finding]:
    """Of all pulses of a channel the one that comes nearest to what it may do, or is farthest beyond; nothing without pulses.

    Notes
    -----
    The blow's energy is m v^2 / 2 with the speed of the first arrival.
    """
    if not pulses:
        return
    match rule.check:
        case "stroke":
            yield from _arrival(rule, placed, pulses, bench)
        case "held-in":
            yield from _held_in(rule, placed, pulses, bench)
        case "impact":
            yield from _impact(rule, placed, pulses, bench)
        case "second-impact":
            yield from _second(rule, placed, pulses, bench)
        case "return":
            yield from _return(rule, placed, pulses, bench)


def _arrival(rule: MotionRule, placed: PlacedRule, pulses: Sequence[Travelled], bench: Bench) -> Iterator[Finding]:
    moved = [p for p in pulses if p.began < IN * rule.travel]  # one that has not come back is told of by its return
    short = [p for p in moved if not p.hits]
    if short:
        p = min(short, key=lambda one: one.farthest)
        share = p.farthest / rule.travel
        limit = replace(rule.limit, value=rule.travel, unit="m", name="travel")
        said = (
            f"{placed.label}: in its pulse at {in_units(p.on, 's', 4)} ({in_units(p.off - p.on, 's')} long) {placed.part} gets "
            f"{in_units(max(p.farthest, 0.0), 'm')} far, of {in_units(rule.travel, 'm')}; try: "
            + (rule.stays if share < BACK else "a longer pulse, a higher voltage, or a weaker spring")
        )
        yield bench.finding(
            placed, limit, "way that a pulse moves it", p.farthest, min(share - 1, -1e-3), p.on, said, worse="low"
        )
        return
    if not moved:
        return

    def due(p: Travelled) -> float:
        return rule.limit.value if rule.limit.value is not None else p.off - p.on

    p = min(moved, key=lambda one: 1 - (one.hits[0][0] - one.on) / due(one))
    took, allowed = p.hits[0][0] - p.on, due(p)
    margin = (allowed - took) / allowed
    named = "end of the pulse" if rule.limit.value is None else "latest arrival"
    limit = replace(rule.limit, value=allowed, name=named, source=rule.limit.source or "the pattern")
    said = (
        f"{placed.label}: fired at {in_units(p.on, 's', 4)}, {placed.part} arrives after {in_units(took, 's')}; the {named} is at "
        f"{in_units(allowed, 's')}" + ("; try: a longer pulse, or a higher voltage" if margin < 0 else "")
    )
    yield bench.finding(placed, limit, "time to arrive", took, margin, p.hits[0][0], said)


def _held_in(rule: MotionRule, placed: PlacedRule, pulses: Sequence[Travelled], bench: Bench) -> Iterator[Finding]:
    arrived = [p for p in pulses if p.hits and p.hits[0][0] <= p.off]
    if not arrived:
        return
    p = min(arrived, key=lambda one: one.ended)
    bound = IN * rule.travel
    margin = (p.ended - bound) / bound
    limit = replace(
        rule.limit, value=bound, name="position that counts as in", source="9/10 of the travel, from memory"
    )
    said = (
        f"{placed.label}: at the end of its pulse at {in_units(p.off, 's', 4)} {placed.part} is at {in_units(p.ended, 'm')} of "
        f"{in_units(rule.travel, 'm')}"
        + (", and had arrived; try: more current to hold it" if margin < 0 else ": held in")
    )
    yield _counted(
        bench.finding(placed, limit, "position at the end of a pulse", p.ended, margin, p.off, said, worse="low")
    )


def _impact(rule: MotionRule, placed: PlacedRule, pulses: Sequence[Travelled], bench: Bench) -> Iterator[Finding]:
    hits = [p.hits[0] for p in pulses if p.hits]
    if not hits:
        return

    def energy(hit: tuple[float, float]) -> float:
        return 0.5 * rule.mass * hit[1] ** 2

    hardest, softest = max(hits, key=energy), min(hits, key=energy)
    most, least = rule.limit.value, rule.least
    at, value = hardest[0], energy(hardest)
    detail = f"{placed.label}: {placed.part} hits its stop{_at(at)} at {in_units(hardest[1], 'm/s')}, with {in_units(value, 'J')}"
    if most is None or least is None:
        said = f"{detail}; no band of the energy of its blow was given to hold it against"
        yield bench.finding(placed, rule.limit, "energy of the blow", value, None, at, said)
        return
    margin = (most - value) / most
    said = f"{detail}; up to {in_units(most, 'J')} may be" + (
        "; try: a shorter pulse, or a softer stop" if margin < 0 else ""
    )
    yield bench.finding(placed, rule.limit, "energy of the hardest blow", value, margin, at, said)
    value, at = energy(softest), softest[0]
    margin = (value - least) / least
    said = f"{placed.label}: the softest blow of {placed.part}, {in_units(value, 'J')}{_at(at)}, is held against at least {in_units(least, 'J')}"
    said += "; try: a longer pulse, or a higher voltage" if margin < 0 else ""
    yield bench.finding(
        placed, replace(rule.limit, value=least), "energy of the softest blow", value, margin, at, said, worse="low"
    )


def _second(rule: MotionRule, placed: PlacedRule, pulses: Sequence[Travelled], bench: Bench) -> Iterator[Finding]:
    shares = [(max((v / p.hits[0][1]) ** 2 for _, v in p.hits[1:]), p) for p in pulses if len(p.hits) > 1]
    if not shares or rule.limit.value is None:
        return
    share, p = max(shares, key=lambda one: one[0])
    at = max(p.hits[1:], key=lambda hit: hit[1])[0]
    margin = (rule.limit.value - share) / rule.limit.value
    said = (
        f"{placed.label}: {placed.part} bounces off its stop and hits it again{_at(at)} with {share:.0%} of the first blow's energy; "
        f"{rule.limit.value:.0%} may be"
        + ("; try: a softer stop, or more current while it arrives" if margin < 0 else "")
    )
    yield bench.finding(placed, rule.limit, "second blow's share", share, margin, at, said)


def _return(rule: MotionRule, placed: PlacedRule, pulses: Sequence[Travelled], bench: Bench) -> Iterator[Finding]:
    gone = [p for p in pulses if p.farthest > BACK * rule.travel]
    out = [p for p in gone if p.back is None]
    if out:
        p = max(out, key=lambda one: one.left)
        bound = BACK * rule.travel
        then = "when the run ends" if p.last else f"when it is fired again at {in_units(p.until, 's', 4)}"
        limit = Limit(bound, "m", None, "2 % of the travel, from memory", "position that counts as back")
        said = (
            f"{placed.label}: {placed.part} is still {in_units(p.left, 'm')} out {then}, {in_units(p.until - p.off, 's')} after its pulse; "
            "try: a longer pause, a clamp of higher voltage, or a stronger spring"
        )
        yield bench.finding(
            placed, limit, "position when fired again", p.left, min((bound - p.left) / bound, -1e-3), p.until, said
        )
        return
    timed = [(p.back - p.off, p) for p in gone if p.back is not None and not p.last]
    if not timed:
        return
    took, p = max(timed, key=lambda one: one[0] / (one[1].until - one[1].off))
    pause = p.until - p.off
    limit = Limit(pause, "s", None, "the pattern", "pause")
    said = (
        f"{placed.label}: {placed.part} is back at its rest {in_units(took, 's')} after its pulse at {in_units(p.off, 's', 4)}; the pause is "
        f"{in_units(pause, 's')}"
    )
    yield bench.finding(placed, limit, "time to return", took, (pause - took) / pause, p.back, said)


def _at(at: float) -> str:
    return f" at {in_units(at, 's', 4)}"


def _counted(finding: Finding) -> Finding:
    """A position is in or it is not: there is no guard band about it."""
    return replace(finding, verdict="pass") if finding.verdict == "tight" else finding
