"""Bipolar switches on ngspice against the datasheet figures that they are made from."""

from __future__ import annotations

import math

import pytest

from boardsim.board.reader import library_part
from boardsim.circuit.build import Builder
from boardsim.engine.run import Engine
from boardsim.parts.base import Part
from boardsim.parts.darlington import DarlingtonArray
from boardsim.parts.library import records
from boardsim.parts.proof import Proof
from boardsim.verdict.proving import read_proof

pytestmark = pytest.mark.engine

# TI ULN2803A SLRS049H (Feb 2017), section 6.5: typical and maximum; typed from there, not from the library's record.
# Typical within 10 %: three points on a straight resistance. Delays: section 6.6 and figure 10, typical only.
ULN2803A = {
    "V_CE(sat) at 100 mA": (0.9, 1.1),
    "V_CE(sat) at 200 mA": (1.0, 1.3),
    "V_CE(sat) at 350 mA": (1.3, 1.6),
    "input current at 3.85 V": (0.93e-3, 1.35e-3),
    "forward voltage of the clamp diode at 350 mA": (1.7, 2.0),
    "delay to the output's falling edge": (20e-9, math.inf),
    "delay to the output's rising edge": (130e-9, math.inf),
}
ON = {"input voltage for 200 mA": 2.4, "input voltage for 250 mA": 2.7, "input voltage for 300 mA": 3.0}


def measured(engine: Engine, proof: Proof) -> float:
    builder = Builder()
    builder.add(proof.elements)
    step = proof.duration / 2000
    lines = [builder.netlist().rstrip(), ".options method=gear reltol=1e-5 abstol=1e-9 temp=25 tnom=25"]
    lines += [f".tran {step:.9g} {proof.duration:.9g} 0 {step:.9g}", ".end"]
    with engine.run_text("\n".join(lines) + "\n", proof.duration) as waves:
        value = read_proof(proof.reading, waves)
    assert value is not None
    return value


def proof_of(part: Part, begin: str) -> Proof:
    (found,) = (p for p in part.proofs() if p.quantity.startswith(begin))
    return found


@pytest.mark.parametrize("begin", sorted(ULN2803A))
def test_the_array_meets_typical_points_inside_the_printed_maximum(engine: Engine, begin: str) -> None:
    typical, highest = ULN2803A[begin]
    value = measured(engine, proof_of(library_part("sink-array-8"), begin))
    assert value == pytest.approx(typical, rel=0.10)
    assert value <= highest


# Delays of other makers in their own circuits. Toshiba ULN2003,04APG/AFWG (2006-06-14), p. 4: 0.1 us and 0.2 us at 50 V,
# 125 ohm, 15 pF. The others are made up: slower, and with more storage than any. Within 10 % as all typical points.
DELAYS = [(100e-9, 200e-9, 125.0), (50e-9, 300e-9, 250.0), (30e-9, 1e-6, 163.0)]


@pytest.mark.parametrize(("on", "off", "load"), DELAYS)
def test_the_array_meets_the_delays_of_other_circuits(engine: Engine, on: float, off: float, load: float) -> None:
    record = {k: v for k, v in records()["sink-array-8"].items() if k not in ("source", "sources")}
    switching = {"turn_on": f"{on!r} s", "turn_off": f"{off!r} s", "load": f"{load} ohm"}
    part = DarlingtonArray.model_validate(record | {"switching": switching})
    assert measured(engine, proof_of(part, "delay to the output's falling")) == pytest.approx(on, rel=0.10)
    assert measured(engine, proof_of(part, "delay to the output's rising")) == pytest.approx(off, rel=0.10)


@pytest.mark.parametrize("begin", sorted(ON))
def test_the_array_is_on_at_the_printed_input_voltage(engine: Engine, begin: str) -> None:
    assert 1.0 < measured(engine, proof_of(library_part("sink-array-8"), begin)) <= ON[begin]


@pytest.mark.parametrize("name", ["npn-small", "npn-medium"])
def test_a_transistor_meets_the_figures_of_its_record(engine: Engine, name: str) -> None:
    part = library_part(name)
    assert part.proofs()
    for proof in part.proofs():
        assert measured(engine, proof) == pytest.approx(proof.printed.typ, rel=proof.tolerance), proof.quantity
