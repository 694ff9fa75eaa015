"""What every kind of part is: a record with a kind and a role, and its stamp in a corner.

Nothing under `parts` knows PySpice or ngspice: a part says what it consists of as values; `circuit` builds the deck
from them, `verdict` applies the rules to the waveforms.
"""

from __future__ import annotations

import inspect
import itertools
import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Annotated, Any, ClassVar, Literal, Self, Union

from pydantic import BeforeValidator, Field, ValidationError, ValidationInfo, WrapValidator
from pydantic_core import InitErrorDetails, PydanticCustomError

from boardsim.parts.elements import Element, Port, Probe, Signal
from boardsim.parts.proof import Proof
from boardsim.parts.record import Name, Record, named_like, said, shown
from boardsim.parts.rules import HeatRule, Rule, SumRule, TogetherRule, linear_unknown
from boardsim.quantities import Bound, Quantity

if TYPE_CHECKING:
    from boardsim.parts.coil import Coil


T_MODEL = 298.15  # [K], at which datasheets give typical figures and where no ambient is given


class Part(Record):
    """One component record. `kind` names the kind, `role` the place where it can be used."""

    role: ClassVar[str] = ""
    side: ClassVar[Literal["low", "high"]] = "low"
    """Of a switch: whether it ties the coil to ground, and the coil's other end lies at the rail, or the other way round."""
    both_ways: ClassVar[bool] = False
    """Of a switch: whether its coil lies between two of it, each on a channel number of its own, and takes either direction."""
    in_the_chain: ClassVar[bool] = False
    """Of a switch: whether it is an output of the chain's own registers."""
    holds_switch: ClassVar[bool] = False
    """Of a clamp: whether it turns the switch on again, so that the switch takes the coil's energy in its linear region."""
    kind: str
    title: Name | None = None

    @property
    def across(self) -> Literal["coil", "switch"]:
        """Of a clamp: what it lies in parallel to."""
        return "coil"

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this part, by the keys of `Corner.ends`."""
        return {}

    def tolerances_too(self) -> tuple[tuple[str, Quantity], ...]:
        """Further numbers that the same ends vary, such as those of a stage's second transistor."""
        return ()

    def taken_at_ends(self) -> tuple[Quantity, ...]:
        """Numbers whose worse end counts in every corner, or that lie within one that `tolerances` holds."""
        return ()

    def implied(self) -> dict[str, Quantity]:
        """Numbers by the names of fields that follow from others, or are assumed where the field was not given."""
        return {}

    def proofs(self) -> tuple[Proof, ...]:
        """What of its datasheet the model can be held against; none for a part that has no model of its own."""
        return ()

    def per_package(self) -> int:
        """How many channels share one package of this part; 0 where each has its own."""
        return 0

    def at_the_coil(self) -> bool:
        """Whether a clamp sits at the coil's own ends and not on the board; only with leads between the two a difference."""
        return False

    def blocks(self, volts: float) -> bool:
        """Whether a clamp carries no current to speak of while this voltage lies across the switch that is off. [V]"""
        return True

    def held_off(self) -> bool:
        """Whether a switch has a resistor of its own that keeps it off while nothing drives it."""
        return False

    def clamped(self) -> bool:
        """Whether a switch has a clamp in its own package, which its stamp holds."""
        return False

    def control(self, name: str) -> str:
        """The node of a switch's control terminal in its stamp of this name, such as its gate; empty where it has none.

        A switch that has one probes the current into that terminal as `i_g`.
        """
        return ""

    def linear(self, corner: Corner) -> tuple[Rule, ...]:
        """What judges a switch that takes a coil's energy in its linear region: a limit that nobody knows unless a kind says."""
        return (linear_unknown(),)

    def follows_within(self) -> float:
        """How long a switch takes to follow an edge at its input, where that is long against the edge; else 0.

        A run looks closely for as long after each edge. [s]
        """
        return 0.0

    def package_of(self, place: int, output: int) -> int:
        """Which of its packages a channel is in: `place` counts the channels of its range, `output` is the register's.

        Filled in the order of the range, unless a kind says better.
        """
        return place // self.per_package()

    def beside(self, switch: Part) -> str:
        """What keeps a clamp from being used beside a switch, for people; nothing where it fits."""
        return ""

    def matched(self, switch: Part) -> Part:
        """A clamp that is offered for comparison, as it would be built beside a switch: of its package, where it is in one."""
        return self

    def common(self, name: str, a: str, b: str, corner: Corner) -> Stamp | None:
        """What a clamp has once for all channels of a package, from the node `a` where theirs end to the node `b`.

        None where every channel's clamp is whole by itself and ends at `b`.
        """
        return None

    def takes_over(self, current: float) -> float:
        """Highest current that a clamp's own parts are known to meet when the coil carries this much. [A]"""
        return current

    def in_the_way(self) -> float:
        """Highest resistance that a coil's current meets in this part once its switch is off: it sets how finely the decay
        has to be followed. [ohm]
        """
        return 0.0

    def swings_with(self) -> float:
        """Least capacitance that a coil's current goes into once its switch is off: the two then swing; 0 if none. [F]"""
        return 0.0

    def steady_input(self, volts: float, resistance: float) -> float:
        """Highest current that a switch draws from an output that stays at `volts` behind `resistance`. [V], [ohm] -> [A]"""
        return 0.0

    def input_threshold(self) -> Quantity | None:
        """Of a switch with a logic input of its own, between which voltages that switches; None of any other. [V]"""
        return None

    def edge_input(self, volts: float, resistance: float) -> tuple[float, float]:
        """Charge that a switch takes from an output that rises to `volts` behind `resistance`, and the current at first.

        Its steady current, for ever, unless a kind says better. [V], [ohm] -> [C], [A]
        """
        current = self.steady_input(volts, resistance)
        return math.inf if current > 0 else 0.0, current

    def delays(self) -> tuple[float, float]:
        """By how much a switch turns on and off later than an edge at its input by design, at most; what its gate takes besides
        is left out. [s]
        """
        return 0.0, 0.0

    def steady_for(self) -> float:
        """How long a level at a switch's input has to last at least for its model to hold. [s]"""
        return 0.0

    def moments(self) -> tuple[float, ...]:
        """When, after an edge at a switch's input, a run makes a step whatever its estimate of the error: where the switch
        itself makes an edge that comes late and is short against how long it took to come. [s]
        """
        return ()

    @classmethod
    def candidates(cls, shelf: Shelf, coil: Coil, rail: float) -> tuple[Self, ...]:
        """This kind as a library could build it, to be set beside other kinds of its role.

        Every combination of library parts for the fields that take a part. A kind that needs more than parts, such
        as a resistance, overrides this.

        Parameters
        ----------
        shelf : callable
            The library's parts of a class.
        coil : Coil
            That it is to serve.
        rail : float
            What feeds that coil. [V]
        """
        classes = {name: field.annotation for name, field in cls.model_fields.items()}
        fields = {name: c for name, c in classes.items() if inspect.isclass(c) and issubclass(c, Part)}
        combinations = itertools.product(*(shelf(c) for c in fields.values()))
        return tuple(cls.model_validate(dict(zip(fields, parts, strict=True))) for parts in combinations)


