"""A low-side logic-level N-MOSFET and its gate network, as the switch of a channel."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from boardsim.parts.base import T_MODEL, Assumption, Corner, Part, Stamp, listed, named_part
from boardsim.parts.elements import (
    GROUND,
    Ammeter,
    Element,
    Model,
    Port,
    PowerMosfet,
    Probe,
    Resistor,
    current,
    plus,
    scaled,
    voltage,
)
from boardsim.parts.heat import junction_heat
from boardsim.parts.linear import linear_rules
from boardsim.parts.mosfet import NMosfet
from boardsim.parts.rules import BreakdownRule, FloorRule, Limit, MeanRule, PeakRule, Rule
from boardsim.parts.temperature import grown, reverse_current
from boardsim.parts.vendor.beside import held_off, stored
from boardsim.parts.vendor.model import typical
from boardsim.quantities import (
    POSITIVE_RESISTANCE,
    RESISTANCE,
    Quantity,
)

_BODY_DIODE_POTENTIAL = 0.75  # [V], grading exponent 1/2: an abrupt junction, from memory
_BODY_DRIFT = -2e-3  # [V/K] of the body diode's forward voltage at 1 A, silicon, common practice
_SUBTHRESHOLD = 0.1  # [V], ngspice's own default for the rounding near threshold
_ROUNDS = 60  # until threshold and channel agree
_BREAKDOWN_CURRENT = 250e-6  # [A], at which V_(BR)DSS is specified, common practice


class NMosfetStage(Part):
    """The transistor with its gate resistor and pull-down; source at ground, drain at the coil."""

    role: ClassVar[str] = "switch"
    kind: Literal["n-mosfet"] = "n-mosfet"
    part: named_part(NMosfet)  # type: ignore[valid-type]
    gate: Annotated[Quantity, RESISTANCE]
    pulldown: Annotated[Quantity, POSITIVE_RESISTANCE] | None = None

    active: ClassVar[Literal["high", "low"]] = "high"
    """Output level that turns the coil on."""

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this stage: where the transistor breaks down, its on-resistance and its threshold."""
        part: NMosfet = self.part
        varied = {"breakdown": part.breakdown, "on_resistance": part.spread, "threshold": part.threshold}
        return {key: typical(q, part.model) for key, q in varied.items()}

    def steady_input(self, volts: float, resistance: float) -> float:
        """Through gate resistor and pull-down; a gate by itself takes none. [V], [ohm] -> [A]"""
        return 0.0 if self.pulldown is None else volts / (resistance + self.gate.min + self.pulldown.min)

    def edge_input(self, volts: float, resistance: float) -> tuple[float, float]:
        """The gate's charge, through the gate resistor. [V], [ohm] -> [C], [A]

        Notes
        -----
        Printed gate charge, in proportion where the gate goes higher than it was printed for; else C_iss V + Q_gd, the charge of
        the capacitances and of the plateau. The charge counts as a store that is empty at first: I_0 = V / R.
        """
        part: NMosfet = self.part
        given, at = part.gate_charge, part.charge_gate
        charge = part.input_capacitance.max * volts + part.gate_drain_charge.max
        if given is not None and at is not None:
            charge = given.max * max(volts / at.typ, 1.0)
        return charge, volts / (resistance + self.gate.min + part.gate_resistance.min)

    def held_off(self) -> bool:
        """Whether it has a pull-down."""
        return self.pulldown is not None

    def control(self, name: str) -> str:
        """The gate."""
        return f"{name}_g"

    def linear(self, corner: Corner) -> tuple[Rule, ...]:
        """Its safe area and its thermal impedance, as far as they are given."""
        part: NMosfet = self.part
        return linear_rules(
            part.safe_area, part.thermal_impedance, part.junction_rating, part.thermal_resistance, corner
        )

    def stamp(self, name: str, pin: str, load: str, corner: Corner, rail: str = "") -> Stamp:
        """The stage between the register's node `pin` and the coil's node `load`."""
        part: NMosfet = self.part
        bv = corner.take(part.breakdown, "breakdown") + corner.drifted(part.drift_of_breakdown.typ)
        shift = corner.take(part.threshold, "threshold") - part.threshold.typ
        parameters = part.at_temperature(bv, corner.junction, corner.take(part.spread, "on_resistance"), shift)
        gate, inside = self.control(name), f"{name}_di"
        meter = Ammeter(f"{name}_d", load, inside)
        vendors = None if part.model is None else self._vendors(name, inside, gate, corner)
        r_gate = max(self.gate.typ, 1e-2)
        into_gate = scaled(1 / r_gate, voltage(pin, gate))
        elements: list[Element] = [
            meter,
            PowerMosfet(name, inside, gate, GROUND, Model(f"{name}_m", "VDMOS", parameters)),
        ]
        if vendors is not None:
            elements[1:] = vendors.elements
            bv = self._rating(corner)  # where the model breaks down is not known: what is above the rating counts
        elif part.leakage:
            reverse = reverse_current(part.leakages(), corner.junction)
            elements.append(Resistor(f"{name}_leak", inside, GROUND, part.breakdown.typ / reverse))
        network: list[Element] = [Resistor(f"{name}_gate", pin, gate, r_gate)]
        if self.pulldown is not None:
            network.append(Resistor(f"{name}_pulldown", gate, GROUND, self.pulldown.typ))
            into_gate = plus(into_gate, scaled(-1 / self.pulldown.typ, voltage(gate)))
        peak = Limit.of(part.pulse_current, "pulsed drain current", "A", "current")
        if part.pulse_current is None:
            peak = Limit.of(part.continuous_current, "continuous drain current (no pulse rating given)", "A", "current")
        lowest = min(part.on_resistance, key=lambda p: p.gate.typ)
        holds = (
            0.5 * (parameters["CJO"] + parameters["CGDMAX"]) * bv**2
            + 0.5 * (part.input_capacitance.typ + parameters["CGDMAX"]) * 20.0**2
        )
        return Stamp(
            elements=(*elements, *network),
            probes=(
                Probe("v_ds", voltage(inside), "V"),
                Probe("i_d", current(meter), "A"),
                Probe("v_gs", voltage(gate), "V"),
                Probe("i_g", into_gate, "A"),
                *(vendors.probes if vendors is not None else ()),
            ),
            ports=(Port("switch", (("v_ds", "i_d"), ("v_gs", "i_g")), holds=holds),),
            rules=(
                BreakdownRule(
                    "overvoltage",
                    "v_ds",
                    "i_d",
                    bv,
                    Limit.of(part.breakdown, "drain-source voltage", "V", "voltage", self._rating(corner)),
                    Limit.of(part.avalanche_current, "avalanche current", "A", "current"),
                    Limit.of(part.avalanche_energy, "single-pulse avalanche energy", "J", "energy"),
                    Limit.of(part.avalanche_repetitive, "repetitive avalanche energy", "J", "energy"),
                ),
                PeakRule(
                    "overvoltage",
                    "v_gs",
                    Limit.of(part.gate_rating, "gate-source voltage", "V", "voltage"),
                    "destroy",
                    "gate-source voltage of the switch",
                    "lower the logic rail, or choose a gate rating that stands it",
                    magnitude=True,
                ),
                FloorRule(
                    "under-drive",
                    "v_gs",
                    Limit.of(lowest.gate, "lowest gate voltage with an on-resistance", "V", None),
                    "destroy",
                    "gate drive of the switch",
                    "raise the logic rail, or choose a switch that is specified at this gate voltage",
                ),
                PeakRule(
                    "overcurrent",
                    "i_d",
                    peak,
                    "destroy",
                    "peak current of the switch",
                    "choose a larger switch",
                ),
                MeanRule(
                    "overcurrent",
                    ("i_d",),
                    Limit.of(part.continuous_current, "continuous drain current", "A", "current"),
                    "destroy",
                    "average current of the switch",
                    "choose a larger switch, or fire less often",
                ),
                junction_heat(
                    part.title or "switch",
                    "switch",
                    (("v_ds", "i_d"), ("v_gs", "i_g")),
                    part.thermal_resistance,
                    part.junction_rating,
                    corner.ambient,
                    "choose a switch of less on-resistance or with a better path for heat, or fire less often",
                    growth=part.growth.typ,
                    # What a switch takes as its own clamp, or in avalanche, does not grow with its on-resistance.
                    growing=("i_d", "i_d"),
                    factor=self._highest_resistance(corner),
                ),
                *(vendors.rules if vendors is not None else ()),
            ),
            assumptions=self._assumed(),
        )

    def _highest_resistance(self, corner: Corner) -> float:
        """The on-resistance in this run at the lowest gate voltage that it is given for. [ohm]"""
        part: NMosfet = self.part
        cold = max(p.value.typ for p in part.on_resistance if p.kelvin == T_MODEL)
        return grown(cold * corner.take(part.spread, "on_resistance"), part.growth.typ, corner.junction)

    def _assumed(self) -> tuple[Assumption, ...]:
        """What was supplied; with a vendor's model only what judges or audits it, and not what would shape ours."""
        part: NMosfet = self.part
        shaping = ("gate_resistance", "threshold_current", "drift_of_the_threshold") if part.model is not None else ()
        numbers = {
            "gate_resistance": part.gate_resistance,
            "capacitance_voltage": part.capacitance_voltage,
            "threshold_current": part.threshold_current,
            "drift_of_the_threshold": part.drift_of_threshold,
            "drift_of_the_breakdown": part.drift_of_breakdown,
            "growth_of_the_on_resistance": part.growth,
        }
        found = listed("switch", **{name: q for name, q in numbers.items() if name not in shaping})
        if part.model is None:
            return found
        return (*found, *part.model.told("switch"), stored("switch", "C_iss, C_oss and Q_gd"))

    def _vendors(self, name: str, inside: str, gate: str, corner: Corner) -> Stamp:
        """The vendor's model in the place of ours, and one beside it that shows whether it stands its rated voltage."""
        part: NMosfet = self.part
        assert part.model is not None
        device = part.model.part(name, {"drain": inside, "gate": gate, "source": GROUND}, corner.junction)
        at = f"{name}_off"
        elements, probe, rule = held_off(
            part.model,
            name,
            {"drain": at, "gate": GROUND, "source": GROUND},
            at,
            self._rating(corner),
            str(part.breakdown.origin),
            corner.junction,
        )
        return Stamp(elements=(device, *elements), probes=(probe,), rules=(rule,))

    def _rating(self, corner: Corner) -> float:
        """The rated voltage, which is given for 25 degC and above: a colder transistor breaks down earlier. [V]"""
        part: NMosfet = self.part
        return part.breakdown.min + min(0.0, corner.drifted(part.drift_of_breakdown.typ))
