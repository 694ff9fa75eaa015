"""Coils in rows and columns: how they are laid out, and which mistakes are named."""

from __future__ import annotations

from pathlib import Path

import pytest
from matrix_boards import board, text

from boardsim.board.matrix import LINES_FROM
from boardsim.errors import InputError

PLAIN = """
[channels."40"]
coil = "needle"
outputs = "15"
switch = { part = "n-logic-60v", gate = "100 ohm" }
clamp = { kind = "diode", diode = "fast-2a" }
"""


def test_channels_are_numbered_row_by_row(tmp_path: Path) -> None:
    read = board(tmp_path, channels="0-5", rows="1,0", columns="8-10")
    assert [c.outputs for c in read.channels] == [(1, 8), (1, 9), (1, 10), (0, 8), (0, 9), (0, 10)]
    assert [c.bits for c in read.channels] == [c.outputs for c in read.channels]
    assert [c.label for c in read.channels] == [f"needle {n}" for n in range(6)]


def test_lines_know_who_lies_along_them(tmp_path: Path) -> None:
    lines = board(tmp_path, channels="0-5", rows="0-1", columns="8-10").lines
    assert {line.label: line.channels for line in lines} == {
        "row 0": (0, 1, 2),
        "row 1": (3, 4, 5),
        "column 0": (0, 3),
        "column 1": (1, 4),
        "column 2": (2, 5),
    }
    assert [line.number for line in lines] == [LINES_FROM + i for i in range(5)]
    assert {line.package for line in lines} == {"source-array-8 1", ""}


def test_the_firmwares_bits_may_be_others_than_the_outputs(tmp_path: Path) -> None:
    read = board(tmp_path, matrix='row_bits = "4-5"\ncolumn_bits = "7,6"')
    assert [c.bits for c in read.channels] == [(4, 7), (4, 6), (5, 7), (5, 6)]
    assert [c.outputs for c in read.channels] == [(0, 8), (0, 9), (1, 8), (1, 9)]


def test_other_channels_may_share_the_board(tmp_path: Path) -> None:
    read = board(tmp_path, more=PLAIN)
    assert [(d.label, d.output) for d in read.drivers] == [
        ("channel 40", 15),
        ("row 0", 0),
        ("row 1", 1),
        ("column 0", 8),
        ("column 1", 9),
    ]
    assert read.channel(40).outputs == (15,)


def test_a_second_matrix_goes_on_counting_lines_and_packages(tmp_path: Path) -> None:
    second = text(channels="8-9", rows="2", columns="10-11").partition('[channels."8-9"]')[2].partition("[limits]")[0]
    read = board(tmp_path, more=f'[channels."8-9"]{second}')
    assert [line.label for line in read.lines] == [
        *("row 0", "row 1", "column 0", "column 1"),
        *("row 2", "column 2", "column 3"),
    ]
    assert read.lines[4].package == "source-array-8 2"


def test_crossings_of_lines_that_are_built_alike_are_alike(tmp_path: Path) -> None:
    assert len({c.build for c in board(tmp_path).channels}) == 1


@pytest.mark.parametrize(
    ("changes", "said"),
    [
        ({"channels": "0-4"}, "names 5 channels, where 2 rows and 2 columns cross 4 times"),
        ({"columns": "1-2"}, 'channels."0-3".matrix.columns: output 1 is already taken by channels."0-3"'),
        ({"columns": "15-16"}, "columns: output 16 outside the chain, which has outputs 0-15"),
        ({"rows": "0-"}, "matrix.rows: '0-' is not a range of numbers"),
        ({"more": PLAIN.replace("15", "8")}, 'channels."40".outputs: output 8 is already taken by channels."0-3"'),
        ({"keys": 'outputs = "0-3"'}, "outputs of its rows and columns; leave outputs out"),
        ({"keys": 'bits = "0-3"'}, "bits of its rows and columns; leave bits out"),
        ({"matrix": 'row_bits = "4"'}, "matrix.row_bits: names 1 where there are 2 rows"),
        ({"matrix": 'row_bits = "8-9"'}, "matrix.columns: bit 8 is already taken"),
        (
            {"sink": "source-array-8", "gate": ""},
            "source-array ties a line to the rail; a column needs a switch that ties it to ground",
        ),
        ({"row_clamp": '{ kind = "diode", diode = "fast-2a", at = "coil" }'}, 'is at = "coil"'),
        ({"diode": 'diode = "20v-5w"'}, '"20v-5w" is a zener; a diode is needed here'),
        ({"matrix": 'spacing = "1"'}, "spacing"),
    ],
)
def test_mistakes_are_named_with_their_place(tmp_path: Path, changes: dict[str, str], said: str) -> None:
    with pytest.raises(InputError) as caught:
        board(tmp_path, **changes)
    assert said in str(caught.value)
    assert all(problem.line for problem in caught.value.problems)


def test_a_low_side_switch_is_no_row_switch(tmp_path: Path) -> None:
    content = text().replace('{ part = "source-array-8" }', '{ part = "n-logic-60v", gate = "100 ohm" }')
    with pytest.raises(
        InputError, match=r"n-mosfet ties a line to ground; a row needs a switch that ties it to the rail"
    ):
        board(tmp_path, content.replace('"built-in"', '"none"'))


def test_a_clamp_inside_a_package_needs_a_package_that_has_one(tmp_path: Path) -> None:
    content = text().replace('clamp = { kind = "diode", diode = "fast-2a" }', 'clamp = { kind = "built-in" }')
    with pytest.raises(InputError, match="n-mosfet has no clamp in its package"):
        board(tmp_path, content)


def test_a_channel_must_not_be_called_like_a_line(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r'labelled "row 0", as a line of the matrix is called'):
        board(tmp_path, text().replace("needle {n}", "row {n}"))
