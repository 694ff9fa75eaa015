"""How fast an output of a power register turns on and off: from the delays and edges that its datasheet prints."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Annotated

from boardsim.errors import QuantityError
from boardsim.parts.record import Record
from boardsim.quantities import CAPACITANCE, POSITIVE_RESISTANCE, POSITIVE_TIME, VOLTAGE, Quantity, assume

_USUAL = "TI SLIS032A (TPIC6B595), pp. 4-5, for parts of this class"
_TEN, _HALF, _NINETY = 0.1, 0.5, 0.9  # shares of the supply at which edges and delays are read
_LEAST_SHAPE, _MOST_SHAPE = 1e-2, 1e4  # [1]
_STEPS = 80  # bisections


class OutputSwitching(Record):
    """Typical delays and edges of an output with a resistive load, counted from output enable; halves for delays, 10 and 90 %
    for edges.
    """

    turn_on: Annotated[Quantity, POSITIVE_TIME] = assume("90 ns", POSITIVE_TIME, _USUAL)
    turn_off: Annotated[Quantity, POSITIVE_TIME] = assume("150 ns", POSITIVE_TIME, _USUAL)
    fall: Annotated[Quantity, POSITIVE_TIME] = assume("200 ns", POSITIVE_TIME, _USUAL)
    rise: Annotated[Quantity, POSITIVE_TIME] = assume("200 ns", POSITIVE_TIME, _USUAL)
    supply: Annotated[Quantity, VOLTAGE] = assume("24 V", VOLTAGE, _USUAL)
    load: Annotated[Quantity, POSITIVE_RESISTANCE] = assume("235 ohm", POSITIVE_RESISTANCE, _USUAL)
    capacitance: Annotated[Quantity, CAPACITANCE] = assume("30 pF", CAPACITANCE, _USUAL)


@dataclass(frozen=True)
class GateShape:
    """How an output follows its bit.

    Attributes
    ----------
    on, off : float
        Time constants in which its gate comes up and goes down. [s]
    shape : float
        How much faster the resistance rises than the gate falls. [1]
    dead : float
        Time before the gate moves at all. [s]
    """

    on: float
    off: float
    shape: float
    dead: float


def gate_shape(switching: OutputSwitching, conducts: Callable[[float], float]) -> GateShape:
    """The gate that gives the printed delays and edges.

    Parameters
    ----------
    switching : OutputSwitching
    conducts : callable
        Current of an output that is fully on at a drain voltage, without its limit. [V] -> [A]

    Returns
    -------
    GateShape

    Raises
    ------
    QuantityError
        If the load is too heavy for the output: it would not turn on to a tenth of the supply.

    Notes
    -----
    The gate g goes exponentially from 0 to 1 with `on`, and from 1 to 0 with `off`. The output's resistance is that of the
    datasheet times 1 + b (1 / g - 1): infinite without a gate, b the shape. With a resistive load the drain is at a share k of the
    supply where the conductance is u_k = (1 - k) V / R_L / conducts(k V) of that of an output that is on, so that

    - 1 / g_k = 1 + (1 / u_k - 1) / b,
    - turning off t_k = `off` ln(1 / g_k), turning on t_k = -`on` ln(1 - g_k).

    The edges, t_90 - t_10, give the two time constants. The delays are `dead` and t_50: b is where both ask for the same
    `dead`. Where there is no such b the end of its range that comes nearest is taken; where the delays are shorter than the edges
    allow, no dead time is left. The proof then shows by how much they are missed. The load's capacitance is left out: with some
    100 pF at 235 ohm it is charged within a tenth of the printed edges.
    """
    s = switching
    volts, ohms = s.supply.typ, s.load.typ
    share = {k: (1 - k) * volts / ohms / conducts(k * volts) for k in (_TEN, _HALF, _NINETY)}
    if share[_TEN] >= 1:
        raise QuantityError(
            f"switching with a load of {s.load} at {s.supply}: the output would not pull it down to a tenth of the supply; use load, "
            "supply and on_resistance of one data sheet"
        )

    def fitted(shape: float) -> tuple[GateShape, float, float]:
        """With a shape: the gate without dead time, and the dead times that turning on and turning off ask for. [s]"""
        gate = {k: 1 / (1 + (1 / u - 1) / shape) for k, u in share.items()}
        on = s.fall.typ / (math.log1p(-gate[_NINETY]) - math.log1p(-gate[_TEN]))
        off = s.rise.typ / math.log(gate[_TEN] / gate[_NINETY])
        after_on = s.turn_on.typ + on * math.log1p(-gate[_HALF])
        after_off = s.turn_off.typ + off * math.log(gate[_HALF])
        return GateShape(on, off, shape, 0.0), after_on, after_off

    low, high = _LEAST_SHAPE, _MOST_SHAPE
    for _ in range(_STEPS):
        shape = math.sqrt(low * high)
        _, after_on, after_off = fitted(shape)
        low, high = (shape, high) if after_off < after_on else (low, shape)
    found, after_on, after_off = fitted(math.sqrt(low * high))
    return GateShape(found.on, found.off, found.shape, max((after_on + after_off) / 2, 0.0))
