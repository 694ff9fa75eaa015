"""A shift register with a storage stage: what it asks of its lines, how fast it follows, and outputs of the 74HC595 type."""

from __future__ import annotations

from abc import abstractmethod
from dataclasses import dataclass
from typing import TYPE_CHECKING, Annotated, ClassVar, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Assumption, Part, Stamp, listed, named_part
from boardsim.parts.elements import GROUND, CurrentLaw, Drive, Element, Resistor
from boardsim.parts.family import LogicFamily, columns_assumed, of_columns, place_in, rising
from boardsim.parts.record import Record
from boardsim.quantities import (
    CAPACITANCE,
    CURRENT,
    FREQUENCY,
    POSITIVE_RESISTANCE,
    POSITIVE_TIME,
    TEMPERATURE,
    TIME,
    VOLTAGE,
    Quantity,
    assume,
)

_LEAST_SHARE = 0.25  # of the longest delay: the shortest, where no data sheet prints it
_LEAST_WHY = "a quarter of the longest, where the data sheet prints no shortest delay, from memory"


class TimingPoint(Record):
    """At one printed supply: what the register asks of its inputs, and how long it takes."""

    supply: Annotated[Quantity, VOLTAGE]
    setup: Annotated[Quantity, TIME] = Field(description="data before the clock's rising edge")
    hold: Annotated[Quantity, TIME] = Field(description="data after the clock's rising edge")
    latch_setup: Annotated[Quantity, TIME] = Field(description="the clock's rising edge before the latch's")
    clock_width: Annotated[Quantity, POSITIVE_TIME] = Field(description="shortest clock pulse, high or low")
    latch_width: Annotated[Quantity, POSITIVE_TIME] = Field(description="shortest latch pulse")
    clear_width: Annotated[Quantity, POSITIVE_TIME] | None = Field(None, description="shortest clear pulse")
    shift_delay: Annotated[Quantity, POSITIVE_TIME] = Field(description="longest, from clock to serial output")
    shift_delay_least: Annotated[Quantity, TIME] | None = Field(
        None, description="shortest, from clock to serial output"
    )
    latch_delay: Annotated[Quantity, POSITIVE_TIME] = Field(description="longest, from latch to outputs")
    alone_up_to: Annotated[Quantity, FREQUENCY] = Field(description="highest clock of one register alone")


@dataclass(frozen=True)
class EdgeTimes:
    """What a register asks of its inputs and how long it takes, at one supply; as `TimingPoint`. [s], [Hz]"""

    supply: float
    setup: float
    hold: float
    latch_setup: float
    clock_width: float
    latch_width: float
    clear_width: float | None
    shift_delay: float
    shift_delay_least: float
    latch_delay: float
    alone_up_to: float


