"""What stands beside a vendor's model, since what is inside it is not known: where it breaks down, and what it stores."""

from __future__ import annotations

from collections.abc import Mapping

from boardsim.parts.base import Assumption, Stamp
from boardsim.parts.elements import GROUND, Ammeter, Drive, Element, Probe, Resistor, current
from boardsim.parts.rules import LeastRule, Limit, PeakRule
from boardsim.parts.vendor.model import VendorsModel
from boardsim.quantities import Quantity, in_units

BREAKDOWN_CURRENT = 250e-6  # [A], at which breakdown voltages are specified, common practice
_BEHIND = 0.01  # share of the voltage that the resistance before a held device takes at the current that matters


def held_off(
    model: VendorsModel, name: str, nodes: Mapping[str, str], at: str, volts: float, source: str, kelvin: float
) -> tuple[tuple[Element, ...], Probe, PeakRule]:
    """A second device of the same model, kept off at its rated voltage, and what judges the current that it takes there.

    Parameters
    ----------
    model : VendorsModel
    name : str
        Of the switch in the deck.
    nodes : mapping of terminals to nodes
        Those of a device that is off; the terminal that takes the voltage at the node `at`.
    at : str
    volts : float
        Rated voltage at this temperature, from ground. [V]
    source : str
        Of that rating.
    kelvin : float
        Junction temperature. [K]

    Notes
    -----
    Where a model breaks down is not known from its text. Avalanche is counted from the record's rated voltage on; a model
    that breaks down below it would take a coil's energy unseen. At the rated voltage a part of the record takes less than
    the test current of its breakdown, 250 uA (common practice); a model that takes more is not of this part. It hangs on
    a source at a node of its own (`_held`): it loads nothing else.
    """
    source_of, meter = _held(f"{name}_off", at, volts, BREAKDOWN_CURRENT)
    elements = (*source_of, model.part(f"{name}_o", nodes, kelvin))
    limit = Limit(
        BREAKDOWN_CURRENT,
        "A",
        None,
        f"test current of breakdown, common practice; rated voltage: {source}",
        f"breakdown current at {in_units(volts, 'V')}",
    )
    # The voltage stands in the limit's name: what was read has one name in all corners, of which the worst is told.
    rule = PeakRule(
        "model-breakdown",
        "i_off",
        limit,
        "misbehave",
        "current that the vendor's model takes at its rated voltage while it is off",
        "another model: this one breaks down below what the datasheet guarantees",
    )
    return elements, Probe("i_off", current(meter), "A"), rule


def _held(name: str, at: str, volts: float, amperes: float) -> tuple[tuple[Element, ...], Ammeter]:
    """What holds a device at a voltage, and the meter of its current.

    Notes
    -----
    V + R I_0 behind R, where I_0 is the current that matters: the device's current is below I_0 just if its own current at V is,
    for it rises with the voltage, and the load line passes through (V, I_0). A bare source would have no solution for a junction
    without a series resistance some volts beyond its breakdown.
    """
    ohms = _BEHIND * volts / amperes
    behind, meter = volts * (1 + _BEHIND), Ammeter(name, f"{at}s", at)
    source = Drive(f"{name}_at", f"{at}v", GROUND, ((0.0, behind), (1.0, behind)))
    return (source, Resistor(f"{name}_r", f"{at}v", f"{at}s", ohms), meter), meter


