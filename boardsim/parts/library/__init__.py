"""The library of generic parts: records as data (TOML), each number with its source."""

from __future__ import annotations

import functools
import tomllib
from collections.abc import Mapping
from importlib import resources
from typing import Any


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
