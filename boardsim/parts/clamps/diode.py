"""A freewheel diode from the switch to the rail."""

from __future__ import annotations

from typing import ClassVar, Literal

from boardsim.parts.base import Corner, Stamp, named_part
from boardsim.parts.clamp import CoilClamp, in_series
from boardsim.parts.diode import Diode
from boardsim.parts.elements import Ammeter, current


class DiodeClamp(CoilClamp):
    """A diode across the coil: lowest voltage, slowest release."""

    role: ClassVar[str] = "clamp"
    kind: Literal["diode"] = "diode"
    diode: named_part(Diode)  # type: ignore[valid-type]

    def stamp(self, name: str, drain: str, rail: str, corner: Corner) -> Stamp:
        """The clamp between node `drain` and node `rail`."""
        meter = Ammeter(f"{name}_a", drain, f"{name}_in")
        diode = self.diode.stamp(f"{name}_d", "clamp diode", f"{name}_in", rail, current(meter), corner)
        return in_series((meter,), diode)
