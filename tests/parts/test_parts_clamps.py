"""Kinds of clamp and of the parts in them: what a file may say, what is stamped, and what is judged."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import pytest
from pydantic import ValidationError

from boardsim.board.corners import corners
from boardsim.board.reader import Board, library_part, read_board
from boardsim.circuit.assemble import assemble, windows
from boardsim.errors import InputError
from boardsim.firing.pattern import read_pattern
from boardsim.firing.schedule import fire
from boardsim.parts.base import NOMINAL, Corner, Stamp
from boardsim.parts.clamp import CoilClamp
from boardsim.parts.diode import Diode
from boardsim.parts.elements import Junction, Resistor
from boardsim.parts.kinds import kinds
from boardsim.parts.led import Led
from boardsim.parts.library import records
from boardsim.parts.rules import EnergyRule, HeatRule, MeanRule, PeakRule, PulseRule, Rule
from boardsim.parts.tvs import Tvs
from boardsim.parts.zener import Zener

TVS = {
    "stand_off": "24 V", "breakdown": "26.7 to 29.5 V", "test_current": "1 mA", "clamping_voltage": "38.9 V",
    "clamping_current": "15.4 A",
}  # fmt: skip
ZENER = {"voltage": "24 V", "test_current": "50 mA", "impedance": "3.5 ohm"}
FORWARD = [{"voltage": "0.9 V", "current": "1 A"}]
ARRAY = '{ part = "sink-array-8" }'


def board_text(clamp: str, more: str = "", switch: str = '{ part = "n-logic-60v", gate = "100 ohm" }') -> str:
    return f"""
