"""What pulses of many widths make a coil's moving part do, corner by corner, and from which width on that is what it should."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from boardsim.board.reader import Board, Channel
from boardsim.circuit.deck import Deck, PlacedRule
from boardsim.engine.waves import Waves
from boardsim.firing.pattern import snapped
from boardsim.firing.schedule import Firing
from boardsim.parts.rules import MotionRule
from boardsim.verdict.audit import SMALL
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding, Reading, Verdict
from boardsim.verdict.motion import judge_motion
from boardsim.verdict.readings import Key, SignalTable, our_name
from boardsim.verdict.strokes import BACK, Strokes, Travelled, commands, energy
from boardsim.verdict.studies import Column, Table
from boardsim.verdict.watch import Extremes, Samples

AT_REST = (
    0.02  # share of the highest speed and current below which nothing moves or flows, as far as the next blow can tell
)
_ALIKE = 0.03  # share by which blows of settled pulses may differ: each of two runs may be 1 % off, and so may the travel time
_ORDER: tuple[Verdict, ...] = ("fail", "unproven", "tight", "pass")


@dataclass(frozen=True)
class StrokePoint:
    """One pulse in one corner, from rest.

    Attributes
    ----------
    width : float
        Of the pulse, at the register's output. [s]
    arrives : float or None
        From the command to the arrival at the stop, chain and jitter included; None where it does not arrive. [s]
    flies : float or None
        The same from when the output turns on. [s]
    speed, energy : float or None
        Of the blow. [m/s], [J]
    farthest : float
        [m]
    back : float or None
        From the end of the pulse until it is back at its rest; None where it is not within the pause. [s]
    verdict : Verdict
        The worst of what is asked of a motion, except the energy of its blow where no band was given.
    why : str
        The sentence that decides a verdict other than pass or tight, without a hint; empty for those.
    """

    width: float
    arrives: float | None
    flies: float | None
    speed: float | None
    energy: float | None
    farthest: float
    back: float | None
    verdict: Verdict
    why: str = ""

    @property
    def works(self) -> bool:
        """Whether all that is asked of it holds."""
        return self.verdict in ("pass", "tight")


@dataclass(frozen=True)
class StrokeRow:
    """One channel, swept.

    Attributes
    ----------
    channel : int
    label, coil : str
        Of the channel, and of its coil.
    travel : float
        [m]
    points : mapping of corner to tuple of StrokePoint
        By width; the same widths in every corner.
    shown : float
        The longest width that a picture shows; one that is longer makes sure that nothing changes any more. [s]
    due : float or None
        Latest arrival after the command. [s]
    least, most : float or None
        Band of the blow's energy. [J]
    asked : float or None
        The width that was asked for. [s]
    """

    channel: int
    label: str
    coil: str
    travel: float
    points: Mapping[str, tuple[StrokePoint, ...]]
    shown: float
    due: float | None
    least: float | None
    most: float | None
    asked: float | None = None

    @property
    def widths(self) -> tuple[float, ...]:
        """Those that were tried, rising. [s]"""
        return tuple(p.width for p in next(iter(self.points.values()), ()))

    def at(self, width: float) -> dict[str, StrokePoint]:
        """Of every corner what a width does."""
        return {corner: p for corner, points in self.points.items() for p in points if p.width == width}

    def verdict(self, width: float) -> Verdict:
        """The worst of all corners."""
        return min((p.verdict for p in self.at(width).values()), key=_ORDER.index)

    def works(self, width: float) -> bool:
        """Whether a width does all that it should in every corner."""
        return all(p.works for p in self.at(width).values())

    @property
    def stretch(self) -> tuple[float, float] | None:
        """The shortest width that works in every corner, and the longest with which all from there on do. [s]"""
        good = [self.works(w) for w in self.widths]
        if not any(good):
            return None
        first = good.index(True)
        last = next((k for k in range(first, len(good)) if not good[k]), len(good)) - 1
        return self.widths[first], self.widths[last]

    @property
    def settled(self) -> float | None:
        """The width from which on, in every corner, the blow comes before the end of the pulse and stays what it is. [s]

        None where it does not arrive in some corner, or where a wider pulse did change the blow.
        """
        longest = [points[-1].flies for points in self.points.values()]
        if None in longest or not longest:
            return None
        from_on = max(f for f in longest if f is not None)
        for points in self.points.values():
            last = points[-1].energy or 0.0
            if any(abs((p.energy or 0.0) - last) > _ALIKE * last for p in points if p.width >= from_on):
                return None
        return from_on


@dataclass(frozen=True)
class StrokeStudy:
    """Channels swept over pulse width."""

    rows: tuple[StrokeRow, ...]

    @property
    def table(self) -> Table:
        """One row per width, each number in its worst corner."""
        columns = (
            Column("channel"),
            Column("width", "s"),
            Column("latest arrival", "s"),
            Column("softest blow", "J"),
            Column("hardest blow", "J"),
            Column("fastest", "m/s"),
            Column("back after", "s"),
            Column("verdict"),
        )
        return Table(columns, tuple(_cells(row, width) for row in self.rows for width in row.widths))


def _cells(row: StrokeRow, width: float) -> tuple[float | str | None, ...]:
    points = list(row.at(width).values())

    def every(values: Sequence[float | None]) -> list[float] | None:
        return None if None in values else [v for v in values if v is not None]

    arrives, back = (every([p.arrives for p in points]), every([p.back for p in points]))
    blows, speeds = (
        [p.energy for p in points if p.energy is not None],
        [p.speed for p in points if p.speed is not None],
    )
    return (
        row.label,
        width,
        max(arrives) if arrives else None,
        (min(blows) if len(blows) == len(points) else 0.0) if blows else None,
        max(blows, default=None),
        max(speeds, default=None),
        max(back) if back else None,
        row.verdict(width),
    )


def motion_rules(channel: Channel) -> tuple[PlacedRule, ...]:
    """What a channel's moving part is held against; nothing where its coil moves nothing, or holds it without current."""
    rules = [r for r in channel.coil.more_rules() if isinstance(r, MotionRule)]
    comes_back = {"stroke", "return"} <= {r.check for r in rules}
    return tuple(PlacedRule(r, channel.number, channel.coil_name, channel.label) for r in rules if comes_back)


