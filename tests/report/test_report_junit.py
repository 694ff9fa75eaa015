"""junit.xml: what a CI service counts is what was found."""

import xml.etree.ElementTree as ET
from collections import Counter
from pathlib import Path

import pytest
from made_up_results import finding, result

from boardsim.report.junit import write_junit
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
