"""What a coil comes to from what people know of it: ratings, a measured rise of its current, its winding, its loss."""

from __future__ import annotations

import itertools
import math
from collections.abc import Callable, Mapping
from typing import Annotated

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.copper import T_20C, resistance_at
from boardsim.parts.record import Record
from boardsim.parts.winding import Winding
from boardsim.quantities import (
    CURRENT,
    FREQUENCY,
    POSITIVE_TIME,
    SHARE,
    VOLTAGE,
    Origin,
    Quantity,
    computed,
    in_units,
)

_CONTRADICTION = 0.05  # share by which numbers of one nameplate may differ: rounding of what is printed
_RINGS = 2.0  # quality of what still rings: below it what is left after a cycle says little
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


class MeasuredLoss(Record):
    """Its quality at a frequency, from a meter or from how it rings with a capacitor across it."""

    frequency: Annotated[Quantity, FREQUENCY] = Field(description="at which this was measured, or at which it rings")
    q: Annotated[float, Field(ge=0.1, le=1000)] | None = Field(None, description="reactance over resistance")
    cycles: Annotated[float, Field(ge=0.5, le=1000)] | None = Field(
        None, description="of its ringing, until so much is left"
    )
    left: Annotated[Quantity, SHARE] | None = Field(None, description="share of the ringing that is left after these")

    @model_validator(mode="after")
    def _either(self) -> MeasuredLoss:
        if (self.cycles is None) != (self.left is None) or (self.q is None) == (self.cycles is None):
            raise QuantityError("measured_loss needs q, or cycles and left of its ringing")
        if self.frequency.toleranced or (self.left is not None and self.left.toleranced):
            raise QuantityError("numbers of a measured loss are one measurement, without tolerance")
        if self.left is not None and self.left.typ >= 1:
            raise QuantityError("measured_loss: what is left of the ringing must be less than 100 %")
        if self.q is None and self.quality < _RINGS:
            raise QuantityError(
                f"measured_loss: what is left of the ringing makes its quality {self.quality:.2g}, and below {_RINGS:g} it says little; use a "
                "larger frequency (a smaller capacitor), or give q from a meter"
            )
        return self

    @property
    def quality(self) -> float:
        """As measured, or of the ringing: sqrt((pi/d)^2 + 1/4) with the logarithmic decrement d of one cycle. [1]"""
        if self.q is not None:
            return self.q
        assert self.left is not None and self.cycles is not None  # noqa: PT018  # one measurement
        return math.hypot(math.pi * self.cycles / math.log(1 / self.left.typ), 0.5)


def loss_of_quality(quality: float, hertz: float, henries: float, ohms: float) -> float:
    """Core-loss resistance across the inductance, from a coil's quality at a frequency.

    Parameters
    ----------
    quality, hertz, henries, ohms : float
        Reactance over resistance of the whole coil; at this frequency; its inductance; of the winding. [1], [Hz], [H], [ohm]

    Returns
    -------
    float
        [ohm]

    Raises
    ------
    QuantityError
        If the winding alone makes the quality lower than that.

    Notes
    -----
    With X = 2 pi f L, and R_p across it, the coil's impedance is R + R_p X (X + j R_p) / (R_p^2 + X^2), so that
    Q = X R_p^2 / (R (R_p^2 + X^2) + R_p X^2): a quadratic in R_p. Without the winding's resistance R_p = Q X. One resistance holds for thin
    laminations and ferrite; in solid iron the eddy currents stay in the skin, and it grows with about the root of the
    frequency: measure at one whose quarter period is about as long as the current takes to rise or to fall. Of a ringing the quality
    is that of the circuit, whose capacitor loses nothing; the two differ by about 1/Q^2.

    References
    ----------
    Series and parallel loss resistance: any textbook of alternating currents. Skin effect in solid iron: from memory.

    Examples
    --------
    >>> round(loss_of_quality(6.0, 1e3, 12e-3, 0.001), 1)
    452.4
    """
    x = 2 * math.pi * hertz * henries
    spare = x - quality * ohms
    if spare <= 0:
        raise QuantityError(
            f"measured_loss: a quality of {quality:.3g} at {in_units(hertz, 'Hz')} is more than {x / ohms:.3g}, which {in_units(ohms, 'ohm')} of winding "
            f"leave of {in_units(henries, 'H')}; check frequency, inductance and resistance"
        )
    return (quality * x * x + math.sqrt(quality**2 * x**4 + 4 * spare * quality * ohms * x * x)) / (2 * spare)


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
