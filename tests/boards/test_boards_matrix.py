"""Boards with coils in rows and columns: ghosts, ways through other coils, and both repaired."""

from __future__ import annotations

from pathlib import Path

import pytest

from boardsim.board.reader import read_board
from boardsim.firing.pattern import read_pattern
from boardsim.report.json_report import result_to_dict
from boardsim.scenarios.fire import fire_pattern
from boardsim.verdict.findings import Finding, Result

pytestmark = pytest.mark.engine

HERE = Path(__file__).parent / "f15_matrix_ghosts"


def fired(board: str, pattern: str, keep: Path) -> Result:
    read = read_board(HERE / f"{board}.toml")
    result = fire_pattern(read, read_pattern(HERE / f"{pattern}.toml", read), keep / "kept")
    assert result.proven
    return result


def broken(result: Result) -> dict[tuple[str, str, int | None], Finding]:
    return {(f.check, f.quantity, f.channel): f for f in result.findings if f.verdict == "fail"}


def test_two_crossings_at_once_fire_two_ghosts_and_break_nothing_else(tmp_path: Path) -> None:
    result = fired("board", "together", tmp_path)
    assert set(broken(result)) == {("wrong-output", "output against command", n) for n in (1, 3)}
    ends = {f.channel: f.value for f in result.findings if f.check == "pull-in"}
    # A ghost carries what a commanded one does: 24 V less source, series diode and switch through 150 ohm.
    assert ends[1] == pytest.approx(ends[0], rel=1e-3)
    assert 0.14 < ends[1] < 24.0 / 150.0


def test_a_scan_of_the_rows_repairs_it_and_lines_are_judged_once(tmp_path: Path) -> None:
    result = fired("board", "scanned", tmp_path)
    assert broken(result) == {}
    assert {f.verdict for f in result.findings} <= {"pass", "tight"}
    sources = [f for f in result.findings if f.quantity == "peak current of the switch" and f.label.startswith("row")]
    assert [(f.label, f.channel) for f in sorted(sources, key=lambda f: f.label)] == [("row 0", None), ("row 1", None)]
    told = result_to_dict(result)
    assert {f["channel"] for f in told["findings"]} == {None, *range(6)}


def test_without_diodes_the_same_scan_feeds_coils_that_nobody_commands(tmp_path: Path) -> None:
    found = broken(fired("no_diodes", "scanned", tmp_path))
    assert {key[:2] for key in found} == {("uncommanded", "sneak current")}
    # Needle 0 is fired: two coils of row 0 in parallel, then two of row 1, then the coil from row 1 to column 0. That one
    # carries V / (R/2 + R/2 + R), and each of the others half of it; with needle 4 it is the coil from row 0 to column 1.
    shared = found["uncommanded", "sneak current", 3].value
    assert found["uncommanded", "sneak current", 1].value == pytest.approx(shared, rel=1e-3)
    # 2 %: source and switch take 1.5 V to 1.7 V of the 24 V.
    assert shared == pytest.approx((24.0 - 1.55) / (2 * 150.0), rel=0.02)
    for half in (2, 5):
        assert found["uncommanded", "sneak current", half].value == pytest.approx(shared / 2, rel=0.02)
