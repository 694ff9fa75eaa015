"""junit.xml: what a CI service counts is what was found."""

import datetime
import os
import subprocess
import sys
import xml.etree.ElementTree as ET
from collections import Counter
from pathlib import Path

import pytest
from junitparser import Error, Failure, JUnitXml, Skipped
from made_up_results import finding, result

from boardsim.errors import Problem
from boardsim.report.junit import write_joint_junit, write_junit
from boardsim.verdict.expectations import Expectation, KnownFailure, Outcome, accept, compare
from boardsim.verdict.findings import Result


def suite(judged: Result, tmp_path: Path) -> ET.Element:
    write_junit(judged, tmp_path / "junit.xml")
    root = ET.parse(tmp_path / "junit.xml").getroot()
    assert root.tag == "testsuites"
    (only,) = root
    assert only.tag == "testsuite"
    return only


def test_the_counts_are_those_of_the_findings(tmp_path: Path) -> None:
    judged = result()
    xml = suite(judged, tmp_path)
    verdicts = Counter(f.verdict for f in judged.findings)
    assert int(xml.attrib["tests"]) == len(judged.findings) == len(xml.findall("testcase"))
    assert int(xml.attrib["failures"]) == verdicts["fail"] == len(xml.findall("testcase/failure"))
    assert int(xml.attrib["skipped"]) == verdicts["limit-missing"] == len(xml.findall("testcase/skipped"))
    assert xml.attrib["errors"] == "0"
    assert float(xml.attrib["time"]) == pytest.approx(8.25)


def test_a_failure_carries_the_sentence_and_where_it_is_worst(tmp_path: Path) -> None:
    case = suite(result((finding("fail", 7),)), tmp_path).find("testcase")
    assert case is not None
    assert case.attrib["classname"] == "fruit sorter.rush"
    assert case.attrib["name"] == "overcurrent: peak current of the clamp diode, lane 7"
    failure = case.find("failure")
    assert failure is not None
    assert failure.attrib["message"] == "The clamp diode of lane 7 carries 3.2 A at turn-off."
    assert "supply high, coils cold" in (failure.text or "")


def test_unproven_is_an_error_and_a_missing_limit_is_skipped_with_its_reason(tmp_path: Path) -> None:
    xml = suite(result((finding("unproven", 1), finding("limit-missing", 2))), tmp_path)
    assert xml.find("testcase/error") is not None
    skipped = xml.find("testcase/skipped")
    assert skipped is not None
    assert skipped.attrib["message"].startswith("the limit was not given: ")


def test_no_two_cases_share_a_name_where_two_parts_are_asked_the_same(tmp_path: Path) -> None:
    xml = suite(result((finding(part="fast-2a"), finding(part="fast-3a"))), tmp_path)
    assert len({case.attrib["name"] for case in xml.findall("testcase")}) == 2


def test_a_failed_audit_is_never_all_green(tmp_path: Path) -> None:
    xml = suite(result((finding("pass"),), proven=False), tmp_path)
    error = xml.find("testcase[@name='verdict']/error")
    assert error is not None
    assert "audit" in error.attrib["message"]
    assert "coil rail 4.2 %" in (error.text or "")
    assert xml.attrib["errors"] == "1"


def test_missing_limits_that_count_as_broken_are_a_failure(tmp_path: Path) -> None:
    xml = suite(result((finding("limit-missing", 2),), strict=True), tmp_path)
    assert xml.attrib["failures"] == "1"
    assert xml.find("testcase[@name='verdict']/failure") is not None


def test_nothing_judged_is_an_error(tmp_path: Path) -> None:
    xml = suite(result((), traces=None), tmp_path)
    assert (xml.attrib["tests"], xml.attrib["errors"]) == ("1", "1")


def test_characters_that_xml_forbids_are_left_out(tmp_path: Path) -> None:
    odd = finding("fail", 4, sentence="Lane\x00 4\x1b[31m & <gate> \ud800fails\ufffe.", label="tray \x0bgate")
    case = suite(result((odd,)), tmp_path).find("testcase")
    assert case is not None
    failure = case.find("failure")
    assert failure is not None
    assert failure.attrib["message"] == "Lane 4[31m & <gate> fails."
    assert case.attrib["name"].endswith("tray gate")


def outcome(judged: Result, expectation: Expectation | None = None) -> Outcome:
    wanted = expectation or Expectation()
    status, surprises = compare(judged, wanted)
    return Outcome("sorter/rush", Path("sorter/rush"), "fire", wanted, judged, status, surprises, 1.5)


def joint(outcomes: list[Outcome], tmp_path: Path, problems: tuple[Problem, ...] = ()) -> Path:
    write_joint_junit(outcomes, problems, tmp_path / "junit.xml")
    return tmp_path / "junit.xml"


