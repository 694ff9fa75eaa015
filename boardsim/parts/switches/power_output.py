"""One output of a power register as the switch of a channel, and what the outputs of a package add up to."""

from __future__ import annotations

from typing import ClassVar, Literal

from boardsim.parts.base import Assumption, Corner, Part, Stamp, Total, named_part
from boardsim.parts.bipolar import breakdown_junction
from boardsim.parts.elements import GROUND, Ammeter, Element, Port, Probe, Resistor, current, voltage
from boardsim.parts.heat import junction_heat
from boardsim.parts.power_register import PowerRegister
from boardsim.parts.rules import BreakdownRule, Limit, MeanRule, PulseRule, Rule, TogetherRule
from boardsim.parts.temperature import reverse_current
from boardsim.quantities import Quantity, celsius

_BODY = 1e-12  # [A], saturation current of the diode from ground to the drain, from memory: some 0.7 V at an ampere
_SHARE = 0.5  # of its peak, above which a pulse of current counts as lasting
_BY_HEAT = Assumption(
    "switch",
    "clamp energy of a junction that is warm, and of many pulses",
    "the single-pulse energy, less by the share of its rise that the junction has made already",
    "a rating for a single pulse is the energy that takes a junction from where it is rated to its highest temperature "
    "(JESD24-5, from memory); what a clamp ages by is not in it",
)


