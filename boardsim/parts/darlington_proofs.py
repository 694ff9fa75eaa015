"""What the datasheet of a sink array prints, and the test circuits that measure it on the model."""

from __future__ import annotations

from typing import TYPE_CHECKING

from boardsim.parts.bipolar import Saturation, with_highest
from boardsim.parts.diode import forward_parameters
from boardsim.parts.elements import (
    GROUND,
    Ammeter,
    Capacitor,
    CurrentDrive,
    Drive,
    Element,
    Junction,
    Model,
    Resistor,
    current,
    voltage,
)
from boardsim.parts.proof import AtEnd, Between, Proof
from boardsim.quantities import Quantity

if TYPE_CHECKING:
    from boardsim.parts.darlington import ClampPoint, DarlingtonArray, InputCurrent, OnVoltage, Switching

_PROOF_TIME = 1e-4  # [s]
_RAMP_TIME = 1e-3  # [s], of the input; slow beside all delays
_EDGE = 5e-9  # [s], of the pulse generator: TI ULN2803A SLRS049H, figure 10, prints less than 5 ns up and 10 ns down
_DELAYS = "closed formula for the charges that the delays consist of, 10 %"


def darlington_proofs(part: DarlingtonArray) -> tuple[Proof, ...]:
    """Every printed figure of a sink array with its test circuit.

    Notes
    -----
    Saturation voltages with both currents of sources; the input current with the output open; the input voltage at which
    a slow ramp makes the output sink a current; the clamp diode by itself; delays between the halves of the edges of
    input and output, with a resistive load. 25 degC.
    """
    return (
        *(_saturation_proof(part, p) for p in part.saturation),
        *(_input_proof(part, p) for p in part.input_current),
        *(_on_proof(part, p) for p in part.on_voltage),
        *(_clamp_proof(part, p) for p in part.clamp_forward or ()),
        *(() if part.switching.turn_off.assumed() else _switching_proofs(part, part.switching)),
    )


def _saturation_proof(part: DarlingtonArray, point: Saturation) -> Proof:
    return Proof(
        f"V_CE(sat) at {point.current} with {point.base}",
        "V",
        point.printed,
        (
            *part.sink("dut", "input", "out"),
            CurrentDrive("input", "input", GROUND, _steady(point.base.typ)),
            CurrentDrive("output", "out", GROUND, _steady(point.current.typ)),
        ),
        _PROOF_TIME,
        AtEnd(voltage("out")),
        why="a resistance that grows with the current is taken as a straight one",
    )


def _input_proof(part: DarlingtonArray, point: InputCurrent) -> Proof:
    meter = Ammeter("input", "source", "input")
    return Proof(
        f"input current at {point.voltage}, output open",
        "A",
        with_highest(point.typical, point.highest),
        (
            *part.sink("dut", "input", "out"),
            Drive("source", "source", GROUND, _steady(point.voltage.typ)),
            meter,
            Resistor("open", "out", GROUND, 1e9),
        ),
        _PROOF_TIME,
        AtEnd(current(meter)),
    )


def _on_proof(part: DarlingtonArray, point: OnVoltage) -> Proof:
    """The input rises slowly from a little below 0 V, until the output sinks the current."""
    meter = Ammeter("output", "supply", "out")
    below, rise = 0.1, 2 * point.voltage.typ
    ramp = ((0.0, -below), (_RAMP_TIME, rise - below))
    return Proof(
        f"input voltage for {point.current} at V_CE {point.across}",
        "V",
        Quantity(point.voltage.typ, 0.0, point.voltage.typ, "V", point.voltage.origin),
        (
            *part.sink("dut", "input", "out"),
            Drive("source", "input", GROUND, ramp),
            Drive("supply", "supply", GROUND, _steady(point.across.typ)),
            meter,
        ),
        _RAMP_TIME,
        Between(voltage("input"), 0.0, "rise", current(meter), point.current.typ, "rise", factor=rise / _RAMP_TIME),
        why="a guarantee for the weakest output bounds the typical one from above only",
        shapes=False,
    )


def _clamp_proof(part: DarlingtonArray, point: ClampPoint) -> Proof:
    assert part.clamp_forward is not None
    i_s, n, r_s = forward_parameters([(p.voltage.typ, p.current.typ) for p in part.clamp_forward])
    return Proof(
        f"forward voltage of the clamp diode at {point.current}",
        "V",
        with_highest(point.voltage, point.highest),
        (
            Junction("dut", "a", GROUND, Model("dut_m", "D", {"IS": i_s, "N": n, "RS": r_s, "TNOM": 25.0})),
            CurrentDrive("through", "a", GROUND, _steady(point.current.typ)),
        ),
        _PROOF_TIME,
        AtEnd(voltage("a")),
    )


def _switching_proofs(part: DarlingtonArray, s: Switching) -> tuple[Proof, Proof]:
    """Between the halves of the edges of input and output."""
    on, off, edge, high = 1e-6, 1e-6 + max(2e-6, 10 * (s.turn_on.typ + s.turn_off.typ)), _EDGE, part.input_high
    points = ((0.0, 0.0), (on, 0.0), (on + edge, high), (off, high), (off + edge, 0.0))
    elements: tuple[Element, ...] = (
        *part.sink("dut", "input", "out"),
        Drive("source", "input", GROUND, points),
        Drive("supply", "supply", GROUND, ((0.0, s.supply.typ), (1.0, s.supply.typ))),
        Resistor("load", "supply", "out", s.load.typ),
        Capacitor("load", "out", GROUND, s.capacitance.typ),
    )
    output, source = voltage("out"), voltage("input")
    half = 0.5 * s.supply.typ
    return (
        Proof(
            "delay to the output's falling edge",
            "s",
            s.turn_on,
            elements,
            2 * off,
            Between(source, high / 2, "rise", output, half, "fall"),
            why=_DELAYS,
        ),
        Proof(
            "delay to the output's rising edge",
            "s",
            s.turn_off,
            elements,
            2 * off,
            Between(source, high / 2, "fall", output, half, "rise"),
            why=_DELAYS,
        ),
    )


def _steady(value: float) -> tuple[tuple[float, float], ...]:
    """A source that does not change."""
    return ((0.0, value), (_PROOF_TIME, value))
