"""What a board file says of the time before the firmware runs: how output enable and clear are held, and how the rails come."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.record import Record
from boardsim.quantities import (
    CAPACITANCE,
    POSITIVE_RESISTANCE,
    POSITIVE_TIME,
    SHARE,
    TIME,
    Quantity,
    assume,
    in_units,
)


class ControlLine(Record):
    """What output enable or clear of all registers is wired to: a rail, or a pull, a capacitor to ground and a controller pin."""

    tied: Literal["low", "high"] | None = Field(None, description="straight to ground or to the logic rail")
    pull_up: Annotated[Quantity, POSITIVE_RESISTANCE] | None = Field(None, description="resistor to the logic rail")
    pull_down: Annotated[Quantity, POSITIVE_RESISTANCE] | None = Field(None, description="resistor to ground")
    capacitance: Annotated[Quantity, CAPACITANCE] | None = Field(
        None, description="capacitor from the line to ground; the inputs' own if absent"
    )
    pin: bool = Field(
        False, strict=True, description="whether a controller pin drives the line; it floats until the firmware runs"
    )

    @model_validator(mode="after")
    def _held_somehow(self) -> ControlLine:
        if self.tied is not None and (self.pin or self.pull_up or self.pull_down or self.capacitance):
            raise QuantityError("a line that is tied has neither pull nor capacitor nor controller pin; leave them out")
        if self.pull_up is not None and self.pull_down is not None:
            raise QuantityError("a line has a pull_up or a pull_down, not both")
        if self.tied is None and self.pull_up is None and self.pull_down is None and not self.pin:
            raise QuantityError('say what holds the line: tied = "low" or "high", pull_up, pull_down or pin = true')
        return self

    @property
    def rests(self) -> Literal["low", "high"] | None:
        """Where it lies while no pin drives it; None where nothing holds it. [1]"""
        if self.tied is not None:
            return self.tied
        return "high" if self.pull_up is not None else "low" if self.pull_down is not None else None


def check_lines(output_enable: ControlLine | None, clear: ControlLine | None) -> None:
    """Refuse a wiring with which the chain never works.

    Raises
    ------
    QuantityError
        If nothing ever enables the outputs, or nothing ever lets go of clear.
    """
    if output_enable is not None and output_enable.rests != "low" and not output_enable.pin:
        raise QuantityError(
            "output_enable is held high and no controller pin drives it: no output would ever be enabled; add pin = true"
        )
    if clear is not None and clear.rests != "high" and not clear.pin:
        raise QuantityError(
            "clear is held low and no controller pin drives it: nothing could ever be shifted in; add pin = true"
        )


class PowerUpTable(Record):
    """How the rails come at switch-on, and when the firmware sends its first frame."""

    coils_at: Annotated[Quantity, TIME] = assume(
        "0 s", TIME, "start of the coil rail: both rails come with one switch, common practice"
    )
    coils_rise: Annotated[Quantity, POSITIVE_TIME] = assume(
        "10 ms", POSITIVE_TIME, "rise of an enclosed switching supply, from memory"
    )
    logic_at: Annotated[Quantity, TIME] = assume(
        "0 s", TIME, "start of the logic rail: both rails come with one switch, common practice"
    )
    logic_rise: Annotated[Quantity, POSITIVE_TIME] = assume(
        "1 ms", POSITIVE_TIME, "rise of a regulator's output, from memory"
    )
    first_frame: Annotated[Quantity, POSITIVE_TIME] = assume(
        "100 ms",
        POSITIVE_TIME,
        "from the full logic rail to the first register frame: start of a controller, from memory",
    )
    harmless: Annotated[Quantity, SHARE] = assume(
        "10 %", SHARE, "share of the release current below which an uncommanded current moves nothing, from memory"
    )
    reset_off: Annotated[Quantity, POSITIVE_TIME] = assume(
        "1 ms",
        POSITIVE_TIME,
        "from a reset until a channel that was on has to be off: short against what a coil moves in, long against how fast a "
        "pull-down empties a gate, from memory",
    )

    @model_validator(mode="after")
    def _leaves_time(self) -> PowerUpTable:
        """A first frame that comes before a reset has to have turned channels off would leave nothing to judge."""
        first, off = self.first_frame.max, self.reset_off.max
        if first <= off:
            raise QuantityError(
                f"first_frame = {in_units(first, 's')} is not after reset_off = {in_units(off, 's')}"
                f"{' (assumed)' if self.reset_off.assumed() else ''}: no time is left in which a channel that a reset leaves on "
                "would be seen; give a later first_frame or a shorter reset_off"
            )
        return self
