"""How hot a junction gets: the rule that every kind with a thermal resistance shares."""

from __future__ import annotations

import math

from boardsim.parts.rules import HeatRule, Limit
from boardsim.quantities import Quantity

_BEYOND = 2000.0  # [K], above which no junction settles


def junction_heat(
    part: str,
    label: str,
    powers: tuple[tuple[str, str], ...],
    thermal_resistance: Quantity | None,
    junction_rating: Quantity | None,
    ambient: float,
    advice: str,
    growth: float = 0.0,
    growing: tuple[str, str] | None = None,
    factor: float = 1.0,
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
    growth : float
        Of the power with the junction's temperature, compounded, as that of an on-resistance. [1/K]
    growing : tuple of two quantity names, or None
        Their product times `factor` is the power that grows, at most all of it. None: all of it grows.
    factor : float
        For a current that is named twice the on-resistance. [ohm]

    Notes
    -----
    T_j = T_ambient + R_th P, the steady state that every datasheet defines R_th by. P is that of the run at its junction
    temperature; what grows with temperature is taken at T_j itself (`settled_temperature`). Holds for the average of a pattern
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
        growth=growth,
        growing=growing,
        factor=factor,
    )


def settled_temperature(
    ambient: float, resistance: float, power: float, growth: float, at: float, steady: float = 0.0
) -> float:
    """Where a junction settles whose power grows with its own temperature.

    Parameters
    ----------
    ambient : float
        [K]
    resistance : float
        Junction to ambient. [K/W]
    power : float
        At the junction temperature `at`. [W]
    growth : float
        [1/K]
    at : float
        [K]
    steady : float
        What there is of power besides that does not grow. [W]

    Returns
    -------
    float
        The lower solution of T = T_ambient + R_th (P_steady + P (1 + g)^(T - at)), which is the stable one; infinite where there is
        none: the junction runs away. [K]

    Notes
    -----
    Iterated from the ambient upwards: each step stays below the lower solution and comes nearer to it.

    Examples
    --------
    >>> settled_temperature(300.0, 50.0, 1.0, 0.0, 300.0)
    350.0
    >>> round(settled_temperature(300.0, 50.0, 1.0, 0.004, 300.0), 1)
    364.7
    >>> settled_temperature(300.0, 200.0, 1.0, 0.01, 300.0)
    inf
    >>> settled_temperature(300.0, 200.0, 0.0, 0.01, 300.0, 1.0)
    500.0
    """
    t = ambient
    for _ in range(2000):
        if t > _BEYOND:
            return math.inf
        nearer = ambient + resistance * (steady + power * math.pow(1 + growth, t - at))
        if abs(nearer - t) < 1e-6:
            return nearer
        t = nearer
    return math.inf


def _end(quantity: Quantity | None, bound: str) -> float | None:
    """The worse end of a band: a high thermal resistance, a low rating."""
    if quantity is None:
        return None
    return quantity.max if bound == "max" else quantity.min
