"""Legs of bridges: whether both transistors of one conduct at once."""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np

from boardsim.circuit.deck import PlacedRule
from boardsim.parts.rules import Limit, ShootThroughRule
from boardsim.quantities import in_units
from boardsim.verdict.bench import Bench, when
from boardsim.verdict.findings import Finding, Floats
from boardsim.verdict.watch import Dips

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

    def feed(self, t: Floats, gates: Floats, currents: Floats) -> None:
        """Times (m,) [s], gate voltages (2, m) [V] and currents of the transistors (2, m). [A]"""
        beyond = gates - np.array(self.turn_on)[:, None]
        self.both.feed(t, -beyond.min(axis=0))
        self.neither.feed(t, beyond.max(axis=0))
        through = np.where(beyond.min(axis=0) > 0, np.maximum(currents.min(axis=0), 0.0), 0.0)
        self.peak = max(self.peak, float(through.max()))
        self.charge += float(np.trapezoid(through, t))


def judge_leg(rule: ShootThroughRule, placed: PlacedRule, leg: Leg, bench: Bench) -> Finding | None:
    """The least time that was left between one gate's turn-off and the other's turn-on; negative where they overlap."""
    both, neither = leg.both.all(), leg.neither.all()
    limit = Limit(0.0, "s", None, rule.source, "time between one transistor's turn-off and the other's turn-on")
    what = "dead time left at the gates"
    if both:
        longest = max(both, key=lambda d: d.lasting)
        needed = rule.dead_time + _MORE * longest.lasting
        said = (
            f"{placed.label}: both transistors of its leg conduct at once for {in_units(longest.lasting, 's')}"
            f"{when(longest.start)}, {len(both)} times: up to {in_units(leg.peak, 'A')} flow from the rail to ground, "
            f"{in_units(leg.charge / len(both), 'C')} each time on average; the driver's dead time is "
            f"{in_units(rule.dead_time, 's')}; try: a dead time of at least {in_units(needed, 's')}, or faster gates"
        )
        margin = -longest.lasting / max(rule.dead_time, longest.lasting)
        return bench.finding(placed, limit, what, -longest.lasting, margin, longest.start, said, "destroy", worse="low")
    if not neither:
        return None
    least = min(neither, key=lambda d: d.lasting)
    left = f"{in_units(least.lasting, 's')} of its dead time of {in_units(rule.dead_time, 's')}"
    said = f"{placed.label}: between the transistors of its leg at least {left} are left{when(least.start)}"
    margin = least.lasting / rule.dead_time if rule.dead_time > 0 else math.nan
    return bench.finding(placed, limit, what, least.lasting, margin, least.start, said, "destroy", worse="low")
