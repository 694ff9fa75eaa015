"""One power MOSFET in a circuit: its elements, what is read of it, and the rules that every stage with one shares."""

from __future__ import annotations

from dataclasses import dataclass, replace

from boardsim.parts.base import T_MODEL, Assumption, Corner, Stamp, listed
from boardsim.parts.elements import (
    GROUND,
    Ammeter,
    Element,
    Port,
    PowerMosfet,
    Probe,
    Resistor,
    Signal,
    current,
    scaled,
    voltage,
)
from boardsim.parts.heat import junction_heat
from boardsim.parts.mosfet import Mosfet
from boardsim.parts.rules import BreakdownRule, FloorRule, Limit, MeanRule, PeakRule, Rule
from boardsim.parts.temperature import grown, reverse_current
from boardsim.parts.vendor.beside import held_off, stored

_GATE_SWING = 20.0  # [V] that a gate may give back, as far as gates are rated


@dataclass(frozen=True)
class Place:
    """Where a transistor sits.

    Attributes
    ----------
    drain, gate, source : str
        Nodes.
    who : str
        For people, such as "switch".
    suffix : str
        Of its quantities, where a channel has several transistors.
    gate_too_high, gate_too_low : str
        What to try where the gate's voltage is beyond its rating, or drives too weakly.
    """

    drain: str
    gate: str
    source: str
    who: str = "switch"
    suffix: str = ""
    gate_too_high: str = "lower the logic rail, or choose a gate rating that stands it"
    gate_too_low: str = "raise the logic rail, or choose a switch that is specified at this gate voltage"

    def of(self, quantity: str) -> str:
        """The name of one of its quantities."""
        return f"{quantity}{self.suffix}"


def in_corner(part: Mosfet, corner: Corner) -> tuple[float, dict[str, float]]:
    """Where a transistor breaks down in a corner, and the parameters of its model there. [V], SI units"""
    breakdown = corner.take(part.breakdown, "breakdown") + corner.drifted(part.drift_of_breakdown.typ)
    shift = corner.take(part.threshold, "threshold") - part.threshold.typ
    spread = corner.take(part.spread, "on_resistance")
    return breakdown, part.at_temperature(breakdown, corner.junction, spread, shift)


def mosfet_stamp(part: Mosfet, name: str, place: Place, into_gate: Signal, corner: Corner, bare: bool = False) -> Stamp:
    """A transistor without its gate network.

    Parameters
    ----------
    part : Mosfet
    name : str
        Of its elements.
    place : Place
    into_gate : Signal
        The current into the gate, out of it for a P-channel part. [A]
    corner : Corner
    bare : bool
        Leaves the gate's own resistance to the network around it, which then has it in series: what is read is the voltage
        at the chip.

    Notes
    -----
    What is read counts in the part's own sense: v_ds, i_d and v_gs are positive where an N-channel part's would be, for a
    P-channel part from source to drain and from source to gate.
    """
    breakdown, parameters = in_corner(part, corner)
    rated = rated_breakdown(part, corner)
    if bare:
        parameters = {**parameters, "RG": 0.0}
    sign, inside = (-1.0, f"{name}_di") if part.mirrored else (1.0, f"{name}_di")
    ends = (inside, place.drain) if part.mirrored else (place.drain, inside)
    meter = Ammeter(f"{name}_d", *ends)
    elements: list[Element] = [
        meter,
        PowerMosfet(name, inside, place.gate, place.source, part.card(f"{name}_m", parameters)),
    ]
    vendors = None if part.model is None else _vendors(part, name, inside, place, corner)
    if vendors is not None:
        elements[1:] = vendors.elements
        breakdown = rated  # where the model breaks down is not known: what is above the rating counts
    elif part.leakage:
        reverse = reverse_current(part.leakages(), corner.junction)
        elements.append(Resistor(f"{name}_leak", inside, place.source, part.breakdown.typ / reverse))
    holds = (
        0.5 * (parameters["CJO"] + parameters["CGDMAX"]) * breakdown**2
        + 0.5 * (part.input_capacitance.typ + parameters["CGDMAX"]) * _GATE_SWING**2
    )
    v_ds, i_d, v_gs, i_g = (place.of(q) for q in ("v_ds", "i_d", "v_gs", "i_g"))
    return Stamp(
        elements=tuple(elements),
        probes=(
            Probe(v_ds, scaled(sign, voltage(inside, place.source)), "V"),
            Probe(i_d, current(meter), "A"),
            Probe(v_gs, scaled(sign, voltage(place.gate, place.source)), "V"),
            Probe(i_g, into_gate, "A"),
            *(vendors.probes if vendors is not None else ()),
        ),
        ports=(Port(place.who, ((v_ds, i_d), (v_gs, i_g)), holds=holds),),
        rules=(
            BreakdownRule(
                "overvoltage",
                v_ds,
                i_d,
                breakdown,
                Limit.of(part.breakdown, "drain-source voltage", "V", "voltage", rated),
                Limit.of(part.avalanche_current, "avalanche current", "A", "current"),
                Limit.of(part.avalanche_energy, "single-pulse avalanche energy", "J", "energy"),
                Limit.of(part.avalanche_repetitive, "repetitive avalanche energy", "J", "energy"),
                of="" if place.who == "switch" else f" of the {place.who}",
            ),
            *_gate_rules(part, place),
            *_current_rules(part, place),
            junction_heat(
                part.title or place.who,
                place.who,
                ((v_ds, i_d), (v_gs, i_g)),
                part.thermal_resistance,
                part.junction_rating,
                corner.ambient,
                "choose a switch of less on-resistance or with a better path for heat, or fire less often",
                growth=part.growth.typ,
                # What a switch takes as its own clamp, or in avalanche, does not grow with its on-resistance.
                growing=(i_d, i_d),
                factor=_highest_resistance(part, corner),
            ),
            *(vendors.rules if vendors is not None else ()),
        ),
        assumptions=_assumed(part, place.who),
    )


