"""A resistor and a capacitor in series, across the coil or across the switch."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, ClassVar, Literal

from pydantic import AfterValidator, Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Corner, Part, Shelf, Stamp
from boardsim.parts.clamp import PulsePower, clamp_resistor, in_series, refuse_rising
from boardsim.parts.elements import Ammeter, Capacitor, Port, Probe, Signal, current, voltage
from boardsim.parts.rules import Limit, PeakRule
from boardsim.quantities import CAPACITANCE, CURRENT, POSITIVE_RESISTANCE, POWER, VOLTAGE, Quantity, computed, in_units

if TYPE_CHECKING:
    from boardsim.parts.coil import Coil

_OTHER_END = {"min": "max", "max": "min"}


class SnubberClamp(Part):
    """A capacitor that takes the coil's current when the switch opens, and a resistor that limits and damps.

    Notes
    -----
    With u the capacitor's voltage less the rail's, L di/dt = -(R + R_s) i - u and C du/dt = i (Kirchhoff), from u = -V and
    i = I_0 on: a damped swing with w0 = 1 / sqrt(L C) and a decay of 2 L / (R + R_s). The switch sees V + u + R_s i. The
    coil's energy swings into the capacitor: without resistances u reaches sqrt(V^2 + I_0^2 L / C), an upper bound, which R_s
    I_0 tops where the resistor is large. It is no clamp for a switch that has to be held to a voltage: the peak follows from
    L, C and I_0. Across the coil and across the switch u is the same; across the coil the peak is that above a rail that
    moves, across the switch that above ground.

    While the switch closes the capacitor is charged anew or discharged through it: V / R_s on top of its own current at
    first, and C V^2 / 2 of heat in R_s at every edge, whatever R_s is. Where the swing goes below ground the switch's body
    diode holds it.

    Holds for a film or ceramic capacitor of constant capacitance and a resistor without inductance; the leads of both, some
    10 nH, add to the step at the turn-off of nanoseconds. A small capacitance clamps high: it is the corner of a high clamp
    voltage.
    """

    role: ClassVar[str] = "clamp"
    kind: Literal["snubber"] = "snubber"
    place: Literal["coil", "switch"] = Field("coil", alias="across", description="what it lies in parallel to")
    at: Literal["board", "coil"] = "board"
    capacitance: Annotated[Quantity, CAPACITANCE]
    resistance: Annotated[Quantity, POSITIVE_RESISTANCE]
    rated: Annotated[Quantity, VOLTAGE] | None = Field(None, description="voltage rating of the capacitor")
    pulse_current: Annotated[Quantity, CURRENT] | None = Field(
        None, description="of the capacitor: its capacitance times its dv/dt rating"
    )
    power: Annotated[Quantity, POWER] | None = Field(None, description="that the resistor stands for ever")
    pulse: Annotated[tuple[PulsePower, ...], AfterValidator(refuse_rising)] = Field(
        (), description="power that the resistor stands in a single pulse, and how long that lasts"
    )

    @model_validator(mode="after")
    def _one_place(self) -> SnubberClamp:
        if self.at == "coil" and self.place == "switch":
            raise QuantityError('at = "coil" goes with across = "coil"; a snubber across the switch sits on the board')
        return self

    @property
    def across(self) -> Literal["coil", "switch"]:
        """What it lies in parallel to."""
        return self.place

    def at_the_coil(self) -> bool:
        """Whether it sits at the coil's own ends."""
        return self.at == "coil"

    @classmethod
    def candidates(cls, shelf: Shelf, coil: Coil, rail: float) -> tuple[SnubberClamp, ...]:
        """One by the published rule for contacts, across the switch; no ratings."""
        farads, ohms = contact_rule(rail / coil.resistance.typ, rail)
        how = f"rule for contacts at {in_units(rail / coil.resistance.typ, 'A')} and {in_units(rail, 'V')}"
        fields = {"capacitance": computed(farads, "F", how), "resistance": computed(ohms, "ohm", how)}
        return (cls.model_validate({"across": "switch", **fields}),)

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this clamp: its peak follows its capacitance."""
        return {"clamp_voltage": self.capacitance}

    def in_the_way(self) -> float:
        """The coil's current meets the resistor. [ohm]"""
        return self.resistance.max

    def swings_with(self) -> float:
        """Its least capacitance. [F]"""
        return self.capacitance.min

    def stamp(self, name: str, a: str, b: str, corner: Corner, control: str = "") -> Stamp:
        """The snubber from node `a` to node `b`, in the direction of the coil's current after the turn-off."""
        meter = Ammeter(f"{name}_a", a, f"{name}_in")
        # The capacitor at the end that stays where it is: the rounding of its charge does not then reach the coil.
        through, middle = current(meter), f"{name}_k"
        resistor = clamp_resistor(
            f"{name}_r",
            "snubber resistor",
            f"{name}_in",
            middle,
            through,
            self.resistance.typ,
            self.power,
            self.pulse,
        )
        return in_series((meter,), resistor, self._capacitor(name, middle, b, through, corner))

    def _capacitor(self, name: str, a: str, b: str, through: Signal, corner: Corner) -> Stamp:
        label = "snubber capacitor"
        v, i = f"v_{label}", f"i_{label}"
        # Clamps high: little capacitance.
        end = corner.ends.get("clamp_voltage", "typ")
        farads = self.capacitance.at(_OTHER_END.get(end, "typ"))  # type: ignore[arg-type]  # one of the three
        return Stamp(
            elements=(Capacitor(f"{name}_c", a, b, farads),),
            probes=(Probe(v, voltage(a, b), "V"), Probe(i, through, "A")),
            ports=(Port(label, ((v, i),), store=(v, farads)),),
            rules=(
                PeakRule(
                    "overvoltage",
                    v,
                    Limit.of(self.rated, "rated voltage", "V", "voltage"),
                    "destroy",
                    f"voltage of the {label}",
                    "a capacitor of a higher voltage, or a larger one, which swings less",
                    magnitude=True,
                    part=label,
                ),
                PeakRule(
                    "overcurrent",
                    i,
                    Limit.of(self.pulse_current, "pulse current", "A", "current"),
                    "destroy",
                    f"peak current of the {label}",
                    "a larger resistor, or a capacitor of a higher dv/dt rating",
                    magnitude=True,
                    part=label,
                ),
            ),
        )


def contact_rule(amperes: float, volts: float) -> tuple[float, float]:
    """Capacitance and resistance that a published rule of thumb gives for the protection of a contact.

    Parameters
    ----------
    amperes : float
        What the contact breaks. [A]
    volts : float
        What it switches. [V]

    Returns
    -------
    tuple of float
        C [F] and R [ohm].

    Notes
    -----
    C = I^2 / 10 in microfarads and R = E / (10 I (1 + 50 / E)). A rule for contacts, which stand hundreds of volts once they
    have opened: beside a transistor the swing has to be looked at.

    References
    ----------
    Rule of Paktron, as the manuals of the Duniway Terranova vacuum controllers quote it.

    Examples
    --------
    >>> farads, ohms = contact_rule(1.0, 110.0)
    >>> round(farads * 1e6, 9), round(ohms, 2)
    (0.1, 7.56)
    """
    return 1e-7 * amperes**2, volts / (10 * amperes * (1 + 50 / volts))
