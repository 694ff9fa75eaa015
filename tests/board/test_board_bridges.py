"""Full bridges in board files: twin channels, and every mistake with its line."""

from __future__ import annotations

from pathlib import Path

import pytest
from board_files import said

from boardsim.board.reader import Board, read_board

TEXT = """\
name = "tray gates"
supply = { voltage = "24 V", resistance = "50 mohm" }
cable = { gauge = "18 AWG", length = "1 m" }
bulk = { capacitance = "2200 uF", esr = "40 mohm" }
logic = { voltage = "5 V" }
[chain]
register = "74HC595"
count = 2
clock = "4 MHz"
[coils.tray]
resistance = "24 ohm"
inductance = "20 mH"
[channels."0-3"]
label = "gate {n}"
reverse = "8-11"
coil = "tray"
switch = { kind = "full-bridge", high = "IRF9540N", low = "n-logic-60v", gate = "10 ohm", driver = { supply = "12 V", dead_time = "1 us", pulldown = "100 kohm" } }
clamp = { kind = "none" }
"""


def changed(*pairs: tuple[str, str]) -> str:
    text = TEXT
    for old, new in pairs:
        assert old in text, old
        text = text.replace(old, new, 1)
    return text


def board(folder: Path, text: str = TEXT) -> Board:
    (folder / "board.toml").write_text(text, encoding="utf-8")
    return read_board(folder / "board.toml")


def test_every_coil_has_a_channel_for_each_direction(tmp_path: Path) -> None:
    found = board(tmp_path)
    assert [(c.number, c.opposite, c.forwards, c.output, c.bit) for c in found.channels] == [
        *((n, n + 8, True, n, n) for n in range(4)),
        *((n + 8, n, False, n + 8, n + 8) for n in range(4)),
    ]
    assert [c.label for c in found.channels[3:5]] == ["gate 3", "gate 0 back"]


def test_reverse_channels_have_outputs_bits_and_labels_of_their_own(tmp_path: Path) -> None:
    keys = 'reverse = "8-11"\nreverse_outputs = "7-4"\nreverse_bits = "12-15"\nreverse_label = "gate {n} shut"\nnumbers = "1-4"'
    found = board(tmp_path, changed(('reverse = "8-11"', keys)))
    assert [(c.number, c.output, c.bit, c.label) for c in found.channels if not c.forwards] == [
        (8, 7, 12, "gate 1 shut"),
        (9, 6, 13, "gate 2 shut"),
        (10, 5, 14, "gate 3 shut"),
        (11, 4, 15, "gate 4 shut"),
    ]


@pytest.mark.parametrize(
    ("pairs", "line", "text"),
    [
        ([('reverse = "8-11"\n', "")], 13, 'a full-bridge drives its coil both ways; say which further channel numbers fire backwards: reverse = "8-15"'),
        ([("full-bridge", "half-bridge")], 15, 'channels."0-3".reverse: reverse needs a switch that drives its coil both ways (a full-bridge); this is a half-bridge'),
        ([('reverse = "8-11"', 'reverse_outputs = "8-11"')], 15, 'channels."0-3".reverse_outputs: reverse_outputs says something of reverse channels; give reverse too'),
        ([('"8-11"', '"8-10"')], 15, 'channels."0-3".reverse: names 3 where the range has 4 channels; every coil needs one of each'),
        ([('"8-11"', '"3-6"')], 15, 'channels."0-3".reverse: channel 3 is already taken by channels."0-3"'),
        ([('"8-11"', '""')], 15, "channels.\"0-3\".reverse: '' is not a range of numbers"),
        ([('"8-11"', '"14-17"')], 15, 'channels."0-3".reverse: outputs 16, 17 are outside the chain: 2 registers have outputs 0-15'),
        ([('reverse = "8-11"', 'reverse = "8-11"\nreverse_outputs = "3-6"')], 16, 'channels."0-3".reverse_outputs: output 3 is already taken by channels."0-3"'),
        ([('reverse = "8-11"', 'reverse = "8-11"\nreverse_bits = "8-9"')], 16, 'channels."0-3".reverse_bits: names 2 where the range has 4 channels'),
        ([('reverse = "8-11"', 'reverse = "8-11"\nreverse_label = "gate {n}"')], 13, 'channels 0 and 8 are both labelled "gate 0"'),
        ([('kind = "none"', 'kind = "diode", diode = "fast-2a"')], 18, 'channels."0-3".clamp: a full-bridge takes its coil\'s current in either direction'),
        ([(', dead_time = "1 us"', "")], 17, 'channels."0-3".switch.driver: "dead_time" is missing'),
        ([('high = "IRF9540N", ', "")], 17, 'channels."0-3".switch: "high" is missing'),
    ],
)  # fmt: skip
def test_a_wrong_bridge_is_refused_with_its_line(
    tmp_path: Path, pairs: list[tuple[str, str]], line: int, text: str
) -> None:
    found = said(tmp_path, changed(*pairs))
    assert any(one.startswith(f"{line}: ") and text in one for one in found), found


def test_a_matrix_drives_its_coils_one_way(tmp_path: Path) -> None:
    matrix = 'matrix = { rows = "0-1", columns = "2-3", row_switch = { part = "IRF9540N", gate = "10 ohm", pullup = "10 kohm", shifter = { part = "n-logic-60v", gate = "100 ohm" } }, row_clamp = { kind = "none" } }'
    found = said(tmp_path, changed(('reverse = "8-11"', f'reverse = "8-11"\n{matrix}')))
    assert any(
        one.startswith("15: ") and "a matrix drives its coils one way; leave reverse out" in one for one in found
    ), found


HALF = (('reverse = "8-11"\n', ""), ("full-bridge", "half-bridge"))


@pytest.mark.parametrize(
    ("pairs", "text"),
    [
        ([('low = "n-logic-60v"', 'low = "IRF9540N"')], '"IRF9540N" is a p-mosfet; an n-mosfet is needed here'),
        ([('high = "IRF9540N"', 'high = "fast-2a"')], '"fast-2a" is a diode; a p-mosfet or n-mosfet is needed here'),
        ([('gate = "10 ohm"', 'gate = "10 mA"')], "channels.\"0-3\".switch.gate: '10 mA' is in 'mA', which does not measure a resistance"),
        ([('dead_time = "1 us"', 'dead_time = "-1 us"')], 'channels."0-3".switch.driver.dead_time'),
        ([('supply = "12 V", dead', "dead")], 'channels."0-3".switch.driver: "supply" is missing'),
        ([("pulldown =", "pull_down =")], '"pull_down" is not known here (did you mean "pulldown"?)'),
        ([('driver = { supply = "12 V", dead_time = "1 us", pulldown = "100 kohm" }', 'driver = "fast"')], 'channels."0-3".switch.driver'),
    ],
)  # fmt: skip
def test_a_wrong_half_bridge_is_refused_on_its_line(tmp_path: Path, pairs: list[tuple[str, str]], text: str) -> None:
    found = said(tmp_path, changed(*HALF, *pairs))
    assert any(one.startswith("16: ") and text in one for one in found), found