class Register(Part):
    """What all registers of a chain have in common: serial in, all outputs change on the latch edge.

    Notes
    -----
    Kinds differ in their outputs. Each gives `propagation`, the time from the latch edge to where an output begins to follow,
    `output_edge`, how long the step of the bit behind it lasts, `output_resistance`, that of an output that is a logic pin, and
    `serial_resistance`, that of the output which drives the next register; and `drive`, an output whose bits are known.
    """

    open_drain: ClassVar[bool] = False
    """Whether its outputs are switches of coils, and no logic pins."""
    clears: Literal["shift", "all"] = Field(
        "shift",
        description='what clear empties: the shift stage only, or "all": the storage stage, and so the outputs, too',
    )
    outputs: Annotated[int, Field(strict=True, ge=1, le=64)]
    family: named_part(LogicFamily) | None = Field(  # type: ignore[valid-type]
        None, description="logic family: levels and ratings of its pins"
    )
    times_hold_at: Annotated[Quantity, TEMPERATURE] = of_columns()
    times: tuple[TimingPoint, ...] = Field((), description="times at each printed supply, the lowest first")
    highest_clock: Annotated[Quantity, FREQUENCY] | None = Field(
        None, description="of one register alone, where there is no table of times"
    )
    timing_supply: Annotated[Quantity, VOLTAGE] | None = Field(
        None, description="logic rail at which clock and times are given; below it the register is slower than they say"
    )
    supply_low: Annotated[Quantity, VOLTAGE]
    supply_high: Annotated[Quantity, VOLTAGE]
    retention: Annotated[Quantity, VOLTAGE] | None = Field(
        None,
        description="logic rail below which its contents are lost; supply_low if absent, below which nothing is promised",
    )
    drives_from: Annotated[Quantity, VOLTAGE] = assume(
        "1 V", VOLTAGE, "logic rail from which an output's transistors can conduct, from memory"
    )
    power_capacitance: Annotated[Quantity, CAPACITANCE] = assume(
        "115 pF",
        CAPACITANCE,
        "power dissipation capacitance C_PD, NXP 74HC595; 74HCT595 rev. 6 (12 Dec 2011), table 7, for parts of this class",
    )
    if TYPE_CHECKING:  # fields of one kind, properties of another

        @property
        @abstractmethod
        def propagation(self) -> Quantity:
            """From the latch edge to where an output begins to follow. [s]"""

        @property
        @abstractmethod
        def output_edge(self) -> Quantity:
            """How long the step of the bit behind an output lasts. [s]"""

        @property
        @abstractmethod
        def output_resistance(self) -> Quantity:
            """Of an output that is a logic pin. [ohm]"""

        @property
        @abstractmethod
        def serial_resistance(self) -> Quantity:
            """Of the output that drives the next register. [ohm]"""

    @property
    def input_leakage(self) -> Quantity:
        """Of one input; assumed where its family does not say. [A]"""
        family: LogicFamily | None = self.family
        return (family.input_leakage if family is not None else None) or assume(
            "1 uA",
            CURRENT,
            "input leakage, maximum, Philips 74HC595; 74HCT595 (25 June 2003), p. 12, for parts of this class",
        )

    @property
    def input_capacitance(self) -> Quantity:
        """Of one input; assumed where it has no family. [F]"""
        family: LogicFamily | None = self.family
        if family is not None:
            return family.input_capacitance
        return assume("5 pF", CAPACITANCE, "one CMOS input with its trace, from memory")

    def switching_levels(self) -> tuple[tuple[float, float, float], ...]:
        """Supplies, rising, with the highest voltage that is surely low and the lowest that is surely high there. [V]

        Notes
        -----
        Those that its family's datasheet prints. Without a family 0.3 and 0.7 of the rail at both ends of its supply range,
        the CMOS levels of JESD7A (the standard from memory).
        """
        family: LogicFamily | None = self.family
        if family is None:
            return tuple((v, 0.3 * v, 0.7 * v) for v in (self.supply_low.typ, self.supply_high.typ))
        return tuple((level.supply.typ, level.low.min, level.high.max) for level in family.inputs)

    @property
    def holds_in(self) -> tuple[float, float]:
        """Coldest and warmest air in which its own limits and those of its family hold. [K]"""
        family: LogicFamily | None = self.family
        ranges = [self.times_hold_at, *([family.levels_hold_at] if family is not None else [])]
        return max(q.min for q in ranges), min(q.max for q in ranges)

    @property
    def keeps_from(self) -> float:
        """The logic rail below which its contents are lost. [V]"""
        return (self.retention or self.supply_low).typ

    @model_validator(mode="after")
    def _one_source_of_times(self) -> Register:
        rising(self.printed, "times")
        if self.times and (self.highest_clock is not None or self.timing_supply is not None):
            raise QuantityError(
                "times holds the highest clock of each supply; leave highest_clock and timing_supply out"
            )
        return self

    @property
    def printed(self) -> tuple[float, ...]:
        """Supplies at which times are printed, rising. [V]"""
        return tuple(point.supply.typ for point in self.times)

    def input_levels(self, volts: float) -> tuple[float, float] | None:
        """Highest voltage that counts as low (V_IL) and lowest that counts as high (V_IH) at a supply. [V]

        Returns
        -------
        tuple or None
            None without a family, and beyond the supplies that its data sheet prints.
        """
        family: LogicFamily | None = self.family
        return None if family is None else family.input_levels(volts)

    def timing(self, volts: float) -> EdgeTimes | None:
        """The times at a supply, each at its worse end; None without a table and beyond its printed supplies.

        Parameters
        ----------
        volts : float
            [V]

        Notes
        -----
        CMOS delay falls with the supply along a curve that opens upwards (t ~ C V / (V - V_T)^a, 1 < a <= 2; Sakurai and
        Newton, IEEE J. Solid-State Circuits 25 (1990) 584). The straight line between two printed supplies lies above
        it: it errs to the safe side for what must not be longer, and so for clock periods. For the shortest delay it would
        not: that of the higher printed supply counts.
        """
        place = place_in(self.printed, volts) if self.times else None
        if place is None:
            return None
        rows = self.times

        def longest(name: str) -> float:
            return place.straight([getattr(row, name).max for row in rows])

        clear = all(row.clear_width is not None for row in rows)
        return EdgeTimes(
            volts,
            longest("setup"),
            longest("hold"),
            longest("latch_setup"),
            longest("clock_width"),
            longest("latch_width"),
            longest("clear_width") if clear else None,
            longest("shift_delay"),
            min(_least(row) for row in rows[place.lower : place.upper + 1]),
            longest("latch_delay"),
            1 / place.straight([1 / row.alone_up_to.min for row in rows]),
        )

    def assumed(self) -> tuple[Assumption, ...]:
        """What had to be supplied for the timing of a chain of these."""
        name = self.title or "register"
        family: LogicFamily | None = self.family
        found = columns_assumed(name, "times", self.times_hold_at)
        if family is not None:
            found += columns_assumed(family.title or "logic family", "levels", family.levels_hold_at)
            found += listed(family.title or "logic family", test_load=family.test_load)
        without = [row for row in self.times if row.shift_delay_least is None]
        if without:
            values = ", ".join(f"{_least(row) * 1e9:.3g} ns at {row.supply}" for row in without)
            found += (Assumption(name, "shortest delay from clock to serial output", values, _LEAST_WHY),)
        return found

    @abstractmethod
    def drive(self, name: str, pin: str, points: tuple[tuple[float, float], ...]) -> Stamp:
        """One output whose voltage is known, as straight lines [s], [V]; node `pin` goes to the channel's switch."""

    @abstractmethod
    def follows(
        self, name: str, pin: str, bit: str, drives: str, rail: str, lets_go: bool, idle: str, loads_rail: bool
    ) -> tuple[Element, ...]:
        """One output that follows its bit at circuit level; node `pin` goes to the channel's switch.

        Parameters
        ----------
        bit : str
            0 to 1, as an expression.
        drives : str
            1 while the output drives, 0 while it does not, as an expression.
        rail : str
            Node of the logic rail.
        lets_go : bool
            Whether it can stop to drive in operation; else only a rail that is too low could make it.
        idle : str
            What flows into the pin while it does not drive, as an expression; nothing if empty. [A]
        loads_rail : bool
            Whether what the output gives comes out of the rail's node.
        """


