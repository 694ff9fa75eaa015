"""What a run comes to: findings, the audit, and what the pictures are drawn from. Values only."""

from __future__ import annotations

import datetime
import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Literal

import numpy as np
from numpy.typing import NDArray

from boardsim.errors import EXIT_LIMIT_BROKEN, EXIT_PASS, EXIT_UNPROVEN
from boardsim.parts.base import Assumption
from boardsim.parts.rules import Consequence

if TYPE_CHECKING:
    from boardsim.verdict.closeups import Closeup
    from boardsim.verdict.strokes_study import StrokeStudy
    from boardsim.verdict.studies import ChainStudy, PowerUp, Release, Volley

Verdict = Literal["pass", "tight", "fail", "unproven", "limit-missing"]
Shape = Literal["value", "mean", "energy", "count"]
Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Reading:
    """A number taken from waveforms that no limit belongs to.

    Attributes
    ----------
    quantity, label : str
        What was read, and where.
    value, scale : float
        The number, and the natural size of the quantity; a value that is small against it need not be as exact. [unit]
    at : float or None
        When. [s]
    """

    quantity: str
    label: str
    value: float
    unit: str
    scale: float = 0.0
    at: float | None = None


@dataclass(frozen=True)
class Acceptance:
    """A broken limit that somebody knows of and lives with, until a day; from then on it counts again.

    Attributes
    ----------
    reason : str
    until : datetime.date
        The last day on which it is accepted.
    expired : bool
        Whether that day had passed when the run was judged.
    """

    reason: str
    until: datetime.date
    expired: bool


@dataclass(frozen=True)
class Finding:
    """A reading against a limit.

    Attributes
    ----------
    check : str
        What was checked, such as "overvoltage", "rail-sag".
    quantity, part : str
        What was read, and of which part, such as "peak current of the clamp diode", "fast-2a".
    channel : int or None
        The channel; None for a part of the whole board.
    label : str
        The board's own name for the channel, or the part of the board.
    value, limit : float
        Reading and limit after derating; limit None where it was not given. [unit]
    margin : float or None
        (limit - value) / limit, or the other way round where the limit is a lower one; negative when broken.
    at, lasting : float or None
        When, and for how long. [s]
    corner : str
        The corner in which it is worst; `nominal_only` names what had no tolerance there.
    source : str
        Where the limit comes from.
    assumed : tuple of str
        Assumed numbers that the reading hangs on.
    worse : {"high", "low"}
        Which way a reading gets worse.
    scale : float
        Natural size of the quantity, against which a reading without a limit is compared. [unit]
    probes : tuple of str
        The quantities that were read; their product is what the reading is taken from. Empty where no waveform was.
    shape : {"value", "mean", "energy", "count"}
        Whether the reading is a value of the waveform, its mean, its integral over one event, or a count of channels.
    channels : tuple of int
        Those that are counted, where channels are.
    accepted : Acceptance or None
        Whether somebody knows of the broken limit.
    place : int or None
        Of a row or column of a matrix, which is no channel: under which its waveforms are found.
    """

    check: str
    quantity: str
    part: str
    channel: int | None
    label: str
    value: float
    limit: float | None
    unit: str
    margin: float | None
    at: float | None
    consequence: Consequence
    verdict: Verdict
    sentence: str
    corner: str = ""
    source: str = ""
    lasting: float | None = None
    nominal_only: tuple[str, ...] = ()
    assumed: tuple[str, ...] = ()
    worse: Literal["high", "low"] = "high"
    scale: float = 0.0
    probes: tuple[str, ...] = ()
    shape: Shape = "value"
    channels: tuple[int, ...] = ()
    accepted: Acceptance | None = None
    place: int | None = None

    @property
    def excused(self) -> bool:
        """Whether it is accepted today, and so counts for nothing in the verdict of a run."""
        return self.accepted is not None and not self.accepted.expired

    @property
    def key(self) -> tuple[str, str, str, str]:
        """What makes two findings of different runs the same question."""
        return (self.check, self.quantity, self.part, self.label)


def verdict_of(margin: float | None, guard: float) -> Verdict:
    """The verdict of a margin under a guard band; None stands for a limit that was not given."""
    if margin is None:
        return "limit-missing"
    if not math.isfinite(margin):
        return "unproven"  # a reading that is no number proves nothing
    if margin < 0:
        return "fail"
    return "tight" if margin < guard else "pass"


_SEVERITY: dict[Verdict, int] = {"fail": 0, "unproven": 1, "limit-missing": 2, "tight": 3, "pass": 4}


def severity(finding: Finding) -> tuple[int, float, float, float]:
    """Sort key: broken limits first, then the smallest margin, the worse reading, the longer duration."""
    margin = finding.margin if finding.margin is not None else 0.0
    value = -finding.value if finding.worse == "high" else finding.value
    return (_SEVERITY[finding.verdict], margin, value, -(finding.lasting or 0.0))


def overall(findings: Iterable[Finding], proven: bool, strict: bool) -> Verdict:
    """The verdict of a run: the worst of its findings; a missing limit counts as broken under `strict`.

    What is accepted today does not count; a run of which all is accepted passes.
    """
    findings = list(findings)
    verdicts = {f.verdict for f in findings if not f.excused}
    if findings and not verdicts:
        verdicts = {"pass"}
    if "fail" in verdicts or (strict and "limit-missing" in verdicts):
        return "fail"
    if not proven or "unproven" in verdicts or not verdicts:
        return "unproven"
    for verdict in ("limit-missing", "tight"):
        if verdict in verdicts:
            return verdict
    return "pass"


