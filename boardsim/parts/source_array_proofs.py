"""What the datasheet of a source array prints, and the test circuits that measure it on the model."""

from __future__ import annotations

from typing import TYPE_CHECKING

from boardsim.parts.bipolar import with_highest
from boardsim.parts.diode import forward_parameters
from boardsim.parts.elements import (
    GROUND,
    Ammeter,
    CurrentDrive,
    Drive,
    Junction,
    Model,
    Resistor,
    current,
    voltage,
)
from boardsim.parts.proof import AtEnd, Between, Proof

if TYPE_CHECKING:
    from boardsim.parts.source_array import ClampPoint, SourceArray, SourceInput, SourcePoint, SourceSwitching

_PROOF_TIME = 1e-4  # [s]
_EDGE = 5e-9  # [s], of the pulse generator
_SUPPLY = 20.0  # [V], where a sheet's table says none: the model's currents do not depend on it


def source_array_proofs(part: SourceArray) -> tuple[Proof, ...]:
    """Every printed figure of a source array with its test circuit.

    Notes
    -----
    The voltage from the supply to the output at an output current of a source, at the input voltage of the table; input and
    drive current at an input voltage with the output open; the clamp diode by itself; the delay between the halves of the
    falling edges of input and output, with a resistive load to ground. 25 degC.
    """
    return (
        *(_saturation_proof(part, p) for p in part.saturation),
        *(_input_proof(part, p) for p in part.input_current),
        _drive_proof(part),
        *(_clamp_proof(p, part) for p in part.clamp_forward),
        *(() if part.switching.turn_off.assumed() else (_turn_off_proof(part, part.switching),)),
    )


def _saturation_proof(part: SourceArray, point: SourcePoint) -> Proof:
    return Proof(
        f"voltage from the supply to the output at {point.current}, input {point.input}",
        "V",
        with_highest(point.voltage, point.highest),
        (
            *part.source("dut", "input", "supply", "out"),
            Drive("input", "input", GROUND, _steady(point.input.typ)),
            Drive("supply", "supply", GROUND, _steady(_SUPPLY)),
            CurrentDrive("load", GROUND, "out", _steady(point.current.typ)),
        ),
        _PROOF_TIME,
        AtEnd(voltage("supply", "out")),
        why="a resistance that grows with the current is taken as a straight one",
    )


def _input_proof(part: SourceArray, point: SourceInput) -> Proof:
    meter = Ammeter("input", "source", "input")
    return Proof(
        f"input current at {point.voltage}, output open",
        "A",
        with_highest(point.typical, point.highest),
        (
            *part.source("dut", "input", "supply", "out"),
            Drive("source", "source", GROUND, _steady(point.voltage.typ)),
            meter,
            Drive("supply", "supply", GROUND, _steady(_SUPPLY)),
            Resistor("open", "out", GROUND, 1e9),
        ),
        _PROOF_TIME,
        AtEnd(current(meter)),
        why="a straight line through all input currents, which the junctions of the input bend",
    )


def _drive_proof(part: SourceArray) -> Proof:
    meter, point = Ammeter("supply", "rail", "supply"), part.input_current[0]
    return Proof(
        f"supply current of one output at {point.voltage}, output open",
        "A",
        part.drive_current,
        (
            *part.source("dut", "input", "supply", "out"),
            Drive("source", "input", GROUND, _steady(point.voltage.typ)),
            Drive("rail", "rail", GROUND, _steady(_SUPPLY)),
            meter,
            Resistor("open", "out", GROUND, 1e9),
        ),
        _PROOF_TIME,
        AtEnd(current(meter)),
    )


def _clamp_proof(point: ClampPoint, part: SourceArray) -> Proof:
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


def _turn_off_proof(part: SourceArray, s: SourceSwitching) -> Proof:
    """Between the halves of the falling edges of input and output."""
    on, off, high = 1e-6, 1e-6 + 20 * s.turn_off.typ, part.input_high
    points = ((0.0, 0.0), (on, 0.0), (on + _EDGE, high), (off, high), (off + _EDGE, 0.0))
    source, output = voltage("input"), voltage("out")
    return Proof(
        "delay to the output's falling edge",
        "s",
        s.turn_off,
        (
            *part.source("dut", "input", "supply", "out"),
            Drive("source", "input", GROUND, points),
            Drive("supply", "supply", GROUND, ((0.0, s.supply.typ), (1.0, s.supply.typ))),
            Resistor("load", "out", GROUND, s.load.typ),
        ),
        off + 20 * s.turn_off.typ,
        Between(source, high / 2, "fall", output, 0.5 * s.supply.typ, "fall"),
        tolerance=0.3,
        why="closed formula for the storage of one transistor; sheets print twice to five times the typical delay as the highest",
    )


def _steady(value: float) -> tuple[tuple[float, float], ...]:
    """A source that does not change."""
    return ((0.0, value), (_PROOF_TIME, value))
