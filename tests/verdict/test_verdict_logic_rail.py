"""What a dip of the logic rail is held against: levels of lines at rest, brown-out, the registers' supply, their capacitors."""

from __future__ import annotations

from pathlib import Path

import pytest

from boardsim.board.held_lines import HeldLine, held_lines
from boardsim.board.reader import Board, read_board
from boardsim.circuit.assemble import assemble, windows
from boardsim.firing.pattern import Pattern, read_pattern
from boardsim.firing.schedule import fire
from boardsim.parts.base import NOMINAL
from boardsim.scenarios.chain import check_chain
from boardsim.scenarios.fire import fire_pattern
from boardsim.verdict.chain import judge_chain
from boardsim.verdict.findings import Finding, Result
from boardsim.verdict.logic_rail import _sagged
from boardsim.verdict.logic_supply import judge_supply

BOARDS = Path(__file__).parents[1] / "boards"
RESET = BOARDS / "f11_false_reset"
LOGIC = next(line for line in (RESET / "bad.toml").read_text().splitlines() if line.startswith("logic = "))


def changed(folder: Path, *pairs: tuple[str, str], of: Path = RESET / "bad.toml") -> Board:
    text = of.read_text(encoding="utf-8")
    for old, new in pairs:
        assert old in text, old
        text = text.replace(old, new)
    (folder / "board.toml").write_text(text, encoding="utf-8")
    return read_board(folder / "board.toml")


def pattern(board: Board) -> Pattern:
    return read_pattern(RESET / "pattern.toml", board)


def supplied(board: Board) -> dict[str, Finding]:
    return {f.quantity: f for f in judge_supply(board, fire(board, pattern(board)))}


def lines(board: Board) -> dict[str, HeldLine]:
    return {line.name: line for line in held_lines(board)}


def test_a_weak_high_level_on_the_registers_own_rail_is_lost_where_v_ih_meets_it(tmp_path: Path) -> None:
    """LG1: V_IH is 1.5 V at 2 V and 3.15 V at 4.5 V, 0.18 V + 0.66 v between: v - 1.2 V meets it at 1.38 / 0.34 V."""
    board = changed(tmp_path, ('high_drop = "0.4 V"', 'high_drop = "1.2 V"'), ("spi_mode = 0", "spi_mode = 3"))
    clock = lines(board)["clock"]
    assert clock.rests == "high"
    assert clock.lost_below == pytest.approx(1.38 / 0.34, rel=1e-9)
    # LG4: shortest clock pulse 95 ns at 2 V and 19 ns at 4.5 V.
    assert clock.lasting == pytest.approx(95e-9 - (1.38 / 0.34 - 2) / 2.5 * 76e-9, rel=1e-9)


def test_a_low_level_stays_where_it_is_and_v_il_falls_below_it(tmp_path: Path) -> None:
    """LG1: V_IL is 0.5 V at 2 V and 1.35 V at 4.5 V: 0.6 V is low down to 2 V + 0.1 / 0.34 V, whatever the controller's supply."""
    for own in ("", 'voltage = "3.3 V"\n'):
        board = changed(tmp_path, ('low_output = "0.4 V"', f'{own}low_output = "0.6 V"'))
        assert lines(board)["latch"].lost_below == pytest.approx(2 + 0.1 / 0.34, rel=1e-9)


def test_a_high_level_from_a_supply_of_its_own_is_not_lost_when_the_registers_rail_falls(tmp_path: Path) -> None:
    weak = ('high_drop = "0.4 V"', 'high_drop = "1.2 V"\nvoltage = "5 V"')
    clock = lines(changed(tmp_path, weak, ("spi_mode = 0", "spi_mode = 2")))["clock"]
    assert clock.lost_below is None
    assert clock.floor == 2.0  # V: below it no level is printed


