"""A logic family: which input voltages count as low and high at each supply, what its outputs give, what its pins stand."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from typing import Annotated, ClassVar, Literal, NamedTuple

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Assumption, Part
from boardsim.parts.record import Record
from boardsim.quantities import CAPACITANCE, CURRENT, POSITIVE_TIME, TEMPERATURE, VOLTAGE, Quantity, assume, celsius

_SAME = 1e-9  # share by which two supplies may differ and still be one: rounding of tolerances


class Place(NamedTuple):
    """Where a supply lies in a table: between which of its rows, and what share of the way."""

    lower: int
    upper: int
    share: float

    def straight(self, values: Sequence[float]) -> float:
        """The value on a straight line between the two rows. [unit of the values]"""
        return values[self.lower] + self.share * (values[self.upper] - values[self.lower])


def place_in(supplies: Sequence[float], volts: float) -> Place | None:
    """Where a supply lies among printed ones; None beyond them, where a data sheet says nothing.

    Parameters
    ----------
    supplies : (n,) sequence of float
        Rising. [V]
    volts : float
        [V]

    Examples
    --------
    >>> place_in([2.0, 4.5, 6.0], 5.25)
    Place(lower=1, upper=2, share=0.5)
    >>> place_in([2.0, 4.5, 6.0], 6.5) is None
    True
    """
    if not supplies[0] * (1 - _SAME) <= volts <= supplies[-1] * (1 + _SAME):
        return None
    upper = next((i for i, s in enumerate(supplies) if volts <= s), len(supplies) - 1)
    lower = max(upper - 1, 0)
    span = supplies[upper] - supplies[lower]
    return Place(lower, upper, min(max((volts - supplies[lower]) / span, 0.0), 1.0) if span else 0.0)


def rising(supplies: Sequence[float], table: str) -> None:
    """Complain of a table whose rows are not ordered by supply.

    Raises
    ------
    QuantityError
        If a supply is not above the one before it.
    """
    if any(b <= a for a, b in itertools.pairwise(supplies)):
        raise QuantityError(f"{table}: list each supply once, the lowest first")


def of_columns() -> Quantity:
    """Air in which a record's limits hold, where it does not say. [K]"""
    return assume(
        "-40 to 85 degC",
        TEMPERATURE,
        "air in which levels and times hold: the column that data sheets of logic print first, common practice",
    )


def columns_assumed(part: str, what: str, temperatures: Quantity) -> tuple[Assumption, ...]:
    """The air in which a record's limits hold [K], where that was assumed."""
    if not temperatures.assumed():
        return ()
    value = f"{celsius(temperatures.min)} to {celsius(temperatures.max)}"
    return (Assumption(part, f"air in which its {what} hold", value, temperatures.origin.source),)


class InputLevel(Record):
    """At one printed supply: what an input takes for low and for high."""

    supply: Annotated[Quantity, VOLTAGE]
    low: Annotated[Quantity, VOLTAGE] = Field(description="V_IL max: at or below it counts as low")
    high: Annotated[Quantity, VOLTAGE] = Field(description="V_IH min: at or above it counts as high")

    @model_validator(mode="after")
    def _ordered(self) -> InputLevel:
        if not self.low.max < self.high.min < self.supply.typ:
            raise QuantityError("low must be below high, and high below the supply")
        return self


class SlowestEdge(Record):
    """At one printed supply: how slowly a clock input may rise or fall."""

    rail: Annotated[Quantity, VOLTAGE]
    slowest: Annotated[Quantity, POSITIVE_TIME] = Field(description="longest time of the edge")


class LogicFamily(Part):
    """Levels, drive and ratings that all registers of a family share.

    Notes
    -----
    Between two printed supplies levels lie on straight lines: CMOS thresholds are shares of the supply, TTL ones do not move.
    Beyond the lowest and the highest printed supply nothing is known.
    """

    role: ClassVar[str] = "component"
    kind: Literal["logic-family"] = "logic-family"
    inputs: Annotated[tuple[InputLevel, ...], Field(min_length=1, description="input levels, the lowest supply first")]
    edges: tuple[SlowestEdge, ...] = Field(
        (), description="how slowly a clock input may change, the lowest supply first"
    )
    levels_hold_at: Annotated[Quantity, TEMPERATURE] = of_columns()
    high_drop: Annotated[Quantity, VOLTAGE] = Field(
        description="how far a lightly loaded high output may stay below the supply, as one that drives the next register's input"
    )
    low_output: Annotated[Quantity, VOLTAGE] = Field(description="highest level of a lightly loaded low output")
    input_capacitance: Annotated[Quantity, CAPACITANCE] = Field(description="of one input, the largest")
    input_leakage: Annotated[Quantity, CURRENT] | None = Field(None, description="of one input, the largest")
    above_supply: Annotated[Quantity, VOLTAGE] | None = Field(
        None, description="how far an input may be above the register's supply; not for inputs that bear more"
    )
    input_rating: Annotated[Quantity, VOLTAGE] | None = Field(
        None, description="highest input voltage whatever the supply, of inputs that have no diode to it"
    )
    test_load: Annotated[Quantity, CAPACITANCE] = assume(
        "50 pF", CAPACITANCE, "load at which the delays hold, common practice of data sheets"
    )
    pin_current: Annotated[Quantity, CURRENT] | None = Field(None, description="rating of one output")
    total_current: Annotated[Quantity, CURRENT] | None = Field(
        None, description="rating of the supply pin and of the ground pin"
    )

    @model_validator(mode="after")
    def _by_supply(self) -> LogicFamily:
        rising(self.printed, "inputs")
        rising([edge.rail.typ for edge in self.edges], "edges")
        if self.above_supply is not None and self.input_rating is not None:
            raise QuantityError(
                "give above_supply or input_rating, not both: an input has a diode to the supply or none"
            )
        return self

    @property
    def printed(self) -> tuple[float, ...]:
        """Supplies at which input levels are printed, rising. [V]"""
        return tuple(level.supply.typ for level in self.inputs)

    def input_levels(self, volts: float) -> tuple[float, float] | None:
        """Highest voltage that counts as low and lowest that counts as high at a supply; None beyond the printed ones. [V]"""
        place = place_in(self.printed, volts)
        if place is None:
            return None
        return (
            place.straight([level.low.min for level in self.inputs]),
            place.straight([level.high.max for level in self.inputs]),
        )

    def slowest_edge(self, volts: float) -> float | None:
        """Longest time in which a clock input may rise or fall at a supply; None where it is not known. [s]"""
        place = place_in([edge.rail.typ for edge in self.edges], volts) if self.edges else None
        return None if place is None else place.straight([edge.slowest.min for edge in self.edges])
