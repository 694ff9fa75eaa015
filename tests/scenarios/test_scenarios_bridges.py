"""What questions without a pattern ask of full bridges, and of a half bridge that is turned off."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import pytest

from boardsim.board.reader import Board, read_board
from boardsim.errors import InputError
from boardsim.scenarios.power_up import boots
from boardsim.scenarios.release import chosen_channels, release_channel
from boardsim.scenarios.volley import check_wanted
from boardsim.scenarios.volley_choices import alike
from boardsim.verdict.studies import Release

BOARDS = Path(__file__).parents[1] / "boards"


def both_ways() -> Board:
    return read_board(BOARDS / "f15_both_directions" / "board.toml")


def test_a_volley_counts_a_coil_once_and_fires_it_forwards() -> None:
    board = both_ways()
    assert alike(board) == ((0,),)
    check_wanted(board, 1)
    with pytest.raises(InputError, match="has 1 channel; ask for 1 to 1"):
        check_wanted(board, 2)


def test_at_power_up_one_word_drives_every_coil_although_all_ones_drive_none() -> None:
    """Output 0 is the forward leg of the only coil, output 4 the other: ones at both leave no voltage between them."""
    words = {b.name: b.contents.storage for b in boots(both_ways(), 1) if b.reset is None}
    assert words["storage all ones"] == 0xFF
    assert words["storage with every coil on"] == 0x01
    reset = [b for b in boots(both_ways(), 1) if b.reset is not None]
    assert [b.frames[0][1] for b in reset] == [0x01]


def test_release_asks_nothing_of_a_full_bridge_and_says_why() -> None:
    for number in (None, 0, 4):
        with pytest.raises(
            InputError, match=r"gate 0.*no switch that is turned off.*fire a pattern with a pulse each way"
        ):
            chosen_channels(both_ways(), number, only_one=False)


def test_release_takes_the_other_channels_of_a_board_with_full_bridges() -> None:
    board = both_ways()
    other = replace(board.channel(0), number=7, output=7, bit=7, label="gate 7", opposite=None)
    mixed = replace(board, channels=(*board.channels, other))
    assert [c.number for c in chosen_channels(mixed, None, only_one=False)] == [7]
    with pytest.raises(InputError, match="gate 0 back"):
        chosen_channels(mixed, 4, only_one=False)


@pytest.mark.engine
def test_a_half_bridge_lets_go_as_its_coil_freewheels_through_the_low_transistor(tmp_path: Path) -> None:
    """L / R ln(I / I_release): the low transistor's milliohms and the dead time's diode hardly count beside 24 ohm."""
    board = read_board(BOARDS / "f15_shoot_through" / "repaired.toml")
    result = release_channel(board, tmp_path / "kept")
    assert result.proven
    assert isinstance(result.study, Release)
    (row,) = result.study.rows
    assert row.let_go is not None
    assert row.let_go == pytest.approx(20e-3 / 24 * math.log(24 / 24.1 / 0.1), rel=0.02)
    assert row.peak is not None
    assert (
        row.peak < 24 * 1.1
    )  # the high transistor stands the rail and one body diode, and never the coil's own voltage
    # Into the low transistor: R_on times the integral of i^2, I^2 L / (2 R), at the 45 mohm that its record has for 10 V; what the
    # body diode takes in a microsecond and both gates' edges come on top, some microjoules.
    lost = 45e-3 * (24 / 24.1) ** 2 * 20e-3 / (2 * 24.1)
    assert row.switch_energy is not None
    assert 0.95 * lost < row.switch_energy < 1.3 * lost
    assert row.clamp_energy == 0.0
