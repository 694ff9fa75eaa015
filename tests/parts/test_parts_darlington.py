"""The sink array as a part: packages, totals, needs, and what it refuses."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from pydantic import ValidationError
from test_parts_npn import BOARDS, fire

from boardsim.board.reader import library_part, read_board
from boardsim.parts.base import NOMINAL
from boardsim.parts.darlington import DarlingtonArray
from boardsim.parts.library import records
from boardsim.parts.rules import DriveRule, HeatRule, PeakRule
from boardsim.parts.switches.darlington import DarlingtonStage

RECORD = {k: v for k, v in records()["sink-array-8"].items() if k not in ("source", "sources")}


def stage(**changes: Any) -> DarlingtonStage:
    return DarlingtonStage.model_validate({"part": DarlingtonArray.model_validate(RECORD | changes)})


def test_packages_hold_as_many_channels_as_they_have_outputs() -> None:
    for name, count in (("sink-array-7", 7), ("sink-array-8", 8)):
        assert DarlingtonStage.model_validate({"part": library_part(name)}).per_package() == count


def test_the_package_is_judged_by_the_sum_of_its_currents_and_of_its_heat() -> None:
    current, heat = stage().stamp("s", "pin", "drain", NOMINAL).totals
    assert isinstance(current.rule, PeakRule)
    assert current.rule.limit.value == 2.5
    assert isinstance(heat.rule, HeatRule)
    assert heat.rule.limit.value == pytest.approx(150 + 273.15)


def test_without_a_printed_on_voltage_every_current_is_beyond_what_is_known() -> None:
    (rule,) = (r for r in stage(on_voltage=[]).stamp("s", "pin", "d", NOMINAL).rules if isinstance(r, DriveRule))
    assert rule.needs[-1][0] == 0.0


@pytest.mark.parametrize(
    ("changes", "text"),
    [
        ({"saturation": RECORD["saturation"][:1]}, "needs at least 2 entries"),
        ({"input_current": [{"typical": "1.4 mA", "voltage": "3.85 V"}]}, "input_current"),
        ({"first_resistance": "1 kohm"}, "first_resistance takes all"),
        ({"switching": {"turn_on": "200 ns", "turn_off": "20 ns"}}, "use the typical figures of one table"),
        ({"switching": {"turn_on": "2 ns", "turn_off": "130 ns"}}, "the junctions of a sink take longer to charge"),
        ({"switching": {"input": "1.5 V"}}, "an input of 1.50 V does not turn the load"),
    ],
)
def test_figures_that_contradict_each_other_are_refused_by_name(changes: dict[str, Any], text: str) -> None:
    with pytest.raises(ValidationError) as caught:
        stage(**changes)
    assert text in str(caught.value)


def test_an_array_for_a_higher_input_voltage_needs_no_switching_figures() -> None:
    """10.5 kohm at the input, as of sinks for 6 V to 15 V: 3 V would not turn the load on."""
    current = [{"typical": "0.35 mA", "voltage": "5 V"}]
    found = stage(input_resistance="10.5 kohm", input_current=current, switching={}).part.parameters()
    assert found["forward"] > 0
    assert found["reverse"] > 0


def test_a_turn_off_that_leaves_no_room_for_storage_makes_the_model_no_slower_than_it_must_be() -> None:
    """0.25 us for both, as some makers print: the transistors alone take longer to turn off, and the proof shows it."""
    found = stage(switching={"turn_on": "250 ns", "turn_off": "250 ns"}).part.parameters()
    assert found["reverse"] == 0.0


def test_a_second_range_of_channels_begins_another_package() -> None:
    board = read_board(BOARDS / "f14_package_total" / "repaired.toml")
    assert [c.package[-1] for c in board.channels] == ["1"] * 4 + ["2"] * 4


@pytest.mark.engine
def test_a_package_total_fails_alone_and_passes_on_two_packages(tmp_path: Path) -> None:
    folder = BOARDS / "f14_package_total"
    status, found = fire(tmp_path / "bad", folder / "bad.toml", folder / "pattern.toml")
    assert status == 1
    (broken,) = (f for f in found if f["verdict"] != "pass")
    assert (broken["check"], broken["quantity"]) == ("overcurrent", "ground current of the package")
    status, found = fire(tmp_path / "repaired", folder / "repaired.toml", folder / "pattern.toml")
    assert status == 0
    assert {f["verdict"] for f in found} <= {"pass", "tight"}
