"""Limits, and the rules that hold readings against them. Values only: `verdict` applies them."""

from __future__ import annotations

import math
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
    """The highest value of a probe of a channel that is fired must reach a limit.

    `any_time` says that the logic rail does not bear on it, so that the best moment speaks for every pulse.
    """

    check: str
    quantity: str
    limit: Limit
    consequence: Consequence
    what: str
    advice: str
    any_time: bool = False


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
class HeatRule:
    """A junction must stay cool enough at the average power of the pattern: T_j = T_ambient + R_th P.

    `powers` are pairs of quantities whose products add up to the power. `resistance` is R_th to the ambient [K/W], `ambient`
    the air around it in this run [K]; `limit` [K]. `channels` are those that share one package; empty: the rule's own.
    `growth` is that of the power with the junction's own temperature [1/K]; of `growing`, where that is given, the product of two
    quantities, times `factor`, and not of all of it.
    """

    check: str
    powers: tuple[tuple[str, str], ...]
    resistance: Limit
    ambient: float
    limit: Limit
    consequence: Consequence
    what: str
    advice: str
    part: str = ""
    channels: tuple[int, ...] = ()
    growth: float = 0.0
    growing: tuple[str, str] | None = None
    factor: float = 1.0


@dataclass(frozen=True)
class PulseRule:
    """Every single pulse of a quantity must stay below what the part stands for as long as that pulse lasts.

    `quantities` is one, or two whose product counts. A pulse lasts from where it first is above `share` of its own peak
    to where it last is. `points` are (length [s], rating), the lengths rising: between two of them the rating runs
    straight on logarithmic scales, and a pulse shorter than the first has the first one's. Beyond the last it
    falls with the square root of the length, as heat that spreads into the bulk of a chip has it (from memory), but not
    below `lasting`, which the part stands however long. `limit` names the rating; its value is that of the first point.
    """

    check: str
    quantities: tuple[str, ...]
    limit: Limit
    points: tuple[tuple[float, float], ...]
    lasting: float
    share: float
    consequence: Consequence
    what: str
    advice: str
    part: str = ""


LINEAR_SHARE = math.exp(-1.0)
"""Share of its peak to which a pulse in the linear region lasts; see `boardsim.parts.linear.linear_rules`."""


def linear_unknown() -> PulseRule:
    """The rule of a switch of which nobody knows what it stands in its linear region."""
    return linear_rule(Limit(None, "W", "power", "", "safe area or thermal impedance"), (), 0.0)


def linear_rule(limit: Limit, points: tuple[tuple[float, float], ...], lasting: float, against: str = "") -> PulseRule:
    """The rule that a switch stands every pulse of power that it takes in its linear region.

    Parameters
    ----------
    limit : Limit
    points : tuple of (length, power)
        The lengths rising. [s], [W]
    lasting : float
        What it stands however long. [W]
    against : str
        What it is held against, to tell two such rules apart.
    """
    return PulseRule(
        "linear-region",
        ("v_ds", "i_d"),
        limit,
        points,
        lasting,
        LINEAR_SHARE,
        "destroy",
        f"power of the switch while it is its own clamp{against}",
        "a clamp that takes the energy itself, or a switch that stands more in its linear region",
    )


SumRule = PeakRule | PulseRule | MeanRule
"""What can judge one quantity of the whole of a package."""


@dataclass(frozen=True)
class EnergyRule:
    """The energy of every single pulse of a power (the product of two quantities) must stay below a limit. [J]"""

    check: str
    quantities: tuple[str, str]
    limit: Limit
    consequence: Consequence
    what: str
    advice: str
    part: str = ""


@dataclass(frozen=True)
class BreakdownRule:
    """The drain voltage of a switch: below breakdown against the rating, in avalanche by current and energy.

    `single`, `repetitive` [J] and `current` [A] are the avalanche ratings; `breakdown` [V] is where the model of
    this run conducts. `of` says whose, for people, where a channel has several switches.
    """

    check: str
    voltage: str
    current: str
    breakdown: float
    rating: Limit
    avalanche_current: Limit
    single: Limit
    repetitive: Limit
    what: str = "drain-source voltage"
    of: str = ""


@dataclass(frozen=True)
class TogetherRule:
    """What the switches of one package take in avalanche within a time must stay below a limit. [J]

    `within` is that time: so long the heat of one stays in the chip that they share [s]. Stretches that overlap count in any case.
    `limit` is the rating of the package. Where it was not given, a sum that `one` of its switches stands is allowed as well, and
    nothing is known of more. `channels` are those that share the package, `voltage` the quantity whose avalanche is meant.
    """

    check: str
    limit: Limit
    one: Limit
    advice: str
    channels: tuple[int, ...] = ()
    voltage: str = "v_ds"
    within: float = 0.0


@dataclass(frozen=True)
class PullInRule:
    """At the end of every pulse the coil current must have reached the pull-in current."""

    check: str
    quantity: str
    limit: Limit


@dataclass(frozen=True)
class ReleaseRule:
    """When a channel is fired again its coil current must have fallen below the release current.

    `besides` are channels that drive the same coil the other way: what they left counts too, in either direction.
    """

    check: str
    quantity: str
    limit: Limit
    besides: tuple[int, ...] = ()


