"""What the renderers share: groups of findings, numbers for people, text without control characters."""

from __future__ import annotations

import math
import re
import unicodedata
from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from boardsim.parts.base import Assumption
from boardsim.quantities import apart, celsius, in_units
from boardsim.verdict.findings import Finding, Result, Verdict, severity

# Verdicts in the order in which they are named: what needs attention first.
VERDICTS: tuple[Verdict, ...] = ("fail", "unproven", "limit-missing", "tight", "pass")


@dataclass(frozen=True)
class Group:
    """Findings that put one question to many channels and got one verdict; `worst` speaks for all."""

    worst: Finding
    members: tuple[Finding, ...]

    @property
    def where(self) -> str:
        """The worst channel, and how many more the group stands for."""
        return and_more(self.worst.label, len(self.members) - 1)


def by_severity(findings: Iterable[Finding]) -> list[Finding]:
    """Findings, the most severe first; equal ones by channel, whatever their order in the run was."""

    def key(f: Finding) -> tuple[object, ...]:
        return (*severity(f), f.check, f.quantity, f.part, -1 if f.channel is None else f.channel, f.label)

    return sorted(findings, key=key)


def grouped(findings: Iterable[Finding]) -> tuple[Group, ...]:
    """Findings of the same check, quantity, part and verdict together; groups and members by severity."""
    groups: dict[tuple[object, ...], list[Finding]] = {}
    for f in by_severity(findings):
        groups.setdefault((f.check, f.quantity, f.part, f.verdict, f.accepted), []).append(f)
    return tuple(Group(members[0], tuple(members)) for members in groups.values())


def assumed_alike(assumptions: Iterable[Assumption]) -> tuple[tuple[str, Assumption], ...]:
    """One assumption of each sort, with the parts that it stands for ("coil lane 0, and 23 more").

    Parts are of one sort if the first words of their names agree; a board of 64 equal channels makes the same
    assumption 64 times.
    """
    sorts: dict[tuple[str, str, str, str], list[Assumption]] = {}
    for a in dict.fromkeys(assumptions):
        sorts.setdefault((a.part.partition(" ")[0], a.quantity, a.value, a.why), []).append(a)
    return tuple((and_more(alike[0].part, len(alike) - 1), alike[0]) for alike in sorts.values())


def standing(finding: Finding) -> str:
    """Its verdict, or that it is accepted."""
    return "accepted" if finding.excused else finding.verdict


def verdict_reason(result: Result) -> str:
    """Why the verdict of a run is what it is, in half a sentence."""
    found = Counter(standing(f) for f in result.findings)
    if result.verdict == "fail" and not found["fail"]:
        return f"{many(found['limit-missing'], 'limit')} not given, and a missing limit counts as broken"
    if result.verdict == "unproven" and not found["unproven"]:
        if not result.findings:
            return "nothing was judged"
        return "the audit did not hold, so nothing passes"
    counts = ", ".join(f"{found[word]} {word}" for word in (*VERDICTS, "accepted") if found[word])
    return f"of {many(len(result.findings), 'finding')} {counts}"


def many(count: int, noun: str) -> str:
    """A count with its noun: "1 limit", "3 limits"."""
    return f"{count} {noun}" if count == 1 else f"{count} {noun}s"


def and_more(first: str, more: int) -> str:
    """The first of several, and how many follow."""
    return f"{first}, and {more} more" if more > 0 else first


def plain(text: str) -> str:
    """Text on one line without control characters, which a terminal would obey."""
    one_line = re.sub(r"\s+", " ", text).strip()
    return "".join(c for c in one_line if unicodedata.category(c) not in ("Cc", "Cf", "Cs"))


def plain_path(name: str) -> str:
    """A name as part of a path."""
    return "".join(c if c.isalnum() else "-" for c in name.lower()).strip("-") or "board"


def value_and_limit(finding: Finding) -> tuple[str, str]:
    """Reading and limit, with as many digits as it takes to see that they differ."""
    if finding.limit is None:
        return _number(finding.value, finding.unit, 3), "not given"
    if not (math.isfinite(finding.value) and math.isfinite(finding.limit)):
        return _number(finding.value, finding.unit, 3), _number(finding.limit, finding.unit, 3)
    if finding.unit == "1" and 0 < finding.limit < 1:
        return percent(finding.value), percent(finding.limit)  # a share, not a count
    if finding.unit == "K":
        return celsius(finding.value), celsius(finding.limit)
    value, limit = apart(finding.value, finding.limit, finding.unit)
    return value.strip(), limit.strip()


def _number(value: float, unit: str, digits: int) -> str:
    if unit == "K":
        return celsius(value)
    return in_units(value, unit, digits).strip() if math.isfinite(value) else "unknown"


def percent(share: float | None) -> str:
    """A margin: "-27 %", "4.2 %"; a margin that is not quite nothing never reads as nothing."""
    if share is None or not math.isfinite(share):
        return "-"
    value = 100 * share
    if abs(value) >= 9.95 or value == 0:
        return f"{value:.0f} %"
    return f"{value:.1f} %" if abs(value) >= 0.095 else f"{value:.1g} %"


def moment(seconds: float) -> str:
    """A time within a pattern, fine enough to find it on an oscilloscope. [s]"""
    return f"{seconds:.4f} s" if abs(seconds) >= 1 else in_units(seconds, "s", 4)


def when(finding: Finding) -> Sequence[str]:
    """Time and length of what was found, as far as they are known."""
    parts = []
    if finding.at is not None:
        parts.append(f"at {moment(finding.at)}")
    if finding.lasting is not None:
        parts.append(f"for {moment(finding.lasting)}")
    return parts
