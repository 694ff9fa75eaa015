"""A result as files in a folder: findings, test cases, pictures and the deck, each whole or not at all."""

from __future__ import annotations

import io
import os
from collections.abc import Iterable
from pathlib import Path

from rich.console import Console

from boardsim.errors import InputError
from boardsim.report.chain_picture import draw_chain
from boardsim.report.closeup import draw_closeups
from boardsim.report.edges import write_edges
from boardsim.report.files import remove_unfinished, write_text
from boardsim.report.json_report import write_findings
from boardsim.report.junit import write_junit
from boardsim.report.motion_picture import draw_motion
from boardsim.report.overview import draw_overview
from boardsim.report.power_up_picture import draw_power_up
from boardsim.report.release_picture import draw_release
from boardsim.report.stroke_picture import draw_stroke
from boardsim.report.terminal import print_result
from boardsim.report.volley_picture import draw_volley
from boardsim.verdict.findings import Result
from boardsim.verdict.strokes_study import StrokeStudy
from boardsim.verdict.studies import ChainStudy, PowerUp, Release, Volley

_OURS = (
    "findings.json",
    "junit.xml",
    "board.cir",
    "report.txt",
    "overview.png",
    "power-up.png",
    "release.png",
    "chain.png",
    "edges.csv",
    "motion.png",
    "stroke.png",
    "volley.png",
    "closeup-*.png",
    "fired.json",
    "overlay.png",
    "overlay.json",
    "computed.csv",
    "coil.toml",
)


def make_ready(folder: Path, inputs: Iterable[Path] = ()) -> None:
    """Make a folder for results, and take away what an earlier run left there.

    An old verdict must not stand for a run that comes to nothing.

    Parameters
    ----------
    folder : Path
    inputs : iterable of Path
        Files of the user's, which must not lie in the same folder: it may hold more that is theirs.

    Raises
    ------
    InputError
        If the folder cannot be used.
    """
    if (mine := next((p for p in inputs if p.parent.resolve() == folder.resolve()), None)) is not None:
        raise InputError(
            f"{folder}: holds {mine.name}, which results must not lie beside: they would overwrite files of the same names; "
            "choose another folder with --out"
        )
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
    picture = draw_main(result, folder)
    if result.motions and result.study is None:
        draw_motion(result, folder / "motion.png")
    pictures = draw_closeups(result, folder)
    if result.deck:
        write_text(folder / "board.cir", result.deck)
    if result.edges:
        write_edges(result.edges, folder / "edges.csv")
    write_text(folder / "report.txt", printed(result, picture, folder))
    write_junit(result, folder / "junit.xml")
    write_findings(result, folder / "findings.json", pictures)  # last: who waits for it finds the rest in place
    return picture


def draw_main(result: Result, folder: Path) -> Path:
    """Draw the picture that answers the scenario's question; its path.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    match result.study:
        case Volley():
            draw_volley(result, path := folder / "volley.png")
        case Release():
            draw_release(result, path := folder / "release.png")
        case ChainStudy():
            draw_chain(result, path := folder / "chain.png")
        case PowerUp():
            draw_power_up(result, path := folder / "power-up.png")
        case StrokeStudy():
            draw_stroke(result, path := folder / "stroke.png")
        case None:
            draw_overview(result, path := folder / "overview.png")
    return path


def printed(result: Result, picture: Path, folder: Path) -> str:
    """What stands on the terminal after a run, as plain text."""
    text = io.StringIO()
    print_result(result, Console(file=text, width=100, force_terminal=False, color_system=None), picture, folder)
    return text.getvalue()