def everything() -> list[Outcome]:
    """One of each: broken, foreseen, surprising, unproven, missing, accepted, and no result at all."""
    day = datetime.date(2026, 12, 31)
    known = KnownFailure("overcurrent", "seed slot is replaced", day)
    return [
        outcome(result()),
        outcome(result((finding("fail", 1),)), Expectation("fail")),
        outcome(result((finding("tight", 1),)), Expectation("pass")),
        outcome(result((finding("unproven", 1),))),
        outcome(result((finding("pass", 1),), proven=False)),
        outcome(accept(result((finding("fail", 2),)), [known], day)),
        Outcome("a/b", Path("a/b"), "volley", Expectation(), None, 2, ("the disk is full",), 0.1),
    ]


def test_a_limit_that_a_scenario_is_to_break_does_not_turn_the_pipeline_red(tmp_path: Path) -> None:
    (suite_,) = ET.parse(joint([outcome(result((finding("fail", 1),)), Expectation("fail"))], tmp_path)).getroot()
    assert (suite_.attrib["failures"], suite_.attrib["errors"]) == ("0", "0")
    (said,) = suite_.iter("system-out")
    assert "breaks, as this scenario is to show" in (said.text or "")


@pytest.mark.parametrize(
    ("judged", "expectation"),
    [
        (result((finding("fail", 1),)), None),
        (result((finding("pass", 1),)), Expectation("fail")),
        (result((finding("tight", 1),)), Expectation("pass")),
        (result((finding("fail", 1),)), Expectation("fail", ("rail-sag",))),
        (result((finding("fail", 1),), proven=False), Expectation("fail", ("overcurrent",))),
        (result((finding("unproven", 1),)), Expectation("fail")),
        (result((), traces=None), Expectation("fail")),
    ],
)
def test_what_is_not_status_0_is_never_all_green(
    judged: Result, expectation: Expectation | None, tmp_path: Path
) -> None:
    one = outcome(judged, expectation)
    (suite_,) = ET.parse(joint([one], tmp_path)).getroot()
    assert one.status != 0
    assert int(suite_.attrib["failures"]) + int(suite_.attrib["errors"]) > 0


def test_an_independent_library_reads_the_same(tmp_path: Path) -> None:
    """Held against junitparser, a published reader of such files."""
    problems = (Problem("scenarios.toml", 3, "needs a pattern"),)
    read = JUnitXml.fromfile(str(joint(everything(), tmp_path, problems)))
    assert [s.name for s in read] == ["input", *["sorter.rush"] * 6, "a.b"]
    declared = [(s.tests, s.failures, s.errors, s.skipped) for s in read]
    counted = []
    for suite_ in read:
        kinds = Counter(type(r) for case in suite_ for r in case.result)
        counted.append((len(list(suite_)), kinds[Failure], kinds[Error], kinds[Skipped]))
    assert declared == counted
    first = everything()[0].result
    assert first is not None
    sentences = {r.message for case in list(read)[1] for r in case.result if isinstance(r, Failure)}
    assert sentences == {f.sentence for f in first.findings if f.verdict == "fail"}


PYTESTS_OWN = """
import pytest
def test_pass(): print("said")
def test_fail(): assert 0
@pytest.mark.skip("why")
def test_skip(): pass
@pytest.fixture
def broken(): raise RuntimeError
def test_error(broken): pass
"""


def form(path: Path) -> dict[str, tuple[set[str], set[str]]]:
    """Of each tag the attributes that it has and the tags in it."""
    found: dict[str, tuple[set[str], set[str]]] = {}
    for element in ET.parse(path).getroot().iter():
        attributes, children = found.setdefault(element.tag, (set(), set()))
        attributes.update(element.attrib)
        children.update(child.tag for child in element)
    return found


def test_the_form_is_that_which_pytest_writes(tmp_path: Path) -> None:
    (tmp_path / "test_own.py").write_text(PYTESTS_OWN)
    arguments = ["-q", "-p", "no:cacheprovider", "-c", os.devnull, f"--junitxml={tmp_path / 'own.xml'}"]
    arguments += ["-o", "junit_logging=system-out", "--rootdir", str(tmp_path), str(tmp_path / "test_own.py")]
    subprocess.run([sys.executable, "-m", "pytest", *arguments], capture_output=True, check=False, cwd=tmp_path)
    theirs, ours = form(tmp_path / "own.xml"), form(joint(everything(), tmp_path))
    assert set(ours) == set(theirs)
    for tag, (attributes, children) in ours.items():
        # pytest names no type of failures and errors; JUnit's own schema has one, and so have we.
        assert attributes <= theirs[tag][0] | {"type"}, tag
        assert children <= theirs[tag][1], tag
