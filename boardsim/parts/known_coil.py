"""Resistance and inductance of a coil from what people know of it: ratings, a measured rise of its current, its winding."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Mapping
from typing import Annotated

from pydantic import model_validator

from boardsim.errors import QuantityError
from boardsim.parts.copper import T_20C, resistance_at
from boardsim.parts.record import Record
from boardsim.parts.winding import Winding
from boardsim.quantities import CURRENT, POSITIVE_TIME, VOLTAGE, Origin, Quantity, computed, in_units

_CONTRADICTION = 0.05  # share by which numbers of one nameplate may differ: rounding of what is printed
_WOUND = 0.15  # the same of a winding and a measured resistance: tension and tolerance of thin wire, from memory


class MeasuredRise(Record):
    """The current of a coil that was switched on, once, and how long after."""

    voltage: Annotated[Quantity, VOLTAGE]
    time: Annotated[Quantity, POSITIVE_TIME]
    current: Annotated[Quantity, CURRENT]

    @model_validator(mode="after")
    def _one_point(self) -> MeasuredRise:
        if any(q.toleranced for q in (self.voltage, self.time, self.current)):
            raise QuantityError(
                "voltage, time and current of a measured rise are one measured point each, without tolerance"
            )
        return self


def inductance_of_rise(volts: float, seconds: float, amperes: float, ohms: float) -> float:
    """Inductance from one point of a coil's rising current.

    Parameters
    ----------
    volts, seconds, amperes, ohms : float
        Across the coil; since it was switched on; at that time; of the winding. [V], [s], [A], [ohm]

    Returns
    -------
    float
        [H]

    Raises
    ------
    QuantityError
        If the current is at or above volts / ohms, which no coil reaches, or so near that nothing can be said.

    Notes
    -----
    i(t) = V/R (1 - exp(-t R / L)), so L = -R t / ln(1 - i R / V). For small i R / V it is V t / i. A core that saturates, or a
    plunger that moves, bends the rise: take the point well before either.

    Examples
    --------
    >>> round(inductance_of_rise(24.0, 50e-6, 0.35, 18.2) * 1e3, 2)
    2.95
    """
    share = amperes * ohms / volts
    if share >= 0.95:
        raise QuantityError(
            f"measured_rise: {in_units(amperes, 'A')} is {share:.0%} of the {in_units(volts / ohms, 'A')} that the winding lets through in the "
            "end, so near that the inductance cannot be told from it; take a point at half of that, or less"
        )
    return -ohms * seconds / math.log1p(-share)


def resistance_from(
    resistance: Quantity | None, rated: Mapping[str, Quantity | None], winding: Winding | None, at: float
) -> Quantity:
    """Winding resistance: as given, else from two ratings, else from the winding.

    Parameters
    ----------
    resistance : Quantity or None
        [ohm]
    rated : mapping
        "voltage", "current" and "power" of the nameplate, None where it does not say. [V], [A], [W]
    winding : Winding or None
    at : float
        Temperature for which it is asked. [K]

    Returns
    -------
    Quantity
        With the band that those of the two ratings make. [ohm]

    Raises
    ------
    QuantityError
        If too little is given, or numbers contradict each other.

    Notes
    -----
    R = V / I = V^2 / P = P / I^2. Every two of the four numbers give a resistance, which may differ by 5 % (what is printed is
    rounded).
    """
    found = {"resistance": resistance} if resistance is not None else {}
    for (a, b), law in _LAWS.items():
        first, second = rated[a], rated[b]
        if first is not None and second is not None:
            found[f"rated_{a} and rated_{b}"] = _band(law, first, second, f"from rated {a} and {b}")
    for (how, one), (other, two) in itertools.combinations(found.items(), 2):
        apart = max(one.typ, two.typ) / min(one.typ, two.typ) - 1
        if apart > _CONTRADICTION:
            raise QuantityError(
                f"{how} say {in_units(one.typ, 'ohm')}, and {other} say {in_units(two.typ, 'ohm')}: {apart:.0%} apart, where up to "
                f"{_CONTRADICTION:.0%} can be rounding; correct one of them, or leave it out"
            )
    if not found and winding is None:
        raise QuantityError(
            "nothing tells its resistance: give resistance, or two of rated_voltage, rated_current and rated_power, or the winding"
        )
    if winding is None:
        return next(iter(found.values()))
    wound = resistance_at(winding.wound().resistance, T_20C, at)
    if not found:
        return computed(wound, "ohm", "from turns, wire and bobbin")
    how, given = next(iter(found.items()))
    if abs(given.typ / wound - 1) > _WOUND:
        raise QuantityError(
            f"{how} say {in_units(given.typ, 'ohm')}, and the winding comes out at {in_units(wound, 'ohm')}: more than {_WOUND:.0%} apart, "
            "which is more than thin wire varies; check the wire's diameter and the turns"
        )
    return given


def inductance_from(
    inductance: Quantity | None, rise: MeasuredRise | None, winding: Winding | None, resistance: Quantity
) -> Quantity:
    """Inductance: as given, or from a measured rise of the current, or from the winding and the factor of its core. [H]

    Raises
    ------
    QuantityError
        If nothing tells it, or more than one thing does.
    """
    factor = None if winding is None else winding.core_factor
    told = {"inductance": inductance, "measured_rise": rise, "core_factor of the winding": factor}
    ways = [name for name, value in told.items() if value is not None]
    if len(ways) > 1:
        raise QuantityError(f"{' and '.join(ways)} each tell the inductance; give one of them")
    if inductance is not None:
        return inductance
    if rise is not None:
        by = [
            inductance_of_rise(rise.voltage.typ, rise.time.typ, rise.current.typ, ohms)
            for ohms in (resistance.typ, resistance.max, resistance.min)
        ]
        return Quantity(by[0], min(by), max(by), "H", Origin("computed", "from a measured rise of the current"))
    if winding is not None and factor is not None:
        henries = winding.wound().inductance * factor
        return computed(henries, "H", f"of the winding, Wheeler's formula, times the core factor of {factor:g}")
    raise QuantityError(
        "nothing tells its inductance: give inductance (a band such as '8 to 14 mH' will do), or measured_rise = { voltage = ..., time = ..., "
        "current = ... }, or a core_factor in its winding (1 for a coil without iron)"
    )


_LAWS: dict[tuple[str, str], Callable[[float, float], float]] = {
    ("voltage", "current"): lambda v, i: v / i,
    ("voltage", "power"): lambda v, p: v * v / p,
    ("current", "power"): lambda i, p: p / (i * i),
}


def _band(law: Callable[[float, float], float], first: Quantity, second: Quantity, how: str) -> Quantity:
    ends = [law(a, b) for a in (first.min, first.max) for b in (second.min, second.max)]
    return Quantity(law(first.typ, second.typ), min(ends), max(ends), "ohm", Origin("computed", how))
