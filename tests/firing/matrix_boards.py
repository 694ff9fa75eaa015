"""Small boards with coils in rows and columns: a needle selector."""

from __future__ import annotations

from pathlib import Path

from boardsim.board.reader import Board, read_board

DIODE = 'diode = "fast-2a"'
TEXT = """\
name = "needle selector"
supply = {{ voltage = "12 V" }}
cable = {{ area = "1 mm2", length = "1 m" }}
bulk = {{ capacitance = "1000 uF", esr = "50 mohm" }}
logic = {{ voltage = "5 V" }}

[chain]
register = "74HC595"
count = 2
clock = "1 MHz"
latch_time = "1 us"

[coils.needle]
resistance = "60 ohm"
inductance = "20 mH"
pull_in = "90 mA"
release = "20 mA"

[channels."{channels}"]
label = "needle {{n}}"
coil = "needle"
switch = {{ part = "{sink}"{gate} }}
clamp = {{ kind = "diode", diode = "fast-2a" }}
{keys}

[channels."{channels}".matrix]
rows = "{rows}"
columns = "{columns}"
row_switch = {{ part = "source-array-8" }}
row_clamp = {row_clamp}
{diode}
{matrix}

{more}
[limits]
most_on = 2
"""


def text(
    *,
    channels: str = "0-3",
    rows: str = "0-1",
    columns: str = "8-9",
    diode: str = DIODE,
    sink: str = "n-logic-60v",
    gate: str = ', gate = "100 ohm", pulldown = "10 kohm"',
    row_clamp: str = '{ kind = "built-in" }',
    keys: str = "",
    matrix: str = "",
    more: str = "",
) -> str:
    """The file of a matrix of rows from a source array and columns to MOSFETs; two of each unless told otherwise."""
    return TEXT.format(**locals())


def board(folder: Path, content: str = "", **changes: str) -> Board:
    """The board read back from its file."""
    path = folder / "board.toml"
    path.write_text(content or text(**changes), encoding="utf-8")
    return read_board(path)
