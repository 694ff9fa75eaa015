"""The JSON Schema that editors check files against agrees with what the reader accepts."""

import copy
import tomllib
from pathlib import Path
from typing import Any

import pytest
from board_files import NETLISTS, TEXT, ZENER, problems, with_part
from jsonschema import Draft202012Validator

from boardsim.parts.kinds import kinds
from boardsim.scenarios.starter import BOARD, PATTERN, json_schema

BOARDS = sorted(NETLISTS.glob("*/board*.toml"))
PATTERNS = sorted(NETLISTS.glob("*/patterns/*.toml"))


def validator(what: str) -> Draft202012Validator:
    schema = json_schema(what)
    assert schema is not None
    return Draft202012Validator(schema)


@pytest.mark.parametrize("what", ["board", "pattern", "scenarios"])
def test_the_schema_is_a_valid_schema(what: str) -> None:
    schema = json_schema(what)
    assert schema is not None
    assert schema["$schema"] == "https://json-schema.org/draft/2020-12/schema"
    Draft202012Validator.check_schema(schema)


def test_there_is_no_schema_of_anything_else() -> None:
    assert json_schema("deck") is None


@pytest.mark.parametrize("path", BOARDS, ids=lambda p: p.parent.name + "/" + p.name)
def test_the_schema_accepts_the_demonstration_boards(path: Path) -> None:
    validator("board").validate(tomllib.loads(path.read_text(encoding="utf-8")))


@pytest.mark.parametrize("path", PATTERNS, ids=lambda p: p.stem)
def test_the_schema_accepts_the_demonstration_patterns(path: Path) -> None:
    validator("pattern").validate(tomllib.loads(path.read_text(encoding="utf-8")))


def test_the_schema_accepts_the_starter_files() -> None:
    validator("board").validate(tomllib.loads(BOARD))
    validator("pattern").validate(tomllib.loads(PATTERN))


def test_the_starter_board_is_valid_also_with_its_commented_keys(tmp_path: Path) -> None:
    assert problems(tmp_path, BOARD) == ()
    optional = [line for line in BOARD.splitlines() if line.startswith("# ") and " = " in line.split("#")[1][:16]]
    assert len(optional) >= 5
    whole = "\n".join(
        line[2:] if line in optional and not line.startswith(("# kind", "# breakdown", "# Numbers", "# channels", "# most")) else line
        for line in BOARD.splitlines()
    ).replace("# [derating]", "[derating]").replace("# [[limits.exclusive]]", "[[limits.exclusive]]").replace('# channels = "0-1"', 'channels = "0-1"').replace("# most = 1", "most = 1")  # fmt: skip
    assert tomllib.loads(whole)["derating"]["reason"] == "house rule"
    assert tomllib.loads(whole)["limits"]["exclusive"] == [{"channels": "0-1", "most": 1}]
    assert tomllib.loads(whole)["chain"]["bit_order"] == "msb"
    assert problems(tmp_path, whole) == ()
    validator("board").validate(tomllib.loads(whole))


def tables(data: Any, keys: tuple[str, ...] = ()) -> list[tuple[str, ...]]:
    found = [keys]
    for key, value in data.items():
        if isinstance(value, dict):
            found += tables(value, (*keys, key))
    return found


def test_the_schema_refuses_an_unknown_key_in_every_table() -> None:
    data = tomllib.loads(with_part(ZENER))
    for keys in tables(data):
        changed = copy.deepcopy(data)
        table = changed
        for key in keys:
            table = table[key]
        table["colour"] = "red"
        assert not validator("board").is_valid(changed), keys


@pytest.mark.parametrize(
    "change",
    [
        {"pulses": [{"channels": "0", "start": "1 ms", "width": "1 ms", "colour": "red"}]},
        {"pulses": []},
        {"pulses": [{"channels": "0", "start": 1, "width": "1 ms"}]},
        {"pulses": [{"channels": "0", "start": "1 ms"}]},
        {"pulses": [{"channels": "0", "start": "1 ms", "width": "1 ms", "repeat": "2"}]},
        {"colour": "red", "pulses": [{"channels": "0", "start": "1 ms", "width": "1 ms"}]},
        {},
    ],
)
def test_the_schema_refuses_what_no_pattern_holds(change: dict[str, Any]) -> None:
    assert not validator("pattern").is_valid(change)


@pytest.mark.parametrize(
    ("section", "value"),
    [
        ("chain", {"register": "74HC595", "count": "3", "clock": "4 MHz"}),
        ("chain", {"register": "74HC595", "count": 65, "clock": "4 MHz"}),
        ("chain", {"register_": "74HC595", "count": 3, "clock": "4 MHz"}),
        ("cable", {"gauge": 16, "length": "1 m"}),
        ("logic", {"voltage": 5}),
        ("channels", {}),
    ],
)
def test_the_schema_refuses_what_the_reader_refuses(section: str, value: Any) -> None:
    data = tomllib.loads(TEXT)
    data[section] = value
    assert not validator("board").is_valid(data)


def test_the_schema_takes_parts_in_place_and_registers_among_the_parts() -> None:
    data = tomllib.loads(TEXT)
    register = {
        "outputs": 8,
        "output_resistance": "30 ohm",
        "propagation": "40 ns",
        "output_edge": "10 ns",
        "supply_low": "2 V",
        "supply_high": "6 V",
    }
    data["chain"]["register"] = register
    validator("board").validate(data)
    data["parts"] = {"mine": {"kind": "shift-register", **register}}
    data["chain"]["register"] = "mine"
    validator("board").validate(data)


@pytest.mark.parametrize("path", sorted(NETLISTS.glob("*/scenarios.toml")), ids=lambda p: p.parent.name)
def test_the_schema_accepts_the_demonstration_scenarios(path: Path) -> None:
    validator("scenarios").validate(tomllib.loads(path.read_text(encoding="utf-8")))


def test_the_schema_knows_every_kind_that_the_program_knows() -> None:
    text = str(json_schema("board"))
    for role in ("clamp", "switch", "component", "register", "coil", "supply", "cable", "bulk", "logic"):
        for kind in kinds(role):
            assert f"'{kind}'" in text, kind


@pytest.mark.parametrize("what", ["board", "pattern", "scenarios"])
def test_defaults_in_the_schema_are_of_the_type_that_the_schema_wants(what: str) -> None:
    schema = json_schema(what)
    assert schema is not None
    seen = 0
    for model in [schema, *schema["$defs"].values()]:
        for field in model["properties"].values():
            if "default" in field:
                seen += 1
                Draft202012Validator({**field, "$defs": schema["$defs"]}).validate(field["default"])
    assert seen > 4
