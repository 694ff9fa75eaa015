"""How much slower and quicker than typical the gates of a leg follow their driver."""

from __future__ import annotations

from boardsim.parts.base import Corner
from boardsim.parts.mosfet import Mosfet
from boardsim.quantities import Quantity, computed

RESISTANCES = "gate_resistances"
"""The key of a corner's ends under which resistances spread; those of charges are `charges_of`."""


def charges_of(end: str) -> str:
    """The key under which the gate charge of the transistor `end` ("h" or "l") spreads."""
    return {"h": "charge_high", "l": "charge_low"}[end]


def charge_spread(part: Mosfet) -> Quantity:
    """Printed over typical gate charge, of the gate-drain or the total charge whichever spreads more. [1]

    Notes
    -----
    All of a gate's charges are taken to spread together, as with the chip's area. The largest Q_gd beside a typical C_rss would
    have to sit at low drain voltages, and asks of an IRF9540N for more than its largest Q_g (97 nC, its datasheet).
    """
    charges = [q for q in (part.gate_drain_charge, part.gate_charge) if q is not None]
    return _over_typical([[q] for q in charges], part.gate_drain_charge)


def resistance_spread(*ways: tuple[Quantity, ...]) -> Quantity:
    """Of several ways from driver to gate, each a row of resistances in series, the one that spreads most, over typical. [1]"""
    return _over_typical([list(way) for way in ways], ways[0][0])


def _over_typical(sums: list[list[Quantity]], of: Quantity) -> Quantity:
    low = min(sum(q.min for q in row) / sum(q.typ for q in row) for row in sums)
    high = max(sum(q.max for q in row) / sum(q.typ for q in row) for row in sums)
    return Quantity(1.0, low, high, "1", computed(1.0, "1", str(of.origin)).origin)


def times_in(corner: Corner, end: str, charge: Quantity, resistance: Quantity) -> tuple[float, float]:
    """How long a gate takes to turn off and to turn on in a corner, each over what it typically takes. [1]

    Notes
    -----
    A gate's network has one time, resistance times charge: both spread, and their ends multiply. What destroys a leg is a
    transistor that turns off late beside one that turns on early, and either may be either: in a corner in which they spread
    both gates turn off as the slowest and on as the quickest would.
    """
    spread = [q for key, q in ((charges_of(end), charge), (RESISTANCES, resistance)) if key in corner.ends]
    slow = quick = 1.0
    for q in spread:
        slow, quick = slow * q.max, quick * q.min
    return slow, quick


def paced(wanted: str, gate: str, slow: float, quick: float) -> str:
    """What to put before a gate's resistor so that the gate falls `slow` and rises `quick` times as long as it would. [V]

    Parameters
    ----------
    wanted, gate : str
        Expressions of what the driver gives, and of the gate's voltage from its source. [V]
    slow, quick : float
        Above and below one. [1]

    Notes
    -----
    Through a resistance R flows (o - g) / R; it has to be (u - g) / (k R), thus o = u + (u - g) (1 / k - 1), with one k for
    falling gates, g > u, and one for rising ones. What lifts a gate that is held off, C_GD dv/dt, meets k R as well.
    """
    falls = f"+{1 - 1 / slow!r}*max(0,{gate}-{wanted})" if slow != 1.0 else ""
    rises = f"+{1 / quick - 1!r}*max(0,{wanted}-{gate})" if quick != 1.0 else ""
    return f"{wanted}{falls}{rises}"
