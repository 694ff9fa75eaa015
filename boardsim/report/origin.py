"""fired.json: from which files a result was fired, so that one pulse of it can be computed again and held against a trace."""

from __future__ import annotations

import hashlib
import json
import os
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path

from boardsim.errors import InputError, Problem
from boardsim.report.json_report import write_json

NAME = "fired.json"
_SCHEMA = "boardsim-fired/1"


@dataclass(frozen=True)
class Origin:
    """What was fired.

    Attributes
    ----------
    board, pattern : Path
    libraries : tuple of Path
        Folders that were named.
    files : mapping of Path to str
        Every file that was read, and the digest of what it held.
    boardsim : str
        Version.
    """

    board: Path
    pattern: Path
    libraries: tuple[Path, ...]
    files: tuple[tuple[Path, str], ...]
    boardsim: str

    def changes(self) -> tuple[str, ...]:
        """What is not as it was when it was fired, in words."""
        found = []
        for path, digest in self.files:
            now = _digest(path)
            if now != digest:
                found.append(
                    f"{path} {'is gone' if not now else 'has changed'} since it was fired: computed as it is now"
                )
        if self.boardsim != version("boardsim"):
            found.append(f"it was fired by boardsim {self.boardsim} and is computed by {version('boardsim')}")
        return tuple(found)


def origin_of(board: Path, pattern: Path, libraries: Sequence[Path], also: Iterable[Path] = ()) -> Origin:
    """What is about to be fired; `also` are further files that the pattern was read from."""
    folders = [*libraries, board.parent / "library"]
    parts = [p for folder in folders if folder.is_dir() for p in sorted(folder.glob("*.toml"))]
    files = dict.fromkeys(p.resolve() for p in (board, pattern, *also, *parts) if p.is_file())
    return Origin(board, pattern, tuple(libraries), tuple((p, _digest(p)) for p in files), version("boardsim"))


def write_origin(origin: Origin, folder: Path) -> None:
    """Write fired.json, whole or not at all; paths are relative to the folder, so that both may move together.

    Raises
    ------
    InputError
        If the file cannot be written.
    """

    def there(path: Path) -> str:
        try:
            return os.path.relpath(path.resolve(), folder.resolve())
        except ValueError:  # another drive
            return str(path.resolve())

    values = {
        "schema": _SCHEMA,
        "boardsim": origin.boardsim,
        "board": there(origin.board),
        "pattern": there(origin.pattern),
        "libraries": [there(p) for p in origin.libraries],
        "files": {there(p): digest for p, digest in origin.files},
    }
    write_json(folder / NAME, values)


def read_origin(folder: Path) -> Origin:
    """Read fired.json of a result.

    Raises
    ------
    InputError
        If there is none that can be used.
    """
    path = folder / NAME
    if not folder.is_dir():
        raise InputError(f"{folder}: is no folder; name the one that boardsim fire wrote its results into (--out)")
    if not path.is_file():
        raise InputError(
            f"{folder}: holds no {NAME}, which tells what was fired; name a folder of boardsim fire, or fire the pattern again"
        )
    try:
        raw = json.loads(path.read_text(encoding="utf-8"))
        if raw["schema"] != _SCHEMA:
            raise InputError(
                [Problem(str(path), None, f"is of another version ({raw['schema']!r}); fire the pattern again")]
            )
        files = tuple((folder / p, str(digest)) for p, digest in raw["files"].items())
        return Origin(
            _near(folder / raw["board"]),
            _near(folder / raw["pattern"]),
            tuple(_near(folder / p) for p in raw["libraries"]),
            tuple((_near(p), digest) for p, digest in files),
            str(raw["boardsim"]),
        )
    except (OSError, ValueError, KeyError, TypeError, AttributeError) as err:
        raise InputError([Problem(str(path), None, "cannot be read; fire the pattern again")]) from err


def _near(path: Path) -> Path:
    """A path as people write it: without steps back, and from where they are if that is shorter."""
    whole = Path(os.path.normpath(path.absolute()))
    try:
        return whole.relative_to(Path.cwd())
    except ValueError:
        return whole


def _digest(path: Path) -> str:
    """Of what a file holds; empty where it cannot be read."""
    try:
        return hashlib.sha256(path.read_bytes()).hexdigest()
    except OSError:
        return ""
