"""The fruit sorter's file with one thing changed at a time: a valid board or located problems, never anything else."""

from __future__ import annotations

import copy
import json
import tomllib
from collections.abc import Iterator
from datetime import date, time
from pathlib import Path
from typing import Any

import pytest
from board_files import TEXT, problems
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

DATA = tomllib.loads(TEXT)
WRONG = {
    "text": "x",
    "empty text": "",
    "bare number": 12,
    "negative number": -1,
    "zero": 0,
    "fraction": 1.5,
    "nan": float("nan"),
    "true": True,
    "date": date(2001, 2, 3),
    "time": time(4, 5, 6),
    "list": [],
    "list of lists": [[1]],
    "table": {},
    "table in table": {"kind": {"kind": "diode"}},
    "mass": "3 kg",
    "negative ohms": "-3 ohm",
    "no ohms": "0 ohm",
    "no volts": "0 V",
    "huge": "1e300 V",
    "wide": "10 V +/- 100 %",
    "command": "\n.control\nshell true\n.endc",
}  # fmt: skip


def toml(value: Any) -> str:
    """A value as TOML, tables inline."""
    if isinstance(value, dict):
        return "{" + ", ".join(f"{json.dumps(k)} = {toml(v)}" for k, v in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(map(toml, value)) + "]"
    if isinstance(value, bool):
        return "true" if value else "false"
    return json.dumps(value) if isinstance(value, str) else str(value)


def document(data: dict[str, Any]) -> str:
    """A whole file, one key per line."""
    return "".join(f"{json.dumps(key)} = {toml(value)}\n" for key, value in data.items())


def places(data: Any, keys: tuple[str, ...] = ()) -> Iterator[tuple[str, ...]]:
    """The path of every key of a file, tables included."""
    if isinstance(data, dict):
        for key, value in data.items():
            yield (*keys, key)
            yield from places(value, (*keys, key))


def at(data: dict[str, Any], keys: tuple[str, ...]) -> dict[str, Any]:
    """The table that holds a key."""
    for key in keys[:-1]:
        data = data[key]
    return data


PLACES = list(places(DATA))


def test_the_file_survives_the_way_through_this_files_own_writer(tmp_path: Path) -> None:
    assert tomllib.loads(document(DATA)) == DATA
    assert problems(tmp_path, document(DATA)) == ()
    assert len(PLACES) > 40


@pytest.mark.parametrize("what", WRONG)
def test_any_value_of_another_kind_is_refused_at_its_line(tmp_path: Path, what: str) -> None:
    for keys in PLACES:
        data = copy.deepcopy(DATA)
        at(data, keys)[keys[-1]] = WRONG[what]
        found = problems(tmp_path, document(data))
        line = list(data).index(keys[0]) + 1
        free_text = keys[-1] in ("name", "label")
        if found:
            # What hangs on a coil or part that is gone is reported where it is asked for.
            assert any(p.line == line for p in found) or keys[0] == "coils", (keys, found)
            assert all(p.text.isprintable() for p in found)
        else:
            # A line of the chain says by its mere presence that it is there; all that is on it may be absent.
            optional = keys in (("coils",), ("limits",), ("controller",)) or keys[-1].endswith("_line")
            optional_table = optional and what == "table"
            assert (free_text and isinstance(WRONG[what], str)) or optional_table or may_be(what, keys[-1]), keys


def may_be(what: str, key: str) -> bool:
    """Which changed values make sense after all."""
    return (what, key) in {("no ohms", k) for k in ("resistance", "esr", "gate")} | {
        ("bare number", "count"),
        ("bare number", "most_on"),
        ("zero", "spi_mode"),  # a number among four
    }


def test_every_key_that_goes_missing_leaves_a_valid_board_or_a_located_problem(tmp_path: Path) -> None:
    optional = {
        "name",
        "ambient",
        "junction_rise",
        "limits",
        "most_on",
        "brown_out",
        "label",
        "to",
        "pulldown",
        "pull_in",
        "release",
    }
    optional |= {"at", "rise", "current_ceiling", "esl", "rated", "resistance"}
    optional |= {"controller", "high_drop", "low_output", "spi_mode", "tick", "jitter", "frame_gap"}
    optional |= {"lateness", "clock_line", "latch_line", "pull_down"}
    for keys in PLACES:
        data = copy.deepcopy(DATA)
        del at(data, keys)[keys[-1]]
        found = problems(tmp_path, document(data))
        if not found:
            assert keys[-1] in optional, keys
        elif len(keys) > 1:
            assert any(f'"{keys[-1]}" is missing' in p.text or p.line is not None for p in found), found


def test_every_key_that_is_misspelt_is_named_at_its_line_with_the_right_one(tmp_path: Path) -> None:
    for keys in PLACES:
        if keys[0] in ("channels", "coils") and len(keys) == 2:
            continue  # a range and a name: free to choose
        data = copy.deepcopy(DATA)
        table = at(data, keys)
        table[keys[-1] + "x"] = table.pop(keys[-1])
        found = problems(tmp_path, document(data))
        if keys[-1] in ("kind", "to"):
            assert found, keys
            continue  # without its kind a clamp cannot say which keys it knows; "tox" is too short a word to guess
        expected = f'"{keys[-1]}x" is not known here (did you mean "{keys[-1]}"?); known: '
        assert any(expected in p.text and p.line for p in found), (keys, found)


def test_every_key_that_stands_twice_is_refused_at_its_second_line(tmp_path: Path) -> None:
    lines = TEXT.splitlines(keepends=True)
    for i, line in enumerate(lines):
        if "=" in line and not line.startswith("#"):
            found = problems(tmp_path, "".join([*lines[: i + 1], line, *lines[i + 1 :]]))
            assert [p.line for p in found] == [i + 2]
            assert "the same key stands here twice" in found[0].text


_LEAF = st.one_of(
    st.text(max_size=12),
    st.integers(-(2**63), 2**63 - 1),
    st.floats(),
    st.booleans(),
    st.sampled_from(["5 V", "1 mA", "16 ohm", "0-7", "ejector", "fast-2a", "24v-5w", "n-mosfet", "diode", "none"]),
)
_KEY = st.one_of(
    st.text(max_size=8),
    st.sampled_from(sorted({key for keys in PLACES for key in keys} | {"kind", "parts", "derating"})),
)
_VALUE = st.recursive(
    _LEAF, lambda inner: st.one_of(st.lists(inner, max_size=3), st.dictionaries(_KEY, inner, max_size=4)), max_leaves=8
)


@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(keys=st.sampled_from(PLACES), key=_KEY, value=_VALUE)
def test_arbitrary_tables_anywhere_end_in_located_problems_or_a_board(
    tmp_path: Path, keys: tuple[str, ...], key: str, value: Any
) -> None:
    data = copy.deepcopy(DATA)
    at(data, keys)[keys[-1]] = value
    at(data, keys)[key] = value
    problems(tmp_path, document(data))


@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(start=st.integers(0, len(TEXT)), length=st.integers(0, 40), put=st.text(max_size=6))
def test_arbitrary_damage_to_the_text_ends_in_located_problems_or_a_board(
    tmp_path: Path, start: int, length: int, put: str
) -> None:
    damaged = (TEXT[:start] + put + TEXT[start + length :]).encode("utf-8", "surrogatepass")
    for problem in problems(tmp_path, damaged):
        assert problem.line is not None or "is missing" in problem.text
        assert problem.line is None or 1 <= problem.line <= damaged.count(b"\n") + 1


@settings(max_examples=100, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(content=st.binary(max_size=60))
def test_arbitrary_bytes_are_refused(tmp_path: Path, content: bytes) -> None:
    assert problems(tmp_path, content)
