"""What stands beside a vendor's model of a switch, since what is inside it is not known: its breakdown, and what it stores."""

from __future__ import annotations

from collections.abc import Mapping

from boardsim.parts.base import Assumption
from boardsim.parts.elements import GROUND, Ammeter, Drive, Element, Probe, current
from boardsim.parts.rules import Limit, PeakRule
from boardsim.parts.vendor.model import VendorsModel
from boardsim.quantities import in_units

BREAKDOWN_CURRENT = 250e-6  # [A], at which breakdown voltages are specified, common practice


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
    the test current of its breakdown, 250 uA (common practice); a model that takes more is not of this part. A current through
    a source at a node of its own: it loads nothing else.
    """
    meter = Ammeter(f"{name}_off", f"{at}s", at)
    levels = ((0.0, volts), (1.0, volts))
    elements = (Drive(f"{name}_off_at", f"{at}s", GROUND, levels), meter, model.part(f"{name}_o", nodes, kelvin))
    limit = Limit(
        BREAKDOWN_CURRENT,
        "A",
        None,
        f"test current of breakdown, common practice; rated voltage: {source}",
        "breakdown current",
    )
    rule = PeakRule(
        "model-breakdown",
        "i_off",
        limit,
        "misbehave",
        f"current that the vendor's model takes at its rated {in_units(volts, 'V')} while it is off",
        "another model: this one breaks down below what the datasheet guarantees",
    )
    return elements, Probe("i_off", current(meter), "A"), rule


def stored(part: str, of: str) -> Assumption:
    """That the audit bounds what a vendor's part may give back by the record's figures."""
    why = "what the vendor's model stores is not read from its text; the audit's bound"
    return Assumption(part, "energy that its capacitances may give back", f"by the record's {of}", why)
