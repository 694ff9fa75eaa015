"""The resistor across a coil as a part, and what every kind of clamp offers to be set beside others."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Annotated, Literal

import pytest

from boardsim.board.corners import corners
from boardsim.board.reader import Board, library_part, read_board
from boardsim.errors import InputError
from boardsim.parts.base import NOMINAL, Corner, Part, named_part
from boardsim.parts.clamps.resistor import ResistorClamp
from boardsim.parts.coil import Coil
from boardsim.parts.diode import Diode
from boardsim.parts.elements import Resistor
from boardsim.parts.kinds import kinds
from boardsim.parts.library import records
from boardsim.parts.rules import MeanRule
from boardsim.parts.zener import Zener
from boardsim.quantities import POWER, RESISTANCE, Quantity, parse

COIL = Coil.model_validate({"resistance": "16 ohm", "inductance": "12 mH"})


def shelf(cls: type[Part]) -> Sequence[Part]:
    kind = cls.model_fields["kind"].default
    return [library_part(name) for name, record in records().items() if record["kind"] == kind]


def resistor(**fields: str) -> ResistorClamp:
    return ResistorClamp.model_validate(fields)


def board_with(folder: Path, clamp: str) -> Board:
    text = f"""
supply = {{ voltage = "24 V +/- 5 %" }}
cable = {{ gauge = "18 AWG", length = "1 m" }}
bulk = {{ capacitance = "1000 uF", esr = "50 mohm" }}
logic = {{ voltage = "5 V" }}
[chain]
register = "74HC595"
count = 1
clock = "1 MHz"
[coils.gate]
resistance = "24 ohm"
inductance = "30 mH"
[channels."0-1"]
coil = "gate"
switch = {{ part = "n-logic-60v", gate = "100 ohm" }}
clamp = {clamp}
"""
    (folder / "board.toml").write_text(text, encoding="utf-8")
    return read_board(folder / "board.toml")


def test_a_board_file_takes_it_with_or_without_a_power_rating(tmp_path: Path) -> None:
    plain = board_with(tmp_path, '{ kind = "resistor", resistance = "47 ohm" }').channels[0].clamp
    assert (plain.resistance.typ, plain.power) == (47.0, None)
    rated = board_with(tmp_path, '{ kind = "resistor", resistance = "47 ohm +/- 5 %", power = "3 W" }')
    assert rated.channels[0].clamp.power.typ == 3.0


@pytest.mark.parametrize(
    ("clamp", "text"),
    [
        ('{ kind = "resistor" }', '"resistance" is missing'),
        ('{ kind = "resistor", resistance = "0 ohm" }', "'0 ohm' is zero"),
        ('{ kind = "resistor", resistance = "47 ohm", powr = "3 W" }', '"powr" is not known here (did you mean "power"?)'),
        ('{ kind = "resistor", resistance = "47 ohm", to = "ground" }', 'allowed: "rail"'),
    ],
)  # fmt: skip
def test_a_mistake_in_it_is_named(tmp_path: Path, clamp: str, text: str) -> None:
    with pytest.raises(InputError) as caught:
        board_with(tmp_path, clamp)
    assert text in str(caught.value)


def test_its_resistance_is_varied_with_the_clamp_voltage(tmp_path: Path) -> None:
    clamp = resistor(resistance="47 ohm +/- 5 %")
    board = board_with(tmp_path, '{ kind = "resistor", resistance = "47 ohm +/- 5 %" }')
    assert {c.ends.get("clamp_voltage") for c in corners(board)} >= {"min", "max"}
    for end, ohms in (("min", 44.65), ("max", 49.35)):
        stamp = clamp.stamp("c", "drain", "rail", Corner("one", {"clamp_voltage": end}))  # type: ignore[dict-item]
        (found,) = (e for e in stamp.elements if isinstance(e, Resistor))
        assert found.ohms == pytest.approx(ohms)


def test_its_power_is_a_limit_and_stays_in_view_when_it_was_not_given() -> None:
    for power, value in ((None, None), ("3 W", 3.0)):
        fields = {"resistance": "47 ohm"} | ({"power": power} if power else {})
        (rule,) = resistor(**fields).stamp("c", "drain", "rail", NOMINAL).rules
        assert isinstance(rule, MeanRule)
        assert (rule.limit.value, rule.limit.unit, rule.consequence) == (value, "W", "destroy")


def test_it_lies_between_switch_and_rail_and_the_audit_sums_all_of_its_power() -> None:
    stamp = resistor(resistance="47 ohm").stamp("c", "drain", "rail", NOMINAL)
    assert {e.a for e in stamp.elements} | {e.b for e in stamp.elements} == {"drain", "rail", "c_in"}  # type: ignore[union-attr]
    (port,) = stamp.ports
    assert set(port.pairs[0]) == {probe.quantity for probe in stamp.probes}
    assert (port.holds, port.store) == (0.0, None)


@pytest.mark.parametrize("kind", sorted(set(kinds("clamp")) - {"avalanche", "built-in"}))  # circuits of "none"
def test_every_kind_of_clamp_offers_itself_for_comparison(kind: str) -> None:
    offered = kinds("clamp")[kind].candidates(shelf, COIL, 24.0)
    assert offered
    assert all(type(clamp) is kinds("clamp")[kind] for clamp in offered)
    assert len(set(offered)) == len(offered)


def test_the_resistor_offers_once_and_twice_the_coils_resistance_and_says_where_they_come_from() -> None:
    offered = ResistorClamp.candidates(shelf, COIL, 24.0)
    assert [clamp.resistance.typ for clamp in offered] == [16.0, 32.0]
    assert all(clamp.resistance.origin.kind == "computed" for clamp in offered)
    assert all("16.0 ohm of the coil" in clamp.resistance.origin.source for clamp in offered)
    assert all(clamp.power is None for clamp in offered)


def test_a_kind_with_two_parts_offers_every_combination_of_the_shelf() -> None:
    class Pair(Part):
        kind: Literal["pair"] = "pair"
        first: named_part(Diode)  # type: ignore[valid-type]
        second: named_part(Zener)  # type: ignore[valid-type]
        more: Annotated[Quantity, POWER] | None = None

    offered = Pair.candidates(shelf, COIL, 24.0)
    assert {(p.first.title, p.second.title) for p in offered} == {
        (d.title, z.title) for d in shelf(Diode) for z in shelf(Zener)
    }


def test_a_kind_without_parts_offers_itself() -> None:
    (only,) = kinds("clamp")["none"].candidates(lambda _: [], COIL, 24.0)
    assert only.kind == "none"
    assert parse("16 ohm", RESISTANCE).typ == COIL.resistance.typ  # the coil of these tests is what it says
