"""What a switch stands while it is on and off at once: points of its safe area, or its thermal impedance to a pulse."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from typing import Annotated

from boardsim.errors import QuantityError
from boardsim.parts.base import T_MODEL, Corner
from boardsim.parts.record import Record
from boardsim.parts.rules import Limit, PeakRule, Rule, linear_rule, linear_unknown
from boardsim.quantities import CURRENT, POSITIVE_TIME, THERMAL_RESISTANCE, VOLTAGE, Quantity, celsius


class SafeAreaPoint(Record):
    """A point on one of the lines of a safe operating area: a single pulse of this voltage, current and length."""

    voltage: Annotated[Quantity, VOLTAGE]
    current: Annotated[Quantity, CURRENT]
    lasting: Annotated[Quantity, POSITIVE_TIME]

    @property
    def power(self) -> float:
        """[W]"""
        return self.voltage.typ * self.current.typ


class ImpedancePoint(Record):
    """A point of the thermal impedance from junction to case for a single pulse of a length."""

    value: Annotated[Quantity, THERMAL_RESISTANCE]
    lasting: Annotated[Quantity, POSITIVE_TIME]


def refuse_unordered(points: Sequence[tuple[float, float]], what: str, rises: bool) -> None:
    """Hold points over pulse length against the way in which all of their kind go.

    Parameters
    ----------
    points : sequence of (length, value)
        The lengths rising. [s], [any unit]
    what : str
        For the message.
    rises : bool
        Whether values rise with the length; else they fall.

    Raises
    ------
    QuantityError
        If two points have the same length, or one goes the other way.
    """
    for (t1, a), (t2, b) in itertools.pairwise(points):
        if t1 == t2 or (b < a if rises else b > a):
            way = "rise" if rises else "fall"
            raise QuantityError(f"{what} must {way} with the length of the pulse, with one point for each length")


def refuse_incoherent(
    safe_area: Sequence[SafeAreaPoint], impedance: Sequence[ImpedancePoint], rating: Quantity | None
) -> None:
    """Hold a switch's figures for its linear region against each other.

    Parameters
    ----------
    safe_area : sequence of SafeAreaPoint
    impedance : sequence of ImpedancePoint
    rating : Quantity or None
        Highest junction temperature. [K]

    Raises
    ------
    QuantityError
        If their points do not go the way that they must, or say nothing without a junction rating above 25 degC.
    """
    refuse_unordered(_powers(safe_area), "the powers of safe_area", rises=False)
    refuse_unordered(_impedances(impedance), "thermal_impedance", rises=True)
    if rating is None and (safe_area or impedance):
        raise QuantityError(
            "safe_area and thermal_impedance need junction_rating: what they allow falls to nothing at the highest junction "
            "temperature"
        )
    if rating is not None and rating.min <= T_MODEL:
        raise QuantityError(
            f"junction_rating of {celsius(rating.min)} is not above {celsius(T_MODEL)}, at which the figures of a part are printed and its "
            "safe area is drawn; datasheets print 150 or 175 degC"
        )


def linear_rules(
    safe_area: Sequence[SafeAreaPoint],
    impedance: Sequence[ImpedancePoint],
    rating: Quantity | None,
    to_ambient: Quantity | None,
    corner: Corner,
) -> tuple[Rule, ...]:
    """What judges a switch that takes the energy of a coil in its linear region.

    Parameters
    ----------
    safe_area : sequence of SafeAreaPoint
    impedance : sequence of ImpedancePoint
    rating : Quantity or None
        Highest junction temperature; given where points are. [K]
    to_ambient : Quantity or None
        Thermal resistance from junction to ambient. [K/W]
    corner : Corner
        Its junction temperature is where pulses begin, or the warmest air where that is warmer.

    Returns
    -------
    tuple of Rule
        One that has no limit where the switch has neither sort of points.

    Notes
    -----
    Thermal impedance: a rectangle of power P and length t heats the junction by P Z_th(t), so that it stands (T_j,max -
    T_0) / Z_th(t) from T_0 on. Safe area: the same, read off the chart at the voltage of the clamp; charts are drawn for a case
    of 25 degC, and are taken down with (T_j,max - T_0) / (T_j,max - 25 degC), as makers' application notes do (common
    practice). Both hold for single pulses; what they add up to is judged by average power and heat.

    A clamped coil's pulse is no rectangle: it begins at V_clamp I_0 and falls, straight where the clamp is far above the rail and
    as an exponential where it is close to it. It counts as a rectangle of its peak P as long as it is above P / e: an exponential's
    time constant T, whose energy is that of P for T, and 0.63 of a triangle's base b, which has the energy of P for b / 2. Of
    all pulses of a peak and an energy the rectangle heats a junction most, since Z_th rises ever more slowly and what comes
    last counts most: the rule is an upper bound by any thermal impedance. Where heat diffuses into the chip, Z_th ~
    sqrt(t), a triangle heats by 0.471 Z_th(b) P and an exponential by 0.541 Z_th(T) P (Dawson's integral): about 0.6 and 0.54 of
    what it is taken for.

    From a thermal impedance alone nothing is seen of a chip that does not share its current evenly: at high voltage and low
    current modern transistors' charts fall below it (thermal instability). Where both are given both count. Above the
    voltage that a safe-area point was read at the chart falls, so that there the points say nothing: that fails.

    Beyond the last point what it stands falls with 1 / sqrt(t), not below what it stands for ever to the ambient.
    """
    if rating is None or not (safe_area or impedance):
        return (linear_unknown(),)
    begin = max(corner.junction, corner.ambient)
    room = max(rating.min - begin, 1e-6)  # [K]; the heat rule fails a junction that begins above its rating
    lasting = 0.0 if to_ambient is None else room / to_ambient.max
    rules: list[Rule] = []
    if safe_area:
        share = room / (rating.min - T_MODEL)
        first = min(safe_area, key=lambda p: p.lasting.typ)
        points = tuple((t, share * watts) for t, watts in _powers(safe_area))
        limit = Limit.of(first.current, "safe area", "W", "power", points[0][1])
        rules += [linear_rule(limit, points, lasting, ", against its safe area"), _within(safe_area)]
    if impedance:
        points = tuple((t, room / value) for t, value in _impedances(impedance))
        shortest = min(impedance, key=lambda p: p.lasting.typ)
        limit = Limit.of(shortest.value, "power by thermal impedance", "W", "power", points[0][1])
        rules.append(linear_rule(limit, points, lasting, ", against its thermal impedance"))
    return tuple(rules)


def _within(safe_area: Sequence[SafeAreaPoint]) -> PeakRule:
    lowest = min(safe_area, key=lambda p: p.voltage.typ)
    return PeakRule(
        "linear-region",
        "v_ds",
        Limit.of(lowest.voltage, "voltage of the safe-area points", "V", None),
        "destroy",
        "voltage of the switch while it is its own clamp",
        "read the safe area at the voltage that the clamp reaches, or a clamp of lower voltage",
    )


def _powers(points: Sequence[SafeAreaPoint]) -> list[tuple[float, float]]:
    return sorted((p.lasting.typ, p.power) for p in points)


def _impedances(points: Sequence[ImpedancePoint]) -> list[tuple[float, float]]:
    return sorted((p.lasting.typ, p.value.max) for p in points)
