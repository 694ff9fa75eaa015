"""A boosted bank in a board file: what cannot be is refused with its line."""

from __future__ import annotations

from pathlib import Path

import pytest
from board_files import TEXT, with_table

from boardsim.board.corners import corners
from boardsim.board.reader import Board, read_board
from boardsim.errors import InputError

BOOST = """
[boost]
channels = "0-7"
voltage = "60 V +/- 5 %"
capacitance = "470 uF +/- 20 %"
esr = "50 mohm"
charging = "220 ohm"
least = "50 V"
diode = "fast-2a"
"""
HIGH = 'switch = { part = "source-array-8" }\nclamp = { kind = "built-in" }'
ARRAY = 'switch = { part = "sink-array-8" }\nclamp = { kind = "array", part = "sink-array-8" }'


def read(folder: Path, boost: str = BOOST, text: str = TEXT) -> Board:
    path = folder / "board.toml"
    path.write_text(with_table(boost) if text is TEXT else text + boost, encoding="utf-8")
    return read_board(path)


def switched(lines: str) -> str:
    """The fruit sorter with other switches and clamps."""
    kept = [line for line in TEXT.splitlines() if not line.startswith(("switch =", "clamp ="))]
    at = next(i for i, line in enumerate(kept) if line.startswith("coil = "))
    return "\n".join([*kept[: at + 1], lines, *kept[at + 1 :]]) + "\n"


def test_a_bank_has_its_channels_and_lists_what_it_assumes(tmp_path: Path) -> None:
    found = read(tmp_path)
    assert found.boosted == tuple(range(8))
    assert found.boost is not None
    assert read(tmp_path, "").boosted == ()


def test_every_corner_has_the_least_reservoir(tmp_path: Path) -> None:
    board = read(tmp_path)
    assert board.boost is not None
    assert [c.take(board.boost.capacitance, "reservoir") for c in corners(board)] == pytest.approx([0.8 * 470e-6] * 4)
    assert {c.take(board.boost.voltage, "supply") for c in corners(board)} == {57.0, 63.0}


@pytest.mark.parametrize(
    ("old", "new", "text", "said"),
    [
        ('"0-7"', '"20-27"', TEXT, "24-27 are not on this board"),
        ('"0-7"', '"some"', TEXT, "boost.channels"),
        ('"60 V +/- 5 %"', '"25 V"', TEXT, r"not above the coil supply's highest voltage of 25\.2 V"),
        ('least = "50 V"', 'least = "58 V"', TEXT, "not below the 57 V"),
        ('diode = "fast-2a"', 'diode = "n-logic-60v"', TEXT, "boost.diode"),
        ("", "", switched(HIGH), "the switches of 0-7 lie between coil and rail"),
        ('"0-7"', '"0-3"', switched(ARRAY), "4-7 share a package with channels of the bank"),
    ],
)
def test_a_bank_that_cannot_be_is_refused_with_its_line(
    tmp_path: Path, old: str, new: str, text: str, said: str
) -> None:
    with pytest.raises(InputError, match=said) as err:
        read(tmp_path, BOOST.replace(old, new, 1) if old else BOOST, text)
    assert all(p.line is not None for p in err.value.problems)