Shelf = Callable[[type[Part]], Sequence[Part]]
"""A library, asked for all parts of a class."""


def any_of(classes: Sequence[type[Part]]) -> Any:
    """A field that takes a part of any of these classes, told apart by `kind`."""
    if len(classes) == 1:
        return classes[0]

    def without_tag(value: Any, handler: Callable[[Any], Any]) -> Any:
        # pydantic names the kind in the place of an error, where a reader would take it for a key of the file.
        try:
            return handler(value)
        except ValidationError as err:
            kinds = {cls.model_fields["kind"].default for cls in classes}
            raise ValidationError.from_exception_data(
                "part",
                [
                    InitErrorDetails(
                        type=PydanticCustomError("said", "{said}", {"said": e["msg"]})
                        if e["type"] == "said"
                        else e["type"],
                        loc=e["loc"][1:] if e["loc"] and e["loc"][0] in kinds else e["loc"],
                        input=e["input"],
                        ctx=e.get("ctx", {}),
                    )
                    for e in err.errors(include_url=False)
                ],
            ) from None

    return Annotated[Union[tuple(classes)], Field(discriminator="kind"), WrapValidator(without_tag)]  # noqa: UP007


def kinds_of(*classes: type[Part]) -> str:
    """What a part of one of several classes is called: by their role where a kind bears its name, as for coils, else by their kinds."""
    kinds = [c.model_fields["kind"].default for c in classes]
    return classes[0].role if classes[0].role in kinds else " or ".join(kinds)


