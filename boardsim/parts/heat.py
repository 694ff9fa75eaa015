"""How hot a junction gets: the rule that every kind with a thermal resistance shares."""

from __future__ import annotations

from boardsim.parts.rules import HeatRule, Limit
from boardsim.quantities import Quantity


def junction_heat(
    part: str,
    label: str,
    powers: tuple[tuple[str, str], ...],
    thermal_resistance: Quantity | None,
    junction_rating: Quantity | None,
    ambient: float,
    advice: str,
) -> HeatRule:
    """The rule that a junction stays cool enough at the average power of the pattern.

    Parameters
    ----------
    part, label : str
        Name of the part, and of its place for people, such as "clamp diode".
    powers : tuple of (voltage, current) quantity names
    thermal_resistance : Quantity or None
        Junction to ambient. [K/W]
    junction_rating : Quantity or None
        Highest junction temperature. [K]
    ambient : float
        Air around the board in this corner. [K]
    advice : str

    Notes
    -----
    T_j = T_ambient + R_th P, the steady state that every datasheet defines R_th by. Holds for the average of a pattern
    that is short against the seconds to minutes in which a board warms up, or goes on for ever. The swing within one
    pulse comes on top: surge and energy ratings judge that.
    """
    return HeatRule(
        "overheating",
        powers,
        Limit.of(thermal_resistance, "thermal resistance to the ambient", "K/W", None, _end(thermal_resistance, "max")),
        ambient,
        Limit.of(junction_rating, "highest junction temperature", "K", None, _end(junction_rating, "min")),
        "destroy",
        f"junction of the {label}",
        advice,
        part=part,
    )


def _end(quantity: Quantity | None, bound: str) -> float | None:
    """The worse end of a band: a high thermal resistance, a low rating."""
    if quantity is None:
        return None
    return quantity.max if bound == "max" else quantity.min
