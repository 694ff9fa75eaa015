"""Several scenarios in one file and one table: what is not as expected stands out, and nothing is hidden."""

from __future__ import annotations

import datetime
import io
import json
from pathlib import Path

import pytest
from jsonschema import Draft202012Validator
from made_up_results import finding, result
from rich.console import Console

from boardsim.errors import Problem
from boardsim.report.collection import SCHEMA, SCHEMA_FILE, print_collection, write_collection
from boardsim.verdict.expectations import Expectation, KnownFailure, Outcome, accept, compare
from boardsim.verdict.findings import Result

DAY = datetime.date(2026, 12, 31)
KNOWN = KnownFailure("overcurrent", "seed slots are replaced in spring", DAY)


def outcome(judged: Result, expectation: Expectation | None = None, name: str = "sorter/rush") -> Outcome:
    wanted = expectation or Expectation()
    status, surprises = compare(judged, wanted)
    return Outcome(name, Path(name), "fire", wanted, judged, status, surprises, 1.5)


def printed(outcomes: list[Outcome], status: int, problems: tuple[Problem, ...] = (), width: int = 100) -> str:
    text = io.StringIO()
    print_collection(outcomes, problems, status, Console(file=text, width=width), Path("out/verify"))
    return text.getvalue()


def test_the_file_follows_its_schema_and_every_finding_names_its_scenario(tmp_path: Path) -> None:
    broken = Outcome("a/b", Path("a/b"), "volley", Expectation(), None, 2, ("the disk is full",), 0.1)
    outcomes = [outcome(result()), outcome(result((finding("tight"),)), name="sorter/steady"), broken]
    problem = Problem("scenarios.toml", 3, "needs a pattern")
    write_collection(outcomes, [problem], 2, tmp_path)
    read = json.loads((tmp_path / "findings.json").read_text())
    schema = json.loads(SCHEMA_FILE.read_text())
    Draft202012Validator.check_schema(schema)
    assert schema["title"] == SCHEMA
    Draft202012Validator(schema).validate(read)
    assert (read["verdict"], read["status"]) == ("wrong input", 2)
    assert len(read["findings"]) == len(result().findings) + 1
    assert {f["scenario"] for f in read["findings"]} == {"sorter/rush", "sorter/steady"}
    assert [s["verdict"] for s in read["scenarios"]] == ["fail", "tight", None]
    assert read["problems"] == [{"file": "scenarios.toml", "line": 3, "text": "needs a pattern"}]


def test_what_is_not_as_expected_is_told_in_its_sentences() -> None:
    text = printed(
        [outcome(result((finding("fail", 7),))), outcome(result((finding("tight"),)), name="sorter/calm")], 1
    )
    assert "The clamp diode of lane 7 carries 3.2 A at turn-off." in text
    assert text.splitlines()[-1] == "verdict: fail - 1 of 2 scenarios as expected. All files in out/verify"


def test_what_a_scenario_is_to_break_is_counted_and_not_told_again() -> None:
    text = printed([outcome(result((finding("fail", 7),)), Expectation("fail", ("overcurrent",)))], 0)
    assert "fail: overcurrent" in text
    assert "1 fail" in text
    assert "carries 3.2 A" not in text


def test_an_accepted_failure_is_in_view_with_reason_and_day() -> None:
    judged = accept(result((finding("fail", 7), finding("pass", 8))), [KNOWN], DAY)
    text = " ".join(printed([outcome(judged)], 0).split())
    assert "1 accepted" in text
    assert "carries 3.2 A at turn-off. [accepted until 2026-12-31: seed slots are replaced in spring]" in text


def test_an_acceptance_that_nothing_needs_is_noted() -> None:
    judged = accept(result((finding("pass", 8),)), [KNOWN], DAY)
    assert "take it out of the scenario file" in " ".join(printed([outcome(judged)], 0).split())


def test_missing_limits_are_told_where_they_count_as_broken() -> None:
    missing = result((finding("limit-missing", 3),), strict=True)
    judged = type(missing)(**{**vars(missing), "strict": True})
    assert "The clamp diode of lane 3" in printed([outcome(judged)], 1)


@pytest.mark.parametrize("width", [60, 80, 100, 140])
def test_numbers_and_words_stay_whole_at_any_width(width: int) -> None:
    text = printed([outcome(result((finding("fail", 7),)), name="sorter/rush")], 1, width=width)
    for word in ("fail", "rush", "1.5 s"):
        assert word in text
    assert max(len(line) for line in text.splitlines()[:-1]) <= width


def test_control_characters_in_names_do_not_reach_the_terminal() -> None:
    assert "\x1b" not in printed([outcome(result((finding("fail", 7),)), name="a\x1b[31m/b")], 1)
