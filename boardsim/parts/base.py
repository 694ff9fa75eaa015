"""What every kind of part is made of: fields, plain circuit elements, probes, ports for the audit, and rules.

Nothing here knows PySpice or ngspice: a part says what it consists of as values; `circuit` builds the deck from
them, `verdict` applies the rules to the waveforms.
"""

from __future__ import annotations

import difflib
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Annotated, Any, ClassVar, Literal

from pydantic import (
    AfterValidator,
    BaseModel,
    BeforeValidator,
    ConfigDict,
    ValidationError,
    ValidationInfo,
    model_validator,
)
from pydantic_core import InitErrorDetails, PydanticCustomError

from boardsim.quantities import Bound, Quantity

FROM_MEMORY = "typical of its class, from memory: check against your datasheet"

# ---------------------------------------------------------------------------------------------- fields


def nearest(word: str, words: list[str]) -> str:
    """ " (did you mean ...?)" for the nearest known word, or nothing."""
    close = difflib.get_close_matches(word, words, n=1, cutoff=0.6)
    return f' (did you mean "{close[0]}"?)' if close else ""


class Record(BaseModel):
    """A table of a file: frozen, unknown keys refused with the nearest known one."""

    model_config = ConfigDict(frozen=True, extra="forbid", arbitrary_types_allowed=True)

    @model_validator(mode="wrap")
    @classmethod
    def _in_plain_words(cls, value: Any, handler: Callable[[Any], Any]) -> Any:
        """Say of each mistake what is allowed; done here since only here the class is at hand."""
        try:
            return handler(value)
        except ValidationError as err:
            known = list(cls.model_fields)
            raise ValidationError.from_exception_data(
                cls.__name__, [_reworded(e, known) for e in err.errors(include_url=False)]
            ) from None


def _reworded(error: Any, known: list[str]) -> InitErrorDetails:
    """One pydantic error in the project's words: what was found, what is allowed, the nearest known word."""
    kind, loc, found, ctx = error["type"], error["loc"], error["input"], error.get("ctx", {})
    key = str(loc[-1]) if loc else ""
    expected = re.findall(r"'([^']*)'", str(ctx.get("expected", ctx.get("expected_tags", ""))))
    allowed = ", ".join(f'"{word}"' for word in expected)
    said = error["msg"].removeprefix("Value error, ")
    if kind == "extra_forbidden":
        said = f'"{key}" is not known here{nearest(key, known)}; known: {", ".join(known)}'
    elif kind == "missing":
        said = f'"{key}" is missing'
    elif kind == "literal_error":
        said = f'{found!r} is not allowed for "{key}"{nearest(str(found), expected)}; allowed: {allowed}'
    elif kind == "union_tag_invalid":
        tag = str(ctx.get("tag", ""))
        said = f'kind "{tag}" is not known for "{key}"{nearest(tag, expected)}; known: {allowed}'
    elif kind == "union_tag_not_found":
        said = f'"{key}" needs a "kind"'
    elif kind in ("model_type", "model_attributes_type", "dict_type"):
        said = f'"{key}" must be a table, such as {{ ... }}; found {found!r}'
    elif kind in ("int_type", "int_parsing", "int_from_float"):
        said = f'"{key}" must be a whole number without unit; found {found!r}'
    elif kind in ("string_type", "tuple_type", "list_type"):
        what = "text in quotes" if kind == "string_type" else "a list in [ ]"
        said = f'"{key}" must be {what}; found {found!r}'
    return InitErrorDetails(type=PydanticCustomError("said", "{said}", {"said": said}), loc=loc, input=found)


def _safe(text: str) -> str:
    """Names go into reports and file names: letters, digits, blanks and a few signs, on one line."""
    if not re.fullmatch(_NAME, text):
        raise PydanticCustomError(
            "unsafe_name",
            "{text} cannot be a name: use up to 60 letters, digits, blanks and _ + - ( ) # / , . { }, starting with a letter or digit",
            {"text": repr(text)},
        )
    return text


_NAME = r"[^\W_][\w +\-()#/,.{}]{0,59}"
Name = Annotated[str, AfterValidator(_safe)]


class Part(Record):
    """One component record. `kind` names the kind, `role` the place where it can be used."""

    role: ClassVar[str] = ""
    kind: str
    title: Name | None = None

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this part, by the keys of `Corner.ends`."""
        return {}


def named_part(cls: type[Part]) -> Any:
    """A field that takes a part inline, or by its name from the board file or the library."""

    def find(value: Any, info: ValidationInfo) -> Any:
        if isinstance(value, str):
            if not info.context or "find" not in info.context:
                raise PydanticCustomError("no_library", "a part by name needs a library")
            return info.context["find"](cls, value)
        if isinstance(value, Mapping) and "kind" not in value:
            return {"kind": cls.model_fields["kind"].default, **value}
        return value

    return Annotated[cls, BeforeValidator(find, json_schema_input_type=str | cls)]


# -------------------------------------------------------------------------------------------- elements


@dataclass(frozen=True)
class Resistor:
    """Between two nodes. [ohm]"""

    name: str
    a: str
    b: str
    ohms: float


@dataclass(frozen=True)
class Inductor:
    """Between two nodes; its current flows from a to b inside. [H]"""

    name: str
    a: str
    b: str
    henries: float


@dataclass(frozen=True)
class Capacitor:
    """Between two nodes. [F]"""

    name: str
    a: str
    b: str
    farads: float


@dataclass(frozen=True)
class Model:
    """A .model line: device type and parameters in SI units, ngspice's own names."""

    name: str
    type: str
    parameters: Mapping[str, float]


