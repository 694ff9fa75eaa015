"""Proofs of parts: the measurement itself against circuits with known answers, then every library part against its sheet."""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from boardsim.board.reader import library_part
from boardsim.engine.run import Engine
from boardsim.parts.elements import (
    Ammeter,
    Capacitor,
    CurrentDrive,
    Drive,
    Element,
    Resistor,
    current,
    scaled,
    voltage,
)
from boardsim.parts.library import records
from boardsim.parts.proof import AtEnd, Between, Proof, Ratio
from boardsim.quantities import Quantity
from boardsim.scenarios.crew import Crew
from boardsim.scenarios.part_proofs import parts_to_prove, prove, prove_parts
from boardsim.verdict.proving import AGREEMENT, ProofLine, judge_proof

pytestmark = pytest.mark.engine

EXACT = 1e-3  # of circuits that have a closed solution; the ladder itself asks for 1 % only


def plain(value: float, unit: str = "V") -> Quantity:
    return Quantity(value, value, value, unit)


def ramp(name: str, top: float, duration: float) -> Drive:
    return Drive(name, "a", "0", ((0.0, 0.0), (2 * duration, 2 * top)))


def line(engine: Engine, printed: float, elements: tuple[Element, ...], duration: float, reading: object) -> ProofLine:
    proof = Proof("known", "V", plain(printed), elements, duration, reading, tolerance=EXACT)  # type: ignore[arg-type]
    return prove("circuit", "made up", proof, engine)


def test_a_resistance_is_the_ratio_of_voltage_and_current(engine: Engine) -> None:
    meter = Ammeter("m", "a", "b")
    circuit = (ramp("s", 1.0, 1e-3), meter, Resistor("r", "b", "0", 47e-3))
    assert line(engine, 47e-3, circuit, 1e-3, Ratio(voltage("b"), current(meter))).verdict == "pass"


def test_a_capacitance_is_current_over_slope(engine: Engine) -> None:
    meter = Ammeter("m", "a", "b")
    circuit = (ramp("s", 0.1, 1e-6), meter, Capacitor("c", "b", "0", 65e-12))
    assert line(engine, 65e-12, circuit, 1e-6, AtEnd(scaled(1e-5, current(meter)))).verdict == "pass"


def test_a_charge_is_the_time_between_two_levels_times_the_current(engine: Engine) -> None:
    """1 mA into 1 nF: from 1 V to 4 V it takes 3 nC."""
    source = CurrentDrive("i", "a", "0", ((0.0, 0.0), (1e-6, 0.0), (1.001e-6, 1e-3), (1e-4, 1e-3)))
    circuit = (source, Capacitor("c", "a", "0", 1e-9), Resistor("r", "a", "0", 1e9))
    reading = Between(voltage("a"), 1.0, "rise", voltage("a"), 4.0, "rise", factor=1e-3)
    assert line(engine, 3e-9, circuit, 10e-6, reading).verdict == "pass"
    relative = Between(voltage("a"), 1.0, "rise", voltage("a"), 3.0, "rise", factor=1e-3, relative=True)
    assert line(engine, 3e-9, circuit, 10e-6, relative).verdict == "pass"


def test_a_fall_time_is_that_of_a_discharge(engine: Engine) -> None:
    """R C = 1 us: from 90 % to 10 % it takes ln 9 us."""
    source = Drive("s", "a", "0", ((0.0, 1.0), (1e-7, 1.0), (1.001e-7, 0.0), (1e-3, 0.0)))
    circuit = (source, Resistor("r", "a", "b", 1e3), Capacitor("c", "b", "0", 1e-9))
    reading = Between(voltage("b"), 0.9, "fall", voltage("b"), 0.1, "fall")
    assert line(engine, 1e-6 * math.log(9), circuit, 5e-6, reading).verdict == "pass"


def test_a_model_that_is_off_fails_and_says_by_how_much(engine: Engine) -> None:
    meter = Ammeter("m", "a", "b")
    circuit = (ramp("s", 1.0, 1e-3), meter, Resistor("r", "b", "0", 1.2))
    found = line(engine, 1.0, circuit, 1e-3, Ratio(voltage("b"), current(meter)))
    assert found.verdict == "fail"
    assert found.deviation == pytest.approx(0.2, rel=1e-3)


def test_a_level_that_is_never_reached_is_unproven(engine: Engine) -> None:
    circuit = (ramp("s", 1.0, 1e-3), Resistor("r", "a", "0", 1.0))
    found = line(engine, 1e-3, circuit, 1e-3, Between(voltage("a"), 0.5, "rise", voltage("a"), 5.0, "rise"))
    assert found.verdict == "unproven"
    assert found.value is None


