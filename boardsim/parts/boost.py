"""A reservoir of a higher voltage, which a high-side switch lays on a bank of coils while they are in their peaks."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from pydantic import Field

from boardsim.parts.base import Assumption, Corner, Part, Stamp, listed, named_part
from boardsim.parts.diode import Diode
from boardsim.parts.elements import (
    GROUND,
    Ammeter,
    Capacitor,
    CurrentLaw,
    Drive,
    Port,
    Probe,
    Resistor,
    VoltageLaw,
    current,
    voltage,
)
from boardsim.parts.rules import Limit, MeanRule, PeakRule, ReserveRule
from boardsim.quantities import (
    CAPACITANCE,
    POSITIVE_RESISTANCE,
    POSITIVE_TIME,
    POWER,
    RESISTANCE,
    VOLTAGE,
    Quantity,
    assume,
)

_MIN_ESR = 1e-4  # [ohm], keeps the branch resistive where 0 ohm was given
_SUPPLY = "of its own: what charges it is not taken from the coil rail; where a converter makes it of that rail, add its load to the supply's"


class Boost(Part):
    """A capacitor that is charged through a resistor, and the switch and diode between it, the coil rail and a bank of coils.

    Notes
    -----
    C dv/dt = (V - v) / R_charging - i: i is what the bank takes while the switch is closed. The bank hangs on the coil rail through
    a diode, so that it gets whichever of the two is higher. The switch is a resistance, closed while any channel of
    the bank is in its peak, open otherwise; coils of the bank that are held then get the higher voltage too. The reservoir is
    full before the first pulse. Ignores the capacitor's series inductance, and the body diode of the switch: the
    reservoir never lies below the coil rail by more than the diode's voltage, which is where that would conduct.
    """

    role: ClassVar[str] = "boost"
    kind: Literal["boost"] = "boost"
    channels: str = Field(description="the bank: channels whose coils hang on it in place of the coil rail")
    voltage: Annotated[Quantity, VOLTAGE] = Field(description="that it is charged to, by a supply of its own")
    capacitance: Annotated[Quantity, CAPACITANCE]
    esr: Annotated[Quantity, RESISTANCE]
    charging: Annotated[Quantity, POSITIVE_RESISTANCE] = Field(description="resistor from its supply to the capacitor")
    charging_power: Annotated[Quantity, POWER] | None = Field(None, description="rating of that resistor")
    least: Annotated[Quantity, VOLTAGE] | None = Field(
        None, description="voltage that the capacitor must still have when a peak begins"
    )
    rated: Annotated[Quantity, VOLTAGE] | None = Field(None, description="rated voltage of the capacitor")
    diode: named_part(Diode) = Field(description="from the coil rail to the bank")  # type: ignore[valid-type]
    switch_resistance: Annotated[Quantity, POSITIVE_RESISTANCE] = assume(
        "50 mohm", POSITIVE_RESISTANCE, "of the switch between capacitor and bank, from memory"
    )
    switch_edge: Annotated[Quantity, POSITIVE_TIME] = assume(
        "100 ns", POSITIVE_TIME, "that the switch takes to open or close, from memory"
    )

    def reserve(self, channels: tuple[int, ...]) -> ReserveRule:
        """What is asked of the reservoir whenever a peak of one of its bank's channels begins."""
        limit = Limit.of(self.least, "voltage needed", "V", None, self.least.max if self.least else None)
        return ReserveRule("boost", "v_reservoir", limit, channels)

    def stamp(self, rail: str, bank: str, corner: Corner, closed: tuple[tuple[float, float], ...]) -> Stamp:
        """Everything between node `rail` and node `bank`; `closed` is the switch as straight lines of 0 and 1. [s]"""
        source, top, inner = "boost_supply", "boost_top", "boost_c"
        charge, taken = Ammeter("boost_charge", source, "boost_r"), Ammeter("boost_taken", top, "boost_switch")
        fed = Ammeter("boost_fed", rail, "boost_d_in")
        c = corner.take(self.capacitance, "reservoir")
        ohms = self.switch_resistance.typ
        diode = self.diode.stamp("boost_d", "bank diode", "boost_d_in", bank, current(fed), corner)
        own = Stamp(
            elements=(
                VoltageLaw("boost_supply", source, GROUND, repr(corner.take(self.voltage, "supply"))),
                charge,
                Resistor("boost_charging", "boost_r", top, self.charging.typ),
                Resistor("boost_esr", top, inner, max(corner.take(self.esr, "reservoir_esr"), _MIN_ESR)),
                Capacitor("boost", inner, GROUND, c),
                taken,
                Drive("boost_gate", "boost_gate", GROUND, closed),
                # Current into the bank's node: comes out of the law's minus.
                CurrentLaw("boost_switch", bank, "boost_switch", f"V(boost_gate)*(V(boost_switch)-V({bank}))/{ohms!r}"),
                fed,
            ),
            probes=(
                Probe("v_reservoir", voltage(inner), "V"),
                Probe("v_reservoir_port", voltage(top), "V"),
                Probe("i_boost", current(taken), "A"),
                Probe("v_boost_switch", voltage("boost_switch", bank), "V"),
                Probe("v_charging", voltage("boost_r", top), "V"),
                Probe("i_charging", current(charge), "A"),
                Probe("v_bank", voltage(bank), "V"),
            ),
            ports=(Port("boost switch", (("v_boost_switch", "i_boost"),)),),
            rules=(
                PeakRule(
                    "overvoltage",
                    "v_reservoir_port",
                    Limit.of(self.rated, "rated voltage", "V", "voltage"),
                    "destroy",
                    "voltage across the reservoir",
                    "a capacitor of a higher rated voltage",
                ),
                MeanRule(
                    "overpower",
                    ("v_charging", "i_charging"),
                    Limit.of(self.charging_power, "rated power", "W", "power"),
                    "destroy",
                    "average power of the charging resistor",
                    "a larger resistor, or fewer peaks",
                    part="charging resistor",
                ),
            ),
            assumptions=(
                *listed("boost", resistance_of_its_switch=self.switch_resistance, edge_of_its_switch=self.switch_edge),
                Assumption("boost", "supply", "not of the coil rail", _SUPPLY),
            ),
        )
        return Stamp(
            elements=(*own.elements, *diode.elements),
            probes=(*own.probes, *diode.probes),
            ports=(*own.ports, *diode.ports),
            rules=(*own.rules, *diode.rules),
            assumptions=(*own.assumptions, *diode.assumptions),
        )
