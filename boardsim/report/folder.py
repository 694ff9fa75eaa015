"""A result as files in a folder: findings, test cases, pictures and the deck, each whole or not at all."""

from __future__ import annotations

import os
from pathlib import Path

from boardsim.errors import InputError
from boardsim.report.files import remove_unfinished, write_text
from boardsim.report.json_report import write_findings
from boardsim.report.junit import write_junit
from boardsim.report.overview import draw_overview
from boardsim.verdict.findings import Result

_OURS = ("findings.json", "junit.xml", "board.cir", "overview.png", "release.png", "volley.png", "closeup-*.png")


def make_ready(folder: Path) -> None:
    """Make a folder for results, and take away what an earlier run left there.

    An old verdict must not stand for a run that comes to nothing.

    Raises
    ------
    InputError
        If the folder cannot be used.
    """
    try:
        folder.mkdir(parents=True, exist_ok=True)
        usable = os.access(folder, os.W_OK | os.X_OK)
        why = "no permission to write"
        if usable:
            for pattern in _OURS:
                for old in folder.glob(pattern):
                    old.unlink(missing_ok=True)
            remove_unfinished(folder)
    except OSError as err:
        usable, why = False, err.strerror or str(err)
    if not usable:
        raise InputError(f"{folder}: cannot be used as a folder for results: {why}; choose another with --out")


def write_results(result: Result, folder: Path) -> Path:
    """Write everything that a result is to leave behind; the path of its main picture.

    Raises
    ------
    InputError
        If a file cannot be written.
    """
    picture = folder / "overview.png"
    draw_overview(result, picture)
    if result.deck:
        write_text(folder / "board.cir", result.deck)
    write_junit(result, folder / "junit.xml")
    write_findings(result, folder / "findings.json")  # last: whoever waits for the verdict finds the rest in place
    return picture