def test_every_proof_is_run_twice_with_at_least_half_as_many_points_more(engine: Engine) -> None:
    circuit = (ramp("s", 1.0, 1e-3), Resistor("r", "a", "0", 1.0))
    found = line(engine, 1.0, circuit, 1e-3, AtEnd(voltage("a")))
    assert len(found.points) == 2
    assert found.points[1] >= 1.5 * found.points[0]


PROOF = Proof("x", "V", Quantity(10.0, 10.0, 12.0, "V"), (), 1.0, AtEnd(()))


@pytest.mark.parametrize(
    ("readings", "verdict"),
    [
        ((10.5, 10.5), "pass"),
        ((10.5 * (1 + 2 * AGREEMENT), 10.5), "unproven"),  # two runs that do not agree
        ((10.5,), "unproven"),  # not run twice
        ((), "unproven"),
        ((11.1, 11.1), "fail"),  # inside the band, but beyond 10 % of the typical value
        ((9.5, 9.5), "pass"),  # the lower end equals the typical value: no minimum is printed
        ((8.9, 8.9), "fail"),
        ((12.1, 12.1), "fail"),
    ],
)
def test_the_verdict_of_a_typical_point_with_a_printed_maximum(readings: tuple[float, ...], verdict: str) -> None:
    assert judge_proof("p", "k", PROOF, readings, (400, 1000)).verdict == verdict


@pytest.mark.parametrize(("value", "verdict"), [(5.0, "pass"), (1.0, "pass"), (0.9, "fail"), (9.1, "fail")])
def test_a_number_that_only_bounds_is_judged_by_its_band_alone(value: float, verdict: str) -> None:
    proof = Proof("x", "V", Quantity(5.0, 1.0, 9.0, "V"), (), 1.0, AtEnd(()), shapes=False)
    found = judge_proof("p", "k", proof, (value, value), (400, 1000))
    assert found.verdict == verdict
    assert found.deviation is None


def test_a_bound_without_a_band_proves_nothing() -> None:
    proof = Proof("x", "V", plain(5.0), (), 1.0, AtEnd(()), shapes=False)
    assert judge_proof("p", "k", proof, (5.0, 5.0), (400, 1000)).verdict == "unproven"


# Printed figures that must be among the proofs, so that none is lost: Alpha & Omega AO3400A rev. 1 (May 2008), pp. 1-2;
# IR PD-97390; IR IRLZ44N (8/25/97). Typical and printed maximum, None where not printed.
PRINTED = {
    "AO3400A": [(22e-3, 26.5e-3), (25.4e-3, 32e-3), (34e-3, 48e-3), (1.0, 1.5), (30.0, None), (3.75e-9, None),
                (1.8e-9, None), (10e-9, 13e-9), (900e-12, 1.1e-9), (6.7e-9, None), (24.2e-9, None), (31e-3, 38e-3), (26.0, None),
                (0.72, 1.0)],
    "IRLB8721": [(6.5e-3, 8.7e-3), (13.1e-3, 16e-3), (1.8, 2.35), (3.4e-9, None), (3.1e-9, None), (7.6e-9, 13e-9)],
    "IRLZ44N": [(None, 22e-3), (None, 25e-3), (None, 35e-3), (None, 2.0), (55.0, None), (None, 48e-9), (None, 8.6e-9),
                (None, 25e-9), (95e-9, None), (41e-9, None), (None, 1.3)],
}  # fmt: skip


@pytest.mark.parametrize("name", PRINTED)
def test_printed_figures_of_a_mosfet_are_proven(tmp_path: Path, name: str) -> None:
    with Crew() as crew:
        (found,) = prove_parts(parts_to_prove([name], False), tmp_path, crew)
    for typical, highest in PRINTED[name]:
        near = [
            p for p in found.lines
            if (typical is None or p.proof.printed.typ == pytest.approx(typical))
            and (highest is None or p.proof.printed.max == pytest.approx(highest))
        ]  # fmt: skip
        assert near, (typical, highest)
        # By the table's own numbers, whatever the line's verdict says. Times of fixtures are orders of magnitude only.
        for p in near[:1]:
            assert p.value is not None
            assert highest is None or p.value <= highest
            if typical is not None and p.proof.unit != "s":
                assert p.value == pytest.approx(typical, rel=0.1)


def test_every_library_part_holds_against_its_own_sheet(tmp_path: Path) -> None:
    with Crew() as crew:
        found = prove_parts(parts_to_prove((), True), tmp_path, crew)
    assert sorted(part.part for part in found if not part.lines) == sorted(
        name for name in records() if not library_part(name).proofs()
    )
    assert sum(len(part.lines) for part in found) > 50
    bad = {(p.part, p.proof.quantity): p.reason for part in found for p in part.lines if p.verdict != "pass"}
    assert not bad
    assert not list(tmp_path.rglob("*.cir"))
