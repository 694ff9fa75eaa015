"""Copper: resistance of conductors and windings, and the American wire gauge."""

from __future__ import annotations

import math

from boardsim.errors import QuantityError

RESISTIVITY_20C = 1.7241e-8  # [ohm m], annealed copper, IEC 60028
ALPHA_20C = 0.00393  # [1/K] at 20 degC, IEC 60028
T_20C = 293.15  # [K]
MU_0 = 4e-7 * math.pi  # [H/m]


def awg_diameter(gauge: int) -> float:
    """Diameter of a bare wire of a gauge number.

    Parameters
    ----------
    gauge : int
        American wire gauge; 0 and below for 1/0, 2/0 ...

    Returns
    -------
    float
        The diameter. [m]

    Raises
    ------
    QuantityError
        If the gauge is outside -3 to 50.

    Notes
    -----
    d = 0.127 mm x 92^((36 - n) / 39).

    References
    ----------
    ASTM B258.

    Examples
    --------
    >>> round(awg_diameter(24) * 1e3, 4)
    0.5106
    """
    if not -3 <= gauge <= 50:
        raise QuantityError(f"gauge {gauge} AWG is outside 4/0 to 50 AWG")
    return float(0.127e-3 * 92 ** ((36 - gauge) / 39))


def resistance_at(r_reference: float, t_reference: float, t: float) -> float:
    """Resistance of a copper winding at another temperature.

    Parameters
    ----------
    r_reference : float
        Resistance at the reference temperature. [ohm]
    t_reference, t : float
        Temperatures. [K]

    Returns
    -------
    float
        Resistance at `t`. [ohm]

    Notes
    -----
    Linear in temperature, through R = 0 at -234.5 degC: (1/0.00393 - 20) K. Holds from about -50 to 200 degC.

    References
    ----------
    IEC 60028 (alpha at 20 degC); the same rule is used to find a winding's temperature from its resistance.

    Examples
    --------
    >>> round(resistance_at(320.0, 298.15, 398.15), 1)
    443.3
    """
    inferred_zero = T_20C - 1 / ALPHA_20C
    return r_reference * (t - inferred_zero) / (t_reference - inferred_zero)


def loop_resistance(area: float, length: float, t: float) -> float:
    """Resistance of a conductor out and back.

    Parameters
    ----------
    area : float
        Cross-section of one conductor. [m^2]
    length : float
        One way. [m]
    t : float
        Conductor temperature. [K]

    Returns
    -------
    float
        Resistance of both conductors in series. [ohm]

    Examples
    --------
    >>> round(loop_resistance(0.5e-6, 2.0, 293.15), 3)
    0.138
    """
    return resistance_at(RESISTIVITY_20C * 2 * length / area, T_20C, t)


def pair_inductance(diameter: float, spacing: float, length: float) -> float:
    """Inductance of two parallel round conductors that carry the same current out and back.

    Parameters
    ----------
    diameter, spacing : float
        Of one bare conductor; between the two axes, at least the diameter. [m]
    length : float
        One way. [m]

    Returns
    -------
    float
        Inductance of the loop. [H]

    Raises
    ------
    QuantityError
        If the conductors would overlap.

    Notes
    -----
    L = (mu0 l / pi) (arccosh(s / d) + 1/4); the last term is the field inside the conductors at low frequency.
    Ignores the ends.

    References
    ----------
    F. W. Grover, Inductance Calculations (1946), return circuit of parallel wires; from memory.

    Examples
    --------
    >>> round(pair_inductance(1.29e-3, 2.6e-3, 1.8) * 1e6, 2)
    1.13
    """
    if spacing < diameter:
        raise QuantityError(f"conductors of {diameter * 1e3:.2f} mm cannot be {spacing * 1e3:.2f} mm apart")
    return MU_0 * length / math.pi * (math.acosh(spacing / diameter) + 0.25)