@dataclass(frozen=True)
class Junction:
    """A diode between anode and cathode."""

    name: str
    anode: str
    cathode: str
    model: Model


@dataclass(frozen=True)
class PowerMosfet:
    """A vertical MOSFET (ngspice VDMOS)."""

    name: str
    drain: str
    gate: str
    source: str
    model: Model


@dataclass(frozen=True)
class Ammeter:
    """A source of 0 V; the current through it counts from a to b."""

    name: str
    a: str
    b: str


@dataclass(frozen=True)
class Drive:
    """A voltage source that follows a register output: times [s] and levels [V], straight lines between."""

    name: str
    plus: str
    minus: str
    points: tuple[tuple[float, float], ...]


@dataclass(frozen=True)
class CurrentLaw:
    """A current from minus to plus through the source, given by an expression of node voltages. [A]"""

    name: str
    plus: str
    minus: str
    expression: str


Element = Resistor | Inductor | Capacitor | Junction | PowerMosfet | Ammeter | Drive | CurrentLaw

# --------------------------------------------------------------------------------------------- signals

Signal = tuple[tuple[float, str], ...]
"""A linear combination of saved vectors: ((coefficient, "v(node)" or "i(element)"), ...)."""

GROUND = "0"


def voltage(a: str, b: str = GROUND) -> Signal:
    """The voltage from node a to node b. [V]"""
    return tuple((sign, f"v({node})") for sign, node in ((1.0, a), (-1.0, b)) if node != GROUND)


def current(element: Inductor | Ammeter | Drive) -> Signal:
    """The current through an element that has a branch of its own, from a (plus) to b. [A]"""
    return ((1.0, f"i({_PREFIX[type(element)]}{element.name})"),)


_PREFIX = {Inductor: "l", Ammeter: "v", Drive: "v"}


def scaled(factor: float, signal: Signal) -> Signal:
    """A signal times a number."""
    return tuple((factor * k, name) for k, name in signal)


def plus(*signals: Signal) -> Signal:
    """The sum of signals."""
    total: dict[str, float] = {}
    for signal in signals:
        for k, name in signal:
            total[name] = total.get(name, 0.0) + k
    return tuple((k, name) for name, k in total.items())


@dataclass(frozen=True)
class Probe:
    """A quantity of a part that is read from the waveforms, such as v_ds [V] or i_coil [A]."""

    quantity: str
    signal: Signal
    unit: str


@dataclass(frozen=True)
class Port:
    """What the passivity audit sums for one part: pairs of voltage and current probes, current into the part.

    Attributes
    ----------
    part : str
        Name for messages.
    pairs : tuple of (voltage, current) quantity names
        Terminal power is the sum of their products. [W]
    holds : float
        Energy that the part's own capacitances can hold and return. [J]
    store : tuple or None
        (quantity, value): the part stores value/2 x quantity^2 (L with its current, C with its voltage); the
        energy that it has dissipated, not the terminal energy, must then never fall.
    from_rest : bool
        Count voltages from their first value. A capacitor on a rail is as passive about its resting voltage as
        about 0 V, and rounding errors of its charge do not then count at the full rail voltage.
    """

    part: str
    pairs: tuple[tuple[str, str], ...]
    holds: float = 0.0
    store: tuple[str, float] | None = None
    from_rest: bool = False


# ----------------------------------------------------------------------------------------------- rules

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


@dataclass(frozen=True)
class CeilingRule:
    """A supply's current must stay below its ceiling."""

    check: str
    quantity: str
    limit: Limit
    what: str


Rule = PeakRule | MeanRule | BreakdownRule | PullInRule | ReleaseRule | DipRule | CeilingRule

# ---------------------------------------------------------------------------------------------- stamps


@dataclass(frozen=True)
class Assumption:
    """A number that the tool had to supply: of which part, what, and why this value."""

    part: str
    quantity: str
    value: str
    why: str


@dataclass(frozen=True)
class Stamp:
    """What one part adds to the deck and to the judgement."""

    elements: tuple[Element, ...] = ()
    probes: tuple[Probe, ...] = ()
    ports: tuple[Port, ...] = ()
    rules: tuple[Rule, ...] = ()
    assumptions: tuple[Assumption, ...] = ()
    hints: Mapping[str, float] = field(default_factory=dict)
    """Node voltages from which the operating point is sought. [V]"""


@dataclass(frozen=True)
class Corner:
    """Which end of each tolerance a run takes, and how warm windings are.

    Attributes
    ----------
    name : str
        For reports, such as "supply high, coils cold".
    ends : mapping
        From a tolerance's key ("supply", "coil_resistance", "inductance", "clamp_voltage", "breakdown", "bulk",
        "logic") to "min" or "max"; a key that is absent is taken at its typical value.
    winding : {"cold", "hot", "reference"}
        Winding temperature.
    """

    name: str
    ends: Mapping[str, Bound] = field(default_factory=dict)
    winding: Literal["cold", "hot", "reference"] = "reference"

    def take(self, quantity: Quantity, key: str) -> float:
        """The value of a quantity in this corner. [its unit]"""
        return quantity.at(self.ends.get(key, "typ"))


NOMINAL = Corner("nominal")


@dataclass(frozen=True)
class Surroundings:
    """What a run assumes around the board. [K]"""

    ambient_low: float
    ambient_high: float


def listed(part: str, **quantities: Quantity) -> tuple[Assumption, ...]:
    """The assumptions among these quantities."""
    return tuple(
        Assumption(part, name.replace("_", " "), str(q), q.origin.source)
        for name, q in quantities.items()
        if q.assumed()
    )
