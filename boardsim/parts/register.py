"""A shift register with a storage stage, 74HC595 type: the outputs that drive the switches."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from pydantic import Field

from boardsim.parts.base import Part, Stamp
from boardsim.parts.elements import GROUND, Drive, Resistor
from boardsim.quantities import (
    CAPACITANCE,
    CURRENT,
    FREQUENCY,
    POSITIVE_RESISTANCE,
    POSITIVE_TIME,
    TIME,
    VOLTAGE,
    Quantity,
    assume,
)


class Register(Part):
    """Serial in, parallel out, all outputs change on the latch edge.

    Notes
    -----
    An output is a voltage step from 0 to the logic rail behind one resistance, the mean of pull-up and pull-down.
    Ignores that a real output delivers a little less current near its rail.
    """

    role: ClassVar[str] = "register"
    kind: Literal["shift-register"] = "shift-register"
    outputs: Annotated[int, Field(strict=True, ge=1, le=64)]
    output_resistance: Annotated[Quantity, POSITIVE_RESISTANCE]
    propagation: Annotated[Quantity, TIME]
    output_edge: Annotated[Quantity, POSITIVE_TIME]
    highest_clock: Annotated[Quantity, FREQUENCY] | None = None
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
    off_leakage: Annotated[Quantity, CURRENT] = assume(
        "10 uA",
        CURRENT,
        "3-state off current, maximum up to 125 degC, Philips 74HC595; 74HCT595 (25 June 2003), p. 12, for parts of this class",
    )
    input_leakage: Annotated[Quantity, CURRENT] = assume(
        "1 uA",
        CURRENT,
        "input leakage, maximum, Philips 74HC595; 74HCT595 (25 June 2003), p. 12, for parts of this class",
    )
    input_capacitance: Annotated[Quantity, CAPACITANCE] = assume(
        "5 pF", CAPACITANCE, "one CMOS input with its trace, from memory"
    )

    def input_levels(self, volts: float) -> tuple[float, float]:
        """Highest voltage that is surely low and lowest that is surely high at an input. [V]

        Parameters
        ----------
        volts : float
            Logic rail. [V]

        Notes
        -----
        0.3 and 0.7 of the rail, the CMOS levels of JESD7A (the standard from memory; NXP 74HC595 rev. 6, table 6, prints 3.15 V
        at 4.5 V).
        """
        return 0.3 * volts, 0.7 * volts

    @property
    def keeps_from(self) -> float:
        """The logic rail below which its contents are lost. [V]"""
        return (self.retention or self.supply_low).typ

    def drive(self, name: str, pin: str, points: tuple[tuple[float, float], ...]) -> Stamp:
        """One output as a source and its resistance; node `pin` goes to the channel's gate network."""
        return Stamp(
            elements=(
                Drive(name, f"{name}_in", GROUND, points),
                Resistor(f"{name}_out", f"{name}_in", pin, self.output_resistance.typ),
            )
        )
