"""What the close-up of a motion shows: position, speed and current over the pulse that a finding is about, and where it hits."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import get_args

import numpy as np

from boardsim.circuit.deck import Deck
from boardsim.firing.schedule import Firing
from boardsim.parts.rules import MotionRule, Motions
from boardsim.verdict.cutting import between
from boardsim.verdict.findings import Envelope, Finding, Floats, severity
from boardsim.verdict.readings import Key
from boardsim.verdict.stretch import Stretch
from boardsim.verdict.strokes import Strokes
from boardsim.verdict.watch import Slices

_BEFORE, _AFTER = (
    0.08,
    0.5,
)  # shares of the time from the beginning of the pulse to its end or the moment, shown around it
_FLIES = 1.5  # the same after a pulse that was too short, while what it moves flies on and turns
_CHECKS = get_args(Motions)


def motion_rule(finding: Finding, deck: Deck | None) -> MotionRule | None:
    """The rule of a finding on a motion; None of any other, and where there are no waveforms or no moment to show."""
    if deck is None or finding.check not in _CHECKS or finding.at is None or finding.channel is None:
        return None
    mine = (p.rule for p in deck.rules if p.channel == finding.channel)
    return next((rule for rule in mine if isinstance(rule, MotionRule) and rule.check == finding.check), None)


def by_motion(finding: Finding) -> tuple[float, ...]:
    """Sort key: the worst of a motion first. That it is held in counts last of what passes: it has no guard band."""
    first, *others = severity(finding)
    return (first, float(finding.check == "held-in"), *others)


def worst_motions(findings: Iterable[Finding], deck: Deck | None) -> list[Finding]:
    """Of every kind of coil that moves something the worst finding, whatever its verdict: what a picture of motion shows."""
    kept: dict[str, Finding] = {}
    for f in findings:
        if motion_rule(f, deck) is not None and (f.part not in kept or by_motion(f) < by_motion(kept[f.part])):
            kept[f.part] = f
    return list(kept.values())


@dataclass
class MotionCut:
    """A stretch around one pulse; used as any other cut is.

    Attributes
    ----------
    finding : Finding
        Of a motion, with a moment.
    rule : MotionRule
    firing : Firing
        What the stretch lies in.
    count : int
        Of slices.
    """

    finding: Finding
    rule: MotionRule
    firing: Firing
    count: int
    stretch: Stretch = field(init=False)
    slices: Slices = field(init=False)
    strokes: Strokes = field(init=False)

    def __post_init__(self) -> None:
        at, spans = self.finding.at or 0.0, self.firing.on[self.channel]
        # What is found when the next pulse begins, or when the run ends, is about the pulse before.
        later = self.finding.check == "return"
        mine = spans[spans[:, 0] < at] if later else spans[spans[:, 0] <= at]
        on, off = (float(t) for t in (mine[-1] if len(mine) else spans[0]))
        long = max(off, at) - on
        timed, short = self.finding.unit == "s" and not later, self.finding.quantity == "way that a pulse moves it"
        first = at - self.finding.value if timed else on  # an arrival counts from the command
        stop = max(off, at) + (_FLIES if short else _AFTER) * long
        self.stretch = Stretch(max(min(on, first) - _BEFORE * long, 0.0), min(stop, self.firing.duration))
        self.slices = Slices(np.linspace(*self.stretch, self.count + 1), 3)
        self.strokes = Strokes(self.rule.travel, np.array([[on, off]]), self.stretch.start, self.stretch.stop)

    @property
    def channel(self) -> int:
        """The finding's."""
        assert self.finding.channel is not None  # motion_rule asks for one
        return self.finding.channel

    @property
    def subject(self) -> tuple[Key, ...]:
        """No single waveform holds every reading."""
        return ()

    @property
    def causes(self) -> tuple[Key, ...]:
        """Position, speed and current."""
        return tuple((self.channel, q) for q in (self.rule.quantity, self.rule.speed, "i_coil"))

    def feed(self, t: Floats, y: Mapping[Key, Floats]) -> None:
        """Times (m,) [s] and the values of every signal (m,)."""
        t, rows = between(t, np.stack([y[key] for key in self.causes]), *self.stretch)
        self.slices.feed(t, rows)
        self.strokes.feed(t, rows[0], rows[1])

    def waves(self) -> tuple[Envelope, Envelope, Envelope] | None:
        """Position, speed and current; None where the run ended before the stretch did."""
        if not np.isfinite(self.slices.low).all():
            return None
        position, speed, current = (
            Envelope(label, unit, self.slices.edges, self.slices.low[k], self.slices.high[k])
            for k, (label, unit) in enumerate((("position", "m"), ("speed", "m/s"), ("coil current", "A")))
        )
        return position, speed, current

    @property
    def hits(self) -> tuple[tuple[float, float], ...]:
        """Every arrival at the stop within the stretch. [s], [m/s]"""
        return tuple(hit for pulse in self.strokes.all() for hit in pulse.hits)

    @property
    def marked(self) -> tuple[float, float] | None:
        """Where a reading stands on its waveform: a position on that, a blow on the speed; None of what has no such place. [s]"""
        f = self.finding
        if f.at is None or not self.stretch.start <= f.at <= self.stretch.stop:
            return None
        if f.unit == "m":
            return (f.at, f.value) if f.quantity.startswith("position") else None
        return min(((at, speed) for at, speed in self.hits), key=lambda hit: abs(hit[0] - f.at), default=None)  # type: ignore[operator]