@dataclass(frozen=True)
class HoldRule:
    """While a pulse is held, from its peak to its end, the coil current must stay above the hold current."""

    check: str
    quantity: str
    limit: Limit


@dataclass(frozen=True)
class ReserveRule:
    """When the peak of a held pulse of one of `channels` begins, the reservoir that feeds them must still have a voltage."""

    check: str
    quantity: str
    limit: Limit
    channels: tuple[int, ...] = ()


@dataclass(frozen=True)
class IdleRule:
    """Before its first pulse and after its last a channel's coil must carry less than the release current.

    `limit` is that current; where it was not given, `share` of the current that settles in the coil at the lowest supply.
    `besides` are channels that drive the same coil the other way, at their command.
    """

    check: str
    quantity: str
    limit: Limit
    share: float
    besides: tuple[int, ...] = ()


@dataclass(frozen=True)
class SneakRule:
    """While its channel is off a coil's current must not grow to the release current: what others' currents find a way through.

    `limit` and `share` are those of `IdleRule`.
    """

    check: str
    quantity: str
    limit: Limit
    share: float


Motions = Literal["stroke", "held-in", "impact", "second-impact", "return"]


@dataclass(frozen=True)
class MotionRule:
    """What a coil moves between two stops: it arrives in time, stays while its pulse lasts, hits as hard as it should, comes back.

    `check` says which of these is asked. `quantity` [m] and `speed` [m/s] are probes; `travel` [m] and `mass` [kg] of what
    moves. `limit` is the latest arrival after the pulse begins [s], without a value the end of the pulse; or the most energy of the
    blow [J], `least` being the least; or the share of the first blow's energy that a later one may have. `stays` is what to try where
    it does not move at all.
    """

    check: Motions
    quantity: str
    speed: str
    travel: float
    mass: float
    limit: Limit
    least: float | None = None
    stays: str = "a higher voltage, a weaker spring, or a smaller gap at rest"


@dataclass(frozen=True)
class LatchRule:
    """Every pulse leaves a latching coil in the state that it commands, and nothing else flips it.

    `check` says which of these is asked. `at` is the current that flips it [A], `after` how long it has to last [s], `holds` the current
    that never flips it [A]. `starts` is the state before the first pulse, as the rule's channel has it: 1 where its own pulses send
    it, -1 the other way, 0 where nobody knows. `besides` are channels that drive the same coil the other way.
    """

    check: Literal["flip", "stray-flip"]
    quantity: str
    at: Limit
    after: Limit
    holds: Limit
    starts: int = 0
    besides: tuple[int, ...] = ()


@dataclass(frozen=True)
class DriveRule:
    """At the end of every pulse, when its current is highest, a switch must be driven as hard as that current needs.

    `needs` are pairs of current [A] and the drive that it needs [unit of the limit], currents rising; straight lines lie
    between them, below the first the first's need counts, and above the last nothing is known. `limit` says what the
    needs are and where they come from; its own value is not used.
    """

    check: str
    quantity: str
    current: str
    needs: tuple[tuple[float, float], ...]
    limit: Limit
    consequence: Consequence
    what: str
    advice: str


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
class LeastRule:
    """The lowest value of a probe must stay above a limit; `part` if not the stamp's own.

    `soft` says that what is below it is judged elsewhere by what follows from it: then it is tight, and never fails.
    """

    check: str
    quantity: str
    limit: Limit
    what: str
    advice: str
    soft: bool = False
    part: str = ""


@dataclass(frozen=True)
class FallRule:
    """A voltage may fall below a level for less than a given time. [s]

    Parts of the board other than the coil rail, which has its `DipRule`. `guard` is the share above the level from which on
    a fall that lasts is tight. `doubtful` says that a shorter fall may or may not count, and is tight; else it counts for nothing.
    `happens` says what a fall that lasts means. Without a value `unknown` says why nothing can be said below the lowest level,
    `floor`, at which something is known [unit of the limit].
    """

    check: str
    quantity: str
    limit: Limit
    lasting: float
    what: str
    happens: str
    advice: str
    guard: float = 0.0
    doubtful: bool = False
    unknown: str = ""
    floor: float | None = None


@dataclass(frozen=True)
class ShootThroughRule:
    """The two transistors of a leg must not conduct at once.

    `gates` and `currents` are quantities of the high and the low one, `turn_on` the gate voltages at which they begin to
    conduct [V]; `dead_time` is the driver's [s], and `source` where that comes from.
    """

    check: str
    gates: tuple[str, str]
    currents: tuple[str, str]
    turn_on: tuple[float, float]
    dead_time: float
    source: str


@dataclass(frozen=True)
class CeilingRule:
    """A supply's current must stay below its ceiling."""

    check: str
    quantity: str
    limit: Limit
    what: str


Rule = (
    PeakRule
    | FloorRule
    | DriveRule
    | MeanRule
    | HeatRule
    | PulseRule
    | EnergyRule
    | BreakdownRule
    | TogetherRule
    | PullInRule
    | ReleaseRule
    | HoldRule
    | ReserveRule
    | IdleRule
    | MotionRule
    | LatchRule
    | SneakRule
    | DipRule
    | LeastRule
    | FallRule
    | CeilingRule
    | ShootThroughRule
)
