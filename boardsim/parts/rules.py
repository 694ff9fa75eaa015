"""Limits, and the rules that hold readings against them. Values only: `verdict` applies them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from boardsim.quantities import Quantity

Consequence = Literal["destroy", "misbehave"]
Derating = Literal["voltage", "current", "power", "energy"]


@dataclass(frozen=True)
class Limit:
    """A rated number: value, derating class, where it comes from; `value` None where it was not given."""

    value: float | None
    unit: str
    derating: Derating | None
    source: str
    name: str

    @staticmethod
    def of(
        quantity: Quantity | None, name: str, unit: str, derating: Derating | None, value: float | None = None
    ) -> Limit:
        """The limit that a field holds; `value` where not the typical value counts."""
        if quantity is None:
            return Limit(None, unit, derating, "", name)
        return Limit(quantity.typ if value is None else value, unit, derating, str(quantity.origin), name)


@dataclass(frozen=True)
class PeakRule:
    """The highest value of a probe (or of its magnitude) must stay below a limit; `part` if not the stamp's own."""

    check: str
    quantity: str
    limit: Limit
    consequence: Consequence
    what: str
    advice: str
    magnitude: bool = False
    part: str = ""


@dataclass(frozen=True)
class FloorRule:
    """The highest value of a probe of a channel that is fired must reach a limit."""

    check: str
    quantity: str
    limit: Limit
    consequence: Consequence
    what: str
    advice: str


@dataclass(frozen=True)
class MeanRule:
    """The average over the pattern, of a probe or of the product of two, must stay below a limit."""

    check: str
    quantities: tuple[str, ...]
    limit: Limit
    consequence: Consequence
    what: str
    advice: str
    part: str = ""


@dataclass(frozen=True)
class BreakdownRule:
    """The drain voltage of a switch: below breakdown against the rating, in avalanche by current and energy.

    `single`, `repetitive` [J] and `current` [A] are the avalanche ratings; `breakdown` [V] is where the model of
    this run conducts.
    """

    check: str
    voltage: str
    current: str
    breakdown: float
    rating: Limit
    avalanche_current: Limit
    single: Limit
    repetitive: Limit


@dataclass(frozen=True)
class PullInRule:
    """At the end of every pulse the coil current must have reached the pull-in current."""

    check: str
    quantity: str
    limit: Limit


@dataclass(frozen=True)
class ReleaseRule:
    """When a channel is fired again its coil current must have fallen below the release current."""

    check: str
    quantity: str
    limit: Limit


@dataclass(frozen=True)
class DipRule:
    """A voltage may be below a level for a given time only. `lasting` [s]; None counts any dip."""

    check: str
    quantity: str
    limit: Limit
    lasting: float
    what: str
    guard: float = 0.0


@dataclass(frozen=True)
class CeilingRule:
    """A supply's current must stay below its ceiling."""

    check: str
    quantity: str
    limit: Limit
    what: str


Rule = PeakRule | FloorRule | MeanRule | BreakdownRule | PullInRule | ReleaseRule | DipRule | CeilingRule
