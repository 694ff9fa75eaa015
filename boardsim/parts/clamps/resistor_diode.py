"""A resistor and a diode in series across the coil."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, ClassVar, Literal

from pydantic import AfterValidator, Field

from boardsim.parts.base import Corner, Shelf, Stamp, named_part
from boardsim.parts.clamp import CoilClamp, PulsePower, clamp_resistor, in_series, refuse_rising
from boardsim.parts.diode import Diode, most_current
from boardsim.parts.elements import Ammeter, current
from boardsim.quantities import POSITIVE_RESISTANCE, POWER, Quantity, computed, in_units

if TYPE_CHECKING:
    from boardsim.parts.coil import Coil

_SHARES = (1, 2)  # times the coil's resistance: what is set beside other clamps


class ResistorDiodeClamp(CoilClamp):
    """A resistor that opposes the coil's current when it is turned off, and a diode that keeps it idle while the coil is on.

    Notes
    -----
    From the turn-off on the coil's current I_0 flows through both: L di/dt = -(R + R_x) i - V_F, so that
    i(t) = (I_0 + V_F / (R + R_x)) exp(-t (R + R_x) / L) - V_F / (R + R_x) until it is 0, with a peak of V + V_F + I_0 R_x at
    the switch (Kirchhoff's voltage law about coil and clamp; for V_F = 0 that of `resistor`). While the coil is on the
    diode blocks the rail: unlike a resistor alone it takes nothing from the switch.

    Holds for a resistor without inductance at a constant temperature. Its resistance is varied with the clamp voltage.
    """

    role: ClassVar[str] = "clamp"
    kind: Literal["resistor-diode"] = "resistor-diode"
    diode: named_part(Diode)  # type: ignore[valid-type]
    resistance: Annotated[Quantity, POSITIVE_RESISTANCE]
    power: Annotated[Quantity, POWER] | None = Field(None, description="that the resistor stands for ever")
    pulse: Annotated[tuple[PulsePower, ...], AfterValidator(refuse_rising)] = Field(
        (), description="power that the resistor stands in a single pulse, and how long that lasts"
    )

    @classmethod
    def candidates(cls, shelf: Shelf, coil: Coil, rail: float) -> tuple[ResistorDiodeClamp, ...]:
        """Once and twice the coil's resistance with the diode that stands the most current; no ratings of the resistor."""
        strongest = max(shelf(Diode), key=most_current, default=None)  # type: ignore[arg-type]  # a shelf of diodes
        if strongest is None:
            return ()
        typ = coil.resistance.typ
        said = [(k, f"{k} times the {in_units(typ, 'ohm')} of the coil") for k in _SHARES]
        return tuple(cls(diode=strongest, resistance=computed(k * typ, "ohm", how)) for k, how in said)

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this clamp: its voltage follows its resistance."""
        return {"clamp_voltage": self.resistance}

    def in_the_way(self) -> float:
        """The coil's current decays with L / (R + R_x). [ohm]"""
        return self.resistance.max

    def stamp(self, name: str, a: str, b: str, corner: Corner, control: str = "") -> Stamp:
        """The clamp from node `a` to node `b`: the coil's ends, in the direction of its current after the turn-off."""
        meter = Ammeter(f"{name}_a", a, f"{name}_in")
        through, middle = current(meter), f"{name}_k"
        diode = self.diode.stamp(f"{name}_d", "clamp diode", f"{name}_in", middle, through, corner)
        ohms = corner.take(self.resistance, "clamp_voltage")
        resistor = clamp_resistor(f"{name}_r", "clamp resistor", middle, b, through, ohms, self.power, self.pulse)
        return in_series((meter,), diode, resistor)