def test_a_controller_on_its_own_supply_drives_a_current_into_inputs_of_a_rail_that_falls(tmp_path: Path) -> None:
    """HC inputs stand 0.5 V above their supply: 5 V into registers that have fallen to 4.2 V are 0.8 V."""
    board = changed(tmp_path, ('high_drop = "0.4 V"', 'high_drop = "0.4 V"\nvoltage = "5 V"'))
    high = [f for f in judge_chain(_sagged(board, 4.2)) if f.check == "overvoltage"]
    assert [(f.verdict, f.consequence) for f in high] == [("fail", "destroy")]
    assert high[0].value == pytest.approx(0.8)
    assert all(f.verdict != "fail" for f in judge_chain(board))


def test_below_what_is_printed_nothing_is_known_and_nothing_passes(tmp_path: Path) -> None:
    """HCT levels are printed from 4.5 V on."""
    board = changed(tmp_path, ('register = "74HC595"', 'register = "74HCT595"'))
    latch = lines(board)["latch"]
    assert latch.lost_below is None
    assert latch.floor == 4.5
    assert "given from 4.50 V on only" in latch.unknown


@pytest.mark.parametrize("key", ["high_drop", "low_output"])
def test_a_level_that_was_not_given_is_named(tmp_path: Path, key: str) -> None:
    board = changed(tmp_path, (f'{key} = "0.4 V"\n', ""), ("spi_mode = 0", "spi_mode = 3"))
    name = "clock" if key == "high_drop" else "latch"
    assert lines(board)[name].unknown == f"[controller] {key} was not given"


def test_clear_counts_as_held_only_where_a_pin_holds_it(tmp_path: Path) -> None:
    added = ('decoupling = "100 nF"\n', 'decoupling = "100 nF"\nclear = { pull_up = "10 kohm", pin = true }\n')
    assert set(lines(changed(tmp_path))) == {"clock", "latch"}
    assert lines(changed(tmp_path, added))["clear"].rests == "high"


def test_the_regulators_current_is_the_load_and_what_outputs_give_at_once(tmp_path: Path) -> None:
    """Six pull-downs of 10 kohm behind 100 ohm and 28 ohm at 5.1 V take 0.5 mA each; 60 mA are given."""
    found = supplied(
        changed(tmp_path, ('current_ceiling = "1 A", capacitance', 'current_ceiling = "62 mA", capacitance'))
    )
    one = found["current of the logic rail"]
    assert one.value == pytest.approx(60e-3 + 6 * 5.1 / 10128, rel=1e-6)
    assert one.verdict == "fail"
    without = supplied(changed(tmp_path, ('current_ceiling = "1 A", capacitance', "capacitance")))
    assert without["current of the logic rail"].verdict == "limit-missing"


def test_a_capacitor_at_the_register_is_asked_for_and_judged_by_what_a_frame_takes(tmp_path: Path) -> None:
    """Six gates of one frame; C_PD of 115 pF at 5.1 V, and 5.1 V / 130 ohm each through 20 nH into 100 nF."""
    one = supplied(changed(tmp_path))["dip at a register's supply pin"]
    first = 6 * 5.1 / (28 + 100 + 2)
    assert one.value == pytest.approx(115e-12 * 5.1 / 100e-9 + first * (20e-9 / 100e-9) ** 0.5, rel=1e-3)
    assert one.verdict == "pass"
    assert "inductance of the logic supply" in one.assumed
    missing = supplied(changed(tmp_path, ('decoupling = "100 nF"\n', "")))["dip at a register's supply pin"]
    assert missing.verdict == "limit-missing"
    small = ('decoupling = "100 nF"', 'decoupling = "1 nF"\nsupply_inductance = "200 nH"')
    assert supplied(changed(tmp_path, small))["dip at a register's supply pin"].verdict == "fail"


