"""What do the register outputs do? Their edges as a file, for viewers and for the firmware's own tests."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path

from boardsim.board.reader import Board
from boardsim.errors import InputError
from boardsim.firing.pattern import Pattern
from boardsim.firing.schedule import fire
from boardsim.report.edge_dump import edges_text
from boardsim.report.files import write_text


def check_place(path: Path, inputs: Iterable[Path], pattern: Pattern) -> None:
    """Refuse to write edges over a file that was read; a capture and a list of events are among them.

    Raises
    ------
    InputError
        If it is one, or a folder.
    """
    recorded = pattern.recorded.recorded if pattern.recorded is not None else None
    read = [*inputs, pattern.path, *([recorded.capture] if recorded is not None else [])]
    if path.is_dir():
        raise InputError(f"--edges {path}: is a folder; name a file in it")
    if any(path.exists() and one.exists() and path.samefile(one) for one in read):
        raise InputError(f"--edges {path}: is one of the files to read; name another")


def write_edges(board: Board, pattern: Pattern, path: Path) -> None:
    """Write the edges of every channel's register output, of a matrix those of rows and columns, as a value change dump.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    firing = fire(board, pattern)
    labels = {d.number: d.label for d in board.drivers}
    levels = {d.number: firing.levels[d.output] for d in board.drivers}
    write_text(path, edges_text(board.name, labels, levels, firing.duration))