class ShiftRegister(Register):
    """The 74HC595 type, whose outputs are logic pins that drive switches.

    Notes
    -----
    An output is a voltage step from 0 to the logic rail behind one resistance, the mean of pull-up and pull-down.
    Ignores that a real output delivers a little less current near its rail.
    """

    role: ClassVar[str] = "register"
    kind: Literal["shift-register"] = "shift-register"
    output_resistance: Annotated[Quantity, POSITIVE_RESISTANCE]
    propagation: Annotated[Quantity, TIME] = Field(description="from the latch edge to the outputs, for firing")
    output_edge: Annotated[Quantity, POSITIVE_TIME]
    off_leakage: Annotated[Quantity, CURRENT] = assume(
        "10 uA",
        CURRENT,
        "3-state off current, maximum up to 125 degC, Philips 74HC595; 74HCT595 (25 June 2003), p. 12, for parts of this class",
    )

    @property
    def serial_resistance(self) -> Quantity:
        """Of the serial output, which is like the others. [ohm]"""
        return self.output_resistance

    def drive(self, name: str, pin: str, points: tuple[tuple[float, float], ...]) -> Stamp:
        """One output as a source and its resistance; node `pin` goes to the channel's gate network."""
        return Stamp(
            elements=(
                Drive(name, f"{name}_in", GROUND, points),
                Resistor(f"{name}_out", f"{name}_in", pin, self.output_resistance.typ),
            )
        )

    def follows(
        self, name: str, pin: str, bit: str, drives: str, rail: str, lets_go: bool, idle: str, loads_rail: bool
    ) -> tuple[Element, ...]:
        """One output that follows its bit, as currents.

        Notes
        -----
        i = e g (q V_CC - v) into the pin: q is the bit, g one over the output resistance, e 1 while it drives and
        else 0. What comes from the rail is its pull-up's share, e g q (V_CC - v), and the rest, -e g (1 - q) v, the
        pull-down's to ground. Ignores the diodes from the pin to rail and ground: a voltage that a floating gate drifts
        to is not held by them.
        """
        ohms = repr(self.output_resistance.typ)
        factor = f"{drives}*" if lets_go else ""
        leaks = f"+(1-{drives})*({idle})" if idle else ""
        if loads_rail:
            return (
                CurrentLaw(f"{name}_up", pin, rail, f"{factor}{bit}*(V({rail})-V({pin}))/{ohms}"),
                CurrentLaw(f"{name}_down", pin, GROUND, f"{factor}({bit}-1)*V({pin})/{ohms}{leaks}"),
            )
        return (CurrentLaw(name, pin, GROUND, f"{factor}({bit}*V({rail})-V({pin}))/{ohms}{leaks}"),)


def _least(row: TimingPoint) -> float:
    return row.shift_delay_least.min if row.shift_delay_least is not None else _LEAST_SHARE * row.shift_delay.typ
