"""Model files -> statements: every byte is held against an allow list before anything is understood.

ngspice 39 runs commands that stand in a deck, as measured with a command that makes a file: between `.control` and
`.endc`, in any case, after leading blanks, inside `.if`, after `.end` and in included files; and from every line that
begins with `*#`, a comment to everybody else, also inside an included `.subckt`. So no line of a vendor ever goes into a
deck: what is read here becomes numbers and names of our own.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field
from pathlib import Path

from boardsim.errors import QuantityError
from boardsim.parts.record import shortened

LARGEST_FILE = 1 << 20  # [byte]; a maker's library of a hundred transistors has a fifth of it
MOST_FILES = 32
_LARGEST_TOGETHER = 2 << 20  # [byte] of a file and what it includes
_MOST_LINES = 100_000  # of these together, comments among them
_MOST_STATEMENTS = 20_000  # of these together
_LONGEST_LINE = 4096
_LONGEST_STATEMENT = 32768
_DEEPEST = 8  # includes within includes

_ALLOWED = re.compile(r"[A-Za-z0-9_ \t.+\-*/=(){},:<>&|!?^~\"]*")
_ENCRYPTED = re.compile(r"\$?cdnencstart|encrypted_lib|\.prot\b|ltspice encrypted|^\W*begin:\s*$", re.IGNORECASE)
_INCLUDE = re.compile(r"\.(include|inc|lib)\b[ \t]*(.*)", re.IGNORECASE)
_NAME_OF_FILE = re.compile(r'"([^"]*)"|([^\s"]+)')


class ModelTextError(QuantityError):
    """A vendor's model file holds what is not allowed or cannot be translated; says where, what, and what is allowed."""


@dataclass(frozen=True)
class Place:
    """A line of a model file."""

    file: str
    line: int

    def __str__(self) -> str:
        return f"{self.file}:{self.line}"

    def refuse(self, text: str) -> ModelTextError:
        """The mistake at this place."""
        return ModelTextError(f"{self}: {text}")


@dataclass(frozen=True)
class Statement:
    """A logical line in lower case: continuations joined, comments gone."""

    place: Place
    text: str


def read_statements(path: Path, folder: Path) -> tuple[Statement, ...]:
    """Every statement of a model file and of the files that it includes.

    Parameters
    ----------
    path : Path
    folder : Path
        What is read must lie in it or below, links resolved.

    Raises
    ------
    ModelTextError
        If a file cannot be read, lies elsewhere, or holds what no model needs.
    """
    return tuple(_read(path, folder.resolve(), (), _Taken()))


@dataclass
class _Taken:
    """What was read of a model so far, so that many files together stay bounded as well as each."""

    files: set[Path] = field(default_factory=set)
    size: int = 0
    lines: int = 0
    statements: int = 0


def _read(
    path: Path, folder: Path, around: tuple[Path, ...], taken: _Taken, named: Place | None = None
) -> Iterator[Statement]:
    where = around[-1].name if around else path.name
    try:
        real = path.resolve()
        inside = real.is_relative_to(folder)
        there = inside and real.is_file()
    except (OSError, ValueError, RuntimeError) as err:
        raise ModelTextError(
            f"{plain_name(where)}: {plain_name(path.name)} cannot be read ({plain_name(str(err))})"
        ) from None
    name = plain_name(path.name)
    if not inside:
        said = (
            f"{name} lies outside the folder {plain_name(folder.name)}; a model file and what it includes lie beside the file that "
            "names them, or below"
        )
        raise ModelTextError(said) if named is None else named.refuse(f"includes a file beyond what is allowed: {said}")
    if not there:
        said = f"{name} is not there, or is no file; name an existing model file, relative to this one"
        raise ModelTextError(said) if named is None else named.refuse(f"includes a file that cannot be read: {said}")
    if real in around:
        raise ModelTextError(f"{name} includes itself, by way of {plain_name(where)}")
    if len(around) >= _DEEPEST:
        raise ModelTextError(f"{name}: includes nest more than {_DEEPEST} files deep")
    if real in taken.files:
        return  # its definitions are there already
    taken.files.add(real)
    if len(taken.files) > MOST_FILES:
        raise ModelTextError(f"{name}: more than {MOST_FILES} files are included")
    text = _decoded(real, name)
    taken.size += len(text)
    taken.lines += text.count("\n") + text.count("\r")
    if taken.size > _LARGEST_TOGETHER:
        raise ModelTextError(
            f"{name}: with the files before it more than {_LARGEST_TOGETHER >> 20} MiB are read; leave out what the part does not need"
        )
    if taken.lines > _MOST_LINES:
        raise ModelTextError(
            f"{name}: more than {_MOST_LINES} lines are no model; leave out what the part does not need"
        )
    for statement in _statements(text, name):
        taken.statements += 1
        if taken.statements > _MOST_STATEMENTS:
            raise statement.place.refuse(f"more than {_MOST_STATEMENTS} statements are no model")
        included = _INCLUDE.match(statement.text)
        if included:
            target = _target(included[2], statement.place)
            yield from _read(real.parent / target, folder, (*around, real), taken, statement.place)
        else:
            yield Statement(statement.place, statement.text.lower())


