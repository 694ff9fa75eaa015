"""junit.xml: findings as test cases, in the form that pytest writes, for any CI service."""

from __future__ import annotations

import re
import xml.etree.ElementTree as ET
from collections import Counter
from collections.abc import Callable, Iterable
from dataclasses import replace
from pathlib import Path

from boardsim.errors import EXIT_LIMIT_BROKEN, EXIT_UNPROVEN, Problem
from boardsim.report.files import write_text
from boardsim.report.wording import by_severity, verdict_reason
from boardsim.verdict.expectations import Outcome
from boardsim.verdict.findings import Finding, Result, Verdict

# The tag that stands for a verdict; a finding without one passes.
_TAGS: dict[Verdict, str] = {"fail": "failure", "unproven": "error", "limit-missing": "skipped"}
# Characters that XML 1.0 (section 2.2) does not allow, not even escaped.
_NOT_IN_XML = re.compile("[^\t\n\r\x20-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")


def write_junit(result: Result, path: Path) -> None:
    """Write junit.xml of one result, whole or not at all.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    _write([suite_element(result)], path)


def write_joint_junit(outcomes: Iterable[Outcome], problems: Iterable[Problem], path: Path) -> None:
    """Write junit.xml of several scenarios, one test suite each, whole or not at all.

    Parameters
    ----------
    outcomes : iterable of Outcome
    problems : iterable of Problem
        Mistakes in files, each an error: a scenario that could not be read was not run.
    path : Path

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    _write([*_input_suites(problems), *(outcome_element(o) for o in outcomes)], path)


def _write(suites: Iterable[ET.Element], path: Path) -> None:
    root = ET.Element("testsuites", name="boardsim")
    root.extend(suites)
    ET.indent(root)
    write_text(path, '<?xml version="1.0" encoding="utf-8"?>\n' + ET.tostring(root, encoding="unicode") + "\n")


def suite_element(result: Result) -> ET.Element:
    """One result as a test suite, one test case per finding.

    A run whose verdict no finding carries (the audit failed, or missing limits count as broken) gets one case
    more, named "verdict": a viewer that counts cases must not show it green.
    """
    classname = _clean(f"{result.board}.{result.pattern}")
    cases = _cases(result, classname, lambda f: False)
    if result.verdict in ("fail", "unproven") and not _carried(cases, result.verdict):
        cases.append(_verdict_case(result, classname))
    return _suite(classname, cases, _longest(result))


def outcome_element(outcome: Outcome) -> ET.Element:
    """One scenario as a test suite: a limit that it is expected to break passes, saying so; what was expected and did
    not come is a failure.
    """
    classname = _clean(str(outcome.folder).replace("/", "."))
    result = outcome.result
    if result is None:
        cases = [_plain_case(classname, "scenario", "error", "input", said) for said in outcome.surprises]
        return _suite(classname, cases, outcome.seconds)
    cases = _cases(result, classname, outcome.expectation.foresees)
    cases += [_plain_case(classname, "expected verdict", "failure", "verdict", said) for said in outcome.surprises]
    bad: Verdict | None = {EXIT_LIMIT_BROKEN: "fail", EXIT_UNPROVEN: "unproven"}.get(outcome.status)  # type: ignore[assignment]
    if bad is not None and not _carried(cases, bad):
        cases.append(_verdict_case(replace(result, verdict=bad), classname))
    return _suite(classname, cases, outcome.seconds)


def _cases(result: Result, classname: str, foreseen: Callable[[Finding], bool]) -> list[ET.Element]:
    findings = by_severity(result.findings)
    names = Counter(_name(f) for f in findings)
    return [
        _case(f, classname, _name(f) if names[_name(f)] == 1 else f"{_name(f)}, {f.part}", foreseen(f))
        for f in findings
    ]


def _carried(cases: Iterable[ET.Element], verdict: Verdict) -> bool:
    """Whether a case shows a verdict by itself."""
    return any(child.tag == _TAGS[verdict] for case in cases for child in case)


def _suite(classname: str, cases: list[ET.Element], seconds: float) -> ET.Element:
    tags = Counter(child.tag for case in cases for child in case)
    suite = ET.Element(
        "testsuite",
        name=classname,
        errors=str(tags["error"]),
        failures=str(tags["failure"]),
        skipped=str(tags["skipped"]),
        tests=str(len(cases)),
        time=f"{seconds:.3f}",
    )
    suite.extend(cases)
    return suite


def _longest(result: Result) -> float:
    # Stages may overlap and corners run side by side: the longest comes closest to the time that passed.
    return max((t.seconds for t in result.timings), default=0.0)


def _input_suites(problems: Iterable[Problem]) -> list[ET.Element]:
    cases = [
        _plain_case("input", f"{p.file}:{p.line}" if p.line else p.file, "error", "input", str(p)) for p in problems
    ]
    return [_suite("input", cases, 0.0)] if cases else []


def _plain_case(classname: str, name: str, tag: str, kind: str, text: str) -> ET.Element:
    case = ET.Element("testcase", classname=classname, name=_clean(name), time="0.000")
    ET.SubElement(case, tag, type=kind, message=_clean(text)).text = _clean(text)
    return case


def _name(finding: Finding) -> str:
    return f"{finding.check}: {finding.quantity}, {finding.label}"


def _case(finding: Finding, classname: str, name: str, foreseen: bool) -> ET.Element:
    case = ET.Element("testcase", classname=classname, name=_clean(name), time="0.000")
    sentence = _clean(finding.sentence)
    tag = _TAGS.get(finding.verdict)
    known = finding.accepted
    if known is not None and finding.excused:
        text = f"accepted until {known.until.isoformat()}, {known.reason}: {finding.sentence}"
        ET.SubElement(case, "skipped", type="accepted", message=_clean(text))
    elif tag == "skipped":
        ET.SubElement(case, tag, type="limit-missing", message=f"the limit was not given: {sentence}")
    elif tag == "failure" and foreseen:
        ET.SubElement(case, "system-out").text = f"breaks, as this scenario is to show: {sentence}"
    elif tag:
        body = ET.SubElement(case, tag, type=finding.consequence, message=sentence)
        body.text = _clean(
            f"{finding.sentence}\npart: {finding.part}\ncorner: {finding.corner or 'not named'}\n"
            f"source of the limit: {finding.source or 'not named'}"
        )
    elif finding.verdict == "tight":
        ET.SubElement(case, "system-out").text = f"tight: {sentence}"
    return case


def _verdict_case(result: Result, classname: str) -> ET.Element:
    case = ET.Element("testcase", classname=classname, name="verdict", time="0.000")
    reason = _clean(f"{result.verdict}: {verdict_reason(result)}")
    body = ET.SubElement(case, _TAGS[result.verdict], type="verdict", message=reason)
    body.text = _clean(
        "\n".join([reason, *(str(e) for corner in result.audit for e in corner.entries if not e.passed)])
    )
    return case


def _clean(text: str) -> str:
    return _NOT_IN_XML.sub("", text)