def named_part(cls: type[Part], *others: type[Part]) -> Any:
    """A field that takes a part inline, or by its name from the board file or the library.

    With several classes a table in place without a `kind` is of the first.
    """
    classes = {c.model_fields["kind"].default: c for c in (cls, *others)}
    several: Any = Union[tuple(classes.values())] if others else cls  # noqa: UP007

    def find(value: Any, info: ValidationInfo) -> Any:
        kind = kinds_of(cls, *others)
        if isinstance(value, str):
            if not info.context or "find" not in info.context:
                raise PydanticCustomError("no_library", "a part by name needs a library")
            return info.context["find"](cls, value, *others)
        if isinstance(value, Mapping):
            if value.get("kind", cls.model_fields["kind"].default) not in [*classes]:  # which may be no word at all
                raise said(f"this is {named_like(str(value['kind']))}; {named_like(kind)} is needed here")
            return {"kind": cls.model_fields["kind"].default, **value}
        if not isinstance(value, tuple(classes.values())):
            raise said(f"must be the name of {named_like(kind)} in quotes, or a table {{ ... }}; found {shown(value)}")
        return value

    return Annotated[any_of(tuple(classes.values())), BeforeValidator(find, json_schema_input_type=str | several)]


@dataclass(frozen=True)
class Assumption:
    """A number that the tool had to supply: of which part, what, and why this value."""

    part: str
    quantity: str
    value: str
    why: str


@dataclass(frozen=True)
class Total:
    """What the channels of one package add up to, and the rule that judges it, once for the package.

    Attributes
    ----------
    rule : PeakRule, PulseRule, MeanRule, HeatRule or TogetherRule
        Its quantity is that of the sum.
    signal : Signal
        This channel's share of the sum; empty where the rule sums powers or energies by itself.
    unit : str
    """

    rule: SumRule | HeatRule | TogetherRule
    signal: Signal = ()
    unit: str = ""


@dataclass(frozen=True)
class Stamp:
    """What one part adds to the deck and to the judgement."""

    elements: tuple[Element, ...] = ()
    probes: tuple[Probe, ...] = ()
    ports: tuple[Port, ...] = ()
    rules: tuple[Rule, ...] = ()
    assumptions: tuple[Assumption, ...] = ()
    totals: tuple[Total, ...] = ()
    rest: Mapping[str, float] = field(default_factory=dict)
    """Node voltages that a run has to begin with. [V]"""
    joins: tuple[tuple[str, Signal], ...] = ()
    """What is added to quantities of the same channel's other parts, such as a clamp's current to that into the gate."""
    inside: tuple[tuple[str, Stamp], ...] = ()
    """Further components at the same place, each under its own name, such as the second transistor of a half bridge."""


@dataclass(frozen=True)
class Corner:
    """Which end of each tolerance a run takes, and how warm windings and junctions are.

    Attributes
    ----------
    name : str
        For reports, such as "supply high, coils cold".
    ends : mapping
        From a tolerance's key ("supply", "coil_resistance", "inductance", "clamp_voltage", "breakdown", "bulk",
        "esr", "logic") to "min" or "max"; a key that is absent is taken at its typical value.
    winding : {"cold", "hot", "reference"}
        Winding temperature.
    ambient : float
        Warmest air around the board, from which junction temperatures count. [K]
    junction : float
        Temperature of every semiconductor in this run, which its electrical figures are taken at. [K]
    """

    name: str
    ends: Mapping[str, Bound] = field(default_factory=dict)
    winding: Literal["cold", "hot", "reference"] = "reference"
    ambient: float = T_MODEL
    junction: float = T_MODEL

    def take(self, quantity: Quantity, key: str) -> float:
        """The value of a quantity in this corner. [its unit]"""
        return quantity.at(self.ends.get(key, "typ"))

    def drifted(self, drift: float) -> float:
        """How far a voltage with this temperature drift is from where it is at 25 degC. [V/K] -> [V]"""
        return drift * (self.junction - T_MODEL)


NOMINAL = Corner("nominal")


@dataclass(frozen=True)
class Surroundings:
    """What a run assumes around the board, and of junctions that have warmed up. [K]"""

    ambient_low: float
    ambient_high: float
    junction_rise: float = 0.0


def listed(part: str, **quantities: Quantity) -> tuple[Assumption, ...]:
    """The assumptions among these quantities."""
    return tuple(
        Assumption(part, name.replace("_", " "), str(q), q.origin.source)
        for name, q in quantities.items()
        if q.assumed()
    )
