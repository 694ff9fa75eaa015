"""A shift register with a storage stage, 74HC595 type: the outputs that drive the switches."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from pydantic import Field

from boardsim.parts.base import Part, Stamp
from boardsim.parts.elements import GROUND, Drive, Resistor
from boardsim.quantities import FREQUENCY, POSITIVE_RESISTANCE, POSITIVE_TIME, TIME, VOLTAGE, Quantity


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

    def drive(self, name: str, pin: str, points: tuple[tuple[float, float], ...]) -> Stamp:
        """One output as a source and its resistance; node `pin` goes to the channel's gate network."""
        return Stamp(
            elements=(
                Drive(name, f"{name}_in", GROUND, points),
                Resistor(f"{name}_out", f"{name}_in", pin, self.output_resistance.typ),
            )
        )
