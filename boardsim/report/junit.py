"""junit.xml: findings as test cases, in the form that pytest writes, for any CI service."""

from __future__ import annotations

import re
import xml.etree.ElementTree as ET
from collections import Counter
from pathlib import Path

from boardsim.report.files import write_text
from boardsim.report.wording import by_severity, verdict_reason
from boardsim.verdict.findings import Finding, Result, Verdict

# The tag that stands for a verdict; a finding without one passes.
_TAGS: dict[Verdict, str] = {"fail": "failure", "unproven": "error", "limit-missing": "skipped"}
# Characters that XML 1.0 (section 2.2) does not allow, not even escaped.
_NOT_IN_XML = re.compile("[^\t\n\r\x20-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")


def write_junit(result: Result, path: Path) -> None:
    """Write junit.xml, whole or not at all.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    root = ET.Element("testsuites", name="boardsim")
    root.append(suite_element(result))
    ET.indent(root)
    write_text(path, '<?xml version="1.0" encoding="utf-8"?>\n' + ET.tostring(root, encoding="unicode") + "\n")


def suite_element(result: Result) -> ET.Element:
    """One result as a test suite, one test case per finding.

    A run whose verdict no finding carries (the audit failed, or missing limits count as broken) gets one case
    more, named "verdict": a viewer that counts cases must not show it green.
    """
    classname = _clean(f"{result.board}.{result.pattern}")
    findings = by_severity(result.findings)
    names = Counter(_name(f) for f in findings)
    cases = [_case(f, classname, _name(f) if names[_name(f)] == 1 else f"{_name(f)}, {f.part}") for f in findings]
    if result.verdict in ("fail", "unproven") and all(f.verdict != result.verdict for f in findings):
        cases.append(_verdict_case(result, classname))

    tags = Counter(child.tag for case in cases for child in case)
    # Stages may overlap and corners run side by side: the longest comes closest to the time that passed.
    suite = ET.Element(
        "testsuite",
        name=classname,
        errors=str(tags["error"]),
        failures=str(tags["failure"]),
        skipped=str(tags["skipped"]),
        tests=str(len(cases)),
        time=f"{max((t.seconds for t in result.timings), default=0.0):.3f}",
    )
    suite.extend(cases)
    return suite


def _name(finding: Finding) -> str:
    return f"{finding.check}: {finding.quantity}, {finding.label}"


def _case(finding: Finding, classname: str, name: str) -> ET.Element:
    case = ET.Element("testcase", classname=classname, name=_clean(name), time="0.000")
    sentence = _clean(finding.sentence)
    tag = _TAGS.get(finding.verdict)
    if tag == "skipped":
        ET.SubElement(case, tag, type="limit-missing", message=f"the limit was not given: {sentence}")
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
