"""Which kinds of part exist: found by looking into the folders, listed nowhere."""

from __future__ import annotations

import functools
import importlib
import pkgutil
from collections.abc import Iterator

import boardsim.parts
from boardsim.parts.base import Part


def _descendants(cls: type[Part]) -> Iterator[type[Part]]:
    for sub in cls.__subclasses__():
        yield sub
        yield from _descendants(sub)


@functools.cache
def kinds(role: str) -> dict[str, type[Part]]:
    """Every kind of part for a role ("clamp", "switch", "component", ...), by its name.

    Raises
    ------
    TypeError
        If two files claim the same kind for one role.
    """
    for module in pkgutil.walk_packages(boardsim.parts.__path__, "boardsim.parts."):
        importlib.import_module(module.name)
    found: dict[str, type[Part]] = {}
    for cls in _descendants(Part):
        if cls.role == role and cls.__module__.startswith("boardsim.parts."):
            kind = cls.model_fields["kind"].default
            if kind in found:
                raise TypeError(f"{cls.__module__} and {found[kind].__module__} both define {role} kind {kind!r}")
            found[kind] = cls
    return dict(sorted(found.items()))