def blocking(
    model: VendorsModel, name: str, label: str, rated: Quantity | None, leakage: float, part: str, kelvin: float
) -> Stamp:
    """A second diode of the same model at its rated reverse voltage, and what judges the current that it takes there.

    Parameters
    ----------
    model : VendorsModel
    name, label : str
        Of the diode in the deck, and for people.
    rated : Quantity or None
        Reverse voltage. [V]
    leakage : float
        That the datasheet prints at the rated voltage, moved to this temperature; 0 if it prints none. [A]
    part : str
        What findings call it.
    kelvin : float
        Junction temperature. [K]

    Notes
    -----
    A diode that breaks down below its rating would hold a voltage off that the part lets stand: the reverse voltage then never
    reaches its limit, and the run is too kind. At the rated voltage a part takes no more than its leakage; beyond that the test
    current at which breakdown is specified, 250 uA (common practice), tells breakdown from leakage. Without a rated voltage there
    is nothing to hold it at, and its limit is missing.
    """
    what = f"current that the vendor's model of the {label} takes at its rated reverse voltage"
    if rated is None:
        limit = Limit(None, "V", None, "", "reverse voltage to hold the vendor's model at")
        advice = "give the record's reverse_voltage"
        return Stamp(rules=(PeakRule("model-breakdown", f"vr_{label}", limit, "misbehave", what, advice, part=part),))
    at, quantity, most = f"{name}_off", f"i_off_{label}", leakage + BREAKDOWN_CURRENT
    held, meter = _held(f"{name}_off", at, rated.typ, most)
    device = model.part(f"{name}_o", {"anode": GROUND, "cathode": at}, kelvin)
    source = f"test current of breakdown, common practice; rated voltage: {rated.origin}"
    if leakage:
        source = f"printed leakage and {source}"
    limit = Limit(most, "A", None, source, "breakdown current")
    advice = (
        f"another model: this one breaks down below {in_units(rated.typ, 'V')}; or, of a Schottky diode that leaks as much, "
        "the record's leakage as its datasheet prints it"
    )
    return Stamp(
        elements=(*held, device),
        probes=(Probe(quantity, current(meter), "A"),),
        rules=(PeakRule("model-breakdown", quantity, limit, "misbehave", what, advice, part=part),),
    )


def in_its_band(
    model: VendorsModel, name: str, label: str, held: Quantity, test: float, drifted: float, part: str, kelvin: float
) -> Stamp:
    """Two more of a part that is used in breakdown, at both ends of its printed band, and what judges their currents.

    Parameters
    ----------
    model : VendorsModel
    name, label : str
        Of the part in the deck, and for people.
    held : Quantity
        Band of its breakdown voltage at the test current, at 25 degC. [V]
    test : float
        That current. [A]
    drifted : float
        How far the band moves to this temperature. [V]
    part : str
        What findings call it.
    kelvin : float
        Junction temperature. [K]

    Notes
    -----
    Its current rises with the voltage, so that V_min <= V(I_T) <= V_max is I(V_min) <= I_T <= I(V_max): of two voltages that
    stand still each shows one end. The band moves as the record says (or assumes) that the part's voltage does: a model without
    such a law of its own lies outside as soon as the junction is warm enough, and then is not of the part at this temperature.
    A single number without a band has no ends to hold a model between: then both limits are missing.
    """
    ends = (("low", held.min + drifted), ("high", held.max + drifted))
    elements: list[Element] = []
    probes: list[Probe] = []
    for end, volts in ends:
        at = f"{name}_{end}"
        source, meter = _held(f"{name}_{end}", at, volts, test)
        device = model.part(f"{name}_{end[0]}", {"anode": GROUND, "cathode": at}, kelvin)
        elements += [*source, device]
        probes.append(Probe(f"i_{end}_{label}", current(meter), "A"))
    known = test if held.toleranced else None  # a single number has no ends to hold a model between
    low, high = (Limit(known, "A", None, str(held.origin), f"test current at {in_units(v, 'V')}") for _, v in ends)
    takes = f"current that the vendor's model of the {label} takes"
    advice = (
        "another model, one with the part's own temperature law, or the record's drift where it was assumed: this one"
    )
    return Stamp(
        elements=tuple(elements),
        probes=tuple(probes),
        rules=(
            PeakRule(
                "model-breakdown",
                probes[0].quantity,
                low,
                "misbehave",
                f"{takes} at the least voltage of its band",
                f"{advice} breaks down below its band",
                part=part,
            ),
            LeastRule(
                "model-breakdown",
                probes[1].quantity,
                high,
                f"{takes} at the highest voltage of its band",
                f"{advice} breaks down above its band",
                part=part,
            ),
        ),
    )


def stored(part: str, of: str) -> Assumption:
    """That the audit bounds what a vendor's part may give back by the record's figures."""
    why = "what the vendor's model stores is not read from its text; the audit's bound"
    return Assumption(part, "energy that its capacitances may give back", f"by the record's {of}", why)
