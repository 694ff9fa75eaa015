"""Whatever tells what is fired: pattern files, lists of events, captures of the bus."""

from __future__ import annotations

from pathlib import Path

from boardsim.board.reader import Board
from boardsim.board.toml_file import read_toml
from boardsim.errors import InputError, Problem
from boardsim.firing.capture import capture_of
from boardsim.firing.csv_events import events_of, read_events
from boardsim.firing.pattern import Pattern, pattern_of

_DUMP = (
    "is a capture; name a TOML file beside it that says which signal is which: "
    'capture = "{name}" and signals = {{ data = "...", clock = "...", latch = "..." }}'
)


def read_source(path: Path, board: Board) -> Pattern:
    """Read a pattern from whatever kind of file tells it: TOML with pulses, TOML that names a capture or a list, or CSV.

    Raises
    ------
    InputError
        If the file cannot be used: file, line, what was found, what is allowed.
    """
    ending = path.suffix.lower()
    if ending == ".csv":
        return read_events(path, board)
    if ending == ".vcd":
        raise InputError([Problem(str(path), None, _DUMP.format(name=path.name))])
    file = read_toml(path, "pattern")
    if "capture" in file.data or ("signals" in file.data and "pulses" not in file.data):
        return capture_of(file, board)
    if "events" in file.data and "pulses" not in file.data:
        return events_of(file, board)
    return pattern_of(file, board)