def _target(text: str, place: Place) -> str:
    """The file of an include; the section of a library, or anything absolute, is refused."""
    found = _NAME_OF_FILE.fullmatch(text.strip())
    name = (found[1] if found[1] is not None else found[2]) if found else ""
    if not name:
        raise place.refuse(
            f"cannot be used: {_shown(text)} is not one file's name; sections of a library (.lib FILE SECTION) are not read"
        )
    if name.startswith(("/", "~")) or re.match(r"[A-Za-z]:", name):
        raise place.refuse(f"includes {_shown(name)}; only files in this file's own folder, or below, may be included")
    return name


def _decoded(path: Path, name: str) -> str:
    try:
        with path.open("rb") as handle:
            raw = handle.read(LARGEST_FILE + 1)
    except OSError as err:
        raise ModelTextError(f"{name}: cannot be read ({err.strerror or err})") from None
    if len(raw) > LARGEST_FILE:
        raise ModelTextError(f"{name}: is larger than {LARGEST_FILE >> 20} MiB, which no model file is")
    try:
        return raw.decode("utf-8-sig")
    except UnicodeDecodeError:
        return raw.decode("latin-1")  # comments of old files; anything beyond ASCII is refused outside of comments


def _statements(text: str, name: str) -> Iterator[Statement]:
    """Logical lines. A `+` continues the last line that is no comment, as in ngspice."""
    waiting: Statement | None = None
    for number, line in enumerate(re.split(r"\r\n|\n|\r", text), 1):
        place = Place(name, number)
        content = _content(line, place)
        if not content:
            continue
        if content.startswith("+"):
            if waiting is None:
                raise place.refuse("begins with +, and there is no line above that it could continue")
            if _INCLUDE.match(waiting.text):
                raise place.refuse("continues the name of a file; write it on one line")
            waiting = Statement(waiting.place, f"{waiting.text} {content[1:].strip()}")
            if len(waiting.text) > _LONGEST_STATEMENT:
                raise place.refuse(f"a statement of more than {_LONGEST_STATEMENT} characters is no model's")
            continue
        if waiting is not None:
            yield waiting
        waiting = Statement(place, content)
    if waiting is not None:
        yield waiting


def _content(line: str, place: Place) -> str:
    """What a physical line says, without its comment; empty for none."""
    if len(line) > _LONGEST_LINE:
        raise place.refuse(f"a line of {len(line)} characters is longer than the {_LONGEST_LINE} that a model may have")
    odd = next((c for c in line if (ord(c) < 32 and c != "\t") or 127 <= ord(c) < 160), "")
    if odd:
        raise place.refuse(f"holds the control character 0x{ord(odd):02x}; a model file is plain text")
    if _ENCRYPTED.search(line):
        raise place.refuse(
            "is encrypted, so that nobody can check what it says; ask the maker for a plain model, or leave the model out: "
            "the record's datasheet figures then shape it"
        )
    text = line.strip(" \t")
    if text.startswith("*#") and re.search(r"\w", text):
        raise place.refuse("begins with *#, which ngspice runs as a command; a comment begins with * alone")
    if text.startswith("*"):
        return ""
    text = re.split(r";|\$(?=[ \t]|$)", text, maxsplit=1)[0].strip(" \t")
    allowed = _ALLOWED.match(text)
    end = allowed.end() if allowed else 0
    if end < len(text):
        odd = text[end]
        found = repr(odd) if odd.isascii() else f"U+{ord(odd):04X}"
        raise place.refuse(
            f"holds {found}, which no model needs; outside of comments letters, digits and . _ + - * / = ( ) {{ }} , : < > & | ! ? are allowed"
        )
    if '"' in text and not _INCLUDE.match(text):
        raise place.refuse("holds text in quotes; only the file name of .include may stand in quotes")
    # One blank for many: what looks for words later takes a time that grows with the square of a run of blanks.
    return text if _INCLUDE.match(text) else re.sub(r"[ \t]+", " ", text)


def _shown(text: str) -> str:
    return repr(shortened(text))


def some_of(names: Iterable[str]) -> str:
    """Names for a message; a dozen where there are more."""
    every = [shortened(n) for n in names]
    return ", ".join(every[:12]) + (f" ... ({len(every)} in all)" if len(every) > 12 else "") or "none"


def plain_name(text: str) -> str:
    """A file's name for a message and for a deck's comment: what is not a plain character shows as a question mark."""
    return re.sub(r"[^A-Za-z0-9 ._+\-]", "?", shortened(text)) or "?"
