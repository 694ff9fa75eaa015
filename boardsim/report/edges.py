"""edges.csv: every pulse as asked for, as the controller's timer has it, and as its output shows it."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable
from pathlib import Path

from boardsim.report.files import write_text
from boardsim.report.wording import plain
from boardsim.verdict.findings import EdgeTimes

_COLUMNS = ("asked on", "asked off", "timer on", "timer off", "output on", "output off")


def write_edges(edges: Iterable[EdgeTimes], path: Path) -> None:
    """Write a table with one row per pulse, whole or not at all; times in seconds, to the nanosecond.

    The output's times are empty where it shows nothing of the pulse.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    text = io.StringIO()
    table = csv.writer(text, lineterminator="\n")
    table.writerow(["channel", "label", *(f"{name} [s]" for name in _COLUMNS)])
    for e in edges:
        times = (*e.asked, *e.timer, *(e.output or ()))
        row = [f"{t:.9f}" for t in times]
        table.writerow([e.channel, plain(e.label), *row, *[""] * (len(_COLUMNS) - len(row))])
    write_text(path, text.getvalue())
