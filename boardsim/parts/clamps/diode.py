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

    def stamp(self, name: str, a: str, b: str, corner: Corner, control: str = "") -> Stamp:
        """The clamp from node `a` to node `b`: the coil's ends, in the direction of its current after the turn-off."""
        meter = Ammeter(f"{name}_a", a, f"{name}_in")
        diode = self.diode.stamp(f"{name}_d", "clamp diode", f"{name}_in", b, current(meter), corner)
        return in_series((meter,), diode)
