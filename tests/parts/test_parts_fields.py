"""What fields, names and messages of parts are made of."""

import math
import re

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from pydantic import ValidationError

from boardsim.errors import QuantityError
from boardsim.parts.base import NOMINAL, Corner, Surroundings
from boardsim.parts.cable import Cable
from boardsim.parts.coil import Coil
from boardsim.parts.copper import pair_inductance
from boardsim.parts.diode import THERMAL_VOLTAGE, Diode, forward_parameters
from boardsim.parts.elements import plus, scaled, voltage
from boardsim.parts.mosfet import NMosfet
from boardsim.parts.record import name_from, named_like, nearest, shown
from boardsim.parts.supply import Supply
from boardsim.quantities import CAPACITANCE, CHARGE, CURRENT, RESISTANCE, VOLTAGE, Dimension


def coil(**changes: str) -> Coil:
    return Coil.model_validate({"resistance": "16 ohm +/- 10 %", "inductance": "12 mH", **changes})


def test_the_nearest_known_word_is_offered_and_nothing_where_none_is_near() -> None:
    assert nearest("zenner", ["diode", "zener"]) == ' (did you mean "zener"?)'
    assert nearest("propeller", ["diode", "zener"]) == ""


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (True, "true"),
        (5, "5"),
        ("x", "'x'"),
        ({"a": 1}, "a table"),
        ([1], "a list"),
        ("y" * 99, repr("y" * 60 + "...")),
    ],
)
def test_what_a_file_holds_is_shown_shortly(value: object, text: str) -> None:
    assert shown(value) == text


def test_kinds_get_the_article_that_is_spoken() -> None:
    assert [named_like(k) for k in ("diode", "n-mosfet", "inductor", "zener")] == [
        "a diode",
        "an n-mosfet",
        "an inductor",
        "a zener",
    ]


@given(st.text(max_size=80))
def test_any_text_makes_a_name_that_a_part_can_have(text: str) -> None:
    name = name_from(text, "board")
    assert coil(title=name).title == name


def test_a_part_cannot_be_changed_after_it_was_read() -> None:
    with pytest.raises(ValidationError, match="frozen"):
        coil().title = "other"  # type: ignore[misc]


def test_signals_add_up_by_vector() -> None:
    assert plus(voltage("a", "b"), scaled(2.0, voltage("b"))) == ((1.0, "v(a)"), (1.0, "v(b)"))
    assert voltage("0", "a") == ((-1.0, "v(a)"),)


def test_a_corner_takes_the_end_that_it_names_and_the_middle_otherwise() -> None:
    quantity = coil().resistance
    assert Corner("low", {"coil_resistance": "min"}).take(quantity, "coil_resistance") == pytest.approx(14.4)
    assert NOMINAL.take(quantity, "coil_resistance") == 16.0


def test_a_winding_is_coldest_at_the_lowest_ambient_and_hottest_at_the_highest_with_its_own_rise() -> None:
    around = Surroundings(278.15, 318.15)
    part = coil(at="20 degC", rise="40 K")
    cold = part.ohms(Corner("cold", {}, "cold"), around)
    hot = part.ohms(Corner("hot", {}, "hot"), around)
    # R = R20 (1 + alpha (T - 20 degC)), alpha 0.00393 / K: IEC 60028
    assert cold == pytest.approx(16 * (1 + 0.00393 * (5 - 20)))
    assert hot == pytest.approx(16 * (1 + 0.00393 * (45 + 40 - 20)))
    assert part.ohms(NOMINAL, around) == part.ohms(Corner("cold", {}, "cold"), None) == 16.0


def test_a_coil_cannot_let_go_at_more_current_than_it_pulls_in_with() -> None:
    with pytest.raises(ValidationError, match="release must be smaller than pull_in"):
        coil(pull_in="0.5 A", release="0.6 A")


@given(
    v=st.floats(0.4, 1.5),
    rise=st.floats(0.05, 1.0),
    i=st.floats(1e-3, 1.0),
    ratio=st.floats(2.0, 100.0),
)
def test_a_diode_passes_through_the_points_that_were_given(v: float, rise: float, i: float, ratio: float) -> None:
    points = [(v, i), (v + rise, i * ratio)]
    # A straight line that meets the axis of currents to the right of 0 A leaves no voltage for the junction.
    assume(v + rise > rise / (i * ratio - i) * i * ratio)
    # Two points that rise less than a junction of 1e-28 A does are refused: ngspice takes none below.
    f1, f2 = (math.log(amperes / 1e-28) for amperes in (i, i * ratio))
    assume((v + rise) * f1 > 1.001 * v * f2)
    i_s, n, r_s = forward_parameters(points)
    assert i_s >= 1e-28 * (1 - 1e-9)
    assert r_s >= 0
    v_last, i_last = points[-1]
    assert n * THERMAL_VOLTAGE * math.log(i_last / i_s) + r_s * i_last == pytest.approx(v_last, rel=1e-6)
    assert n * THERMAL_VOLTAGE * math.log(i / i_s) + r_s * i == pytest.approx(v, abs=1e-6)


@pytest.mark.parametrize(
    "points",
    [
        [(1.0, 1.0), (0.9, 2.0)],
        [(1.0, 1.0), (1.1, 1.0)],
        [(3.0, 0.1), (3.05, 1.0)],
        [(50.0, 1.0)],
        [(9000.0, 1e-9)],
        [(0.5, 1.0), (1.5, 2.0)],
    ],
)
def test_forward_points_of_no_single_junction_are_refused(points: list[tuple[float, float]]) -> None:
    with pytest.raises(QuantityError, match=r"must rise|more than that of one junction|more steeply than a junction"):
        forward_parameters(points)


