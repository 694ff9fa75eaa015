"""The source array as a part: what its figures make, what it refuses, packages and totals."""

from __future__ import annotations

import math
from typing import Any

import pytest
from pydantic import ValidationError

from boardsim.board.reader import library_part
from boardsim.parts.base import NOMINAL
from boardsim.parts.clamps.built_in import BuiltInClamp
from boardsim.parts.diode import THERMAL_VOLTAGE
from boardsim.parts.library import records
from boardsim.parts.rules import DriveRule, HeatRule, PeakRule
from boardsim.parts.source_array import SourceArray
from boardsim.parts.switches.n_mosfet import NMosfetStage
from boardsim.parts.switches.source_array import SourceStage

RECORD = {k: v for k, v in records()["source-array-8"].items() if k not in ("source", "sources")}


def stage(**changes: Any) -> SourceStage:
    return SourceStage.model_validate({"part": SourceArray.model_validate(RECORD | changes)})


def test_two_followers_and_one_resistance_rise_with_the_current_as_printed() -> None:
    """2 V_T ln(350/100) of two junctions, the rest a resistance: 150 mV in all (the PNP adds a few millivolts)."""
    found = stage().part.parameters()
    junctions = 2 * THERMAL_VOLTAGE * math.log(3.5)
    # 10 %: the PNP's own saturation voltage moves a little with what the followers need.
    assert found["output"] == pytest.approx((0.15 - junctions) / 0.25, rel=0.1)


def test_the_input_takes_what_is_printed_and_drives_what_is_printed() -> None:
    """Ohm's and Kirchhoff's laws about the input: V_I = R_I I_I + V_0 + R_E (I_I + I_D)."""
    found = stage().part.parameters()
    assert found["input_gain"] == pytest.approx(0.7 / 0.52)
    assert 3e3 * 0.52e-3 + found["base"] + found["emitter"] * 1.22e-3 == pytest.approx(2.4)


def test_two_input_currents_tell_how_many_junctions_lie_in_their_way() -> None:
    """140 uA at 2.4 V and 310 uA at 3.85 V: straight back to no current that is 2.4 - 0.14 x 1.45 / 0.17 = 1.21 V."""
    low = library_part("source-array-8-low-input")
    assert isinstance(low, SourceArray)
    assert low.parameters()["base"] == pytest.approx(2.4 - 0.14 * 1.45 / 0.17)


def test_the_package_is_judged_by_the_sum_of_its_currents_and_of_its_heat() -> None:
    current, heat = stage(total_current="1 A").stamp("s", "pin", "out", NOMINAL, "rail").totals
    assert isinstance(current.rule, PeakRule)
    assert current.rule.limit.value == 1.0
    assert isinstance(heat.rule, HeatRule)
    assert heat.rule.limit.value == pytest.approx(150 + 273.15)
    assert stage().per_package() == 8


def test_a_total_that_was_not_given_is_a_limit_that_is_missing() -> None:
    current, _ = stage().stamp("s", "pin", "out", NOMINAL, "rail").totals
    assert current.rule.limit.value is None


def test_every_output_current_needs_the_input_voltage_that_it_is_printed_with() -> None:
    (rule,) = (r for r in stage().stamp("s", "pin", "out", NOMINAL, "rail").rules if isinstance(r, DriveRule))
    assert rule.needs == (pytest.approx((0.1, 2.4)), pytest.approx((0.35, 2.4)))


@pytest.mark.parametrize(
    ("changes", "text"),
    [
        ({"saturation": RECORD["saturation"][:1]}, "needs at least 2 entries"),
        ({"input_current": [{"typical": "0.7 mA", "voltage": "2.4 V"}]}, "does not fit input_resistance"),
        ({"drive_current": "40 uA"}, "check drive_current"),
        ({"second_resistance": "5 ohm"}, "second_resistance takes all of it"),
        (
            {
                "saturation": [
                    {"voltage": "1.6 V", "current": "100 mA", "input": "2.4 V"},
                    {"voltage": "1.5 V", "current": "350 mA", "input": "2.4 V"},
                ]
            },
            "saturation does not rise",
        ),
        ({"switching": {"turn_off": "2 us", "input": "0.5 V"}}, "does not turn the load"),
    ],
)
def test_figures_that_contradict_each_other_are_refused_by_name(changes: dict[str, Any], text: str) -> None:
    with pytest.raises(ValidationError) as caught:
        stage(**changes)
    assert text in str(caught.value)


def test_a_built_in_clamp_is_only_taken_beside_a_switch_that_has_one() -> None:
    assert BuiltInClamp().beside(stage()) == ""
    other = NMosfetStage.model_validate({"part": library_part("n-logic-60v"), "gate": "100 ohm"})
    assert "has no clamp in its package" in BuiltInClamp().beside(other)
