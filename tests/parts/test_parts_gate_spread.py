"""How gates of a leg spread: ratios by hand, what the source before a gate's resistor has to give, and which corners take them."""

from __future__ import annotations

from pathlib import Path

import pytest

from boardsim.board.corners import corners, nominal_only, not_varied
from boardsim.board.reader import Board, library_part, read_board
from boardsim.parts.base import NOMINAL, Corner
from boardsim.parts.gate_spread import charge_spread, paced, resistance_spread, times_in
from boardsim.quantities import RESISTANCE, Quantity, read_quantity

REPAIRED = Path(__file__).parents[1] / "boards" / "f15_shoot_through" / "repaired.toml"


def ohms(text: str) -> Quantity:
    return read_quantity(text, RESISTANCE)


def changed(folder: Path, supply: str, dead: str) -> Board:
    text = REPAIRED.read_text(encoding="utf-8")
    text = text.replace('supply = "12 V"', f'supply = "{supply}"').replace(
        'dead_time = "1 us"', f'dead_time = "{dead}"'
    )
    (folder / "board.toml").write_text(text, encoding="utf-8")
    return read_board(folder / "board.toml")


def test_charges_spread_as_the_datasheet_prints_them() -> None:
    """IRF9540N: Q_gd 36 nC typical and 51 nC at most, Q_g 74 and 97 nC (International Rectifier IRF9540N, p. 2)."""
    assert charge_spread(library_part("IRF9540N")).max == pytest.approx(51 / 36)  # more than 97 / 74
    assert not charge_spread(library_part("n-logic-60v")).toleranced


def test_resistances_in_series_spread_as_their_sum_and_multiply_with_the_charge() -> None:
    found = resistance_spread((ohms("5 ohm +/- 20 %"), ohms("15 ohm")), (ohms("5 ohm"), ohms("15 ohm")))
    assert (found.min, found.max) == pytest.approx((19 / 20, 21 / 20))
    charge = Quantity(1.0, 0.8, 1.5, "1")
    ends = Corner("c", {"charge_high": "max", "gate_resistances": "max"})
    assert times_in(ends, "h", charge, found) == pytest.approx((1.5 * 21 / 20, 0.8 * 19 / 20))
    assert times_in(ends, "l", charge, found) == pytest.approx((21 / 20, 19 / 20))
    assert times_in(NOMINAL, "h", charge, found) == (1.0, 1.0)


@pytest.mark.parametrize(("u", "g", "times"), [(0.0, 9.0, 1.5), (12.0, 3.0, 0.8), (5.0, 5.0, 1.0)])
def test_what_stands_before_a_resistor_gives_it_the_current_of_a_slower_or_quicker_gate(
    u: float, g: float, times: float
) -> None:
    """Ohm's law: (o - g) / R = (u - g) / (k R)."""
    given = eval(paced(str(u), str(g), 1.5, 0.8), {"max": max})
    assert given - g == pytest.approx((u - g) / times)


def test_the_drivers_supply_is_run_at_both_ends_and_its_least_dead_time_counts(tmp_path: Path) -> None:
    board = changed(tmp_path, "12 V +/- 10 %", "0.8 us to 1.2 us")
    assert {c.ends.get("gate_supply") for c in corners(board)} == {"min", "max"}
    assert {c.ends.get("charge_high") for c in corners(board)} == {"max", None}
    assert not [a for a in not_varied(board) if a.quantity in ("supply", "dead time", "delay") and a.part == "switch"]
    assert "gate driver's supply" not in nominal_only(board)
    assert "gate charge of the high transistor" not in nominal_only(board)


def test_what_was_given_as_one_number_is_said_to_be_nominal_only() -> None:
    assert {"gate driver's supply", "gate charge of the low transistor", "gate resistances"} <= {
        *nominal_only(read_board(REPAIRED))
    }
