"""What the library holds, every number of a part with its source, and records to start one's own from."""

from __future__ import annotations

import json
import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from boardsim.board.shelves import Entry, read_shelves
from boardsim.errors import InputError, QuantityError
from boardsim.parts.base import Part
from boardsim.parts.record import nearest, shortened
from boardsim.quantities import CURRENT, VOLTAGE, Dimension, Quantity, parse

_CONDITIONS = ("test", "threshold", "timing", "supply")  # fields with these words say how a number was measured


@dataclass(frozen=True)
class Listed:
    """One part of the library, for a table.

    Attributes
    ----------
    ratings : mapping
        Main ratings by the name of their field: the first in volts, amperes and watts that the kind declares, which are
        what parts are chosen by.
    source : str
    """

    name: str
    title: str
    kind: str
    ratings: Mapping[str, Quantity]
    source: str


@dataclass(frozen=True)
class Detail:
    """One field of a part: a number with its band and source, a word or count, or None where it was not given."""

    field: str
    value: Quantity | str | None


def list_parts(
    libraries: Sequence[Path] = (), kind: str | None = None, voltage: str | None = None, current: str | None = None
) -> tuple[Listed, ...]:
    """The parts of the library and of the user's folders, by kind and name.

    Parameters
    ----------
    libraries : sequence of Path
        The user's folders.
    kind : str or None
        Only this kind.
    voltage, current : str or None
        Least rating, such as "40 V"; a part without that rating is left out.

    Raises
    ------
    InputError
        If the kind is not in the library, or a rating is no quantity.
    """
    shelves = read_shelves(libraries)
    kinds = sorted({e.kind for e in shelves.values()})
    if kind is not None and kind not in kinds:
        raise InputError(
            f'--kind "{shortened(kind)}": the library has none{nearest(kind, kinds)}; it has: {", ".join(kinds)}'
        )
    least = [
        (dimension.unit, _asked(option, text, dimension))
        for option, text, dimension in (("--voltage", voltage, VOLTAGE), ("--current", current, CURRENT))
        if text is not None
    ]
    found = []
    for name, entry in sorted(shelves.items(), key=lambda item: (item[1].kind, item[0])):
        part = entry.part(name)
        if part is None or kind not in (None, entry.kind):
            continue
        ratings = main_ratings(part)
        by_unit = {q.unit: q.min for q in ratings.values()}
        if all(by_unit.get(unit, -1.0) >= value for unit, value in least):
            found.append(Listed(name, part.title or name, entry.kind, ratings, _one_source(entry)))
    return tuple(found)


def _asked(option: str, text: str, dimension: Dimension) -> float:
    try:
        return parse(text, dimension).typ
    except QuantityError as err:
        raise InputError(f"{option}: {err}") from None


def _one_source(entry: Entry) -> str:
    return entry.origin(None).source


def main_ratings(part: Part) -> dict[str, Quantity]:
    """The first number in volts, in amperes and in watts that a part has, except those that say how others were measured."""
    found: dict[str, Quantity] = {}
    for unit in ("V", "A", "W"):
        for field in type(part).model_fields:
            value = getattr(part, field)
            if isinstance(value, Quantity) and value.unit == unit and not any(w in field for w in _CONDITIONS):
                if not value.assumed():
                    found[field] = value
                break
    return found


def find_part(name: str, libraries: Sequence[Path] = ()) -> tuple[Entry, Part]:
    """The record and the part of a name.

    Raises
    ------
    InputError
        If there is none; names the nearest.
    """
    shelves = read_shelves(libraries)
    part = shelves[name].part(name) if name in shelves else None
    if part is None:
        known = ", ".join(sorted(shelves))
        raise InputError(
            f'there is no part "{shortened(name)}" in the library{nearest(name, list(shelves))}; known: {known}'
        )
    return shelves[name], part


def show_part(name: str, libraries: Sequence[Path] = ()) -> tuple[Part, tuple[Detail, ...]]:
    """Every field of a part.

    Raises
    ------
    InputError
        If there is no such part.
    """
    _, part = find_part(name, libraries)
    implied = part.implied()
    shown = [d for field in type(part).model_fields for d in _details(field, getattr(part, field))]
    given = [d for d in shown if d.field not in implied or d.value is not None]
    return part, (*given, *(Detail(name, q) for name, q in implied.items() if name not in {d.field for d in given}))


def _details(field: str, value: Any) -> Iterable[Detail]:
    label = field.replace("_", " ")
    if isinstance(value, Quantity) or value is None:
        yield Detail(label, value)
    elif isinstance(value, tuple):
        for i, one in enumerate(value, 1):
            yield from _details(f"{field} {i}", one)
    elif isinstance(value, Mapping):  # from words to words, such as from terminals to pins; empty where there are none
        if value:
            yield Detail(label, ", ".join(f"{word} is {other}" for word, other in value.items()))
    elif hasattr(type(value), "model_fields"):
        for inner in type(value).model_fields:
            if (found := getattr(value, inner)) is not None:
                yield from _details(f"{field}, {inner}", found)
    else:
        yield Detail(label, str(value))


# ---------------------------------------------------------------------------------------------------- a record to start from


def copy_part(name: str, libraries: Sequence[Path] = ()) -> str:
    """A part's record as text: a `[parts.NAME]` table for a board file or for a file of the user's library.

    Sources stand as comments: the numbers become those of whoever takes them over.

    Raises
    ------
    InputError
        If there is no such part.
    """
    entry, part = find_part(name, libraries)
    # A coil of a library goes under [coils] of a board file, everything else under [parts].
    lines = [
        f"# A copy of {name}: put your datasheet's numbers in place of these.",
        f"# Source: {_comment(_one_source(entry))}",
        f"[parts.{_key(name)}]",
    ]
    for field, value in entry.body.items():
        source = entry.origin(field).source
        own = f"  # {_comment(source)}" if source != _one_source(entry) else ""
        lines.append(f"{_key(field)} = {_toml(value)}{own}")
    given = entry.body.keys()
    for field in type(part).model_fields:
        value = getattr(part, field)
        if field in given or field in ("title", "kind"):
            continue
        if isinstance(value, Quantity):
            lines.append(f'# {field} = "{_plainly(value)}"  # assumed: {_comment(value.origin.source)}')
        elif value is None:
            lines.append(f"# {field} is not given")
    return "\n".join(lines) + "\n"


def _plainly(value: Quantity) -> str:
    return str(value).partition(" (")[0]


def _comment(text: str) -> str:
    return " ".join(text.split())


def _key(name: str) -> str:
    return name if re.fullmatch(r"[A-Za-z0-9_-]+", name) else json.dumps(name, ensure_ascii=False)


def _toml(value: Any) -> str:
    """A value of a record as TOML; JSON writes text, numbers and truth values in the same way."""
    if isinstance(value, Mapping):
        return "{ " + ", ".join(f"{_key(k)} = {_toml(v)}" for k, v in value.items()) + " }"
    if isinstance(value, list):
        return "[" + ", ".join(map(_toml, value)) + "]"
    return json.dumps(value, ensure_ascii=False)


def write_copy(text: str, to: Path) -> None:
    """Write a record to a new file.

    Raises
    ------
    InputError
        If the file exists, or cannot be written.
    """
    try:
        to.parent.mkdir(parents=True, exist_ok=True)
        with to.open("x", encoding="utf-8") as handle:
            handle.write(text)
    except FileExistsError:
        raise InputError(f"--to {to}: is there already and is not overwritten; name a new file") from None
    except OSError as err:
        raise InputError(f"--to {to}: cannot be written ({err.strerror or err}); choose another place") from err
