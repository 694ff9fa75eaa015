"""Mistakes in what a board file says of a logic rail that hangs on the coil rail."""

from __future__ import annotations

from pathlib import Path

import pytest
from board_files import changed, problems

from boardsim.board.reader import read_board
from boardsim.scenarios.power_up import logic_comes

STIFF = 'logic = { voltage = "5 V +/- 5 %" }'
LINEAR = 'logic = { kind = "linear-regulator", voltage = "5 V", dropout = "1.5 V", load = "50 mA", capacitance = "100 uF", current_ceiling = "0.5 A" }'
BUCK = 'logic = { kind = "buck-regulator", voltage = "5 V", load = "50 mA", capacitance = "47 uF" }'


@pytest.mark.parametrize("logic", [STIFF, STIFF.replace("{ ", '{ kind = "logic", '), LINEAR, BUCK])
def test_every_kind_of_logic_rail_is_taken(tmp_path: Path, logic: str) -> None:
    assert problems(tmp_path, changed(STIFF, logic)) == ()


@pytest.mark.parametrize(
    ("logic", "said"),
    [
        (LINEAR.replace('dropout = "1.5 V", ', ""), 'logic: "dropout" is missing'),
        (LINEAR.replace('load = "50 mA", ', ""), 'logic: "load" is missing'),
        (LINEAR.replace("linear-regulator", "linear"), "logic"),
        (LINEAR.replace('dropout = "1.5 V"', 'dropout = "20 V"'), "needs 25 V for 5.00 V, and the supply gives 22.8 V at least"),
        (BUCK.replace('voltage = "5 V"', 'voltage = "24 V"'), "needs 27 V for 24.0 V, and the supply gives 22.8 V at least"),
        (LINEAR.replace("0.5 A", "40 mA"), "the load of 50.0 mA is not below the regulator's current ceiling of 40.0 mA"),
        (STIFF.replace("{ ", '{ dropout = "1 V", '), "dropout"),
    ],
)  # fmt: skip
def test_a_logic_rail_that_cannot_be_is_refused_with_its_line(tmp_path: Path, logic: str, said: str) -> None:
    (one,) = problems(tmp_path, changed(STIFF, logic))
    assert said in str(one)
    assert one.line == 8


def test_a_reset_at_the_rails_own_voltage_is_refused(tmp_path: Path) -> None:
    text = changed("[limits]", '[limits]\nlogic_brown_out = { voltage = "4.8 V", lasting = "1 ms" }')
    (one,) = problems(tmp_path, text)
    assert "logic_brown_out.voltage of 4.80 V is not below the logic rail's lowest voltage of 4.75 V" in str(one)


@pytest.mark.parametrize("key", ["logic_at", "logic_rise"])
def test_a_rail_that_comes_with_the_coil_rail_has_no_rise_of_its_own(tmp_path: Path, key: str) -> None:
    text = changed(STIFF, LINEAR) + f'\n[power_up]\n{key} = "2 ms"\n'
    (one,) = problems(tmp_path, text)
    assert f"rises with it; leave {key} out" in str(one)


def test_a_regulated_rail_is_full_when_its_capacitor_has_been_charged_at_the_ceiling(tmp_path: Path) -> None:
    """C V / (I - I_load) = 100 uF x 5 V / 0.45 A = 1.11 ms after the coil rail's 10 ms."""
    (tmp_path / "board.toml").write_text(changed(STIFF, LINEAR), encoding="utf-8")
    at, rise = logic_comes(read_board(tmp_path / "board.toml"))
    assert at == 0.0
    assert rise == pytest.approx(10e-3 + 100e-6 * 5 / 0.45)