class PowerOutputStage(Part):
    """One output of the chain's own registers: the coil at its drain, ground at its source, no part between."""

    role: ClassVar[str] = "switch"
    kind: Literal["power-shift-register"] = "power-shift-register"
    in_the_chain: ClassVar[bool] = True
    part: named_part(PowerRegister)  # type: ignore[valid-type]

    active: ClassVar[Literal["high", "low"]] = "high"
    """Bit that turns the coil on."""

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this stage: where its output clamps, and its on-resistance."""
        part: PowerRegister = self.part
        return {"breakdown": part.clamp_voltage, "on_resistance": part.spread}

    def held_off(self) -> bool:
        """Always: an output that is not driven is off."""
        return True

    def per_package(self) -> int:
        """Outputs of the package. [1]"""
        return int(self.part.outputs)

    def package_of(self, place: int, output: int) -> int:
        """The register in the chain that the output belongs to."""
        return output // self.per_package()

    def edge_input(self, volts: float, resistance: float) -> tuple[float, float]:
        """The charge of its gate, inside the package, and the current that brings it up. [V], [ohm] -> [C], [A]"""
        part: PowerRegister = self.part
        charge = part.gate_capacitance.max * volts
        return charge, charge / part.gate.on

    def stamp(self, name: str, pin: str, load: str, corner: Corner, rail: str = "") -> Stamp:
        """The output between ground and the coil's node `load`; node `pin` says how well it conducts."""
        part: PowerRegister = self.part
        volts = corner.take(part.clamp_voltage, "breakdown") + corner.drifted(part.drift_of_clamp.typ)
        inside = f"{name}_di"
        meter = Ammeter(f"{name}_d", load, inside)
        elements: list[Element] = [
            meter,
            *part.sink(name, pin, inside, corner.junction, corner.take(part.spread, "on_resistance")),
            breakdown_junction(f"{name}_clamp", inside, volts, _BODY, part.output_capacitance.typ),
        ]
        if part.leakage:
            leaks = reverse_current(part.leakages(), corner.junction)
            elements.append(Resistor(f"{name}_leak", inside, GROUND, part.clamp_voltage.typ / leaks))
        derated = self._by_heat(corner)
        return Stamp(
            elements=tuple(elements),
            probes=(
                Probe("v_ds", voltage(inside), "V"),
                Probe("i_d", current(meter), "A"),
                Probe("gate", voltage(pin), "1"),
            ),
            ports=(Port("switch", (("v_ds", "i_d"),), holds=0.5 * part.output_capacitance.typ * volts**2),),
            rules=self._rules(corner, volts, derated),
            totals=self._totals(corner, meter, derated),
            assumptions=(*part.of_one_output(), *(() if derated is None else (_BY_HEAT,))),
        )

    def _by_heat(self, corner: Corner) -> float | None:
        """What a single pulse may bring into a junction that is as warm as this corner's, or as the warmest air. [J]

        Notes
        -----
        E (T_max - T) / (T_max - T_0) with the rated energy E, the junction T_0 from which it is rated and its highest
        temperature T_max: a pulse of one shape heats in proportion to its energy. Not more than E where T is below T_0. How
        warm junctions get on average is held against the corner's temperature elsewhere.
        """
        part: PowerRegister = self.part
        single, top, rated = part.avalanche_energy, part.junction_rating, part.avalanche_from.typ
        if single is None or top is None:
            return None
        return single.typ * min(max((top.min - _warm(corner)) / (top.min - rated), 0.0), 1.0)

    def _rules(self, corner: Corner, volts: float, derated: float | None) -> tuple[Rule, ...]:
        part: PowerRegister = self.part
        single = Limit.of(part.avalanche_energy, "single-pulse clamp energy", "J", "energy", derated)
        if derated is not None and part.avalanche_energy is not None and derated < part.avalanche_energy.typ:
            single = Limit.of(
                part.avalanche_energy,
                f"single-pulse clamp energy from a junction of {celsius(_warm(corner))}",
                "J",
                "energy",
                derated,
            )
        repetitive = Limit.of(part.avalanche_repetitive, "repetitive clamp energy", "J", "energy")
        if part.avalanche_repetitive is None and derated is not None and part.thermal_resistance is not None:
            repetitive = single
        lasting = part.output_current
        pulsed = part.pulse_current or lasting
        points = () if pulsed is None else ((part.pulse_lasting.typ, pulsed.typ),)
        return (
            BreakdownRule(
                "overvoltage",
                "v_ds",
                "i_d",
                volts,
                Limit.of(part.clamp_voltage, "drain-source voltage", "V", "voltage", part.clamp_voltage.min),
                Limit.of(part.avalanche_current, "clamp current", "A", "current"),
                single,
                repetitive,
            ),
            PulseRule(
                "overcurrent",
                ("i_d",),
                Limit.of(pulsed, "drain current of an output", "A", "current"),
                points,
                0.0 if lasting is None else lasting.typ,
                _SHARE,
                "destroy",
                "peak current of the switch",
                "choose a register with larger outputs, or coils that take less",
            ),
            MeanRule(
                "overcurrent",
                ("i_d",),
                Limit.of(lasting, "continuous drain current of an output", "A", "current"),
                "destroy",
                "average current of the switch",
                "choose a register with larger outputs, or fire less often",
            ),
        )

    def _totals(self, corner: Corner, meter: Ammeter, derated: float | None) -> tuple[Total, ...]:
        """What the outputs of one package add up to: current, heat, and what their clamps take before their chip has cooled.

        Notes
        -----
        The whole of the power counts as growing with the junction's temperature, though only that of conduction does: where clamps
        take most of it the junction comes out too hot.
        """
        part: PowerRegister = self.part
        advice = "fewer outputs of one package at once, or spread the channels over more packages"
        together, less = part.avalanche_package, 1.0
        if derated is not None and part.avalanche_energy is not None:
            less = derated / part.avalanche_energy.typ
        whole = Limit.of(
            together,
            "clamp energy of all outputs together",
            "J",
            "energy",
            None if together is None else less * together.typ,
        )
        one = Limit.of(part.avalanche_energy, "single-pulse clamp energy of one output", "J", "energy", derated)
        return (
            *self._together(meter, advice),
            Total(
                junction_heat(
                    part.title or "register",
                    "package",
                    (("v_ds", "i_d"),),
                    part.thermal_resistance,
                    part.junction_rating,
                    corner.ambient,
                    "fire less often, spread the channels over more packages, or clamp the coils elsewhere",
                    growth=part.growth.typ,
                )
            ),
            Total(
                TogetherRule(
                    "overvoltage",
                    whole,
                    one,
                    f"clamp each coil outside the package, or {advice}",
                    within=part.chip_cools_in.typ,
                )
            ),
        )

    def _together(self, meter: Ammeter, advice: str) -> tuple[Total, Total]:
        """The current of all outputs of one package: its pulses by their length, and its average."""
        part: PowerRegister = self.part
        lasting = part.total_current
        pulsed = part.total_pulse_current or lasting
        points = () if pulsed is None else ((part.pulse_lasting.typ, pulsed.typ),)
        peaks = PulseRule(
            "overcurrent",
            ("i_ground",),
            Limit.of(pulsed, "current of all outputs together", "A", "current"),
            points,
            0.0 if lasting is None else lasting.typ,
            _SHARE,
            "destroy",
            "current of all outputs of the package",
            advice,
        )
        mean = MeanRule(
            "overcurrent",
            ("i_ground",),
            Limit.of(lasting, "continuous current of all outputs together", "A", "current"),
            "destroy",
            "average current of all outputs of the package",
            advice,
        )
        return Total(peaks, current(meter), "A"), Total(mean, current(meter), "A")


def _warm(corner: Corner) -> float:
    """The junction of a corner, or the warmest air where the corner is a cold one. [K]"""
    return max(corner.junction, corner.ambient)
