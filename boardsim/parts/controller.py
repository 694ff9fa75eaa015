"""The microcontroller as the chain sees it: levels of its pins, its serial port, and the timer that firing follows."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from pydantic import Field

from boardsim.parts.base import Assumption, Part, listed
from boardsim.quantities import CURRENT, POSITIVE_RESISTANCE, POSITIVE_TIME, SHARE, TIME, VOLTAGE, Quantity, assume


class Controller(Part):
    """What drives data, clock and latch, and when.

    Notes
    -----
    A pin is a step between 0 and the controller's supply behind one resistance; loaded levels are those that are given, up
    to the load that they are given for.
    In SPI modes 0 and 3 data change half a period before the clock's rising edge, at which the registers take them. In modes
    1 and 2 they change at that very edge (Motorola SPI Block Guide V03.06, section 4.3: CPOL and CPHA). In mode 1 the
    registers then take the bit before: every bit comes one place late.
    """

    role: ClassVar[str] = "controller"
    kind: Literal["controller"] = "controller"
    voltage: Annotated[Quantity, VOLTAGE] | None = Field(None, description="its supply; the logic rail if absent")
    high_drop: Annotated[Quantity, VOLTAGE] | None = Field(
        None, description="how far a high output may stay below the supply under its load, worst case"
    )
    low_output: Annotated[Quantity, VOLTAGE] | None = Field(
        None, description="highest level of a low output under its load"
    )
    resistance: Annotated[Quantity, POSITIVE_RESISTANCE] = assume(
        "50 ohm", POSITIVE_RESISTANCE, "of an output at usual drive strength, from memory"
    )
    level_current: Annotated[Quantity, CURRENT] = assume(
        "4 mA", CURRENT, "load up to which high_drop and low_output hold, at usual drive strength, from memory"
    )
    spi_mode: Annotated[int, Field(strict=True, ge=0, le=3)] = Field(
        0, description="clock polarity and phase; registers take data on the rising edge, as modes 0 and 3 do"
    )
    data_valid: Annotated[Quantity, TIME] = assume(
        "10 ns", TIME, "longest from the clock edge that changes data until they are valid, from memory"
    )
    data_hold: Annotated[Quantity, TIME] = assume(
        "0 s", TIME, "shortest from the clock edge that changes data until they change, seldom printed, from memory"
    )
    clock_duty: Annotated[Quantity, SHARE] = assume(
        "45 to 55 %", SHARE, "share of a period for which the clock is high, from memory"
    )
    latch_width: Annotated[Quantity, POSITIVE_TIME] = assume(
        "500 ns", POSITIVE_TIME, "length of the latch pulse, a pin toggled by firmware, from memory"
    )
    tick: Annotated[Quantity, TIME] = assume("0 s", TIME, "no timer tick given: times are kept as asked")
    jitter: Annotated[Quantity, TIME] = assume("0 s", TIME, "no jitter of interrupts given: frames start when due")
    frame_gap: Annotated[Quantity, TIME] = assume(
        "0 s", TIME, "no pause between frames given: one follows on the other"
    )
    at_reset: Literal["floating", "low", "high"] = Field(
        "floating", description="what its pins do from power-on until the firmware sets them"
    )
    pin_leakage: Annotated[Quantity, CURRENT] = assume(
        "1 uA", CURRENT, "of a pin that floats, the largest, from memory"
    )

    def assumed(self) -> tuple[Assumption, ...]:
        """The numbers that the file does not give."""
        names = ("resistance", "data_valid", "data_hold", "clock_duty", "latch_width", "tick", "jitter", "frame_gap")
        found = listed("controller", **{name: getattr(self, name) for name in (*names, "pin_leakage")})
        for name, value, why in (
            ("voltage", "that of the logic rail", "no supply of its own given"),
            ("spi_mode", f"{self.spi_mode}", "not given: the mode that registers of this type are written in"),
            ("at_reset", self.at_reset, "not given: pins float until the firmware sets them, common practice"),
        ):
            if name not in self.model_fields_set:
                found += (Assumption("controller", name.replace("_", " "), value, why),)
        return found
