"""An LED across the coil, alone or with a resistor or a diode in series."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, ClassVar, Literal

from boardsim.parts.base import Corner, Shelf, Stamp, named_part
from boardsim.parts.clamp import CoilClamp, in_series
from boardsim.parts.diode import Diode
from boardsim.parts.elements import Ammeter, Port, Probe, Resistor, Signal, current, voltage
from boardsim.parts.led import Led
from boardsim.parts.rules import Limit, MeanRule
from boardsim.quantities import POSITIVE_RESISTANCE, POWER, Quantity

if TYPE_CHECKING:
    from boardsim.parts.coil import Coil


class LedClamp(CoilClamp):
    """An LED that lights up when the coil lets go; the whole current of the coil goes through it.

    Notes
    -----
    At the turn-off the coil's current I_0 flows on through the LED: a resistor in series raises the voltage at the switch
    to V + V_F + I_0 R_x and shortens the release, but takes nothing off the current. While the coil is on the rail lies
    across the LED backwards; a diode in series takes that over.
    """

    role: ClassVar[str] = "clamp"
    kind: Literal["led"] = "led"
    led: named_part(Led)  # type: ignore[valid-type]
    resistor: Annotated[Quantity, POSITIVE_RESISTANCE] | None = None
    power: Annotated[Quantity, POWER] | None = None
    diode: named_part(Diode) | None = None  # type: ignore[valid-type]

    @classmethod
    def candidates(cls, shelf: Shelf, coil: Coil, rail: float) -> tuple[LedClamp, ...]:
        """The first LED of the library, alone: what one meets on boards."""
        return tuple(cls(led=part) for part in shelf(Led)[:1])

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this clamp: its resistor, where it has one."""
        return {} if self.resistor is None else {"clamp_voltage": self.resistor}

    def in_the_way(self) -> float:
        """The coil's current decays with L / (R + R_x) at its beginning. [ohm]"""
        return 0.0 if self.resistor is None else self.resistor.max

    def stamp(self, name: str, a: str, b: str, corner: Corner, control: str = "") -> Stamp:
        """The clamp from node `a` to node `b`: the coil's ends, in the direction of its current after the turn-off."""
        meter = Ammeter(f"{name}_a", a, f"{name}_in")
        through, node = current(meter), f"{name}_in"
        stamps: list[Stamp] = []
        if self.resistor is not None:
            stamps.append(self._resistor(name, node, f"{name}_r", through, corner))
            node = f"{name}_r"
        if self.diode is not None:
            stamps.append(self.diode.stamp(f"{name}_d", "series diode", node, f"{name}_k", through, corner))
            node = f"{name}_k"
        stamps.append(self.led.stamp(f"{name}_led", "LED", node, b, through, corner))
        return in_series((meter,), *stamps)

    def _resistor(self, name: str, a: str, b: str, through: Signal, corner: Corner) -> Stamp:
        assert self.resistor is not None  # asked for by `stamp` only where there is one
        label = "series resistor"
        v, i = f"v_{label}", f"i_{label}"
        return Stamp(
            elements=(Resistor(f"{name}_x", a, b, corner.take(self.resistor, "clamp_voltage")),),
            probes=(Probe(v, voltage(a, b), "V"), Probe(i, through, "A")),
            ports=(Port(label, ((v, i),)),),
            rules=(
                MeanRule(
                    "overpower",
                    (v, i),
                    Limit.of(self.power, "power", "W", "power"),
                    "destroy",
                    f"average power of the {label}",
                    "choose a larger resistor, or fire less often",
                    part=label,
                ),
            ),
        )
