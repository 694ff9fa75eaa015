"""What the close-up of a leg shows: both gates against what turns their transistors on, and what flows through both."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

from boardsim.circuit.deck import Deck
from boardsim.firing.schedule import Firing
from boardsim.parts.rules import ShootThroughRule
from boardsim.quantities import in_units
from boardsim.verdict.cutting import between
from boardsim.verdict.findings import Envelope, Finding, Floats
from boardsim.verdict.readings import Key
from boardsim.verdict.stretch import Stretch
from boardsim.verdict.watch import Slices

_DEAD_TIMES = 2.0  # to look at on either side of the moment
_LEAST = 0.4e-6  # [s] to look at on either side: in it gates of any size turn off


def leg_rule(finding: Finding, deck: Deck | None) -> ShootThroughRule | None:
    """The rule of a finding on a leg; None of any other, and where there are no waveforms or no moment to show."""
    if deck is None or finding.check != "shoot-through" or finding.at is None:
        return None
    mine = (p.rule for p in deck.rules if p.channel == finding.channel)
    return next((rule for rule in mine if isinstance(rule, ShootThroughRule)), None)


@dataclass
class LegCut:
    """A stretch of some dead times around the moment; used as any other cut is.

    Attributes
    ----------
    finding : Finding
        Of shoot-through, with a moment.
    rule : ShootThroughRule
    firing : Firing
        What the stretch lies in.
    count : int
        Of slices.
    """

    finding: Finding
    rule: ShootThroughRule
    firing: Firing
    count: int
    stretch: Stretch = field(init=False)
    slices: Slices = field(init=False)

    def __post_init__(self) -> None:
        at, reach = self.finding.at or 0.0, max(_DEAD_TIMES * self.rule.dead_time, _LEAST)
        stop = min(at + reach + abs(self.finding.value), self.firing.duration)
        self.stretch = Stretch(max(min(at, stop) - reach, 0.0), stop)
        self.slices = Slices(np.linspace(*self.stretch, self.count + 1), 3)

    @property
    def subject(self) -> tuple[Key, ...]:
        """No single waveform holds the reading."""
        return ()

    @property
    def causes(self) -> tuple[Key, ...]:
        """Both gates and both currents."""
        return tuple((self.finding.channel, q) for q in (*self.rule.gates, *self.rule.currents))

    def feed(self, t: Floats, y: Mapping[Key, Floats]) -> None:
        """Times (m,) [s] and the values of every signal (m,)."""
        t, rows = between(t, np.stack([y[key] for key in self.causes]), *self.stretch)
        on = (rows[:2] > np.array(self.rule.turn_on)[:, None]).all(axis=0)
        through = np.where(on, np.maximum(rows[2:].min(axis=0), 0.0), 0.0)
        self.slices.feed(t, np.vstack([rows[:2], through]))

    def waves(self) -> tuple[tuple[Envelope, ...], Envelope] | None:
        """Both gates, and the current through both; None where the run ended before the stretch did."""
        if not np.isfinite(self.slices.low).all():
            return None
        high, low, through = (
            Envelope(label, unit, self.slices.edges, self.slices.low[k], self.slices.high[k])
            for k, (label, unit) in enumerate(
                (
                    (f"high transistor, on from {in_units(self.rule.turn_on[0], 'V')}", "V"),
                    (f"low transistor, on from {in_units(self.rule.turn_on[1], 'V')}", "V"),
                    ("current while both gates are on", "A"),
                )
            )
        )
        return (high, low), through
