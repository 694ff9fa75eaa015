"""A half-bridge gate driver: two gates from one input, one after the other."""

from __future__ import annotations

import math
from typing import Annotated

from pydantic import Field

from boardsim.parts.elements import GROUND, Capacitor, Element, Resistor, VoltageLaw
from boardsim.parts.record import Record
from boardsim.quantities import POSITIVE_RESISTANCE, POSITIVE_TIME, TIME, VOLTAGE, Quantity, assume

_OHMS = 1e3  # of the lags, whose product with their capacitance counts alone
_STEEP = 200.0  # slope of the comparators: a gate that crosses an eighth of its voltage is then 1.5 % of the lag late
_INPUT = 0.05  # [V], half width of the input's threshold


class GateDriver(Record):
    """Its supply, delay and dead time.

    Notes
    -----
    The input as 0 or 1, u = (1 + tanh((v - v_th) / w)) / 2, goes through two lags dy/dt = (u - y) / tau with tau ln 2 = t_d and
    tau ln 2 = t_d + t_dead, so that they are at one half a delay, and a delay and the dead time, after an edge. A gate turns on
    when both are past one half and off when the first is. Holds for pulses and pauses that are long against both times: after
    seven times t_d + t_dead a lag is within 1 % of its end. The outputs give the driver's supply, or the coil rail where
    that is lower. What the driver takes from its supply is left out; the high side's is taken as always there (no bootstrap
    capacitor that runs empty).
    """

    supply: Annotated[Quantity, VOLTAGE] = Field(description="what it puts between a gate and its source")
    dead_time: Annotated[Quantity, TIME] = Field(
        description="from one gate's turn-off to the other's turn-on; its least value counts, 0 s for one without"
    )
    delay: Annotated[Quantity, POSITIVE_TIME] = assume(
        "100 ns", POSITIVE_TIME, "propagation delay of a half-bridge driver, from memory"
    )
    output_resistance: Annotated[Quantity, POSITIVE_RESISTANCE] = assume(
        "5 ohm", POSITIVE_RESISTANCE, "output stage of an ampere or two, from memory"
    )
    threshold: Annotated[Quantity, VOLTAGE] = assume(
        "1.5 V", VOLTAGE, "between the levels of an input for 3.3 V and 5 V logic, from memory"
    )
    pulldown: Annotated[Quantity, POSITIVE_RESISTANCE] | None = Field(None, description="at its input")

    def elements(self, name: str, pin: str, rail: str) -> tuple[tuple[Element, ...], str, str]:
        """The input and both lags; what the high and the low gate get, as expressions. [V]"""
        level = f"(V({pin})-{self.threshold.typ!r})/{_INPUT!r}"
        first = self.delay.typ / math.log(2)
        both = (self.delay.typ + self.dead_time.min) / math.log(2)
        found: list[Element] = [
            VoltageLaw(f"{name}_u", f"{name}_u", GROUND, f"0.5*(1+tanh({level}))"),
            Resistor(f"{name}_y1", f"{name}_u", f"{name}_y1", _OHMS),
            Capacitor(f"{name}_y1", f"{name}_y1", GROUND, first / _OHMS),
        ]
        up, down = _past(f"V({name}_y1)"), _past(f"V({name}_y1)", -1)
        if self.dead_time.min > 0:
            found += [
                Resistor(f"{name}_y2", f"{name}_u", f"{name}_y2", _OHMS),
                Capacitor(f"{name}_y2", f"{name}_y2", GROUND, both / _OHMS),
            ]
            up, down = f"{up}*{_past(f'V({name}_y2)')}", f"{down}*{_past(f'V({name}_y2)', -1)}"
        if self.pulldown is not None:
            found.append(Resistor(f"{name}_pulldown", pin, GROUND, self.pulldown.typ))
        volts = f"min({self.supply.typ!r},V({rail}))"
        return tuple(found), f"{volts}*{up}", f"{volts}*{down}"


def _past(y: str, sign: int = 1) -> str:
    """One where a lag is past one half, upwards or downwards."""
    return f"0.5*(1+tanh({sign * _STEEP!r}*({y}-0.5)))"
