"""A diode and a Zener (or a transient suppressor) in series from the switch to the rail."""

from __future__ import annotations

from typing import TYPE_CHECKING, ClassVar, Literal

from boardsim.parts.base import Corner, Shelf, Stamp, named_part
from boardsim.parts.clamp import CoilClamp, in_series
from boardsim.parts.diode import Diode, most_current
from boardsim.parts.elements import Ammeter, current
from boardsim.parts.tvs import Tvs
from boardsim.parts.zener import Zener
from boardsim.quantities import Quantity

if TYPE_CHECKING:
    from boardsim.parts.coil import Coil


class DiodeZenerClamp(CoilClamp):
    """The Zener opposes the coil's current and so shortens its release; the diode blocks while the coil is on."""

    role: ClassVar[str] = "clamp"
    kind: Literal["diode-zener"] = "diode-zener"
    diode: named_part(Diode)  # type: ignore[valid-type]
    zener: named_part(Zener, Tvs)  # type: ignore[valid-type]

    @classmethod
    def candidates(cls, shelf: Shelf, coil: Coil, rail: float) -> tuple[DiodeZenerClamp, ...]:
        """Every Zener with the diode that stands the most current: which diode carries it hardly changes the release."""
        strongest = max(shelf(Diode), key=most_current, default=None)  # type: ignore[arg-type]  # a shelf of diodes
        zeners = shelf(Zener)
        return tuple(cls(diode=strongest, zener=z) for z in zeners) if strongest is not None else ()

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this clamp."""
        return {"clamp_voltage": self.zener.clamping}

    def stamp(self, name: str, a: str, b: str, corner: Corner, control: str = "") -> Stamp:
        """The clamp from node `a` to node `b`: the coil's ends, in the direction of its current after the turn-off."""
        meter = Ammeter(f"{name}_a", a, f"{name}_in")
        through = current(meter)
        diode = self.diode.stamp(f"{name}_d", "clamp diode", f"{name}_in", f"{name}_mid", through, corner)
        label = "clamp Zener" if isinstance(self.zener, Zener) else "clamp suppressor"
        zener = self.zener.stamp(f"{name}_z", label, f"{name}_mid", b, through, corner)
        return in_series((meter,), diode, zener)
