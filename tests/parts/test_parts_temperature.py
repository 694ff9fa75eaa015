"""How printed figures move with the junction's temperature, and what a file may say of it."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydantic import ValidationError

from boardsim.board.reader import library_part
from boardsim.parts.base import NOMINAL, T_MODEL, Corner
from boardsim.parts.diode import Diode
from boardsim.parts.elements import Resistor
from boardsim.parts.heat import settled_temperature
from boardsim.parts.led import Led
from boardsim.parts.mosfet import NMosfet
from boardsim.parts.rules import BreakdownRule, HeatRule
from boardsim.parts.switches.n_mosfet import NMosfetStage
from boardsim.parts.temperature import grown, in_celsius, junction_at, reverse_current, thermal_voltage
from boardsim.parts.zener import Zener

HOT, COLD = Corner("hot", junction=398.15), Corner("cold", junction=248.15)
SCHOTTKY = {
    "kind": "diode",
    "title": "a Schottky",
    "forward": [{"voltage": "0.3 V", "current": "0.1 A"}, {"voltage": "0.52 V", "current": "1 A"}],
    "reverse_voltage": "40 V",
}


def voltage_at(part: Diode | Led, amperes: float, t: float) -> float:
    i_s, n, r_s = part.parameters(t)
    return n * thermal_voltage(t) * math.log(amperes / i_s) + r_s * amperes


def test_an_on_resistance_grows_by_half_from_25_to_125_degc() -> None:
    """1.49 with 0.4 %/K. Reference: an Infineon note, quoted in the edaboard thread 339471; the linear law has 1.40."""
    assert grown(1.0, 0.004, 398.15) == pytest.approx(1.49, abs=0.005)


def test_a_schottky_diodes_reverse_current_runs_through_both_columns_of_its_datasheet() -> None:
    """1 mA at 25 degC, 10 mA at 100 degC. Reference: ON Semiconductor 1N5817/D rev. 7 (Dec 2004)."""
    points = [(298.15, 1e-3), (373.15, 10e-3)]
    assert reverse_current(points, 298.15) == pytest.approx(1e-3)
    assert reverse_current(points, 373.15) == pytest.approx(10e-3)
    assert 1e-3 < reverse_current(points, 330.0) < 10e-3


def test_leakage_that_falls_with_temperature_is_refused() -> None:
    with pytest.raises(ValidationError, match="leakage must rise with temperature"):
        Diode.model_validate({**SCHOTTKY, "leakage": [
            {"current": "10 mA"}, {"current": "1 mA", "at": "100 degC"},
        ]})  # fmt: skip


def test_leakage_needs_the_voltage_that_it_is_given_at() -> None:
    fields = {k: v for k, v in SCHOTTKY.items() if k != "reverse_voltage"}
    with pytest.raises(ValidationError, match="reverse_voltage, which is missing"):
        Diode.model_validate({**fields, "leakage": [{"current": "1 mA"}]})


@given(
    st.floats(1e-14, 1e-6), st.floats(1.0, 2.0), st.floats(0.01, 10.0), st.floats(-4e-3, 0.0), st.floats(218.15, 448.15)
)
def test_a_junctions_voltage_moves_by_its_drift(i_s: float, n: float, amperes: float, drift: float, t: float) -> None:
    at, m = junction_at(i_s, n, amperes, drift, t)
    before = n * thermal_voltage(T_MODEL) * math.log(amperes / i_s)
    after = m * thermal_voltage(t) * math.log(amperes / at)
    assert after - before == pytest.approx(drift * (t - T_MODEL), abs=1e-9)


def test_a_diodes_voltage_falls_by_two_millivolts_per_kelvin_where_nothing_else_is_said() -> None:
    part = library_part("rectifier-1a")
    assert isinstance(part, Diode)
    part = part.model_copy(update={"forward_drift": None})
    assert voltage_at(part, 1.0, 398.15) - voltage_at(part, 1.0, 298.15) == pytest.approx(-0.2)
    assert Diode.model_validate(SCHOTTKY).drift.typ == pytest.approx(-1.56e-3)  # 0.3 %/K of 0.52 V


def test_a_drift_that_uses_up_the_forward_voltage_is_refused() -> None:
    with pytest.raises(ValidationError, match="leaves nothing of the junction's voltage at 175 degC"):
        Diode.model_validate({**SCHOTTKY, "forward_drift": "-4 mV/K"}).parameters()


def test_a_forward_point_at_another_temperature_is_met() -> None:
    points = [*SCHOTTKY["forward"], {"voltage": "0.44 V", "current": "1 A", "at": "100 degC"}]  # type: ignore[misc]
    part = Diode.model_validate({**SCHOTTKY, "forward": points})
    assert voltage_at(part, 1.0, 298.15) == pytest.approx(0.52)
    assert voltage_at(part, 1.0, 373.15) == pytest.approx(0.44)
    assert [p.temperature for p in part.proofs()] == pytest.approx([298.15, 298.15, 373.15])
    assert not [a for a in part.stamp("x", "diode", "a", "0", ()).assumptions if "drift" in a.quantity]


def test_points_at_another_temperature_alone_shape_nothing() -> None:
    with pytest.raises(ValidationError, match="forward needs a point at 25 degC"):
        Diode.model_validate({**SCHOTTKY, "forward": [{"voltage": "0.44 V", "current": "1 A", "at": "100 degC"}]})


def test_an_led_that_gets_cold_stays_above_ngspices_least_saturation_current() -> None:
    part = library_part("led-white-5mm")
    assert isinstance(part, Led)
    for t in (218.15, 298.15, 448.15):
        assert part.parameters(t)[0] >= 1e-28
        assert voltage_at(part, 20e-3, t) == pytest.approx(3.0 - 3e-3 * (t - 298.15), abs=0.02)


def test_a_transistors_leakage_is_a_resistance_that_falls_with_temperature() -> None:
    fields = {"current": "1 uA"}
    part = library_part("n-logic-60v").model_copy(update={"leakage": NMosfet.model_validate(
        {**MOSFET, "leakage": [fields]}).leakage})  # fmt: skip
    stage = NMosfetStage.model_validate({"kind": "n-mosfet", "part": part, "gate": "100 ohm"})

    def leak(corner: Corner) -> float:
        return next(e.ohms for e in stage.stamp("s", "pin", "d", corner).elements
                    if isinstance(e, Resistor) and e.name.endswith("leak"))  # fmt: skip

    assert leak(NOMINAL) == pytest.approx(60e6)
    assert leak(Corner("warm", junction=318.15)) == pytest.approx(15e6)  # doubles every 10 K


MOSFET = {
    "kind": "n-mosfet",
    "breakdown": "55 V",
    "breakdown_drift": "0.07 V/K",
    "threshold": "1.5 V",
    "threshold_drift": "-7 mV/K",
    "on_resistance": [{"value": "17 mohm", "gate": "10 V"}, {"value": "26 mohm", "gate": "4 V"}],
    "input_capacitance": "1700 pF",
    "output_capacitance": "400 pF",
    "reverse_capacitance": "150 pF",
    "gate_drain_charge": "18 nC",
    "charge_voltage": "44 V",
}


def rule_of(part: NMosfet, corner: Corner) -> BreakdownRule:
    stage = NMosfetStage.model_validate({"kind": "n-mosfet", "part": part, "gate": "100 ohm"})
    return next(r for r in stage.stamp("s", "pin", "d", corner).rules if isinstance(r, BreakdownRule))


def test_a_cold_transistor_breaks_down_earlier_and_is_rated_less() -> None:
    """0.070 V/K: IR IRLZ44N (8/25/97). 50 K below 25 degC that is 3.5 V."""
    part = NMosfet.model_validate(MOSFET)
    cold, hot = rule_of(part, COLD), rule_of(part, HOT)
    assert cold.breakdown == pytest.approx(51.5)
    assert cold.rating.value == pytest.approx(51.5)
    assert hot.breakdown == pytest.approx(62.0)
    assert hot.rating.value == pytest.approx(55.0)  # the rating does not grow


def test_an_on_resistance_at_another_temperature_sets_how_fast_it_grows() -> None:
    hot = {"value": "30.6 mohm", "gate": "10 V", "at": "125 degC"}
    part = NMosfet.model_validate({**MOSFET, "on_resistance": [*MOSFET["on_resistance"], hot]})  # type: ignore[misc]
    assert grown(17e-3, part.growth.typ, 398.15) == pytest.approx(30.6e-3)
    with pytest.raises(ValidationError, match="needs one at 25 degC"):
        NMosfet.model_validate({**MOSFET, "on_resistance": [*MOSFET["on_resistance"], {**hot, "gate": "5 V"}]})  # type: ignore[misc]


def test_every_model_says_the_temperature_that_it_is_for() -> None:
    part = NMosfet.model_validate(MOSFET)
    assert part.at_temperature(55.0, 398.15)["TNOM"] == in_celsius(398.15) == 125.0
    assert part.at_temperature(55.0, T_MODEL) == part.parameters(55.0)


@pytest.mark.parametrize(("r_th", "power", "growth"), [(50.0, 1.0, 0.004), (62.0, 0.5, 0.006), (20.0, 2.0, 0.0)])
def test_a_junction_settles_where_its_heat_and_its_cooling_meet(r_th: float, power: float, growth: float) -> None:
    t = settled_temperature(318.15, r_th, power, growth, 338.15)
    assert t == pytest.approx(318.15 + r_th * power * (1 + growth) ** (t - 338.15), abs=1e-3)


def test_a_junction_whose_heat_outgrows_its_cooling_runs_away() -> None:
    """At the tangent g R P (1 + g)^(T - at) is 1: the largest power with a solution is 1 / (e ln(1 + g) R) at the ambient."""
    growth, r_th, air = 0.01, 100.0, 300.0
    edge = 1 / (math.e * math.log1p(growth) * r_th)
    assert math.isfinite(settled_temperature(air, r_th, 0.99 * edge, growth, air))
    assert math.isinf(settled_temperature(air, r_th, 1.01 * edge, growth, air))


def test_a_transistors_heat_is_judged_with_the_growth_of_its_on_resistance() -> None:
    part = NMosfet.model_validate({**MOSFET, "thermal_resistance": "62 K/W", "junction_rating": "175 degC"})
    stage = NMosfetStage.model_validate({"kind": "n-mosfet", "part": part, "gate": "100 ohm"})
    (rule,) = (r for r in stage.stamp("s", "pin", "d", HOT).rules if isinstance(r, HeatRule))
    assert rule.growth == pytest.approx(0.004)


@pytest.mark.parametrize(
    ("changes", "text"),
    [
        ({"threshold_drift": "-12 mV/K"}, "leaves no threshold at 175 degC"),
        ({"breakdown_drift": "-3 V/K"}, "of -3 V/K is 5.5% of 55 V per kelvin"),
        ({"breakdown_drift": "0.2 V/K"}, "of 200 mV/K is 0.4% of 55 V per kelvin"),
        ({"on_resistance": [*MOSFET["on_resistance"], {"value": "15 mohm", "gate": "10 V", "at": "125 degC"}]}, "has to rise"),  # type: ignore[misc]
        (
            {"on_resistance": [*MOSFET["on_resistance"], {"value": "30 mohm", "gate": "10 V", "at": "125 degC"}],  # type: ignore[misc]
             "on_resistance_growth": "0.4 %/K"},
            "not both",
        ),
    ],
)  # fmt: skip
def test_what_no_transistor_does_is_refused(changes: dict[str, object], text: str) -> None:
    with pytest.raises(ValidationError, match=text):
        NMosfet.model_validate({**MOSFET, **changes})


@pytest.mark.parametrize(
    ("points", "drift", "text"),
    [
        ([{"voltage": "0.54 V", "current": "1 A", "at": "26 degC"}], None, "too near to 25 degC"),
        ([{"voltage": "0.44 V", "current": "1 A", "at": "100 degC"}], "-1 mV/K", "not both"),
        ([{"voltage": "1.9 V", "current": "1 A", "at": "100 degC"}], None, "more than a junction does"),
    ],
)
def test_forward_points_that_cannot_show_a_drift_are_refused(
    points: list[dict[str, str]], drift: str | None, text: str
) -> None:
    more = {} if drift is None else {"forward_drift": drift}
    with pytest.raises(ValidationError, match=text):
        Diode.model_validate({**SCHOTTKY, "forward": [*SCHOTTKY["forward"], *points], **more})  # type: ignore[misc]


def test_a_zener_that_moves_more_than_any_does_is_refused() -> None:
    fields = {"kind": "zener", "voltage": "24 V", "test_current": "50 mA", "impedance": "3.5 ohm"}
    with pytest.raises(ValidationError, match=r"datasheets print about 0\.1 %/K"):
        Zener.model_validate({**fields, "drift": "-500 mV/K"})


def test_the_hot_corner_takes_the_largest_on_resistance_and_the_least_threshold() -> None:
    """AO3400A: 22 (26.5) mohm at 10 V; the largest ratio is that at 2.5 V, 48 over 34 (rev. 1, May 2008)."""
    part = library_part("AO3400A")
    assert isinstance(part, NMosfet)
    assert part.spread.max == pytest.approx(48 / 34)
    worst = part.at_temperature(30.0, 298.15, part.spread.max, -0.3)
    usual = part.at_temperature(30.0, 298.15)
    assert worst["RD"] == pytest.approx(usual["RD"] * 48 / 34)
    assert worst["VTO"] == pytest.approx(usual["VTO"] - 0.3)


def test_a_part_tells_what_it_assumes_for_want_of_a_number() -> None:
    part = NMosfet.model_validate({k: v for k, v in MOSFET.items() if not k.endswith("_drift")})
    found = part.implied()
    assert found["threshold drift"].typ == pytest.approx(-4.5e-3)
    assert found["breakdown drift"].typ == pytest.approx(55e-3)
    assert all(q.assumed() for q in found.values())
