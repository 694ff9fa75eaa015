"""Where parts are found by name beside the board file itself: a user's library folders first, then the built-in library.

A user's library file is like those in `boardsim/parts/library`: a table per part with `kind`, fields, and `source` for
all its numbers or `sources` for single ones. Tables under `[parts]` count as well, so that what `boardsim parts copy`
writes serves as it is. All user's folders are one level: a name stands there once.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from boardsim.board.schema import component_class
from boardsim.board.toml_file import Keys, TomlFile, read_toml
from boardsim.errors import InputError, Problem
from boardsim.parts.base import Part
from boardsim.parts.kinds import kinds
from boardsim.parts.library import NOT_FIELDS, records, source_of
from boardsim.parts.record import nearest, said, shortened
from boardsim.quantities import Origin

FOLDER = "library"  # beside a board file, found by itself


@dataclass(frozen=True)
class Entry:
    """A record as its file holds it, and where that is.

    Attributes
    ----------
    record : mapping
        As in the file, with source and sources.
    place : str
        The user's file and line; empty for the built-in library.
    file : str
        Short name of the user's file for the origin of its numbers; empty for the built-in library.
    beside : mapping
        The shelves that it stands on, where the parts are found that it names, as a register names its family.
    folder : Path or None
        Of the user's file, from which names of model files count; None for the built-in library.
    """

    record: Mapping[str, Any]
    place: str = ""
    file: str = ""
    beside: Mapping[str, Entry] = field(default_factory=dict, repr=False, compare=False)
    folder: Path | None = None

    @property
    def kind(self) -> str:
        """What the record says it is."""
        return str(self.record.get("kind", ""))

    @property
    def body(self) -> dict[str, Any]:
        """The record without what is said about it."""
        return {k: v for k, v in self.record.items() if k not in NOT_FIELDS}

    def origin(self, field: str | None) -> Origin:
        """Where the number of a field comes from; in a user's library the file is named first."""
        source = source_of(self.record, field)
        return Origin("library", ": ".join(filter(None, (self.file, source))))

    def part(self, name: str) -> Part | None:
        """The part of this record; None where its kind is not known.

        Raises
        ------
        ValidationError
            If the record has mistakes.
        """
        cls = component_class(self.kind)
        body = {"title": name, **self.body}
        context = {"origin": self.origin, "find": self._find, "folder": self.folder}
        return None if cls is None else cls.model_validate(body, context=context)

    def _find(self, cls: type[Part], name: str, *others: type[Part]) -> Part:
        """A part that this one names, as pydantic asks for it."""
        wanted = [c.model_fields["kind"].default for c in (cls, *others)]
        same = [n for n, e in self.beside.items() if e.kind in wanted]
        found = self.beside[name].part(name) if name in same else None
        if found is None:
            kind, known = " or ".join(wanted), ", ".join(sorted(same)) or "none"
            raise said(
                f'{kind} "{shortened(name)}" is not in the library{nearest(shortened(name), same)}; known: {known}'
            )
        return found


Shelves = Mapping[str, Entry]
"""Every part of the user's folders and of the built-in library, by name."""


def read_shelves(folders: Sequence[Path] = (), board: Path | None = None) -> Shelves:
    """The parts that a board may name: those of the user's folders, then the built-in ones that they do not replace.

    Parameters
    ----------
    folders : sequence of Path
        Named by the user.
    board : Path or None
        Board file; the folder `library` beside it counts as well, if there is one.

    Raises
    ------
    InputError
        With every mistake in the user's files, or if a folder cannot be used.
    """
    found: dict[str, Entry] = {}
    found.update({name: Entry(record, beside=found) for name, record in records().items()})
    _add_users(found, _files(folders, board))
    return found


def _files(folders: Sequence[Path], board: Path | None) -> Iterable[Path]:
    """The files of all folders, each once however often its folder is named."""
    beside = board.parent / FOLDER if board is not None else None
    wanted = [*folders, *([beside] if beside is not None and beside.is_dir() else [])]
    files: dict[Path, Path] = {}
    for folder in wanted:
        if not folder.is_dir():
            found = "is a file" if folder.exists() else "there is no such folder"
            raise InputError(f"--library {folder}: {found}; name a folder with .toml files of parts")
        inside = sorted(p for p in folder.glob("*.toml") if not p.name.startswith("."))
        if not inside and folder is not beside:
            raise InputError(f"--library {folder}: holds no .toml file; name a folder with .toml files of parts")
        for path in inside:
            files.setdefault(path.resolve(), path)
    return files.values()


