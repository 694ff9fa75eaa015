"""What a scenario is expected to come to, which known failures are lived with, and whether it came out so."""

from __future__ import annotations

import datetime
import difflib
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Literal

from boardsim.errors import EXIT_LIMIT_BROKEN, EXIT_PASS, EXIT_UNPROVEN
from boardsim.verdict.findings import Acceptance, Finding, Result, Verdict, exit_status, overall

Expected = Literal["pass", "tight", "limit-missing", "fail"]
IDLE = "accepted failure of"
"""How the note begins that an acceptance is not needed any more."""
_ORDER: tuple[Verdict, ...] = ("pass", "tight", "limit-missing")


@dataclass(frozen=True)
class Expectation:
    """What a scenario is to come to.

    Attributes
    ----------
    verdict : {"pass", "tight", "limit-missing", "fail"} or None
        The worst verdict that is all right, or "fail" for a scenario that has to break a limit. None: every limit holds.
    breaks : tuple of str
        The checks that have to break, these and no others; any if empty.
    """

    verdict: Expected | None = None
    breaks: tuple[str, ...] = ()

    def __str__(self) -> str:
        if self.verdict == "fail" and self.breaks:
            return f"fail: {', '.join(self.breaks)}"
        return self.verdict or "limits hold"

    def foresees(self, finding: Finding) -> bool:
        """Whether a broken limit is what the scenario is there to show."""
        return self.verdict == "fail" and (not self.breaks or finding.check in self.breaks)


@dataclass(frozen=True)
class KnownFailure:
    """A broken limit that somebody accepts until a day.

    Attributes
    ----------
    check : str
        Which check breaks.
    channels : tuple of int
        On which channels; empty: anywhere.
    part, quantity : str or None
        Narrower, where given.
    reason : str
    until : datetime.date
        Last day.
    shared : bool
        Whether it stands for all scenarios of a file, so that one of them need not need it.
    """

    check: str
    reason: str
    until: datetime.date
    channels: tuple[int, ...] = ()
    part: str | None = None
    quantity: str | None = None
    shared: bool = False

    def covers(self, finding: Finding) -> bool:
        """Whether a finding is the one that is accepted."""
        return (
            finding.check == self.check
            and (not self.channels or finding.channel in self.channels)
            and self.part in (None, finding.part)
            and self.quantity in (None, finding.quantity)
        )

    def __str__(self) -> str:
        on = f" on {len(self.channels)} channels" if len(self.channels) > 1 else ""
        on = f" on channel {self.channels[0]}" if len(self.channels) == 1 else on
        return f"{self.check}{on}"


def _unknown(check: str, result: Result) -> str:
    """A hint where no finding of a result has a check of this name."""
    names = sorted({f.check for f in result.findings})
    if check in names:
        return ""
    close = difflib.get_close_matches(check, names, n=1, cutoff=0.6)
    return f' (did you mean "{close[0]}"?)' if close else f"; the checks of this run are {', '.join(names)}"


def accept(result: Result, known: Sequence[KnownFailure], today: datetime.date) -> Result:
    """A result with its known failures marked; those whose day has passed count again, and say so.

    A missing limit can be accepted where it counts as broken. Acceptances that nothing needs are noted.
    """
    used: set[KnownFailure] = set()
    findings = []
    for f in result.findings:
        broken = f.verdict == "fail" or (result.strict and f.verdict == "limit-missing")
        mine = [k for k in known if k.covers(f)] if broken else []
        used.update(mine)
        if mine:
            k = max(mine, key=lambda one: one.until)
            over = k.until < today
            said = f"; was accepted until {k.until.isoformat()} ({k.reason})" if over else ""
            f = replace(f, accepted=Acceptance(k.reason, k.until, over), sentence=f.sentence + said)
        findings.append(f)
    idle = tuple(
        f"{IDLE} {k} ({k.reason}) does not occur any more: take it out of the scenario file{_unknown(k.check, result)}"
        for k in dict.fromkeys(known)
        if k not in used and not k.shared
    )
    verdict = overall(findings, result.proven, result.strict)
    return replace(result, findings=tuple(findings), verdict=verdict, notes=(*result.notes, *idle))


@dataclass(frozen=True)
class Outcome:
    """One scenario after its run.

    Attributes
    ----------
    name : str
        Board and scenario, as reports call it.
    folder : Path
        Where its files are, relative to the folder of all.
    question : str
        "fire", "release", "volley", "stroke", "chain" or "power-up".
    expectation : Expectation
    result : Result or None
        None where there was none: the input was wrong, or the engine could not be started.
    status : int
        Exit status of this scenario alone.
    surprises : tuple of str
        What did not come out as expected, in words; empty where all is well.
    seconds : float
        By the clock. [s]
    """

    name: str
    folder: Path
    question: str
    expectation: Expectation
    result: Result | None
    status: int
    surprises: tuple[str, ...] = ()
    seconds: float = field(default=0.0, compare=False)

    @property
    def verdict(self) -> str:
        """The verdict of the run, or that there was none."""
        return self.result.verdict if self.result is not None else "no result"


def compare(result: Result, expectation: Expectation) -> tuple[int, tuple[str, ...]]:
    """Exit status of a result that was expected to come out in a certain way, and what is not as expected."""
    if expectation.verdict != "fail":
        status = exit_status(result.verdict)
        worst, found = expectation.verdict, result.verdict
        if status == EXIT_PASS and worst is not None and _ORDER.index(found) > _ORDER.index(worst):
            return EXIT_LIMIT_BROKEN, (f'came out "{found}", expected "{worst}" at worst',)
        return status, ()
    counted = [f for f in result.findings if not f.excused]
    broken = {f.check for f in counted if f.verdict == "fail" or (result.strict and f.verdict == "limit-missing")}
    wanted = set(expectation.breaks)
    surprises = []
    if missing := sorted(wanted - broken):
        hints = "".join(dict.fromkeys(_unknown(check, result) for check in missing))
        surprises.append(f"was expected to break {', '.join(missing)}, and does not{hints}")
    elif not broken:
        surprises.append("was expected to break a limit, and breaks none")
    if wanted and (more := sorted(broken - wanted)):
        surprises.append(f"breaks {', '.join(more)} as well, which was not expected")
    if not result.proven:
        return (EXIT_LIMIT_BROKEN if broken - wanted and wanted else EXIT_UNPROVEN), tuple(surprises)
    return (EXIT_LIMIT_BROKEN if surprises else EXIT_PASS), tuple(surprises)
