"""How semiconductors' printed figures, given at 25 degC, move with the junction's temperature."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Annotated

from boardsim.errors import QuantityError
from boardsim.parts.base import T_MODEL
from boardsim.parts.record import Record
from boardsim.quantities import CURRENT, TEMPERATURE, ZERO_CELSIUS, Quantity

BOLTZMANN = 8.617333e-5  # [V/K] k / q, CODATA
COLDEST, HOTTEST = 218.15, 448.15  # [K], -55 to 175 degC: what power semiconductors are rated for at most
LEAST_SATURATION = 1e-28  # [A], what ngspice 39 takes instead of anything below it, measured
_MOST_DRIFT = 3e-3  # [1/K]
DOUBLING = 10.0  # [K] by which a junction warms until its reverse current has doubled, common practice for silicon


class LeakagePoint(Record):
    """A reverse current at the rated voltage, and the junction temperature that it is given at."""

    current: Annotated[Quantity, CURRENT]
    at: Annotated[Quantity, TEMPERATURE] | None = None

    @property
    def kelvin(self) -> float:
        """25 degC if none was given. [K]"""
        return T_MODEL if self.at is None else self.at.typ


def thermal_voltage(t: float) -> float:
    """k T / q.

    Parameters
    ----------
    t : float
        Junction temperature. [K]

    Returns
    -------
    float
        [V]

    Examples
    --------
    >>> round(thermal_voltage(298.15), 5)
    0.02569
    """
    return BOLTZMANN * t


def in_celsius(t: float) -> float:
    """A temperature as ngspice takes it. [degC]"""
    return round(t - ZERO_CELSIUS, 6)


def junction_at(i_s: float, n: float, reference: float, drift: float, t: float) -> tuple[float, float]:
    """Saturation current and emission coefficient of a junction at another temperature.

    Parameters
    ----------
    i_s, n : float
        At 25 degC. [A], [1]
    reference : float
        Forward current at which the drift is given. [A]
    drift : float
        Change of the junction's forward voltage there. [V/K]
    t : float
        Junction temperature. [K]

    Returns
    -------
    tuple of float
        I_S [A] and N [1] at `t`.

    Notes
    -----
    V(I) = N (kT/q) ln(I / I_S): the voltage at the reference current moves by drift (t - 25 degC), N stays, and I_S
    follows; below the reference the voltage then falls faster with temperature, above it more slowly, as a
    junction's does. Where I_S would be below 1e-28 A, which ngspice does not take, it is that and N follows. Series
    resistance is left as it is. From -55 to 175 degC, as far as the drift itself is straight.

    Examples
    --------
    >>> i_s, n = junction_at(1e-9, 1.75, 1.0, -2e-3, 398.15)
    >>> cold = 1.75 * thermal_voltage(298.15) * math.log(1.0 / 1e-9)
    >>> round(n * thermal_voltage(398.15) * math.log(1.0 / i_s) - cold, 6)
    -0.2
    """
    if t == T_MODEL:
        return i_s, n
    volts = n * thermal_voltage(T_MODEL) * math.log(reference / i_s) + drift * (t - T_MODEL)
    found = reference * math.exp(-volts / (n * thermal_voltage(t)))
    if found >= LEAST_SATURATION:
        return found, n
    return LEAST_SATURATION, volts / (thermal_voltage(t) * math.log(reference / LEAST_SATURATION))


def reverse_current(points: Sequence[tuple[float, float]], t: float) -> float:
    """Reverse current of a junction at a temperature.

    Parameters
    ----------
    points : sequence of (temperature, current)
        What is printed, temperatures rising. [K], [A]
    t : float
        Junction temperature. [K]

    Returns
    -------
    float
        [A]

    Raises
    ------
    QuantityError
        If there is no point, or the current does not rise from one to the next.

    Notes
    -----
    I(t) = I_0 2^((t - t_0) / D). From one point D = 10 K (common practice for silicon); from more, D follows from
    the first and the last. Held against the 25 and 100 degC columns of rectifiers' datasheets it is right within a
    factor of some units: the pre-factor and surface leakage are left out.

    Examples
    --------
    >>> round(reverse_current([(298.15, 1e-6)], 318.15) * 1e6, 6)
    4.0
    """
    if not points:
        raise QuantityError("no reverse current was given")
    (t_0, i_0), (t_1, i_1) = points[0], points[-1]
    doubling = DOUBLING
    if len(points) > 1:
        if t_1 <= t_0 or i_1 <= i_0:
            raise QuantityError("leakage must rise with temperature from each point to the next")
        doubling = (t_1 - t_0) / math.log2(i_1 / i_0)
    return i_0 * math.pow(2.0, (t - t_0) / doubling)


def refuse_drift(field: str, drift: float, volts: float) -> None:
    """Refuse a drift that no junction in breakdown has.

    Parameters
    ----------
    field : str
        The key of the file.
    drift : float
        [V/K]
    volts : float
        The voltage that moves. [V]

    Raises
    ------
    QuantityError
        If it is more than 0.3 %/K of the voltage, three times what datasheets print (0.03 to 0.13 %/K).
    """
    if abs(drift) > _MOST_DRIFT * volts:
        written = f"{drift:.4g} V/K" if abs(drift) >= 1 else f"{drift * 1e3:.4g} mV/K"
        raise QuantityError(
            f"{field} of {written} is {abs(drift) / volts:.1%} of {volts:.4g} V per kelvin; datasheets print about 0.1 %/K"
        )


def grown(value: float, growth: float, t: float) -> float:
    """A resistance that grows with the junction's temperature.

    Parameters
    ----------
    value : float
        At 25 degC. [unit of the result]
    growth : float
        Per kelvin. [1/K]
    t : float
        Junction temperature. [K]

    Returns
    -------
    float
        value (1 + growth)^(t - 25 degC). [unit of `value`]

    References
    ----------
    An Infineon application note, quoted in the edaboard thread 339471: R_DS(T_j) = R_DS(25 degC) (1 + a/100)^(T_j - 25).

    Examples
    --------
    >>> round(grown(1.0, 0.004, 398.15), 2)
    1.49
    """
    return float(value * (1 + growth) ** (t - T_MODEL))
