"""What the datasheet of a power register prints of its outputs, and the test circuits that measure it on the model."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from boardsim.parts.base import T_MODEL
from boardsim.parts.bipolar import breakdown_junction
from boardsim.parts.elements import (
    GROUND,
    Ammeter,
    Capacitor,
    CurrentDrive,
    Drive,
    Element,
    Resistor,
    current,
    voltage,
)
from boardsim.parts.proof import AtEnd, Between, Proof, Ratio
from boardsim.quantities import Quantity, celsius

if TYPE_CHECKING:
    from boardsim.parts.power_register import DrainResistance, PowerRegister

_PROOF_TIME = 1e-4  # [s]
_EDGE = 10e-9  # [s], of the pulse generator: TI SLIS032A, parameter measurement information, at most 10 ns, from memory
_ACROSS = 10.0  # [V], drain voltage at which a limit is read: far above what the on-resistance drops
_LINE = "a straight line of the resistance against the current, 10 %"
_EDGES = "the load's and the output's own capacitance are left out where the edges shape the model, and slow it by up to a fifth"


def power_proofs(part: PowerRegister) -> tuple[Proof, ...]:
    """Every printed figure of an output with its test circuit.

    Notes
    -----
    On-resistances V_DS / I_D at the printed currents and junction temperatures; the clamp voltage at its test current; the current
    limit with 10 V across the output; delays between the halves of the bit's step and of the drain's edges, and the edges from
    10 to 90 % of the supply, with the resistive load. 25 degC where the datasheet says nothing else.
    """
    return (
        *(_resistance(part, p) for p in part.on_resistance),
        _clamp(part),
        *_limit(part),
        *(() if part.switching.turn_off.assumed() else _times(part)),
    )


def _steady(value: float, duration: float = _PROOF_TIME) -> tuple[tuple[float, float], ...]:
    return ((0.0, value), (duration, value))


def _resistance(part: PowerRegister, point: DrainResistance) -> Proof:
    rail = (point.rail or part.supply_low).typ
    share = dict(part.rails()).get(rail, 1.0)
    meter = Ammeter("drain", "out", "d")
    at = "" if point.kelvin == T_MODEL else f", {celsius(point.kelvin)}"
    typ, top = point.value.typ, (point.highest or point.value).max
    return Proof(
        f"on-resistance at {point.current}, logic rail {rail:g} V{at}",
        "ohm",
        Quantity(typ, point.value.min, max(top, typ), "ohm", point.value.origin),
        (
            *part.sink("dut", "on", "d", point.kelvin),
            meter,
            Drive("on", "on", GROUND, _steady(share)),
            CurrentDrive("load", "out", GROUND, _steady(point.current.typ)),
        ),
        _PROOF_TIME,
        Ratio(voltage("d"), current(meter)),
        why=_LINE,
        temperature=point.kelvin,
    )


def _clamp(part: PowerRegister) -> Proof:
    volts, amperes = part.clamp_voltage, part.clamp_test_current.typ
    return Proof(
        f"clamp voltage at {part.clamp_test_current}",
        "V",
        volts,
        (
            *part.sink("dut", "on", "d"),
            breakdown_junction("clamp", "d", volts.typ, farads=part.output_capacitance.typ),
            Drive("on", "on", GROUND, _steady(0.0)),
            CurrentDrive("load", "d", GROUND, ((0.0, 0.0), (_PROOF_TIME / 10, amperes), (_PROOF_TIME, amperes))),
        ),
        _PROOF_TIME,
        AtEnd(voltage("d")),
        why="a sharp clamp, 10 %",
    )


def _limit(part: PowerRegister) -> Iterator[Proof]:
    if part.current_limit is None:
        return
    meter = Ammeter("drain", "out", "d")
    yield Proof(
        "current limit",
        "A",
        part.current_limit,
        (
            *part.sink("dut", "on", "d"),
            meter,
            Drive("on", "on", GROUND, _steady(1.0)),
            Drive("across", "out", GROUND, _steady(_ACROSS)),
        ),
        _PROOF_TIME,
        AtEnd(current(meter)),
        why="a bend into the limit, 10 %",
    )


def _times(part: PowerRegister) -> Iterator[Proof]:
    """The bit steps `dead` later than output enable; what is counted from is the step without that."""
    s, shape = part.switching, part.gate
    volts, dead = s.supply.typ, shape.dead
    span = 10 * (s.turn_on.typ + s.turn_off.typ + s.fall.typ + s.rise.typ)
    on, off = span / 10, span / 2

    def step(late: float) -> tuple[tuple[float, float], ...]:
        times = ((on, 0.0), (on + _EDGE, 1.0), (off, 1.0), (off + _EDGE, 0.0))
        return ((0.0, 0.0), *((t + late, level) for t, level in times), (span, 0.0))

    elements: tuple[Element, ...] = (
        Drive("enable", "enable", GROUND, step(0.0)),
        Drive("bit", "bit", GROUND, step(dead)),
        *part.gated("dut", "on", "V(bit)", repr(part.supply_low.typ)),
        *part.sink("dut", "on", "d"),
        breakdown_junction("clamp", "d", part.clamp_voltage.typ, farads=part.output_capacitance.typ),
        Drive("supply", "rail", GROUND, _steady(volts, span)),
        Resistor("load", "rail", "d", s.load.typ),
        Capacitor("load", "d", GROUND, s.capacitance.typ),
    )
    enable, drain = voltage("enable"), voltage("d")
    low, half, high = 0.1 * volts, 0.5 * volts, 0.9 * volts
    wanted = (
        ("delay to the output's falling edge", s.turn_on, Between(enable, 0.5, "rise", drain, half, "fall")),
        ("delay to the output's rising edge", s.turn_off, Between(enable, 0.5, "fall", drain, half, "rise")),
        ("falling edge of the output", s.fall, Between(drain, high, "fall", drain, low, "fall")),
        ("rising edge of the output", s.rise, Between(drain, low, "rise", drain, high, "rise")),
    )
    for name, printed, reading in wanted:
        yield Proof(f"{name} at {s.supply}, {s.load}", "s", printed, elements, span, reading, 0.2, _EDGES)
