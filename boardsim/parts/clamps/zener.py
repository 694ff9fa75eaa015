"""A Zener or a transient suppressor across the switch, from drain to ground."""

from __future__ import annotations

from typing import TYPE_CHECKING, ClassVar, Literal

from boardsim.parts.base import Corner, Part, Shelf, Stamp, named_part
from boardsim.parts.clamp import in_series
from boardsim.parts.elements import Ammeter, current
from boardsim.parts.tvs import Tvs
from boardsim.parts.zener import Zener
from boardsim.quantities import Quantity

if TYPE_CHECKING:
    from boardsim.parts.coil import Coil


class ZenerClamp(Part):
    """A Zener across the switch: it holds the switch's own voltage, whatever the rail and the leads do.

    Notes
    -----
    The coil's current flows from the rail through the coil into the Zener: L di/dt = V - V_Z - R i, so that of the energy
    V_Z L/R [I - (V_Z - V)/R ln(1 + R I / (V_Z - V))] in the Zener the share V / V_Z comes from the supply. A Zener of less
    than the highest rail conducts all the time that the coil is off.

    References
    ----------
    Infineon, TLE8108EM data sheet rev. 1.0 (2011-03-23), p. 12, eq. (1): the same circuit with the switch as its clamp.
    """

    role: ClassVar[str] = "clamp"
    kind: Literal["zener"] = "zener"
    to: Literal["ground"] = "ground"
    zener: named_part(Zener, Tvs)  # type: ignore[valid-type]

    @property
    def across(self) -> Literal["coil", "switch"]:
        """The switch."""
        return "switch"

    @classmethod
    def candidates(cls, shelf: Shelf, coil: Coil, rail: float) -> tuple[ZenerClamp, ...]:
        """Every suppressor and every Zener; the voltage that fits depends on the rail, which a coil does not know."""
        return tuple(cls(zener=part) for part in (*shelf(Zener), *shelf(Tvs)))

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this clamp."""
        return {"clamp_voltage": self.zener.clamping}

    def blocks(self, volts: float) -> bool:
        """Whether its lowest voltage is above that of the rail, which lies across it while the coil is off. [V]"""
        return bool(self.zener.lowest > volts)

    def stamp(self, name: str, a: str, b: str, corner: Corner, control: str = "") -> Stamp:
        """The clamp from node `a` to node `b`: the switch's ends, in the direction of its current."""
        meter = Ammeter(f"{name}_a", a, f"{name}_in")
        label = "clamp Zener" if isinstance(self.zener, Zener) else "clamp suppressor"
        zener = self.zener.stamp(f"{name}_z", label, f"{name}_in", b, current(meter), corner)
        return in_series((meter,), zener)