supply = {{ voltage = "24 V +/- 5 %" }}
cable = {{ gauge = "18 AWG", length = "1 m" }}
bulk = {{ capacitance = "1000 uF", esr = "50 mohm" }}
logic = {{ voltage = "5 V" }}
[chain]
register = "74HC595"
count = 1
clock = "1 MHz"
[coils.gate]
resistance = "120 ohm"
inductance = "30 mH"
[channels."0-1"]
coil = "gate"
switch = {switch}
clamp = {clamp}
{more}
"""


def board_with(folder: Path, clamp: str, more: str = "", **named: str) -> Board:
    (folder / "board.toml").write_text(board_text(clamp, more, **named), encoding="utf-8")
    return read_board(folder / "board.toml")


def stamped(folder: Path, clamp: str, corner: Corner = NOMINAL) -> Stamp:
    part = board_with(folder, clamp).channels[0].clamp
    found: Stamp = part.stamp("c", "drain", "rail" if part.across == "coil" else "0", corner)
    return found


def rules_of(part: Any, *more: Any) -> tuple[Rule, ...]:
    rules: tuple[Rule, ...] = part.stamp("x", "label", "a", "b", (), *more).rules
    return rules


def nodes(stamp: Stamp) -> set[str]:
    return {str(getattr(e, key)) for e in stamp.elements for key in ("a", "b", "anode", "cathode") if hasattr(e, key)}


# ------------------------------------------------------------------------------------------------------ kinds


@pytest.mark.parametrize(
    ("clamp", "ends"),
    [
        ('{ kind = "zener", zener = "24v-5w" }', {"drain", "0"}),
        ('{ kind = "zener", zener = "SMBJ24A" }', {"drain", "0"}),
        ('{ kind = "diode-zener", diode = "fast-2a", zener = "SMAJ15A" }', {"drain", "rail"}),
        ('{ kind = "led", led = "led-white-5mm" }', {"drain", "rail"}),
        ('{ kind = "led", led = "led-white-5mm", resistor = "100 ohm", diode = "1N4148" }', {"drain", "rail"}),
        ('{ kind = "avalanche" }', set()),
    ],
)
def test_a_clamp_lies_where_its_kind_says(tmp_path: Path, clamp: str, ends: set[str]) -> None:
    stamp = stamped(tmp_path, clamp)
    assert {n for n in nodes(stamp) if not n.startswith("c_")} == ends
    # The audit sums every part of the clamp: its ports' quantities are all probed.
    assert {q for port in stamp.ports for pair in port.pairs for q in pair} <= {p.quantity for p in stamp.probes}
    assert len(stamp.ports) == sum(isinstance(e, Junction) for e in stamp.elements) + ("resistor" in clamp)


def test_the_array_clamps_with_a_diode_of_its_own_and_heats_with_its_outputs(tmp_path: Path) -> None:
    board = board_with(tmp_path, '{ kind = "array", part = "sink-array-8" }', switch=ARRAY)
    (tmp_path / "pattern.toml").write_text(
        '[[pulses]]\nchannels = "0-1"\nstart = "1 ms"\nwidth = "1 ms"\n', encoding="utf-8"
    )
    firing = fire(board, read_pattern(tmp_path / "pattern.toml", board))
    deck = assemble(board, firing, NOMINAL, windows(board, firing)[0])
    heats = [p for p in deck.rules if isinstance(p.rule, HeatRule)]
    (heat,) = heats  # one package, one temperature
    assert isinstance(heat.rule, HeatRule)
    assert heat.rule.channels == (0, 1)
    assert ("v_array diode", "i_array diode") in heat.rule.powers
    assert ("v_ds", "i_d") in heat.rule.powers
    assert heat.rule.resistance.value == 65.0


@pytest.mark.parametrize(
    ("clamp", "switch", "text"),
    [
        ('{ kind = "array", part = "sink-array-8" }', '{ part = "n-logic-60v", gate = "1 ohm" }', "the switch is another part"),
        ('{ kind = "array", part = "fast-2a" }', ARRAY, '"fast-2a" is a diode; a darlington-array is needed here'),
        ('{ kind = "zener", zener = "fast-2a" }', ARRAY, '"fast-2a" is a diode; a zener or tvs is needed here'),
        ('{ kind = "zener", zener = { kind = "led" } }', ARRAY, "this is a led; a zener or tvs is needed here"),
        ('{ kind = "zener", zener = "24v-5w", to = "rail" }', ARRAY, 'allowed: "ground"'),
        ('{ kind = "led" }', ARRAY, '"led" is missing'),
        ('{ kind = "led", led = "led-white-5mm", resistor = "0 ohm" }', ARRAY, "'0 ohm' is zero"),
        ('{ kind = "diode", diode = "fast-2a", at = "coil" }', ARRAY, "no leads are given"),
        ('{ kind = "diode", diode = "fast-2a", at = "drain" }', ARRAY, 'allowed: "board", "coil"'),
        ('{ kind = "avalanche", diode = "fast-2a" }', ARRAY, '"diode" is not known here'),
    ],
)  # fmt: skip
def test_a_mistake_in_a_clamp_is_named(tmp_path: Path, clamp: str, switch: str, text: str) -> None:
    with pytest.raises(InputError) as caught:
        board_with(tmp_path, clamp, switch=switch)
    assert text in str(caught.value)


def test_an_array_without_diodes_of_its_own_is_no_clamp(tmp_path: Path) -> None:
    bare = {k: v for k, v in records()["sink-array-8"].items() if k not in ("clamp_forward", "source", "sources")}
    cls = kinds("clamp")["array"]
    with pytest.raises(ValidationError, match="has no clamp_forward"):
        cls.model_validate({"part": type(library_part("sink-array-8")).model_validate(bare)})


def test_every_clamp_between_the_coils_ends_can_sit_at_the_coil() -> None:
    there = {kind for kind, cls in kinds("clamp").items() if issubclass(cls, CoilClamp)}
    assert there == {"diode", "diode-zener", "led", "resistor", "resistor-diode"}
    assert not kinds("clamp")["none"]().at_the_coil()


@pytest.mark.parametrize("part", ["24v-5w", "SMBJ24A"])
def test_corners_vary_the_voltage_of_a_clamp_to_ground(tmp_path: Path, part: str) -> None:
    board = board_with(tmp_path, f'{{ kind = "zener", zener = "{part}" }}')
    assert {c.ends.get("clamp_voltage") for c in corners(board)} >= {"min", "max"}
    levels = []
    for end in ("min", "max"):
        stamp = board.channels[0].clamp.stamp("c", "d", "rail", Corner("one", {"clamp_voltage": end}))
        levels.append(next(e.model.parameters["BV"] for e in stamp.elements if isinstance(e, Junction)))
    assert levels[1] > levels[0]


def test_a_clamp_to_ground_is_offered_only_where_it_blocks_the_rail(tmp_path: Path) -> None:
    clamp = board_with(tmp_path, '{ kind = "zener", zener = "SMBJ24A" }').channels[0].clamp
    assert clamp.blocks(25.2)
    assert not clamp.blocks(26.7)


# ------------------------------------------------------------------------------------------------------ parts


def test_a_suppressors_resistance_lies_between_its_upper_breakdown_and_its_clamping_voltage() -> None:
    """(38.9 - 29.5 - 0.0257 ln(15400)) V / 15.4 A = 0.594 ohm, worked by hand."""
    assert Tvs.model_validate(TVS).resistance == pytest.approx(0.5943, rel=1e-3)


@pytest.mark.parametrize(
    ("changes", "text"),
    [
        ({"stand_off": "27 V"}, "stand_off must be below"),
        ({"clamping_voltage": "29 V"}, "clamping_voltage must be above"),
        ({"clamping_current": "1 mA"}, "clamping_current must be above"),
    ],
)
def test_a_suppressor_that_contradicts_itself_is_refused(changes: Mapping[str, str], text: str) -> None:
    with pytest.raises(ValidationError, match=text):
        Tvs.model_validate({**TVS, **changes})


def test_a_bidirectional_suppressor_is_two_junctions_face_to_face() -> None:
    part = Tvs.model_validate({**TVS, "bidirectional": True})
    one, other = (e for e in part.stamp("x", "s", "p", "n", (), NOMINAL).elements if isinstance(e, Junction))
    assert one.anode == other.anode
    assert {one.cathode, other.cathode} == {"p", "n"}


@pytest.mark.parametrize(
    ("points", "text"),
    [
        ([("10 A", "1 ms"), ("12 A", "2 ms")], "must fall"),
        ([("10 A", "1 ms"), ("9 A", "1 ms")], "one for each length"),
    ],
)
def test_surge_points_that_rise_with_length_are_refused(points: list[tuple[str, str]], text: str) -> None:
    surge = [{"current": i, "lasting": t} for i, t in points]
    with pytest.raises(ValidationError, match=text):
        Diode.model_validate({"forward": FORWARD, "surge": surge})


@pytest.mark.parametrize(
    ("part", "missing"),
    [
        (Diode.model_validate({"forward": FORWARD}), {"overvoltage", "overcurrent", "overheating"}),
        (Zener.model_validate(ZENER), {"overcurrent", "overpower", "overheating"}),
        (Tvs.model_validate(TVS), {"surge", "overpower", "overheating"}),
        (Led.model_validate({"forward": FORWARD}), {"overvoltage", "overcurrent", "surge", "overheating"}),
    ],
    ids=["diode", "zener", "tvs", "led"],
)
def test_a_rating_that_was_not_given_stays_in_view_as_missing(part: Any, missing: set[str]) -> None:
    found = rules_of(part, NOMINAL)
    assert {r.check for r in found if r.limit.value is None} == missing  # type: ignore[union-attr]
    assert all(r.consequence == "destroy" for r in found)  # type: ignore[union-attr]


def test_the_junction_is_judged_in_the_air_of_the_corner() -> None:
    hot = Corner("hot", ambient=328.15)
    for name in ("fast-2a", "24v-5w", "SMBJ24A"):
        (heat,) = (r for r in rules_of(library_part(name), hot) if isinstance(r, HeatRule))
        assert heat.ambient == 328.15
        assert heat.resistance.value is not None
        assert heat.limit.value is not None


def test_of_a_thermal_resistance_with_a_band_the_worse_end_counts() -> None:
    part = Diode.model_validate(
        {"forward": FORWARD, "thermal_resistance": "50 K/W +/- 20 %", "junction_rating": "125 to 150 degC"}
    )
    (heat,) = (r for r in rules_of(part) if isinstance(r, HeatRule))
    assert heat.resistance.value == pytest.approx(60.0)
    assert heat.limit.value == pytest.approx(398.15)


def test_a_surge_and_a_pulse_energy_are_judged_where_they_are_given() -> None:
    assert not [r for r in rules_of(Diode.model_validate({"forward": FORWARD})) if isinstance(r, PulseRule)]
    (surge,) = (r for r in rules_of(library_part("rectifier-1a")) if isinstance(r, PulseRule))
    assert surge.points == ((1e-3, 45.0), (2e-3, 35.0), (5e-3, 30.0))  # Vishay 88503 (29 Apr 2020)
    assert surge.lasting == 10.0  # what it stands again and again
    (pulse,) = (r for r in rules_of(library_part("SMBJ24A"), NOMINAL) if isinstance(r, PulseRule))
    assert pulse.points == ((1e-3, 600.0),)
    assert not [r for r in rules_of(Zener.model_validate(ZENER), NOMINAL) if isinstance(r, EnergyRule)]
    rated = Zener.model_validate({**ZENER, "pulse_energy": "20 mJ"})
    (energy,) = (r for r in rules_of(rated, NOMINAL) if isinstance(r, EnergyRule))
    assert (energy.limit.value, energy.limit.derating) == (0.02, "energy")


def test_an_led_is_held_against_its_reverse_voltage_its_peak_and_its_mean() -> None:
    found = rules_of(library_part("led-white-5mm"))
    expected = [(PeakRule, 5.0), (PulseRule, 0.1), (PeakRule, 0.1), (MeanRule, 0.025), (HeatRule, 373.15)]
    assert [(type(r), r.limit.value) for r in found] == expected  # type: ignore[union-attr]


def test_an_led_leaks_as_much_as_it_says_at_five_volts() -> None:
    stamp = library_part("led-white-5mm").stamp("x", "LED", "a", "b", ())  # type: ignore[attr-defined]
    (leak,) = (e for e in stamp.elements if isinstance(e, Resistor))
    assert 5.0 / leak.ohms == pytest.approx(1e-6)


def test_an_array_is_offered_once_although_the_library_has_packages_of_seven_and_of_eight() -> None:
    def shelf(cls: Any) -> list[Any]:
        kind = cls.model_fields["kind"].default
        return [library_part(name) for name, record in records().items() if record["kind"] == kind]

    coil = library_coil()
    assert len(kinds("clamp")["array"].candidates(shelf, coil, 24.0)) == 1
    assert len(kinds("clamp")["diode-zener"].candidates(shelf, coil, 24.0)) == len(shelf(Zener))
    assert kinds("clamp")["avalanche"].candidates(shelf, coil, 24.0) == ()


def library_coil() -> Any:
    return kinds("coil")["coil"].model_validate({"resistance": "16 ohm", "inductance": "12 mH"})
