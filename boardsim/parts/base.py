"""What every kind of part is made of: fields, plain circuit elements, probes, ports for the audit, and rules.

Nothing here knows PySpice or ngspice: a part says what it consists of as values; `circuit` builds the deck from
them, `verdict` applies the rules to the waveforms.
"""

from __future__ import annotations

import difflib
import re
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Annotated, Any, ClassVar, Literal, Union

from pydantic import (
    AfterValidator,
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    ValidationError,
    ValidationInfo,
    WrapValidator,
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


def shortened(text: str) -> str:
    """A word of a file for a message, cut where it is longer than any name."""
    return text if len(text) <= 60 else text[:60] + "..."


def shown(value: Any) -> str:
    """What a file holds, for a message: as it stands there where that is short."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, list | tuple):
        return "a list"
    if isinstance(value, str):
        return repr(shortened(value))
    return str(value)  # a number, a date or a time


def named_like(kind: str) -> str:
    """A kind with its article."""
    return f"{'an' if kind[0] in 'aeiou' or kind[:2] in ('n-', 'r-') else 'a'} {kind}"


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
            known = [field.alias or name for name, field in cls.model_fields.items()]
            errors = err.errors(include_url=False)
            # A list whose only entry is wrong counts as empty; the entry's own mistake says enough.
            inside = {e["loc"][:n] for e in errors for n in range(1, len(e["loc"]))}
            raise ValidationError.from_exception_data(
                cls.__name__,
                [_reworded(e, known) for e in errors if e["type"] != "too_short" or e["loc"] not in inside],
            ) from None


def _reworded(error: Any, known: list[str]) -> InitErrorDetails:
    """One pydantic error in the project's words: what was found, what is allowed, the nearest known word."""
    kind, loc, found, ctx = error["type"], error["loc"], shown(error["input"]), error.get("ctx", {})
    if kind in ("model_type", "model_attributes_type") and not loc:
        # The table around this one knows the key; it rewords the error.
        return InitErrorDetails(type=kind, loc=loc, input=error["input"], ctx=ctx)
    key = shortened(str(loc[-1])) if loc else ""
    expected = re.findall(r"'([^']*)'", str(ctx.get("expected", ctx.get("expected_tags", ""))))
    allowed = ", ".join(f'"{word}"' for word in expected)
    text = error["msg"].removeprefix("Value error, ")
    if kind == "extra_forbidden":
        text = f'"{key}" is not known here{nearest(key, known)}; known: {", ".join(known)}'
    elif kind == "missing":
        text = f'"{key}" is missing'
    elif kind == "literal_error":
        text = (
            f'{found} is not allowed for "{key}"{nearest(shortened(str(error["input"])), expected)}; allowed: {allowed}'
        )
    elif kind == "union_tag_invalid":
        tag = shortened(str(ctx.get("tag", "")))
        text = f'kind "{tag}" is not known for "{key}"{nearest(tag, expected)}; known: {allowed}'
    elif kind == "union_tag_not_found":
        text = f'"{key}" needs a "kind"'
    elif kind in ("model_type", "model_attributes_type", "dict_type"):
        text = f'"{key}" must be a table, such as {{ ... }}; found {found}'
    elif kind == "int_type":
        text = f'"{key}" must be a whole number without unit or quotes; found {found}'
    elif kind in ("greater_than_equal", "less_than_equal"):
        bound = f"{ctx['ge']} or more" if "ge" in ctx else f"{ctx['le']} or less"
        text = f'"{key}" must be {bound}; found {found}'
    elif kind == "too_short":
        text = f'"{key}" is empty; it needs at least {ctx["min_length"]} {"entry" if ctx["min_length"] == 1 else "entries"}'
    elif kind in ("string_type", "tuple_type", "list_type"):
        what = "text in quotes" if kind == "string_type" else "a list in [ ]"
        text = f'"{key}" must be {what}; found {found}'
    return InitErrorDetails(type=PydanticCustomError("said", "{said}", {"said": text}), loc=loc, input=error["input"])


def _safe(text: str) -> str:
    """Names go into reports and file names: letters, digits, blanks and a few signs, on one line."""
    if not re.fullmatch(_NAME, text):
        raise PydanticCustomError(
            "unsafe_name",
            "{text} cannot be a name: use up to 60 letters, digits, blanks and _ + - ( ) # / , . { }, starting with a letter or digit",
            {"text": repr(shortened(text))},
        )
    return text


def name_from(text: str, otherwise: str) -> str:
    """A name made from that of a file or folder, which may hold anything."""
    kept = "".join(c if re.fullmatch(r"[\w +\-()#/,.{}]", c) else "-" for c in text).lstrip("_ +-()#/,.{}")[:60]
    return kept if re.fullmatch(_NAME, kept) else otherwise


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


def said(text: str) -> PydanticCustomError:
    """A mistake in the project's own words."""
    return PydanticCustomError("said", "{said}", {"said": text})


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


def named_part(cls: type[Part]) -> Any:
    """A field that takes a part inline, or by its name from the board file or the library."""

    def find(value: Any, info: ValidationInfo) -> Any:
        kind = cls.model_fields["kind"].default
        if isinstance(value, str):
            if not info.context or "find" not in info.context:
                raise PydanticCustomError("no_library", "a part by name needs a library")
            return info.context["find"](cls, value)
        if isinstance(value, Mapping):
            if value.get("kind", kind) != kind:
                raise said(f"this is {named_like(str(value['kind']))}; {named_like(kind)} is needed here")
            return {"kind": kind, **value}
        if not isinstance(value, cls):
            raise said(f"must be the name of {named_like(kind)} in quotes, or a table {{ ... }}; found {shown(value)}")
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
