"""What the datasheet of an NPN transistor prints, and the test circuits that measure it on the model."""

from __future__ import annotations

from typing import TYPE_CHECKING

from boardsim.parts.base import T_MODEL
from boardsim.parts.bipolar import Saturation
from boardsim.parts.elements import (
    GROUND,
    Ammeter,
    Bipolar,
    CurrentDrive,
    Drive,
    Element,
    Resistor,
    VendorsPart,
    current,
    voltage,
)
from boardsim.parts.proof import AtEnd, Between, Proof, Ratio
from boardsim.quantities import Quantity

if TYPE_CHECKING:
    from boardsim.parts.switches.npn import Gain, Npn

_PROOF_VOLTAGE = 5.0  # [V], collector voltage of the gain's test circuit; without Early effect it does not matter
_PROOF_TIME = 1e-4  # [s]


def npn_proofs(part: Npn) -> tuple[Proof, ...]:
    """Every printed figure of an NPN transistor with its test circuit.

    Notes
    -----
    Voltages in saturation with both currents of sources; the gain at 5 V with the base current of the typical gain; the
    storage time from the reversal of the base current until the collector current has fallen to 90 %. 25 degC.
    """
    return (
        *(_voltage_proof(part, p, "c", "V_CE(sat)") for p in part.saturation),
        *(_voltage_proof(part, p, "b", "V_BE(sat)") for p in part.base_emitter),
        *(_gain_proof(part, g) for g in part.gain),
        *(() if part.storage_time.assumed() else (_storage_proof(part),)),
    )


def _transistor(part: Npn) -> Bipolar | VendorsPart:
    return part.device("dut", "c", "b", T_MODEL)


def _voltage_proof(part: Npn, point: Saturation, node: str, what: str) -> Proof:
    elements: tuple[Element, ...] = (
        _transistor(part),
        _steady("collector", "c", point.current.typ),
        _steady("base", "b", point.base.typ),
    )
    return Proof(
        f"{what} at {point.current} with {point.base}",
        "V",
        point.printed,
        elements,
        _PROOF_TIME,
        AtEnd(voltage(node)),
        why="of more points than parameters the model meets none exactly",
    )


def _gain_proof(part: Npn, gain: Gain) -> Proof:
    collector, base = Ammeter("collector", "supply", "c"), Ammeter("base", "inp", "b")
    volts = ((0.0, _PROOF_VOLTAGE), (_PROOF_TIME, _PROOF_VOLTAGE))
    elements: tuple[Element, ...] = (
        _transistor(part),
        Drive("supply", "supply", GROUND, volts),
        _steady("drive", "inp", gain.current.typ / gain.typ),
        collector,
        base,
    )
    return Proof(
        f"gain at {gain.current}",
        "A/A",
        Quantity(gain.typ, float(gain.least), gain.typ, "A/A", gain.current.origin),
        elements,
        _PROOF_TIME,
        Ratio(current(collector), current(base)),
        why="of more points than parameters the model meets none exactly",
        shapes=gain.typical is not None,
    )


def _storage_proof(part: Npn) -> Proof:
    """From the base current's reversal until the collector current has fallen to 90 %."""
    point = part.saturation[0]
    i_c, i_b, start, edge = point.current.typ, point.base.typ, 10e-6, 1e-9
    load = (10.0 - point.voltage.typ) / i_c
    meter = Ammeter("collector", "load", "c")
    reversal = ((0.0, i_b), (start, i_b), (start + edge, -i_b))
    base = Ammeter("base", "inp", "b")
    elements: tuple[Element, ...] = (
        _transistor(part),
        Drive("supply", "supply", GROUND, ((0.0, 10.0), (1.0, 10.0))),
        Resistor("load", "supply", "load", load),
        meter,
        base,
        CurrentDrive("drive", "inp", GROUND, reversal),
    )
    return Proof(
        f"storage time at {point.current} with {point.base} both ways",
        "s",
        part.storage_time,
        elements,
        start + 2 * part.storage_time.typ,
        Between(current(base), 0.0, "fall", current(meter), 0.9 * i_c, "fall"),
        tolerance=0.3,
        why="Moll's formula holds for low-level injection and to the end of saturation, not to 90 %",
    )


def _steady(name: str, node: str, amperes: float) -> CurrentDrive:
    """A constant current into a node."""
    return CurrentDrive(name, node, GROUND, ((0.0, amperes), (_PROOF_TIME, amperes)))
