"""The shape of a board file. The JSON Schema that editors use is made from these classes."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, ValidationInfo, model_validator

from boardsim.board.enable import EnableTable
from boardsim.board.power_up import ControlLine, PowerUpTable, check_lines
from boardsim.errors import QuantityError
from boardsim.parts.base import Part, any_of, named_part
from boardsim.parts.boost import Boost
from boardsim.parts.bulk import Bulk
from boardsim.parts.cable import Cable
from boardsim.parts.charging import ChargingResistor
from boardsim.parts.coil import Coil
from boardsim.parts.controller import Controller
from boardsim.parts.diode import Diode
from boardsim.parts.kinds import kinds
from boardsim.parts.leads import Leads
from boardsim.parts.logic import Logic
from boardsim.parts.record import Name, Record
from boardsim.parts.register import ShiftRegister
from boardsim.parts.supply import Supply
from boardsim.parts.temperature import COLDEST, HOTTEST
from boardsim.quantities import (
    CAPACITANCE,
    CURRENT,
    FREQUENCY,
    INDUCTANCE,
    POSITIVE_RESISTANCE,
    RESISTANCE,
    SHARE,
    TEMPERATURE,
    TEMPERATURE_RISE,
    TIME,
    VOLTAGE,
    Quantity,
    assume,
    celsius,
)


def _any_kind(*roles: str) -> Any:
    """A field that takes any kind of part of these roles, told apart by `kind`."""
    return any_of([cls for role in roles for cls in kinds(role).values()])


def _with_kind(value: Any, info: ValidationInfo) -> Any:
    """A switch stage is of the kind of the transistor that it names."""
    if not isinstance(value, dict) or "kind" in value:
        return value
    part, kind = value.get("part"), ""
    if isinstance(part, str) and info.context and "kind_of" in info.context:
        kind = info.context["kind_of"](part)
    elif isinstance(part, dict) and part.get("kind") in [*kinds("switch")]:
        kind = part["kind"]
    return {"kind": kind or _likely_kind(value), **value}


def _likely_kind(value: dict[str, Any]) -> str:
    """The kind of switch stage whose keys a table has most of: mistakes in it are then named in terms of what is meant."""

    def fit(kind: str) -> tuple[int, int]:
        fields = kinds("switch")[kind].model_fields
        missing = sum(field.is_required() and name not in value for name, field in fields.items())
        return sum(key in fields for key in value), -missing

    return max(kinds("switch"), key=fit)


_ROUNDING = 1e-6  # [K], of a temperature that was turned from degC: a range that ends at a bound is within it


def _stiff_unless_said(value: Any) -> Any:
    """A logic rail without a kind is a supply of its own, as it has always been."""
    if isinstance(value, dict) and "kind" not in value:
        return {"kind": Logic.model_fields["kind"].default, **value}
    return value


def _plain_unless_said(value: Any) -> Any:
    """A coil without a kind is one of fixed inductance, whose motion is not described."""
    if isinstance(value, dict) and "kind" not in value:
        return {"kind": Coil.model_fields["kind"].default, **value}
    return value


def _further(role: str, first: type[Part]) -> list[type[Part]]:
    """Every kind of a role but the one that a table in place is of where it does not say."""
    return [cls for cls in kinds(role).values() if cls is not first]


AnyClamp = _any_kind("clamp")
AnySwitch = _any_kind("switch")
AnyLogic = _any_kind("logic")
AnyCoil = _any_kind("coil")
AnyComponent = _any_kind("component", "register")
_OTHERS = [cls for cls in kinds("register").values() if cls is not ShiftRegister]


class Line(Record):
    """One line of the chain: a resistor at its driver, trace or cable from register to register, and what holds it."""

    series: Annotated[Quantity, RESISTANCE] = assume("0 ohm", RESISTANCE, "no resistor at the driver given")
    capacitance: Annotated[Quantity, CAPACITANCE] = assume(
        "5 pF", CAPACITANCE, "of the trace to each register, 5 cm at 1 pF/cm, from memory"
    )
    pull_up: Annotated[Quantity, POSITIVE_RESISTANCE] | None = Field(None, description="to the logic rail")
    pull_down: Annotated[Quantity, POSITIVE_RESISTANCE] | None = Field(None, description="to ground")

    @model_validator(mode="after")
    def _one_way(self) -> Line:
        if self.pull_up is not None and self.pull_down is not None:
            raise QuantityError("give pull_up or pull_down, not both")
        return self

    @property
    def pull(self) -> Quantity | None:
        """What holds it, whichever way; None where nothing does. [ohm]"""
        return self.pull_down or self.pull_up


class Chain(Record):
    """The chain of registers and how the controller writes it."""

    register_: named_part(ShiftRegister, *_OTHERS) = Field(alias="register")  # type: ignore[valid-type]
    count: Annotated[int, Field(strict=True, ge=1, le=64)]
    clock: Annotated[Quantity, FREQUENCY]
    bit_order: Literal["msb", "lsb"] = Field("msb", description="which bit of each byte is sent first")
    first_out: Literal["far", "near"] = Field(
        "far", description="whose byte is sent first: of the farthest or the nearest register"
    )
    active: Literal["high", "low"] = Field("high", description="output level by which the firmware means on")
    latch_time: Annotated[Quantity, TIME] = assume(
        "500 ns", TIME, "from the last clock edge to the latch edge, a pin toggled by firmware, from memory"
    )
    data_line: Line = Field(
        Line(), description="from the controller to the first register, and on from each to the next"
    )
    clock_line: Line = Field(Line(), description="to all registers")
    latch_line: Line = Field(Line(), description="to all registers")

    output_enable: ControlLine | None = Field(
        None, description="what holds the registers' output enable (active low); taken as tied low if absent"
    )
    clear: ControlLine | None = Field(
        None, description="what holds the registers' clear (active low); taken as tied high if absent"
    )

    decoupling: Annotated[Quantity, CAPACITANCE] | None = Field(
        None, description="capacitor at the supply pin of each register"
    )
    supply_inductance: Annotated[Quantity, INDUCTANCE] = assume(
        "20 nH", INDUCTANCE, "from the logic rail's capacitor to each register, 2 cm of trace at 10 nH/cm, from memory"
    )

    @model_validator(mode="after")
    def _can_work(self) -> Chain:
        check_lines(self.output_enable, self.clear)
        return self

    @property
    def outputs(self) -> int:
        """Outputs of the whole chain."""
        return int(self.count * self.register_.outputs)


class Matrix(Record):
    """Rows and columns of coils: a switch per line, and each coil from a row to a column."""

    rows: str = Field(description="register outputs of the rows, which tie coils to the rail, in order")
    columns: str = Field(description="register outputs of the columns, which tie coils to ground, in order")
    row_bits: str | None = Field(None, description="bits of the firmware's image; the outputs if absent")
    column_bits: str | None = Field(None, description="bits of the firmware's image; the outputs if absent")
    row_switch: Annotated[AnySwitch, BeforeValidator(_with_kind)] = Field(  # type: ignore[valid-type]
        description="of each row, from the rail; `switch` of the range is that of each column"
    )
    row_clamp: AnyClamp = Field(  # type: ignore[valid-type]
        description="of each row, from ground; `clamp` of the range is that of each column, to the rail"
    )
    diode: named_part(Diode) | None = Field(  # type: ignore[valid-type]
        None, description="in series with each coil, from its row; without it currents find ways through other coils"
    )


class ChannelRange(Record):
    """Channels that are built alike."""

    coil: named_part(Coil, *_further("coil", Coil))  # type: ignore[valid-type]
    switch: Annotated[AnySwitch, BeforeValidator(_with_kind)]  # type: ignore[valid-type]
    clamp: AnyClamp  # type: ignore[valid-type]
    matrix: Matrix | None = Field(
        None, description="coils in rows and columns, numbered row by row; switch and clamp are then the columns'"
    )
    leads: Leads | None = Field(
        None, description="the two wires from the board to the coil; none if it sits on the board"
    )
    outputs: str | None = Field(
        None,
        description="register outputs that the channels are wired to, in order; the channel numbers if absent",
    )
    bits: str | None = Field(
        None,
        description="bits of the firmware's image that mean the channels, in order; the outputs if absent",
    )
    label: Name = Field("channel {n}", description="name for reports; {n} is the channel's number")
    numbers: str | None = Field(None, description="numbers for {n}, in order; the channel numbers if absent")
    reverse: str | None = Field(
        None, description="of a full bridge: further channel numbers that fire the same coils backwards, in order"
    )
    reverse_outputs: str | None = Field(None, description="their register outputs; their channel numbers if absent")
    reverse_bits: str | None = Field(None, description="their bits of the firmware's image; their outputs if absent")
    reverse_label: Name | None = Field(
        None, description='their name for reports, with {n} as in label; the label and "back" if absent'
    )

    @model_validator(mode="after")
    def _fits_together(self) -> ChannelRange:
        clamp: Part = self.clamp
        if problem := clamp.beside(self.switch):
            raise QuantityError(problem)
        if self.leads is None and clamp.at_the_coil():
            raise QuantityError(
                'the clamp is at = "coil", and no leads are given; add leads = { gauge = ..., length = ... }'
            )
        return self


class BrownOut(Record):
    """Below this voltage of a rail, for longer than this, the board no longer works."""

    voltage: Annotated[Quantity, VOLTAGE]
    lasting: Annotated[Quantity, TIME]


class Exclusive(Record):
    """Channels of which only so many may be on at once."""

    channels: str
    most: Annotated[int, Field(strict=True, ge=1)] = 1
    reason: Name | None = None


class AllOff(Record):
    """Channels that must all be off soon after the firmware has fallen silent."""

    within: Annotated[Quantity, TIME] = Field(description="from the last latch edge on")
    channels: str | None = Field(None, description="which channels; all of the board if absent")


class Limits(Record):
    """Limits of the board as a whole."""

    most_on: Annotated[int, Field(strict=True, ge=1)] | None = None
    most_current: Annotated[Quantity, CURRENT] | None = Field(
        None, description="what all coils together may carry at once"
    )
    all_off: AllOff | None = Field(None, description="when all must be off after the last register frame")
    brown_out: BrownOut | None = Field(None, description="of the coil rail")
    logic_brown_out: BrownOut | None = Field(
        None, description="of the logic rail: where the controller resets, and how long a dip that counts is"
    )
    exclusive: tuple[Exclusive, ...] = ()
    pulse_error: Annotated[Quantity, SHARE] = assume(
        "10 %", SHARE, "share of its width by which a pulse may come late or change, common practice"
    )
    lateness: Annotated[Quantity, TIME] | None = Field(
        None, description="how long an output may follow its command, whatever the pulse"
    )
    guard_band: Annotated[Quantity, SHARE] = assume("10 %", SHARE, "guard band for the verdict tight, common practice")


class Deratings(Record):
    """The share of each rating that may be used, and why."""

    voltage: Annotated[Quantity, SHARE] | None = None
    current: Annotated[Quantity, SHARE] | None = None
    power: Annotated[Quantity, SHARE] | None = None
    energy: Annotated[Quantity, SHARE] | None = None
    reason: Name = "the user's own"


class BoardFile(Record):
    """A board: supply, cable, bulk capacitor, logic rail, chain, coils, channels, limits."""

    name: Name | None = None
    ambient: Annotated[Quantity, TEMPERATURE] | None = None
    junction_rise: Annotated[Quantity, TEMPERATURE_RISE] = assume(
        "20 K", TEMPERATURE_RISE, "semiconductors that have warmed up, above the ambient; held against what they take"
    )
    supply: Supply
    cable: Cable
    charging: ChargingResistor | None = Field(
        None, description="resistor behind the cable, through which bulk is charged as a reservoir; none if absent"
    )
    bulk: Bulk
    logic: Annotated[AnyLogic, BeforeValidator(_stiff_unless_said)]  # type: ignore[valid-type]
    chain: Chain
    controller: Controller | None = None
    coils: dict[Name, Annotated[AnyCoil, BeforeValidator(_plain_unless_said)]] = Field(  # type: ignore[valid-type]
        default_factory=dict
    )
    parts: dict[Name, AnyComponent] = Field(default_factory=dict)  # type: ignore[valid-type]
    channels: Annotated[dict[str, ChannelRange], Field(min_length=1)]
    enable_lines: dict[Name, EnableTable] = Field(
        default_factory=dict, description="lines that the controller's timer chops while pulses are held, by name"
    )
    boost: Boost | None = Field(None, description="a reservoir of a higher voltage for the peaks of held pulses")
    power_up: PowerUpTable = PowerUpTable()
    limits: Limits = Limits()
    derating: Deratings = Deratings()

    @model_validator(mode="after")
    def _models_hold(self) -> BoardFile:
        if self.ambient is not None:
            refuse_extremes(self.ambient, self.junction_rise)
        rail: Any = self.logic  # a part of role "logic"
        if self.charging is not None and rail.derived:
            raise QuantityError(
                "the logic rail hangs on a coil rail behind a charging resistor, which its load would hold down for ever; give logic "
                "a supply of its own, or leave charging out"
            )
        return self


def refuse_extremes(ambient: Quantity, rise: Quantity) -> None:
    """Hold the temperatures of semiconductors against the range in which their models hold.

    Parameters
    ----------
    ambient : Quantity
        [K]
    rise : Quantity
        Of warm junctions above the warmest air. [K]

    Raises
    ------
    QuantityError
        If they go beyond it.
    """
    low, high = ambient.min, ambient.max + rise.typ
    if low < COLDEST - _ROUNDING or high > HOTTEST + _ROUNDING:
        raise QuantityError(
            f"ambient and junction_rise take semiconductors from {celsius(low)} to {celsius(high)}; their models hold from "
            f"{celsius(COLDEST)} to {celsius(HOTTEST)}"
        )


def component_class(kind: str) -> type[Part] | None:
    """The class of records of a kind that stand in the library, or under [parts] and [coils]."""
    for role in ("component", "register", "coil"):
        if kind in kinds(role):
            return kinds(role)[kind]
    return None
