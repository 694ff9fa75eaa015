"""What a corner that could not be run does to the verdict of the whole."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from test_scenarios_fire import PULSES, SMALL

from boardsim.board.reader import read_board
from boardsim.errors import EngineCrash
from boardsim.firing.pattern import read_pattern
from boardsim.scenarios import all_corners as room
from boardsim.scenarios.audited import CornerResult, run_corner
from boardsim.scenarios.fire import fire_pattern
from boardsim.verdict.findings import CornerAudit, Result, exit_status

TOLERANCED = SMALL.replace('voltage = "24 V"', 'voltage = "24 V +/- 5 %"')
SWALLOWED = '[[pulses]]\nchannels = "1"\nstart = "1.0001 ms"\nwidth = "2 us"\n'


def crash(corner: Any) -> CornerResult:
    seconds = {"assemble": 0.0, "simulate": 0.0, "read": 0.0}
    return CornerResult(
        corner, None, CornerAudit(corner.name, (), False), seconds, EngineCrash("ngspice ended by itself")
    )


def fired(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, board: str, pattern: str, crashes: Callable[[Any], bool]
) -> Result:
    (tmp_path / "board.toml").write_text(board)
    (tmp_path / "pattern.toml").write_text(pattern)
    the_board = read_board(tmp_path / "board.toml")

    def some(board: Any, firing: Any, corner: Any, *rest: Any, **named: Any) -> CornerResult:
        return crash(corner) if crashes(corner) else run_corner(board, firing, corner, *rest, **named)

    monkeypatch.setattr(room, "run_corner", some)
    return fire_pattern(the_board, read_pattern(tmp_path / "pattern.toml", the_board), tmp_path / "kept")


@pytest.mark.engine
def test_one_corner_that_crashes_makes_a_sound_board_unproven(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    result = fired(tmp_path, monkeypatch, TOLERANCED, PULSES, lambda c: c.name.startswith("supply high"))
    assert (result.verdict, exit_status(result.verdict), result.proven) == ("unproven", 3, False)
    assert any("ended by itself" in note for note in result.notes)
    assert result.findings  # what the other corners found is still told


@pytest.mark.engine
def test_a_limit_broken_in_a_proven_corner_counts_though_another_crashed(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    board = TOLERANCED.replace('pull_in = "0.5 A"', 'pull_in = "2 A"')
    result = fired(tmp_path, monkeypatch, board, PULSES, lambda c: c.name.startswith("supply high"))
    assert (result.verdict, exit_status(result.verdict)) == ("fail", 1)


def test_with_no_corner_run_only_what_needs_no_circuit_counts(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    nothing = fired(tmp_path, monkeypatch, TOLERANCED, PULSES, lambda c: True)
    assert (nothing.verdict, nothing.traces, nothing.deck, nothing.findings) == ("unproven", None, "", ())
    lost = fired(tmp_path, monkeypatch, TOLERANCED, PULSES + SWALLOWED, lambda c: True)
    assert lost.verdict == "fail"
    assert {f.verdict for f in lost.findings} == {"fail"}
