"""The channel of a MOSFET at high currents, from its transconductance, and its body diode from its forward voltage."""

from __future__ import annotations

import math
from dataclasses import dataclass

from boardsim.parts.temperature import thermal_voltage
from boardsim.quantities import Quantity

BODY_EMISSION = 1.1  # [1], from memory
BODY_RESISTANCE = 5e-3  # [ohm], from memory
_BODY_SATURATION = 1e-12  # [A], where no forward voltage is given, from memory: some 0.7 V at an ampere
_MOST = 0.95  # share of the on-resistance's constant part that may be the channel's own
_STEPS = 60  # bisections


@dataclass(frozen=True)
class Channel:
    """K_P at no overdrive [A/V^2], resistance in the drain [ohm], and how the mobility falls with the overdrive [1/V]."""

    k_p: float
    r_d: float
    fall: float


def only_bounds(figure: Quantity) -> bool:
    """Whether a figure has a band with both ends, as where only a least or highest value is printed, and no typical one."""
    return figure.min < figure.typ < figure.max


def mobility(k_p: float, v_to: float, constant: float, transconductance: float, current: float) -> float:
    """How the channel's mobility falls with the overdrive, from a transconductance.

    Parameters
    ----------
    k_p : float
        At no overdrive. [A/V^2]
    v_to : float
        The model's threshold. [V]
    constant : float
        What of the on-resistance does not fall with the gate voltage. [ohm]
    transconductance : float
        [S]
    current : float
        [A]

    Returns
    -------
    float
        Theta. [1/V]; 0 where the square law has no more transconductance than printed.

    Notes
    -----
    I_D = K_P u^2 / (2 (1 + theta u)) in saturation, u being the overdrive: g_fs = dI_D / du. In the triode region
    R_DS(on) = R_D + theta / K_P + 1 / (K_P u): on-resistances cannot tell R_D and theta apart, the transconductance can.
    theta / K_P is at most 95 % of their sum, and theta V_TO at most that. What of the transconductance the resistance of the
    source takes is counted as mobility. ngspice 39 writes the same law with V_GS in the place of u (measured): THETA =
    theta / (1 - theta V_TO), and KP = K_P / (1 - theta V_TO).

    References
    ----------
    ngspice manual, VDMOS model, parameter THETA.
    """
    low, high = 0.0, _MOST * min(constant * k_p, 1 / v_to)
    if gain_at(k_p, low, current) <= transconductance:
        return low
    if gain_at(k_p, high, current) >= transconductance:
        return high
    for _ in range(_STEPS):
        theta = (low + high) / 2
        low, high = (theta, high) if gain_at(k_p, theta, current) > transconductance else (low, theta)
    return theta


def overdrive_at(k_p: float, theta: float, current: float) -> float:
    """Overdrive u at which the channel carries a current in saturation: K_P u^2 = 2 I (1 + THETA u).

    Parameters
    ----------
    k_p, theta : float
        [A/V^2], [1/V]
    current : float
        [A]

    Returns
    -------
    float
        [V]

    Examples
    --------
    >>> u = overdrive_at(40.0, 0.5, 25.0)
    >>> round(40.0 * u**2 / (2 * (1 + 0.5 * u)), 9)
    25.0
    """
    half = current * theta / k_p
    return half + math.sqrt(half**2 + 2 * current / k_p)


def gain_at(k_p: float, theta: float, current: float) -> float:
    """Transconductance in saturation.

    Parameters
    ----------
    k_p, theta : float
        [A/V^2], [1/V]
    current : float
        [A]

    Returns
    -------
    float
        K_P u (2 + THETA u) / (2 (1 + THETA u)^2). [S]

    Examples
    --------
    >>> round(gain_at(40.0, 0.0, 20.0), 9)
    40.0
    """
    u = overdrive_at(k_p, theta, current)
    return k_p * u * (2 + theta * u) / (2 * (1 + theta * u) ** 2)


def body_saturation(volts: Quantity | None, current: Quantity | None, t: float) -> float:
    """Saturation current of the body diode from its forward voltage.

    Parameters
    ----------
    volts, current : Quantity or None
        V_SD and its test current; where there are none, or only a band, a usual diode is taken. [V], [A]
    t : float
        Junction temperature of the figures. [K]

    Returns
    -------
    float
        [A]

    Notes
    -----
    V_SD = N (kT/q) ln(I / I_S) + R I with N = 1.1 and R = 5 mohm (from memory).

    Examples
    --------
    >>> body_saturation(None, None, 298.15)
    1e-12
    """
    if volts is None or current is None or only_bounds(volts):
        return _BODY_SATURATION
    return current.typ * math.exp(-(volts.typ - BODY_RESISTANCE * current.typ) / (BODY_EMISSION * thermal_voltage(t)))
