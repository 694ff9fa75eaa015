"""Bridges: whether both transistors of a leg conduct at once, and both directions of a coil are asked for at once."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass, field, replace

import numpy as np

from boardsim.board.reader import Board
from boardsim.circuit.deck import PlacedRule
from boardsim.firing.schedule import Firing
from boardsim.parts.rules import Limit, ShootThroughRule
from boardsim.quantities import in_units
from boardsim.verdict.bench import Bench, when
from boardsim.verdict.findings import Finding, Floats
from boardsim.verdict.watch import Dips

_COUPLED = (
    "a lower resistance that holds the gate which is off, a slower one that turns on, or a transistor of less gate-drain "
    "capacitance: a gate that was off already was taken up again by the leg's own edge, and no dead time keeps it from that"
)
_MORE = 1.2  # times the overlap that a hint adds to the dead time


@dataclass
class Leg:
    """When both gates of a leg are beyond what turns their transistors on, when neither is, and what flows through both.

    A current that charges the output capacitance of one transistor is none of these: its gate is then off.
    """

    turn_on: tuple[float, float]
    both: Dips = field(default_factory=lambda: Dips(0.0))
    neither: Dips = field(default_factory=lambda: Dips(0.0))
    peak: float = 0.0
    charge: float = 0.0
    most: list[float] = field(default_factory=lambda: [-math.inf, -math.inf])
    """How far each gate came beyond what turns its transistor on. [V]"""

    def feed(self, t: Floats, gates: Floats, currents: Floats) -> None:
        """Times (m,) [s], gate voltages (2, m) [V] and currents of the transistors (2, m). [A]"""
        beyond = gates - np.array(self.turn_on)[:, None]
        self.most = [max(*pair) for pair in zip(self.most, beyond.max(axis=1).tolist(), strict=True)]
        self.both.feed(t, -beyond.min(axis=0))
        self.neither.feed(t, beyond.max(axis=0))
        through = np.where(beyond.min(axis=0) > 0, np.maximum(currents.min(axis=0), 0.0), 0.0)
        self.peak = max(self.peak, float(through.max()))
        self.charge += float(np.trapezoid(through, t))


def judge_leg(
    rule: ShootThroughRule, placed: PlacedRule, leg: Leg, bench: Bench, *, fired: bool = True
) -> Finding | None:
    """The least time that was left between one gate's turn-off and the other's turn-on; negative where they overlap.

    Not judged where it was `fired` and yet one of its gates never turned on; None where it never was.

    Notes
    -----
    Gates overlap because one turns off too late, or because one that was off is lifted again by C_GD dv/dt as the leg's middle
    moves: then neither was on a moment before, which tells the two apart.
    """
    both, neither = leg.both.all(), leg.neither.all()
    limit = Limit(0.0, "s", None, rule.source, "time between one transistor's turn-off and the other's turn-on")
    what = "dead time left at the gates"
    if both:
        longest = max(both, key=lambda d: d.lasting)
        needed = rule.dead_time + _MORE * longest.lasting
        longer = f"a dead time of at least {in_units(needed, 's')}, or faster gates"
        coupled = any(0 <= longest.start - (d.start + d.lasting) <= rule.dead_time for d in neither)
        often, each = (f", {len(both)} times", " each time on average") if len(both) > 1 else (", once", "")
        said = (
            f"{placed.label}: both transistors of its leg conduct at once for {in_units(longest.lasting, 's')}"
            f"{when(longest.start)}{often}: up to {in_units(leg.peak, 'A')} flow from the rail to ground, "
            f"{in_units(leg.charge / len(both), 'C')}{each}; the driver's dead time is "
            f"{in_units(rule.dead_time, 's')}; try: {_COUPLED if coupled else longer}"
        )
        margin = -longest.lasting / max(rule.dead_time, longest.lasting)
        return bench.finding(placed, limit, what, -longest.lasting, margin, longest.start, said, "destroy", worse="low")
    if not fired:
        return None
    if not neither or min(leg.most) <= 0:
        never = " and ".join(who for who, most in zip(("high", "low"), leg.most, strict=True) if most <= 0)
        said = f"{placed.label}: whether both transistors of its leg conduct at once was not judged: "
        said += (
            f"the gate of its {never} transistor never turned that on, though it is fired; try: mend what else is found of its drive"
            if never
            else "its gates never passed their thresholds one after the other"
        )
        unknown = replace(limit, value=None, source="")
        return bench.finding(placed, unknown, what, 0.0, None, None, said, "destroy", worse="low")
    least = min(neither, key=lambda d: d.lasting)
    left = f"{in_units(least.lasting, 's')} of its dead time of {in_units(rule.dead_time, 's')}"
    said = f"{placed.label}: between the transistors of its leg at least {left} are left{when(least.start)}"
    margin = least.lasting / rule.dead_time if rule.dead_time > 0 else math.nan
    return bench.finding(placed, limit, what, least.lasting, margin, least.start, said, "destroy", worse="low")


def fired_again(firing: Firing, channel: int, besides: tuple[int, ...] = ()) -> Floats:
    """When a channel is fired while an earlier pulse, of it or of those `besides`, may have left current in its coil. [s]"""
    starts = firing.on[channel][:, 0]
    earliest = min((float(s[0, 0]) for c in (channel, *besides) if len(s := firing.on[c])), default=math.inf)
    later: Floats = starts[starts > earliest]
    return later


def both_at_once(one: Floats, other: Floats) -> Floats:
    """The stretches in which two channels are on together: rows (from, to) of each [s], (n, 2), into such rows. [s]"""
    rows: list[tuple[float, float]] = []
    i = j = 0
    while i < len(one) and j < len(other):
        start, stop = max(one[i, 0], other[j, 0]), min(one[i, 1], other[j, 1])
        if start < stop:
            rows.append((float(start), float(stop)))
        if one[i, 1] < other[j, 1]:
            i += 1
        else:
            j += 1
    return np.array(rows, dtype=np.float64).reshape(-1, 2)


def judge_directions(board: Board, firing: Firing) -> Iterator[Finding]:
    """Whether both directions of a coil are on at once; nothing of a coil of which only one is ever fired.

    Notes
    -----
    Both legs then hold their end of the coil at the rail: it gets no voltage, whatever both channels were meant to do, and
    what current it has runs on round through both upper transistors.
    """
    for channel in board.channels:
        if channel.opposite is None or not channel.forwards:
            continue
        spans = firing.on[channel.number], firing.on[channel.opposite]
        if not all(len(s) for s in spans):
            continue
        found = both_at_once(*spans)
        lengths = found[:, 1] - found[:, 0]
        back = board.channel(channel.opposite).label
        said = f"{channel.label} and {back}: "
        if len(found):
            k = int(np.argmax(lengths))
            times = f" ({len(found)} times)" if len(found) > 1 else ""
            said += (
                f"both directions of one coil are on at once for {in_units(float(lengths[k]), 's')} from "
                f"{in_units(float(found[k, 0]), 's', 4)} on{times}, and it gets no voltage; one at a time may be; "
                "try: end one before the other starts"
            )
        else:
            said += "the two directions of their coil are never on at once"
        at = float(found[int(np.argmax(lengths)), 0]) if len(found) else None
        yield Finding(
            "overlap",
            "directions of one coil on at once",
            "firing",
            channel.number,
            channel.label,
            2.0 if len(found) else 1.0,
            1.0,
            "1",
            -1.0 if len(found) else 0.0,
            at,
            "misbehave",
            "fail" if len(found) else "pass",
            said,
            source="one voltage lies across a coil",
            shape="count",
            channels=(channel.number, channel.opposite),
        )
