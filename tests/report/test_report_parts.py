"""How parts and proofs are shown: made-up lines, no simulation behind them."""

from __future__ import annotations

import io
import json

import pytest
from rich.console import Console

from boardsim.parts.elements import Resistor, voltage
from boardsim.parts.proof import AtEnd, Proof
from boardsim.quantities import RESISTANCE, VOLTAGE, Origin, Quantity, parse
from boardsim.report.parts_report import print_part, print_parts, print_proofs, proofs_to_dict
from boardsim.verdict.proving import PartProofs, ProofLine

SHEET = Origin("library", "the maker's sheet")


def line(
    verdict: str = "pass", printed: str = "50 mohm -0/+10 mohm", value: float | None = 0.052, **more: object
) -> ProofLine:
    shapes = bool(more.pop("shapes", True))
    proof = Proof(
        "on-resistance", "ohm", parse(printed, RESISTANCE, SHEET), (Resistor("r", "d", "0", 1.0),), 1e-3,
        AtEnd(voltage("d")), why="two points are met", shapes=shapes,
    )  # fmt: skip
    return ProofLine("gate-1", "n-mosfet", proof, value, (400, 1000), verdict, str(more.get("reason", "")))  # type: ignore[arg-type]


def shown(write: object, *arguments: object, width: int = 100) -> str:
    stream = io.StringIO()
    write(*arguments, Console(file=stream, width=width))  # type: ignore[operator]
    return stream.getvalue()


def test_a_proof_shows_what_is_printed_what_is_modelled_and_how_far_apart() -> None:
    text = shown(print_proofs, [PartProofs("gate-1", "n-mosfet", (line(),))])
    row = next(row for row in text.splitlines() if "on-resistance" in row)
    for words in ("pass", "50.0 mohm", "52.0 mohm", "+4.0 %", "10 %, the band"):
        assert words in row
    assert "up to 60.0 mohm" in text
    assert "1 printed number of 1 part: 1 pass" in text


def test_a_failed_proof_says_why_and_why_that_tolerance() -> None:
    text = shown(print_proofs, [PartProofs("gate-1", "n-mosfet", (line("fail", reason="above the printed maximum"),))])
    assert "fail: on-resistance: above the printed maximum (two points are met)" in text


def test_a_number_that_only_bounds_shows_its_band_and_no_deviation() -> None:
    text = shown(print_proofs, [PartProofs("gate-1", "n-mosfet", (line(printed="10 to 60 mohm", shapes=False),))])
    assert "10.0 mohm to 60.0 mohm" in text
    assert "%" not in text


def test_what_rests_on_memory_is_named() -> None:
    made_up = ProofLine(
        "gate-1", "n-mosfet",
        Proof("threshold", "V", parse("1.7 V", VOLTAGE, Origin("library", "from memory")), (), 1.0, AtEnd(())),
        1.7, (1, 2), "pass",
    )  # fmt: skip
    assert "from memory, not from a datasheet: threshold" in shown(
        print_proofs, [PartProofs("gate-1", "n-mosfet", (made_up,))]
    )


def test_a_part_without_proofs_is_not_passed_over_in_silence() -> None:
    text = shown(print_proofs, [PartProofs("74HC595", "shift-register", ())])
    assert "nothing to prove" in text
    assert "74HC595" in text
    assert "0 printed numbers of 0 parts: none" in text


def test_names_cannot_command_the_terminal() -> None:
    text = shown(print_proofs, [PartProofs("gate\x1b[31m", "n-mosfet", (line(reason="\x07bell"),))])
    assert "\x1b" not in text
    assert "\x07" not in text


@pytest.mark.parametrize("value", [0.052, None])
def test_json_holds_the_numbers_in_si_units(value: float | None) -> None:
    values = proofs_to_dict([PartProofs("gate-1", "n-mosfet", (line(value=value),), "ngspice 39")], 1)
    proof = json.loads(json.dumps(values))["parts"][0]["proofs"][0]
    assert proof["printed"] == {"typ": 0.05, "min": 0.05, "max": pytest.approx(0.06)}
    assert proof["modelled"] == value
    assert proof["deviation"] == (None if value is None else pytest.approx(0.04))
    assert proof["source"] == "library: the maker's sheet"
    assert values["status"] == 1
    assert values["engine"] == "ngspice 39"


def test_every_number_of_a_part_has_unit_band_and_source() -> None:
    details = [
        ("breakdown", parse("30 V", VOLTAGE, SHEET)),
        ("threshold", parse("1 V -0.3/+0.5 V", VOLTAGE, SHEET)),
        ("junction rating", Quantity(423.15, 423.15, 423.15, "K", Origin("assumed", "common practice"))),
        ("avalanche energy", None),
    ]
    rows = shown(print_part, "gate-1", "n-mosfet", details).splitlines()
    by_name = {row.split("  ")[0]: row for row in rows}
    assert "30.0 V" in by_name["breakdown"]
    assert "from 700 mV up to 1.50 V" in by_name["threshold"]
    assert "150 degC" in by_name["junction rating"]
    assert "not given" in by_name["avalanche energy"]
    assert "[1] library: the maker's sheet" in rows
    assert "[2] assumed: common practice" in rows
    assert by_name["breakdown"].rstrip().endswith("[1]")
    assert by_name["junction rating"].rstrip().endswith("[2]")


def test_parts_are_listed_by_kind_with_ratings_and_source() -> None:
    rating = {"reverse_voltage": parse("40 V", VOLTAGE, SHEET)}
    text = shown(print_parts, [("diode", "d-1", rating, "sheet A"), ("zener", "z-1", {}, "sheet B")])
    lines = [row.strip() for row in text.splitlines()]
    assert lines.index("diode") < lines.index("zener")
    assert "reverse voltage 40.0 V" in text
    assert "sheet B" in text
    assert "2 parts" in text


def test_an_empty_list_says_so() -> None:
    assert "no part of the library fits" in shown(print_parts, [])
