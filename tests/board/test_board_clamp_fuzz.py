"""Every kind of clamp in a board file with one thing wrong at a time: a valid board or located problems, never anything else."""

from __future__ import annotations

import copy
import tomllib
from pathlib import Path
from typing import Any

import pytest
from board_files import problems
from test_board_fuzz import WRONG, at, document, places

from boardsim.parts.kinds import kinds

BOARD = """
supply = { voltage = "24 V" }
cable = { gauge = "18 AWG", length = "1 m" }
bulk = { capacitance = "1000 uF", esr = "50 mohm" }
logic = { voltage = "5 V" }
[chain]
register = "74HC595"
count = 1
clock = "1 MHz"
[coils.gate]
resistance = "120 ohm"
inductance = "30 mH"
[channels."0"]
coil = "gate"
switch = { part = "n-logic-60v", gate = "100 ohm" }
leads = { gauge = "24 AWG", length = "2 m" }
"""
PULSE = 'pulse = [{ power = "20 W", lasting = "1 ms" }]'
WHOLE = {
    "active": 'zener = "SMBJ24A", diode = "1N4148"',
    "array": 'part = "sink-array-8", to = "rail"',
    "array-zener": 'part = "sink-array-8", zener = "24v-5w", to = "rail"',
    "avalanche": "",
    "built-in": "",
    "diode": 'diode = "fast-2a", to = "rail", at = "coil"',
    "diode-zener": 'diode = "fast-2a", zener = "24v-5w", to = "rail", at = "board"',
    "led": 'led = "led-white-5mm", resistor = "47 ohm", power = "1 W", diode = "fast-2a"',
    "none": "",
    "resistor": 'resistance = "120 ohm", power = "1 W"',
    "resistor-diode": f'diode = "fast-2a", resistance = "120 ohm", power = "1 W", {PULSE}',
    "snubber": f'across = "coil", at = "coil", capacitance = "1 uF", resistance = "47 ohm", rated = "100 V", pulse_current = "5 A", power = "1 W", {PULSE}',
    "zener": 'zener = "SMBJ24A", to = "ground"',
}
OPTIONAL = {"to", "at", "across", "power", "pulse", "rated", "pulse_current", "resistor", "clamp", "leads"}


def data_of(kind: str) -> dict[str, Any]:
    data = tomllib.loads(BOARD)
    data["channels"]["0"]["clamp"] = tomllib.loads(
        f'clamp = {{ {", ".join(filter(None, [f"""kind = "{kind}" """, WHOLE[kind]]))} }}'
    )["clamp"]
    if kind.startswith("array"):
        data["channels"]["0"]["switch"] = {"part": "sink-array-8"}
    if kind == "built-in":
        data["channels"]["0"]["switch"] = {"part": "source-array-8"}
    return data


def clamp_places(data: dict[str, Any]) -> list[tuple[str, ...]]:
    return [keys for keys in places(data) if len(keys) > 3 and keys[2] == "clamp"]


def test_every_kind_is_tried_here() -> None:
    assert set(WHOLE) == set(kinds("clamp"))


@pytest.mark.parametrize("kind", sorted(WHOLE))
def test_a_clamp_with_all_its_keys_is_valid(tmp_path: Path, kind: str) -> None:
    assert problems(tmp_path, document(data_of(kind))) == ()


@pytest.mark.parametrize("kind", sorted(WHOLE))
def test_a_wrong_value_a_missing_key_and_a_misspelt_one_are_named_at_their_line(tmp_path: Path, kind: str) -> None:
    whole = data_of(kind)
    line = list(whole).index("channels") + 1
    for keys in clamp_places(whole):
        for wrong in WRONG.values():
            data = copy.deepcopy(whole)
            at(data, keys)[keys[-1]] = wrong
            found = problems(tmp_path, document(data))
            assert all(p.text.isprintable() for p in found)
            assert any(p.line == line for p in found) or (keys[-1], wrong) == ("pulse", []), (keys, wrong, found)
        data = copy.deepcopy(whole)
        del at(data, keys)[keys[-1]]
        optional = keys[-1] in OPTIONAL or (kind, keys[-1]) == ("led", "diode")
        assert problems(tmp_path, document(data)) or optional, keys
        data = copy.deepcopy(whole)
        at(data, keys)[keys[-1] + "x"] = at(data, keys).pop(keys[-1])
        assert any(p.line == line for p in problems(tmp_path, document(data))), keys