def test_a_diode_refuses_such_points_where_it_is_read() -> None:
    with pytest.raises(ValidationError, match="more than that of one junction"):
        Diode.model_validate({"forward": [{"voltage": "100 V", "current": "1 A"}]})


@pytest.mark.parametrize(
    ("gauge", "number"), [("16 AWG", 16), ("16AWG", 16), ("0 AWG", 0), ("1/0 AWG", 0), ("4/0 AWG", -3)]
)
def test_wire_gauges_are_read(gauge: str, number: int) -> None:
    assert Cable.model_validate({"gauge": gauge, "length": "1 m"}).gauge == number


def test_a_cable_of_an_area_is_round_and_solid() -> None:
    cable = Cable.model_validate({"area": "1 mm2", "length": "1 m"})
    assert cable.section == pytest.approx(1e-6)
    assert cable.diameter == pytest.approx(2 * math.sqrt(1e-6 / math.pi))


def test_conductors_cannot_overlap() -> None:
    with pytest.raises(QuantityError, match=r"conductors of 1.00 mm cannot be 0.90 mm apart"):
        pair_inductance(1e-3, 0.9e-3, 1.0)


def test_wider_spacing_never_lowers_the_inductance() -> None:
    found = [pair_inductance(1e-3, spacing * 1e-3, 1.0) for spacing in (1.0, 1.5, 2.0, 10.0, 100.0)]
    assert found == sorted(found)


@pytest.mark.parametrize(
    ("cls", "changes"),
    [
        (Coil, {"resistance": "0 ohm", "inductance": "1 mH"}),
        (Coil, {"resistance": "1 ohm", "inductance": "1 mH", "core_loss": "0 ohm"}),
        (Supply, {"voltage": "5 V", "internal_load": "0 ohm"}),
    ],
)
def test_a_resistance_that_the_model_divides_by_cannot_be_zero(cls: type, changes: dict[str, str]) -> None:
    with pytest.raises(ValidationError, match="'0 ohm' is zero; a resistance must be positive here"):
        cls.model_validate(changes)  # type: ignore[attr-defined]


MOSFET = {
    "breakdown": "60 V",
    "threshold": "1.7 V",
    "on_resistance": [{"value": "55 mohm", "gate": "4.5 V"}, {"value": "45 mohm", "gate": "10 V"}],
    "input_capacitance": "560 pF",
    "output_capacitance": "95 pF",
    "reverse_capacitance": "35 pF",
    "gate_drain_charge": "3 nC",
    "charge_voltage": "30 V",
}


def test_a_mosfets_model_gives_back_the_figures_that_shaped_it() -> None:
    p = NMosfet.model_validate(MOSFET).parameters(60.0)

    def overdrive(v_gs: float) -> float:
        # ngspice manual, VDMOS model: the effective overdrive with its rounding near the threshold
        return p["KSUBTHRES"] * math.log1p(math.exp((v_gs - p["VTO"]) / p["KSUBTHRES"]))

    for gate, r in ((4.5, 0.055), (10.0, 0.045)):
        assert p["RD"] + 1 / (p["KP"] * overdrive(gate)) == pytest.approx(r, rel=1e-6)
    assert p["KP"] * overdrive(1.7) ** 2 / 2 == pytest.approx(250e-6, rel=1e-6)
    # ngspice manual, VDMOS model: gate-drain capacitance at V_GD = -25 V, the test voltage of most datasheets
    s = (p["CGDMAX"] - p["CGDMIN"]) / (1 + math.pi / 2)
    c_gd = p["CGDMAX"] - s + s * math.atan(p["A"] * -25.0)
    assert c_gd == pytest.approx(35e-12)
    assert p["CGS"] + c_gd == pytest.approx(560e-12)


_FIELDS = {
    "breakdown": VOLTAGE,
    "threshold": VOLTAGE,
    "threshold_current": CURRENT,
    "input_capacitance": CAPACITANCE,
    "output_capacitance": CAPACITANCE,
    "reverse_capacitance": CAPACITANCE,
    "capacitance_voltage": VOLTAGE,
    "gate_drain_charge": CHARGE,
    "charge_voltage": VOLTAGE,
}
_REFUSALS = r"contradict|below the threshold|smaller than|above the threshold|more than a channel"


@settings(max_examples=300, deadline=None)
@given(data=st.data())
def test_any_figures_make_a_finite_model_or_a_refusal_in_plain_words(data: st.DataObject) -> None:
    def some(dimension: Dimension) -> str:
        exponent = data.draw(st.floats(math.log10(dimension.low) + 0.01, math.log10(dimension.high) - 0.01))
        return f"{10**exponent!r} {dimension.unit}"

    changed = data.draw(st.sets(st.sampled_from(sorted(_FIELDS)), max_size=3))
    record: dict[str, object] = {**MOSFET, **{key: some(_FIELDS[key]) for key in changed}}
    if data.draw(st.booleans()):
        record["on_resistance"] = [
            {"value": some(RESISTANCE), "gate": some(VOLTAGE)} for _ in range(data.draw(st.integers(1, 3)))
        ]
    try:
        part = NMosfet.model_validate(record)
    except ValidationError as err:
        messages = [found["msg"] for found in err.errors()]
    else:
        assert all(math.isfinite(value) for value in part.parameters(part.breakdown.typ).values())
        return
    for message in messages:
        assert re.search(_REFUSALS, message), (message, record)
