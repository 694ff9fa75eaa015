"""Boards whose logic rail hangs on the coil rail and falls with it: reset, phantom clock, cleared chain; and repaired (F11)."""

from __future__ import annotations

from pathlib import Path

import pytest

from boardsim.board.reader import read_board
from boardsim.firing.pattern import read_pattern
from boardsim.scenarios.fire import fire_pattern
from boardsim.verdict.findings import Result

pytestmark = pytest.mark.engine

HERE = Path(__file__).parent
CLOCK, CLEAR = "logic rail that holds the clock line", "clear line as a share of its high level"
# What fails on the bad board, and nothing else does. A clock that is not surely high is an edge while it rests, and a wrong level
# in the frame that is sent in the dip.
CASES = {
    "f11_false_reset": {("logic-sag", "logic rail voltage")},
    "f11_corrupted_chain": {("uncommanded-edge", CLOCK), ("logic-level", "high level from the controller")},
    "f11_cleared_chain": {("uncommanded-edge", CLEAR)},
}


def fired(folder: str, board: str, keep: Path) -> Result:
    read = read_board(HERE / folder / f"{board}.toml")
    result = fire_pattern(read, read_pattern(HERE / folder / "pattern.toml", read), keep / "kept", strict=True)
    assert all(audit.proven for audit in result.audit), result.notes
    return result


def broken(result: Result) -> set[tuple[str, str]]:
    return {(f.check, f.quantity) for f in result.findings if f.verdict == "fail"}


@pytest.mark.parametrize("folder", CASES)
def test_the_bad_rail_fails_for_its_reason_and_no_other(tmp_path: Path, folder: str) -> None:
    result = fired(folder, "bad", tmp_path)
    assert broken(result) == CASES[folder]
    assert {f.verdict for f in result.findings} <= {"fail", "tight", "pass", "unproven"}
    assert {f.consequence for f in result.findings if f.verdict == "fail"} == {"misbehave"}


@pytest.mark.parametrize("folder", CASES)
def test_the_repaired_rail_keeps_every_limit(tmp_path: Path, folder: str) -> None:
    result = fired(folder, "repaired", tmp_path)
    assert broken(result) == set()
    assert result.verdict in ("pass", "tight")
    assert result.proven


def test_a_reset_is_told_with_its_depth_and_how_long_it_lasts(tmp_path: Path) -> None:
    (one,) = (f for f in fired("f11_false_reset", "bad", tmp_path).findings if f.check == "logic-sag")
    assert one.lasting is not None
    assert one.value < 4.65
    assert "the logic rail voltage fell to" in one.sentence
    assert "the controller resets after 20.0 us; try: fewer channels at once" in one.sentence
