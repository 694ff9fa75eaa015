"""Power-up of a matrix: what wakes up on, and what the boots hold."""

from __future__ import annotations

from pathlib import Path

import pytest
from matrix_boards import board

from boardsim.circuit.boot import boot_deck
from boardsim.parts.base import NOMINAL
from boardsim.scenarios.power_up import boots, power_up


def test_a_coil_wakes_up_on_where_its_row_and_its_column_do(tmp_path: Path) -> None:
    read = board(tmp_path)
    found = {boot.name: boot for boot in boots(read, 1)}
    off = 0xFFFF & ~0b11_0000_0011
    assert found["storage with one coil of each build on"].contents.storage == off | 1 << 0 | 1 << 8
    assert found["storage all ones"].contents.storage == 0xFFFF
    image = found["every channel was on"].frames[0][1]
    assert image == 0b11_0000_0011


@pytest.mark.parametrize("detail", ["clocked", "edges"])
def test_a_boots_deck_has_every_line_once_and_every_coil(tmp_path: Path, detail: str) -> None:
    read = board(tmp_path, keys='leads = { gauge = "24 AWG", length = "2 m" }')
    deck = boot_deck(read, next(iter(boots(read, 1))), NOMINAL, detail)  # type: ignore[arg-type]
    assert {place for place, quantity in deck.signals if quantity == "i_coil"} == {0, 1, 2, 3}
    assert {place for place, quantity in deck.signals if quantity == "v_ds"} == {line.number for line in read.lines}
    assert {place for place, quantity in deck.signals if quantity == "i_leads"} == {0, 1, 2, 3}


@pytest.mark.engine
@pytest.mark.slow
def test_unknown_contents_fire_coils_of_a_matrix_before_the_first_frame(tmp_path: Path) -> None:
    read = board(tmp_path)
    result = power_up(read, tmp_path / "kept")
    assert result.verdict == "fail"
    rows = {row.name: row for row in result.study.rows}
    assert rows["storage all ones"].count == 4
    assert rows["storage with one coil of each build on"].count == 1
    # 12 V less 1.5 V of the source and about 0.8 V of the series diode, 60 ohm; 3 %: what the two take at 160 mA.
    assert rows["storage with one coil of each build on"].current == pytest.approx((12 - 1.5 - 0.8) / 60, rel=0.03)