class StrokeWatch:
    """Reads a run in which the only channel of a board is fired again and again, each time from rest.

    Attributes
    ----------
    found : mapping of corner to (pulses, whether each began at rest)
        Of the last run of each corner.
    """

    def __init__(self, board: Board, firing: Firing):
        (self.channel,) = board.channels
        self.firing = firing
        self.rule = next(p.rule for p in motion_rules(self.channel) if isinstance(p.rule, MotionRule))
        self.found: dict[str, tuple[tuple[Travelled, ...], tuple[bool, ...]]] = {}

    def __call__(self, waves: Waves, deck: Deck) -> tuple[Reading, ...]:
        """The readings on which two runs must agree; nothing where the register does not make a pulse of every one asked for."""
        number, rule = self.channel.number, self.rule
        on = self.firing.on[number]
        if len(on) != len(self.firing.asked):
            return ()
        strokes = Strokes(
            rule.travel, on, deck.window.start, deck.window.stop, commands(self.firing, number), self.firing.jitter
        )
        keys: tuple[Key, ...] = ((number, rule.quantity), (number, rule.speed), (number, "i_coil"))
        table, starts = SignalTable(deck, tuple(our_name(name) for name in waves.names), keys), on[:, 0]
        rest, most = (Samples(starts), Samples(starts)), Extremes(len(keys))
        for block in waves.blocks():
            t, y = block[:, 0] + deck.window.start, table.values(block)
            strokes.feed(t, y[0], y[1])
            most.feed(t, y)
            for samples, row in zip(rest, y[1:], strict=True):
                samples.feed(t, row)
        size = np.maximum(np.abs(most.high), np.abs(most.low))[1:]
        still = np.all([np.abs(s.values) <= AT_REST * top for s, top in zip(rest, size, strict=True)], axis=0)
        pulses = strokes.all()
        calm = tuple(bool(s) and p.began <= BACK * rule.travel for s, p in zip(still, pulses, strict=True))
        self.found[deck.corner.name] = (pulses, calm)
        return self._readings(pulses)

    def _readings(self, pulses: Sequence[Travelled]) -> tuple[Reading, ...]:
        """Way and blow of every pulse, compared on the scale of a whole stroke.

        A pulse that just brings it to its stop, or just does not, is where any error shows without end: as a share of itself its
        blow could be told from nothing by no step. A hundredth of the hardest blow is what the two runs have to agree to.
        """
        blows = [energy(self.rule.mass, p.hits[0][1]) if p.hits else 0.0 for p in pulses]
        found = []
        for p, blow in zip(pulses, blows, strict=True):
            label = f"{self.channel.label}, pulse at {p.on:.6f} s"
            found.append(Reading("way that a pulse moves it", label, p.farthest, "m", self.rule.travel / SMALL))
            found.append(Reading("energy of the blow", label, blow, "J", max(blows) / SMALL))
        longest = max(pulses, key=lambda p: p.off - p.on, default=None)
        if longest is not None and longest.hits:
            took = longest.hits[0][0] - longest.on
            found.append(Reading("time to arrive", self.channel.label, took, "s", took))
        return tuple(found)


def judge_pulse(rules: Sequence[PlacedRule], pulse: Travelled, bench: Bench) -> list[Finding]:
    """What is found of one pulse, its times counted from its command; the pause after it is the question's own and no limit."""
    zero = pulse.on if pulse.commanded is None else pulse.commanded
    moved = replace(
        pulse,
        on=pulse.on - zero,
        off=pulse.off - zero,
        until=pulse.until - zero,
        hits=tuple((at - zero, speed) for at, speed in pulse.hits),
        back=None if pulse.back is None else pulse.back - zero,
        commanded=None if pulse.commanded is None else 0.0,
    )
    found = []
    for placed in rules:
        assert isinstance(placed.rule, MotionRule)
        for f in judge_motion(placed.rule, placed, [moved], bench):
            if f.check != "return" or f.verdict in ("fail", "unproven"):
                found.append(replace(f, corner=bench.corner, nominal_only=bench.nominal_only))
    return found


def point_of(rules: Sequence[PlacedRule], pulse: Travelled, findings: Sequence[Finding], unproven: str) -> StrokePoint:
    """One pulse in one corner; `unproven` says why nothing is proven there, if so."""
    first = rules[0].rule
    assert isinstance(first, MotionRule)
    hit = pulse.hits[0] if pulse.hits else None
    # A blow for which no band was given is told of once, not with every width.
    verdicts = [f.verdict for f in findings if f.verdict != "limit-missing"]
    verdict: Verdict = "unproven" if unproven else min(verdicts, key=_ORDER.index, default="pass")
    why = unproven or next((f.sentence for f in findings if f.verdict == verdict), "")
    flies = None if hit is None else hit[0] - pulse.on
    return StrokePoint(
        snapped(pulse.off - pulse.on),
        None if flies is None else flies + pulse.until_on,
        flies,
        None if hit is None else hit[1],
        None if hit is None else energy(first.mass, hit[1]),
        pulse.farthest,
        None if pulse.back is None else max(pulse.back - pulse.off, 0.0),
        verdict,
        why.partition("; try:")[0] if verdict in ("fail", "unproven") else "",
    )
