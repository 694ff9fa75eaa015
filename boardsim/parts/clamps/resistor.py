"""A resistor across the coil."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, ClassVar, Literal

from boardsim.parts.base import Corner, Shelf, Stamp
from boardsim.parts.clamp import CoilClamp
from boardsim.parts.elements import Ammeter, Port, Probe, Resistor, current, voltage
from boardsim.parts.rules import Limit, MeanRule
from boardsim.quantities import POSITIVE_RESISTANCE, POWER, Quantity, computed, in_units

if TYPE_CHECKING:
    from boardsim.parts.coil import Coil

_SHARES = (1, 2)  # times the coil's resistance: what is set beside other clamps


class ResistorClamp(CoilClamp):
    """A resistor across the coil: cheap, quick to begin with, but it conducts while the coil is on as well.

    Notes
    -----
    From the turn-off on the coil's current I_0 flows through the resistor R_x: L di/dt = -(R + R_x) i, so that
    i(t) = I_0 exp(-t (R + R_x) / L), with a peak of V + I_0 R_x at the switch (Kirchhoff's voltage law about coil and
    resistor). Of the coil's energy L I_0^2 / 2 the share R_x / (R + R_x) becomes heat in the resistor. While the coil
    is on the resistor takes V / R_x from the switch and V^2 / R_x as heat.

    Holds for a resistor without inductance at a constant temperature, with a core loss far above R_x. A wound
    resistor's own inductance adds a spike at turn-off that is not in this model. Its resistance is varied with the
    clamp voltage: a clamp that is high is a resistance that is high.
    """

    role: ClassVar[str] = "clamp"
    kind: Literal["resistor"] = "resistor"
    resistance: Annotated[Quantity, POSITIVE_RESISTANCE]
    power: Annotated[Quantity, POWER] | None = None

    @classmethod
    def candidates(cls, shelf: Shelf, coil: Coil, rail: float) -> tuple[ResistorClamp, ...]:
        """Once and twice the coil's resistance: peaks of about two and three times the rail; no power rating."""
        typ = coil.resistance.typ
        said = [(k, f"{k} times the {in_units(typ, 'ohm')} of the coil") for k in _SHARES]
        return tuple(cls(resistance=computed(k * typ, "ohm", how)) for k, how in said)

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this clamp: its voltage follows its resistance."""
        return {"clamp_voltage": self.resistance}

    def in_the_way(self) -> float:
        """The coil's current decays with L / (R + R_x). [ohm]"""
        return self.resistance.max

    def stamp(self, name: str, a: str, b: str, corner: Corner, control: str = "") -> Stamp:
        """The clamp from node `a` to node `b`: the coil's ends, in the direction of its current after the turn-off."""
        label = "clamp resistor"
        meter = Ammeter(f"{name}_a", a, f"{name}_in")
        v, i = f"v_{label}", f"i_{label}"
        return Stamp(
            elements=(meter, Resistor(f"{name}_r", f"{name}_in", b, corner.take(self.resistance, "clamp_voltage"))),
            probes=(Probe(v, voltage(f"{name}_in", b), "V"), Probe(i, current(meter), "A")),
            ports=(Port(label, ((v, i),)),),
            rules=(
                MeanRule(
                    "overpower",
                    (v, i),
                    Limit.of(self.power, "power", "W", "power"),
                    "destroy",
                    f"average power of the {label}",
                    "choose a larger resistor, a higher resistance, or fire less often",
                    part=self.title or label,
                ),
            ),
        )