def _add_users(shelves: dict[str, Entry], files: Iterable[Path]) -> None:
    """Put the user's parts on the shelves, and then look for mistakes: a part may name one of a later file."""
    found: dict[str, tuple[Entry, TomlFile, Keys]] = {}
    problems: list[Problem] = []
    for path in files:
        try:
            file = read_toml(path, "library")
        except InputError as err:
            problems += err.problems
            continue
        for keys, record in _tables(file):
            name = str(keys[-1])
            place = str(path) if (line := file.line(keys)) is None else f"{path}:{line}"
            if name in found:
                text = f"a part of this name stands in {found[name][0].place} already; rename or remove one of the two"
                problems.append(file.problem_at(keys, text))
                continue
            short = f"{path.resolve().parent.name}/{path.name}"
            if not isinstance(record, dict):
                problems.append(file.problem_at(keys, 'must be a table of a part, with a "kind"'))
                continue
            found[name] = (Entry(record, place, short, shelves, path.parent), file, keys)
    shelves.update({name: entry for name, (entry, _, _) in found.items()})
    problems += [problem for one in found.values() for problem in _mistakes(*one)]
    if problems:
        raise InputError(problems)


def _tables(file: TomlFile) -> Iterable[tuple[Keys, Any]]:
    for key, value in file.data.items():
        if key == "parts" and isinstance(value, dict) and "kind" not in value:
            yield from ((("parts", name), record) for name, record in value.items())
        else:
            yield (key,), value


def _mistakes(entry: Entry, file: TomlFile, keys: Keys) -> list[Problem]:
    """What is wrong with a user's record, each at its place in the file."""
    known = sorted(k for role in ("component", "register", "coil") for k in kinds(role))
    if "kind" not in entry.record:
        return [file.problem_at(keys, f'"kind" is missing; known: {", ".join(known)}')]
    sources = entry.record.get("sources", {})
    problems = []
    if not isinstance(entry.record.get("source", ""), str):
        problems.append(file.problem_at((*keys, "source"), "must be text in quotes"))
    if not isinstance(sources, dict) or not all(isinstance(s, str) for s in sources.values()):
        problems.append(file.problem_at((*keys, "sources"), "must be a table of text in quotes"))
    else:
        unknown = [s for s in sources if s not in entry.body]
        for s in unknown:
            text = f"names a number that the record does not have{nearest(s, list(entry.body))}"
            problems.append(file.problem_at((*keys, "sources", s), text))
    if problems:
        return problems
    try:
        if entry.part(str(keys[-1])) is None:
            kind = shortened(entry.kind)
            text = f'kind "{kind}" is not known{nearest(kind, known)}; known: {", ".join(known)}'
            return [file.problem_at((*keys, "kind"), text)]
    except ValidationError as err:
        return problems_in(err, file, keys)
    return []


def problems_in(err: ValidationError, file: TomlFile, prefix: Keys = ()) -> list[Problem]:
    """pydantic's errors about a table of a file, as problems with file and line; what only follows from others is left out."""
    data = _inside(file.data, prefix)
    errors = err.errors(include_url=False)
    whole = [e for e in errors if "has mistakes of its own" not in e["msg"]]
    found = {
        file.problem_at((*prefix, *_keys_in(data, e["loc"])), e["msg"].removeprefix("Value error, ")): None
        for e in whole or errors
    }
    return sorted(found, key=lambda p: p.line or 0)


def _inside(data: Any, keys: Keys) -> Any:
    for key in keys:
        data = data[key]
    return data


def _keys_in(data: Any, loc: tuple[int | str, ...]) -> Keys:
    """The part of pydantic's location that names keys of the file (it also names classes and kinds)."""
    keys: Keys = ()
    for step in loc:
        inside = step in data if isinstance(data, dict) else isinstance(data, list) and step in range(len(data))
        if inside:
            data = data[step]
            keys = (*keys, step)
    return keys
