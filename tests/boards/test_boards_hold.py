"""Valves that are held by a chop: dropped where that is slow, held where it is fast; and opened from a reservoir."""

from __future__ import annotations

from pathlib import Path

import pytest

from boardsim.board.reader import read_board
from boardsim.firing.pattern import read_pattern
from boardsim.scenarios.fire import fire_pattern
from boardsim.verdict.findings import Result

pytestmark = pytest.mark.engine

HERE = Path(__file__).parent


def fired(folder: str, pattern: str, keep: Path) -> Result:
    read = read_board(HERE / folder / "board.toml")
    result = fire_pattern(read, read_pattern(HERE / folder / f"{pattern}.toml", read), keep / "kept", pictured=False)
    assert result.proven
    return result


def test_a_valve_that_is_chopped_too_slowly_drops_and_nothing_else_is_wrong(tmp_path: Path) -> None:
    result = fired("peak_and_hold", "slow", tmp_path)
    assert {f.check for f in result.findings if f.verdict == "fail"} == {"hold"}
    # It pulls in by the end of its peak, and is one pulse to every other rule.
    (pull_in,) = (f for f in result.findings if f.check == "pull-in")
    assert pull_in.verdict == "pass"
    assert "at the end of its peak" in pull_in.sentence
    assert not any(f.check == "overlap" and f.unit == "A" for f in result.findings)


@pytest.mark.slow
def test_the_same_duty_five_times_as_fast_holds_it(tmp_path: Path) -> None:
    result = fired("peak_and_hold", "fast", tmp_path)
    assert {f.verdict for f in result.findings} <= {"pass", "tight"}


@pytest.mark.slow
def test_a_burst_finds_the_reservoir_lower_than_its_peaks_need(tmp_path: Path) -> None:
    result = fired("boosted_bank", "burst", tmp_path)
    assert {f.check for f in result.findings if f.verdict == "fail"} == {"boost"}


@pytest.mark.slow
def test_with_pauses_the_reservoir_recovers(tmp_path: Path) -> None:
    result = fired("boosted_bank", "steady", tmp_path)
    assert {f.verdict for f in result.findings} <= {"pass", "tight"}