def _highest_resistance(part: Mosfet, corner: Corner) -> float:
    """The on-resistance in this run at the lowest gate voltage that it is given for. [ohm]"""
    cold = max(p.value.typ for p in part.on_resistance if p.kelvin == T_MODEL)
    return grown(cold * corner.take(part.spread, "on_resistance"), part.growth.typ, corner.junction)


def _assumed(part: Mosfet, who: str) -> tuple[Assumption, ...]:
    """What was supplied; with a vendor's model only what judges or audits it, and not what would shape ours."""
    shaping = ("gate_resistance", "threshold_current", "drift_of_the_threshold") if part.model is not None else ()
    numbers = {
        "gate_resistance": part.gate_resistance,
        "capacitance_voltage": part.capacitance_voltage,
        "threshold_current": part.threshold_current,
        "drift_of_the_threshold": part.drift_of_threshold,
        "drift_of_the_breakdown": part.drift_of_breakdown,
        "growth_of_the_on_resistance": part.growth,
    }
    found = listed(who, **{name: q for name, q in numbers.items() if name not in shaping})
    if part.model is None:
        return found
    return (*found, *part.model.told(who), stored(who, "C_iss, C_oss and Q_gd"))


def _vendors(part: Mosfet, name: str, inside: str, place: Place, corner: Corner) -> Stamp:
    """The vendor's model in the place of ours, and one beside it that shows whether it stands its rated voltage."""
    assert part.model is not None
    device = part.model.part(name, {"drain": inside, "gate": place.gate, "source": place.source}, corner.junction)
    at = f"{name}_off"
    elements, probe, rule = held_off(
        part.model,
        name,
        {"drain": at, "gate": GROUND, "source": GROUND},
        at,
        rated_breakdown(part, corner),
        str(part.breakdown.origin),
        corner.junction,
    )
    # A channel may have several transistors with models of their own.
    probe, rule = replace(probe, quantity=place.of(probe.quantity)), replace(rule, quantity=place.of(rule.quantity))
    return Stamp(elements=(device, *elements), probes=(probe,), rules=(rule,))


def rated_breakdown(part: Mosfet, corner: Corner) -> float:
    """The rated voltage, which is given for 25 degC and above: a colder transistor breaks down earlier. [V]"""
    return part.breakdown.min + min(0.0, corner.drifted(part.drift_of_breakdown.typ))


def _gate_rules(part: Mosfet, place: Place) -> tuple[Rule, ...]:
    lowest = min(part.on_resistance, key=lambda p: p.gate.typ)
    return (
        PeakRule(
            "overvoltage",
            place.of("v_gs"),
            Limit.of(part.gate_rating, "gate-source voltage", "V", "voltage"),
            "destroy",
            f"gate-source voltage of the {place.who}",
            place.gate_too_high,
            magnitude=True,
        ),
        FloorRule(
            "under-drive",
            place.of("v_gs"),
            Limit.of(lowest.gate, "lowest gate voltage with an on-resistance", "V", None),
            "destroy",
            f"gate drive of the {place.who}",
            place.gate_too_low,
        ),
    )


def _current_rules(part: Mosfet, place: Place) -> tuple[Rule, ...]:
    peak = Limit.of(part.pulse_current, "pulsed drain current", "A", "current")
    if part.pulse_current is None:
        peak = Limit.of(part.continuous_current, "continuous drain current (no pulse rating given)", "A", "current")
    i_d = place.of("i_d")
    return (
        PeakRule(
            "overcurrent", i_d, peak, "destroy", f"peak current of the {place.who}", f"choose a larger {place.who}"
        ),
        MeanRule(
            "overcurrent",
            (i_d,),
            Limit.of(part.continuous_current, "continuous drain current", "A", "current"),
            "destroy",
            f"average current of the {place.who}",
            f"choose a larger {place.who}, or fire less often",
        ),
    )
