"""The library of generic parts: records as data (TOML), each number with its source."""

from __future__ import annotations

import functools
import tomllib
from collections.abc import Mapping
from importlib import resources
from typing import Any

NOT_FIELDS = ("source", "sources")  # what a record says about its numbers


@functools.cache
def records() -> Mapping[str, Mapping[str, Any]]:
    """All records by name, as they stand in the files: kind, source, sources, and the fields of the kind.

    Raises
    ------
    ValueError
        If two files define the same name.
    """
    found: dict[str, Mapping[str, Any]] = {}
    for entry in sorted(resources.files(__name__).iterdir(), key=lambda e: e.name):
        if entry.name.endswith(".toml"):
            for name, record in tomllib.loads(entry.read_text(encoding="utf-8")).items():
                if name in found:
                    raise ValueError(f"{entry.name}: part {name!r} is defined twice")
                found[name] = record
    return found


def source_of(record: Mapping[str, Any], field: str | None) -> str:
    """What a record says about the number of a field; a number in a table or list has the source of that.

    Tables of one record must not share names of fields: only the field's own name is known here.

    Examples
    --------
    >>> source_of({"source": "A", "sources": {"power": "B"}, "power": "1 W"}, "power")
    'B'
    >>> source_of({"source": "A", "sources": {"points": "B"}, "points": [{"gate": "5 V"}]}, "gate")
    'B'
    """
    sources = record.get("sources", {})
    if field not in record:
        inside = [key for key, value in record.items() if key not in NOT_FIELDS and _holds(value, field)]
        field = inside[0] if inside else field
    return str(sources.get(field, record.get("source", "")))


def _holds(value: Any, field: str | None) -> bool:
    tables = value if isinstance(value, list) else [value]
    return any(isinstance(table, Mapping) and field in table for table in tables)
