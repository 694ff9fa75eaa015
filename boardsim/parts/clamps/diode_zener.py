"""A diode and a Zener in series from the switch to the rail."""

from __future__ import annotations

from typing import ClassVar, Literal

from boardsim.parts.base import Corner, Part, Stamp, named_part
from boardsim.parts.diode import Diode
from boardsim.parts.elements import Ammeter, current
from boardsim.parts.zener import Zener
from boardsim.quantities import Quantity


class DiodeZenerClamp(Part):
    """The Zener opposes the coil's current and so shortens its release; the diode blocks while the coil is on."""

    role: ClassVar[str] = "clamp"
    kind: Literal["diode-zener"] = "diode-zener"
    to: Literal["rail"] = "rail"
    diode: named_part(Diode)  # type: ignore[valid-type]
    zener: named_part(Zener)  # type: ignore[valid-type]

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this clamp."""
        return {"clamp_voltage": self.zener.voltage}

    def stamp(self, name: str, drain: str, rail: str, corner: Corner) -> Stamp:
        """The clamp between node `drain` and node `rail`."""
        meter = Ammeter(f"{name}_a", drain, f"{name}_in")
        through = current(meter)
        diode = self.diode.stamp(f"{name}_d", "clamp diode", f"{name}_in", f"{name}_mid", through)
        zener = self.zener.stamp(f"{name}_z", "clamp Zener", f"{name}_mid", rail, through, corner)
        return Stamp(
            elements=(meter, *diode.elements, *zener.elements),
            probes=(*diode.probes, *zener.probes),
            ports=(*diode.ports, *zener.ports),
            rules=(*diode.rules, *zener.rules),
            assumptions=(*diode.assumptions, *zener.assumptions),
        )
