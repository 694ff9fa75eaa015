"""Output files appear whole or not at all."""

from __future__ import annotations

import contextlib
import os
import secrets
import time
from collections.abc import Callable
from pathlib import Path

from boardsim.errors import InputError

_STALE = 60.0  # [s], far more than writing a file takes


def write_whole(path: Path, write: Callable[[Path], None]) -> None:
    """Write a file beside its place, then move it there; creates the folder.

    Parameters
    ----------
    path : Path
        Where the file is to stand.
    write : callable
        Writes everything to the path that it is given; its name does not end like `path`, so a writer that
        picks a format by the ending must be told the format.

    Raises
    ------
    InputError
        If the folder or the file cannot be written.
    """
    # The same folder, since a rename is atomic within one file system only; a random part, since two runs may
    # write to one folder at once.
    beside = path.with_name(f".{path.name}.{secrets.token_hex(4)}.part")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        try:
            write(beside)
            os.replace(beside, path)
        finally:
            beside.unlink(missing_ok=True)
    except OSError as err:
        raise InputError(
            f"{path}: the result cannot be written here ({err.strerror or err}); "
            "make room, set the permissions, or choose another place"
        ) from err


def write_bytes(path: Path, content: bytes) -> None:
    """Write bytes, whole or not at all.

    Raises
    ------
    InputError
        If the folder or the file cannot be written.
    """
    write_whole(path, lambda beside: _dump(beside, content))


def remove_unfinished(folder: Path) -> None:
    """Remove what a killed run left beside its files' places; what is fresh may be another run's, at work.

    Raises
    ------
    OSError
        If the folder cannot be read or a file not be removed.
    """
    for left in folder.glob(".*.part"):
        with contextlib.suppress(FileNotFoundError):  # the other run has just finished it
            if time.time() - left.stat().st_mtime > _STALE:
                left.unlink()


def write_text(path: Path, text: str) -> None:
    """Write text as UTF-8, whole or not at all.

    Raises
    ------
    InputError
        If the folder or the file cannot be written.
    """
    # A name taken from a file system may hold bytes that are no UTF-8; a report must not fail for that.
    write_bytes(path, text.encode("utf-8", "replace"))


def _dump(path: Path, content: bytes) -> None:
    path.write_bytes(content)