def test_a_rail_of_its_own_has_no_new_finding_and_no_node(tmp_path: Path) -> None:
    stiff = (LOGIC, 'logic = { voltage = "5 V +/- 2 %" }')
    brown_out = ('logic_brown_out = { voltage = "4.65 V", lasting = "20 us" }\n', "")
    board = changed(tmp_path, stiff, brown_out, ('decoupling = "100 nF"\n', ""))
    firing = fire(board, pattern(board))
    assert list(judge_supply(board, firing)) == []
    deck = assemble(board, firing, NOMINAL, windows(board, firing)[0])
    assert "logic" not in deck.netlist
    with_level = changed(tmp_path, stiff)
    assert supplied(with_level)["logic rail voltage"].margin == pytest.approx((4.9 - 4.65) / 4.65)
    assert check_chain(with_level).verdict != "fail"


def fired(board: Board, keep: Path, clocked: bool = False) -> Result:
    result = fire_pattern(board, pattern(board), keep / "kept", detail="clocked" if clocked else "edges")
    assert all(audit.proven for audit in result.audit), result.notes
    return result


def found(result: Result, check: str) -> list[Finding]:
    return [f for f in result.findings if f.check == check]


@pytest.mark.engine
def test_a_dip_without_a_brown_out_level_is_a_missing_limit(tmp_path: Path) -> None:
    result = fired(changed(tmp_path, ('logic_brown_out = { voltage = "4.65 V", lasting = "20 us" }\n', "")), tmp_path)
    (one,) = found(result, "logic-sag")
    assert one.verdict == "limit-missing"
    assert "([limits] logic_brown_out)" in one.sentence


@pytest.mark.engine
def test_a_dip_shorter_than_the_controller_takes_to_notice_counts_for_nothing(tmp_path: Path) -> None:
    result = fired(changed(tmp_path, ('lasting = "20 us"', 'lasting = "40 ms"')), tmp_path)
    (one,) = found(result, "logic-sag")
    assert one.verdict == "pass"
    assert one.lasting == pytest.approx(20e-3, rel=0.1)


@pytest.mark.engine
def test_the_gate_drive_of_the_pulse_in_the_dip_counts_and_not_the_best_one(tmp_path: Path) -> None:
    """A switch that is specified at 4.5 V behind a rail that is at 4.35 V when the pulse ends."""
    result = fired(changed(tmp_path, ("n-logic-30v", "n-logic-60v")), tmp_path)
    weak = found(result, "under-drive")
    assert {f.verdict for f in weak} == {"fail"}
    assert max(f.value for f in weak) < 4.4


@pytest.mark.engine
def test_a_register_below_its_lowest_supply_is_a_finding_of_its_own(tmp_path: Path) -> None:
    result = fired(changed(tmp_path, ('register = "74HC595"', 'register = "74HCT595"')), tmp_path)
    low = [f for f in found(result, "logic-rail") if f.quantity == "lowest logic rail"]
    assert [f.verdict for f in low] == ["fail"]
    assert {f.verdict for f in found(result, "uncommanded-edge")} == {"limit-missing"}


@pytest.mark.engine
def test_registers_flip_flop_by_flip_flop_see_the_same_dip(tmp_path: Path) -> None:
    board = changed(tmp_path)
    one, other = (found(fired(board, tmp_path, clocked), "logic-sag")[0] for clocked in (False, True))
    assert one.value == pytest.approx(other.value, rel=2e-3)
    assert one.verdict == other.verdict == "fail"


@pytest.mark.engine
def test_a_buck_takes_the_same_power_from_a_lower_rail_and_says_where_it_stops(tmp_path: Path) -> None:
    buck = LOGIC.replace("linear-regulator", "buck-regulator").replace('dropout = "2 V"', 'lowest_input = "6.5 V"')
    result = fired(changed(tmp_path, (LOGIC, buck)), tmp_path)
    stops = [f for f in found(result, "regulator") if "stops" in f.quantity]
    assert [f.verdict for f in stops] == ["fail"]
    without = fired(changed(tmp_path, (LOGIC, buck.replace(', lowest_input = "6.5 V"', ""))), tmp_path)
    stops = [f for f in found(without, "regulator") if "stops" in f.quantity]
    assert [f.verdict for f in stops] == ["limit-missing"]