def exit_status(verdict: Verdict) -> int:
    """The command's status for a verdict."""
    return {"fail": EXIT_LIMIT_BROKEN, "unproven": EXIT_UNPROVEN}.get(verdict, EXIT_PASS)


@dataclass(frozen=True)
class AuditEntry:
    """One criterion of the audit on one run.

    Attributes
    ----------
    criterion : {"passivity", "refinement", "density"}
    corner, run : str
        Which corner, and with which settings of the engine.
    subject : str
        The part or the reading that came closest to the bound.
    measured, allowed : float
        In `unit`.
    """

    criterion: Literal["passivity", "refinement", "density"]
    corner: str
    run: str
    subject: str
    measured: float
    allowed: float
    unit: str
    passed: bool

    def __str__(self) -> str:
        sign = "within" if self.passed else "beyond"
        return f"{self.criterion} ({self.corner}; {self.run}): {self.subject} {self.measured:.3g} {self.unit}, {sign} {self.allowed:.3g} {self.unit}"


@dataclass(frozen=True)
class CornerAudit:
    """The audit of one corner.

    Attributes
    ----------
    corner : str
    entries : tuple of AuditEntry
        Of the run that is reported, of the coarser one, and their comparison; of every try where none held.
    proven : bool
        Whether two runs of the corner pass by themselves and agree.
    """

    corner: str
    entries: tuple[AuditEntry, ...]
    proven: bool

    @property
    def compared(self) -> bool:
        """Whether a run was compared with another at all."""
        return any(entry.criterion == "refinement" for entry in self.entries)


@dataclass(frozen=True)
class Envelope:
    """A waveform thinned for pictures without losing a spike: lowest and highest value per slice of time.

    Attributes
    ----------
    edges : (n + 1,) array
        Borders of the slices. [s]
    low, high : (n,) array
        [unit]
    """

    label: str
    unit: str
    edges: Floats
    low: Floats
    high: Floats


@dataclass(frozen=True)
class Traces:
    """What the overview picture shows, of the corner with the lowest rail.

    Attributes
    ----------
    rail, total, supply : Envelope
        Coil rail at the board [V], sum of the coil currents [A], current out of the supply [A].
    on : mapping of channel to (n, 2) array
        When each channel is on. [s]
    labels : mapping of channel to str
    rail_limit, supply_limit : float or None
        Brown-out level [V] and the supply's ceiling [A].
    lowest : (voltage, time) or None
        Of the rail, exactly; the slices are too wide to tell. [V], [s]
    """

    corner: str
    rail: Envelope
    total: Envelope
    supply: Envelope
    on: Mapping[int, Floats]
    labels: Mapping[int, str]
    rail_limit: float | None
    supply_limit: float | None
    lowest: tuple[float, float] | None = None


@dataclass(frozen=True)
class EdgeTimes:
    """One pulse: as asked for, as the controller's timer has it, as the output shows it (None where it does not). [s]"""

    channel: int
    label: str
    asked: tuple[float, float]
    timer: tuple[float, float]
    output: tuple[float, float] | None


@dataclass(frozen=True)
class Timing:
    """Where the time went: a stage and its seconds."""

    stage: str
    seconds: float


@dataclass(frozen=True)
class Result:
    """One pattern on one board, judged.

    Attributes
    ----------
    firing : tuple of str
        Sentences about the register frames: frame time, how far edges moved.
    engine : str
        Name and version of the simulator.
    deck : str
        The deck of the corner that decides, with the settings that passed the audit.
    strict : bool
        Whether a missing limit counted as broken.
    closeups : tuple of Closeup
        One for each finding that fails or is tight.
    study : Volley, Release, ChainStudy, PowerUp, StrokeStudy or None
        What the scenario found beyond findings: its table, and what its picture is drawn from.
    edges : tuple of EdgeTimes
        Every pulse as asked for, as the timer has it, and as the output shows it.
    simulated : bool
        Whether the question takes runs of the engine, without whose audit nothing is proven.
    motions : tuple of Closeup
        Of every kind of coil that moves something the pulse whose finding is worst, whatever its verdict.
    """

    board: str
    pattern: str
    duration: float
    verdict: Verdict
    findings: tuple[Finding, ...]
    assumptions: tuple[Assumption, ...]
    audit: tuple[CornerAudit, ...]
    firing: tuple[str, ...]
    traces: Traces | None
    deck: str
    timings: tuple[Timing, ...] = ()
    notes: tuple[str, ...] = field(default=())
    engine: str = ""
    strict: bool = False
    closeups: tuple[Closeup, ...] = ()
    study: Volley | Release | ChainStudy | PowerUp | StrokeStudy | None = None
    edges: tuple[EdgeTimes, ...] = ()
    simulated: bool = True
    motions: tuple[Closeup, ...] = ()

    @property
    def proven(self) -> bool:
        """Whether the audit holds in every corner; of what is simulated nothing is proven without one."""
        return (bool(self.audit) or not self.simulated) and all(audit.proven for audit in self.audit)


CAUTIONS = (
    "This is a simulation: it supports a design review and replaces neither measurement nor local codes nor licensed practice.",
    "An unclamped coil reaches hundreds of volts at turn-off; parts that fail can burn.",
    "Coils move things: keep hands away while firing, and give whatever must hold or release people a protection of its own.",
)
