"""What all bipolar switches share: Gummel and Poon's equations in saturation, and the junction that breaks down."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Annotated

from boardsim.errors import QuantityError
from boardsim.parts.base import Assumption
from boardsim.parts.diode import THERMAL_VOLTAGE
from boardsim.parts.elements import GROUND, Junction, Model
from boardsim.parts.record import Record
from boardsim.quantities import CURRENT, VOLTAGE, Quantity

JUNCTION_POTENTIAL = 0.75  # [V] of base-emitter and base-collector junction, ngspice's own default
GRADING = 0.33  # [1] of both, ngspice's own default
# How ngspice takes a transistor to the run's temperature, from figures at 25 degC: I_S by the band gap of silicon [eV] and the
# exponent 3, which makes V_BE fall by about 2 mV/K, and the gains with T^1.5, about 0.5 %/K (from memory; SPICE's own
# default is no growth at all). Resistances and breakdown are left as they are.
WITH_TEMPERATURE = {"EG": 1.11, "XTI": 3.0, "XTB": 1.5, "TNOM": 25.0}
TEMPERATURE_ASSUMED = Assumption(
    "switch", "growth of the gains", "0.5 %/K", "with temperature, to the power of 1.5, from memory"
)
_BREAKDOWN_CURRENT = 1e-3  # [A], at which V_(BR)CEO is specified, common practice
_LEAST_RISE = 1e-30  # [A], saturation current of a junction that must not conduct forward


class Saturation(Record):
    """A typical V_CE(sat) at I_C and I_B (the highest where no typical is printed), and the highest."""

    voltage: Annotated[Quantity, VOLTAGE]
    highest: Annotated[Quantity, VOLTAGE] | None = None
    current: Annotated[Quantity, CURRENT]
    base: Annotated[Quantity, CURRENT]

    @property
    def printed(self) -> Quantity:
        """The typical point with the highest as the upper end of its band. [V]"""
        return with_highest(self.voltage, self.highest)


def with_highest(typical: Quantity, highest: Quantity | None) -> Quantity:
    """A typical figure and the printed maximum as one quantity."""
    top = typical.typ if highest is None else highest.typ
    return Quantity(typical.typ, typical.typ, top, typical.unit, typical.origin)


def base_charge(forward: float, knee: float) -> float:
    """Normalised base charge q_b of Gummel and Poon without Early effect.

    Parameters
    ----------
    forward : float
        Ideal forward current F = I_S exp(V_BE / V_T). [A]
    knee : float
        I_KF, where high-level injection begins; infinite for none. [A]

    Returns
    -------
    float
        q_b = (1 + sqrt(1 + 4 F / I_KF)) / 2. [1]

    Examples
    --------
    >>> base_charge(2.0, 1.0)
    2.0
    """
    return (1 + math.sqrt(1 + 4 * forward / knee)) / 2


def saturated(
    collector: float, base: float, forward_gain: float, reverse_gain: float, knee: float = math.inf
) -> tuple[float, float]:
    """The two ideal junction currents of a transistor at given terminal currents.

    Parameters
    ----------
    collector, base : float
        Terminal currents, into the transistor. [A]
    forward_gain, reverse_gain : float
        B_F, B_R. [1]
    knee : float
        I_KF. [A]

    Returns
    -------
    tuple of float
        F = I_S exp(V_BE / V_T) and R = I_S exp(V_BC / V_T). [A]

    Raises
    ------
    QuantityError
        If the transistor is not saturated at these currents.

    Notes
    -----
    I_C = (F - R) / q_b - R / B_R and I_B = F / B_F + R / B_R, solved for F and R by iteration over q_b. At 25 degC
    without Early effect, leakage components and ohmic resistances. The saturation voltage is V_T ln(F / R).

    References
    ----------
    ngspice manual, BJT model (Gummel and Poon).

    Examples
    --------
    >>> f, r = saturated(0.1, 0.01, 100.0, 4.0)
    >>> round(f - r - r / 4.0, 9), round(f / 100.0 + r / 4.0, 9)
    (0.1, 0.01)
    """
    q_b = 1.0
    forward = reverse = 0.0
    for _ in range(200):
        share = 1 / q_b + 1 / reverse_gain
        forward = (collector + reverse_gain * base * share) / (1 / q_b + reverse_gain / forward_gain * share)
        q_b = 0.5 * (q_b + base_charge(forward, knee))
    reverse = reverse_gain * (base - forward / forward_gain)
    if reverse <= 0:
        raise QuantityError(
            f"a transistor with these gains is not in saturation at a collector current of {collector:.3g} A and a base "
            f"current of {base:.3g} A; give saturation points with more base current, or a higher gain"
        )
    return forward, reverse


def junction_capacitance(measured: float, reverse: float) -> float:
    """Capacitance at 0 V of a junction that was measured at a reverse voltage.

    Parameters
    ----------
    measured : float
        [F]
    reverse : float
        [V]

    Returns
    -------
    float
        C (1 + V / 0.75 V)^0.33. [F]
    """
    return measured * math.pow(1 + reverse / JUNCTION_POTENTIAL, GRADING)


def straight_line(points: Sequence[tuple[float, float]]) -> tuple[float, float]:
    """Offset and slope of the straight line of least squares; slope 0 for one point.

    Examples
    --------
    >>> straight_line([(0.0, 1.0), (1.0, 3.0)])
    (1.0, 2.0)
    """
    n = len(points)
    x0, y0 = sum(x for x, _ in points) / n, sum(y for _, y in points) / n
    spread = sum((x - x0) ** 2 for x, _ in points)
    slope = sum((x - x0) * (y - y0) for x, y in points) / spread if spread else 0.0
    return y0 - slope * x0, slope


def breakdown_junction(
    name: str,
    collector: str,
    volts: float,
    forward: float = _LEAST_RISE,
    farads: float = 0.0,
    emitter: str = GROUND,
) -> Junction:
    """What conducts from the collector to the emitter above V_(BR)CEO.

    Parameters
    ----------
    volts : float
        Where it conducts 1 mA. [V]
    forward : float
        Saturation current for a collector below ground; next to nothing for a transistor without a diode there. [A]
    farads : float
        Its capacitance at 0 V. [F]
    emitter : str
        Where it conducts to.

    Notes
    -----
    Gummel and Poon's model has no breakdown: without this junction an unclamped coil would reach any voltage. A base
    held near its emitter by a resistor breaks down somewhat later (V_(BR)CER) and then falls back to V_(BR)CEO; the lower
    voltage is taken throughout, at a sharp knee.
    """
    model = Model(
        f"{name}_m",
        "D",
        {"IS": forward, "N": 1.0, "BV": volts, "IBV": _BREAKDOWN_CURRENT, "CJO": farads, "TNOM": 25.0},
    )
    return Junction(name, emitter, collector, model)


def thermal(current: float, saturation_current: float) -> float:
    """V_T ln(I / I_S) at 25 degC. [V]"""
    return THERMAL_VOLTAGE * math.log(current / saturation_current)
