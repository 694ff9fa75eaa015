"""A half-bridge gate driver: two gates from one input, one after the other."""

from __future__ import annotations

import math
from typing import Annotated, Any

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Corner
from boardsim.parts.elements import GROUND, Capacitor, Element, Resistor, VoltageLaw
from boardsim.parts.record import Record, said, shown
from boardsim.quantities import POSITIVE_RESISTANCE, POSITIVE_TIME, TIME, VOLTAGE, Quantity, assume, in_units

_OHMS = 1e3  # of the lags, whose product with their capacitance counts alone
_TEN_TO_NINETY = (
    2 * 2 * math.atanh(0.8)
)  # of the outputs' edges: 10 to 90 % of (1 + tanh x) / 2, at half a lag's speed per tau
_INPUT = 0.05  # [V], half width of the input's threshold


class GateDriver(Record):
    """Its supply, delay and dead time.

    Notes
    -----
    The input as 0 or 1, u = (1 + tanh((v - v_th) / w)) / 2, goes through two lags dy/dt = (u - y) / tau with tau ln 2 = t_d and
    tau ln 2 = t_d + t_dead, so that they are at one half a delay, and a delay and the dead time, after an edge. A gate turns on
    when both are past one half and off when the first is: each output is (1 + tanh(s (y - 1/2))) / 2 of its supply. A lag passes
    one half at dy/dt = 1 / (2 tau), so that s = 4 artanh(0.8) tau / t_edge makes every edge, from 10 to 90 %, last t_edge whatever
    delay and dead time are. The edge must not be longer than the delay, else its foot would be there before the input's.
    Holds for pulses and pauses that are long against both times: after
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
    edge: Annotated[Quantity, POSITIVE_TIME] = assume(
        "10 ns",
        POSITIVE_TIME,
        "10 to 90 % of an output that nothing loads: gates slow it by their charge at its resistance, from memory",
    )
    output_resistance: Annotated[Quantity, POSITIVE_RESISTANCE] = assume(
        "5 ohm", POSITIVE_RESISTANCE, "output stage of an ampere or two, from memory"
    )
    threshold: Annotated[Quantity, VOLTAGE] = assume(
        "1.5 V", VOLTAGE, "between the levels of an input for 3.3 V and 5 V logic, from memory"
    )
    pulldown: Annotated[Quantity, POSITIVE_RESISTANCE] | None = Field(None, description="at its input")

    @model_validator(mode="before")
    @classmethod
    def _is_a_table(cls, value: Any) -> Any:
        if isinstance(value, str):
            needed = 'driver = { supply = "12 V", dead_time = "500 ns" }'
            more = ", ".join(name for name in cls.model_fields if name not in ("supply", "dead_time"))
            raise said(
                f"gate drivers have no records by name, and {shown(value)} is one; give its numbers in place, such as {needed}; "
                f"it can also have: {more}"
            )
        return value

    @model_validator(mode="after")
    def _edge_within_delay(self) -> GateDriver:
        if self.edge.typ > self.delay.min:
            raise QuantityError(
                f"edge of {in_units(self.edge.typ, 's')} is longer than the delay of {in_units(self.delay.min, 's')}, and an output "
                "does not move before its input; give an edge that nothing loads, or the delay up to its middle"
            )
        return self

    def elements(self, name: str, pin: str, rail: str, corner: Corner) -> tuple[tuple[Element, ...], str, str]:
        """The input and both lags; what the high and the low gate get, as expressions. [V]"""
        level = f"(V({pin})-{self.threshold.typ!r})/{_INPUT!r}"
        first = self.delay.typ / math.log(2)
        both = (self.delay.typ + self.dead_time.min) / math.log(2)
        found: list[Element] = [
            VoltageLaw(f"{name}_u", f"{name}_u", GROUND, f"0.5*(1+tanh({level}))"),
            Resistor(f"{name}_y1", f"{name}_u", f"{name}_y1", _OHMS),
            Capacitor(f"{name}_y1", f"{name}_y1", GROUND, first / _OHMS),
        ]
        lag, steep = f"V({name}_y1)", _TEN_TO_NINETY * first / self.edge.typ
        up, down = _past(lag, steep), _past(lag, -steep)
        if self.dead_time.min > 0:
            found += [
                Resistor(f"{name}_y2", f"{name}_u", f"{name}_y2", _OHMS),
                Capacitor(f"{name}_y2", f"{name}_y2", GROUND, both / _OHMS),
            ]
            lag, steep = f"V({name}_y2)", _TEN_TO_NINETY * both / self.edge.typ
            up, down = f"{up}*{_past(lag, steep)}", f"{down}*{_past(lag, -steep)}"
        volts = self.level(rail, corner)
        return (*found, *self.load(name, pin)), f"{volts}*{up}", f"{volts}*{down}"

    def load(self, name: str, pin: str) -> tuple[Element, ...]:
        """What lies at its input, such as its pull-down."""
        return () if self.pulldown is None else (Resistor(f"{name}_pulldown", pin, GROUND, self.pulldown.typ),)

    def level(self, rail: str, corner: Corner) -> str:
        """What an output that is on gives, as an expression. [V]"""
        return f"min({corner.take(self.supply, 'gate_supply')!r},V({rail}))"


def _past(lag: str, steep: float) -> str:
    """One where a lag is past one half: upwards, or downwards with a slope below 0."""
    return f"0.5*(1+tanh({steep!r}*({lag}-0.5)))"
