"""Boards whose chain cannot work, for one reason each, and the same boards repaired."""

from __future__ import annotations

from pathlib import Path

import pytest

from boardsim.board.reader import read_board
from boardsim.firing.pattern import read_pattern
from boardsim.scenarios.chain import check_chain
from boardsim.scenarios.fire import fire_pattern
from boardsim.verdict.findings import Finding

HERE = Path(__file__).parent
# What fails on the bad board, and nothing else does; the clock is too fast for pulses and for the cascade alike.
CASES = {
    "chain_clock": {
        ("chain", "clock"),
        ("chain-timing", "set-up, register to register"),
        ("chain-timing", "high clock pulse, controller to every register"),
        ("chain-timing", "low clock pulse, controller to every register"),
    },
    "f12_levels": {("logic-level", "high level from the controller")},
}


def broken(findings: tuple[Finding, ...]) -> set[tuple[str, str]]:
    return {(f.check, f.quantity) for f in findings if f.verdict == "fail"}


@pytest.mark.parametrize("folder", CASES)
def test_the_bad_chain_fails_for_its_reason_and_no_other(folder: str) -> None:
    result = check_chain(read_board(HERE / folder / "bad.toml"), strict=True)
    assert broken(result.findings) == CASES[folder]
    assert result.verdict == "fail"
    assert {f.verdict for f in result.findings} <= {"fail", "tight", "pass", "unproven"}


@pytest.mark.parametrize("folder", CASES)
def test_the_repaired_chain_keeps_every_limit(folder: str) -> None:
    result = check_chain(read_board(HERE / folder / "repaired.toml"), strict=True)
    assert broken(result.findings) == set()
    assert result.verdict in ("pass", "tight")
    assert result.proven


@pytest.mark.engine
@pytest.mark.parametrize("folder", CASES)
@pytest.mark.parametrize("name", ["bad", "repaired"])
def test_no_pattern_passes_on_a_chain_that_cannot_work(tmp_path: Path, folder: str, name: str) -> None:
    read = read_board(HERE / folder / f"{name}.toml")
    result = fire_pattern(read, read_pattern(HERE / folder / "pattern.toml", read), tmp_path / "kept")
    assert result.proven
    assert broken(result.findings) == (CASES[folder] if name == "bad" else set())
    assert result.verdict in (("fail",) if name == "bad" else ("pass", "tight"))
