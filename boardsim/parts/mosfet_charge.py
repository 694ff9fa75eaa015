"""The gate's capacitances of a MOSFET model, from the charges and capacitances that its datasheet prints."""

from __future__ import annotations

import functools
import math
from collections.abc import Mapping
from dataclasses import dataclass

from boardsim.errors import QuantityError

_SLOPE = (
    0.5  # [1/V], how sharply the gate-drain capacitance falls near V_GD = 0 where no total charge tells, from memory
)
_SLOPES = (0.1, 4.0)  # [1/V], the range in which it is sought
_LEAST_SHARE = 0.1  # of C_rss that the gate-drain capacitance keeps at any voltage, so that it never turns negative
_CHARGE_MISS = 0.09  # share by which the total gate charge may be missed before the input capacitance gives way
_STEPS = 200


@dataclass(frozen=True)
class GateFigures:
    """What the gate's capacitances are made from, and the channel's threshold voltages.

    Attributes
    ----------
    c_iss, c_rss : float
        At V_DS = `c_at`, V_GS = 0. [F]
    c_at : float
        [V]
    q_gd : float
        Over the plateau. [C]
    q_at : float
        Drain voltage of the charges. [V]
    v_th, v_to : float
        Printed threshold, and that of the model. [V]
    q_g, q_gate : float or None
        Total charge [C] and the gate voltage up to which it counts [V].
    """

    c_iss: float
    c_rss: float
    c_at: float
    q_gd: float
    q_at: float
    v_th: float
    v_to: float
    q_g: float | None = None
    q_gate: float | None = None


def _area(v: float, a: float) -> float:
    """Integral of atan(a v) below 0 V and of tanh(a v) above, from 0 to v. [V]"""
    if v > 0:
        return (a * v + math.log1p(math.exp(-2 * a * v)) - math.log(2)) / a
    return v * math.atan(a * v) - math.log1p((a * v) ** 2) / (2 * a)


@functools.lru_cache(maxsize=256)  # a board stamps the same transistor on every channel
def gate_capacitances(figures: GateFigures) -> Mapping[str, float]:
    """Parameters of ngspice's VDMOS gate: CGS, CGDMAX, CGDMIN [F] and A [1/V].

    Raises
    ------
    QuantityError
        If the figures contradict each other; names them.

    Notes
    -----
    C_GD(v) = C_max - s + s atan(a v) at v = V_GD below 0 V and C_max - s + s tanh(a v) above, with
    s = (C_max - C_min) / (1 + pi/2). Two equations, linear in C_max and s: C_GD(-V_c) = C_rss where it is printed, and the
    charge over the plateau, from v = -(V - V_th) to where the channel is fully on, about V_TO, is Q_gd. The law reaches
    C_min at -infinity only: with C_min = C_rss the capacitance at the test voltage came out up to two thirds too high.

    The slope a is 0.5/V, or steeper where C_min would fall below a tenth of C_rss; where a total charge is printed it is the one that meets Q_g = C_GS V_G + the integral of C_GD from
    -V to V_G best. C_GS = C_iss - C_rss; where Q_g is still
    missed by more than 9 %, C_GS gives way until it is not: charges are measured over the whole swing that
    switching needs, capacitances at one bias.

    References
    ----------
    ngspice manual, VDMOS model, equation of the gate-drain capacitance.
    """
    f = figures
    if f.q_gd <= f.c_rss * (f.q_at - f.v_th + f.v_to):
        raise QuantityError("gate_drain_charge is smaller than reverse_capacitance times charge_voltage")
    low, high = _SLOPES
    slopes = [low * (high / low) ** (i / _STEPS) for i in range(_STEPS + 1)]
    if f.q_g is None:  # as near to the usual slope as C_min allows
        slopes = [_SLOPE, *(a for a in slopes if a > _SLOPE)]
    possible = [a for a in slopes if (c := _drain_side(f, a)) is not None and c[1] >= _LEAST_SHARE * f.c_rss]
    if not possible:
        raise QuantityError(
            "gate_drain_charge and reverse_capacitance contradict each other: so large a charge needs a capacitance that "
            "does not fall to so little; use the typical figures of one table"
        )
    c_gs = f.c_iss - f.c_rss
    if f.q_g is None or f.q_gate is None:
        a = possible[0]
    else:
        printed, top = f.q_g, f.q_gate
        a = min(possible, key=lambda a: abs(c_gs * top + _drain_charge(f, a) - printed))
        without = _drain_charge(f, a)
        nearest = min(max(c_gs * top + without, (1 - _CHARGE_MISS) * printed), (1 + _CHARGE_MISS) * printed)
        c_gs = (nearest - without) / top
        if c_gs <= 0:
            raise QuantityError("gate_charge is smaller than what gate_drain_charge and reverse_capacitance need alone")
    c_max, c_min = _drain_side(f, a) or (math.nan, math.nan)
    return {"CGS": c_gs, "CGDMAX": c_max, "CGDMIN": c_min, "A": a}


def _drain_side(f: GateFigures, a: float) -> tuple[float, float] | None:
    """C_max and C_min for a slope; None where no such capacitance has the charge. [F]"""
    low, high = f.q_at - f.v_th, f.v_to
    above = 1 + math.atan(a * f.c_at)  # (C_max - C_rss) / s
    width = above * (low + high) - (low + high) + _area(high, a) - _area(-low, a)
    if width <= 0:
        return None
    s = (f.q_gd - f.c_rss * (low + high)) / width
    return f.c_rss + s * above, f.c_rss - s * (math.pi / 2 - math.atan(a * f.c_at))


def _drain_charge(f: GateFigures, a: float) -> float:
    """What the gate-drain capacitance takes from rest to the printed gate voltage. [C]"""
    c_max, c_min = _drain_side(f, a) or (math.nan, math.nan)
    s = (c_max - c_min) / (1 + math.pi / 2)
    top = f.q_gate or 0.0
    return (c_max - s) * (f.q_at + top) + s * (_area(top, a) - _area(-f.q_at, a))
