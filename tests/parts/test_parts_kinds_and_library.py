"""Kinds of part are found by looking, and every record of the library is valid and says where its numbers are from."""

import pkgutil
import tomllib
from importlib import resources
from typing import Any

import pytest

import boardsim.parts
from boardsim.board.reader import library_part
from boardsim.board.schema import component_class
from boardsim.errors import InputError
from boardsim.parts.base import Part
from boardsim.parts.kinds import kinds
from boardsim.parts.library import records
from boardsim.quantities import Quantity

ROLES = ("clamp", "switch", "component", "register", "coil", "supply", "cable", "bulk", "logic")


def test_every_file_in_the_folder_of_a_role_adds_its_kind() -> None:
    for role, folder in (("clamp", "clamps"), ("switch", "switches")):
        path = [f"{p}/{folder}" for p in boardsim.parts.__path__]
        files = {m.name for m in pkgutil.iter_modules(path)}
        homes = {cls.__module__.rsplit(".", 1)[1] for cls in kinds(role).values()}
        assert homes == files, role


@pytest.mark.parametrize("role", ROLES)
def test_a_role_has_kinds_that_carry_its_name(role: str) -> None:
    found = kinds(role)
    assert found
    for kind, cls in found.items():
        assert issubclass(cls, Part)
        assert cls.role == role
        assert cls.model_fields["kind"].default == kind
        assert cls.__doc__


def test_an_unknown_role_has_no_kinds() -> None:
    assert kinds("propeller") == {}


def test_two_files_cannot_claim_the_same_kind(monkeypatch: pytest.MonkeyPatch) -> None:
    class Twin(kinds("bulk")["bulk"]):  # type: ignore[misc]
        pass

    monkeypatch.setattr(Twin, "__module__", "boardsim.parts.twin")
    kinds.cache_clear()
    with pytest.raises(TypeError, match="both define bulk kind 'bulk'"):
        kinds("bulk")
    monkeypatch.undo()  # the class lives on, but no longer claims to be a part of ours
    kinds.cache_clear()
    assert list(kinds("bulk")) == ["bulk"]


def test_every_file_of_the_library_is_read() -> None:
    in_files = {
        name
        for entry in resources.files("boardsim.parts.library").iterdir()
        if entry.name.endswith(".toml")
        for name in tomllib.loads(entry.read_text(encoding="utf-8"))
    }
    assert set(records()) == in_files
    assert {"74HC595", "fast-2a", "24v-5w", "n-logic-60v"} <= in_files


@pytest.mark.parametrize("name", sorted(records()))
def test_a_record_is_a_valid_part_of_its_kind_under_its_own_name(name: str) -> None:
    part = library_part(name)
    assert part.title == name
    assert part.kind == records()[name]["kind"]
    assert type(part) is component_class(part.kind)


def quantities(value: Any, name: str = "") -> list[tuple[str, Quantity]]:
    if isinstance(value, Quantity):
        return [(name, value)]
    if isinstance(value, tuple):
        return [found for item in value for found in quantities(item, name)]
    if hasattr(type(value), "model_fields"):
        return [found for key in type(value).model_fields for found in quantities(getattr(value, key), key)]
    return []


@pytest.mark.parametrize("name", sorted(records()))
def test_every_number_of_a_record_has_a_source(name: str) -> None:
    record = records()[name]
    found = quantities(library_part(name))
    assert found
    for key, quantity in found:
        assert quantity.origin.kind in ("library", "assumed"), key
        assert quantity.origin.source.strip(), key
        if key in record:
            assert quantity.origin.kind == "library", key
            assert quantity.origin.source == record.get("sources", {}).get(key, record["source"])


@pytest.mark.parametrize("name", sorted(records()))
def test_sources_name_only_numbers_that_the_record_has(name: str) -> None:
    record = records()[name]
    assert set(record.get("sources", {})) <= set(record) - {"source", "sources", "kind", "title"}


def test_a_class_from_memory_says_to_check_the_datasheet() -> None:
    for name, record in records().items():
        for source in (record["source"], *record.get("sources", {}).values()):
            if "memory" in source and "datasheet" in source:
                assert source == "typical of its class, from memory: check against your datasheet", name


def test_an_unknown_name_is_refused_with_the_nearest() -> None:
    with pytest.raises(InputError, match=r'the library has no part "24v5w" \(did you mean "24v-5w"\?\)'):
        library_part("24v5w")
