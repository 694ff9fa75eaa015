"""The corners of one firing: run side by side, judged, and put together; the worst of each finding counts."""

from __future__ import annotations

import threading
from collections.abc import Callable, Iterable, Sequence
from dataclasses import replace
from pathlib import Path

from boardsim.board.corners import nominal_only, not_varied
from boardsim.board.reader import Board
from boardsim.circuit.assemble import assemble
from boardsim.firing.schedule import Firing
from boardsim.parts.base import Assumption, Corner
from boardsim.quantities import in_units
from boardsim.scenarios.audited import Assemble, CornerResult, Measure, run_corner, unproven
from boardsim.scenarios.crew import Crew
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding, Timing, severity

_ALIKE = 1e-4  # share of reading or limit below which two corners read alike: two runs of one corner may differ by 1 %


def run_corners(
    board: Board,
    firing: Firing,
    wanted: Sequence[Corner],
    keep: Path,
    crew: Crew,
    progress: Callable[[float], None] | None = None,
    also: Sequence[Finding] = (),
    measure: Measure | None = None,
    pictured: bool = True,
    repeated: bool = False,
    assembled: Assemble = assemble,
) -> list[CornerResult]:
    """Run a firing in several corners, as many at a time as the crew can; results in the order of `wanted`.

    Parameters
    ----------
    keep : Path
        Where deck and log of a failed run are kept.
    progress : callable
        Told the share of the work done, from any thread.
    also, measure, pictured, assembled
        See `run_corner`.
    repeated : bool
        Whether what the firing does once stands for what is done again and again.

    Raises
    ------
    EngineMissing, EngineStopped
        If there is no engine, or the run was interrupted.
    InputError
        If the waveforms would not fit on the disk.
    """
    only = nominal_only(board)
    shares = [0.0] * len(wanted)
    lock = threading.Lock()

    def report(i: int, share: float) -> None:
        if progress is not None:
            with lock:
                shares[i] = max(shares[i], share)
                progress(sum(shares) / len(shares))

    def one(i: int) -> CornerResult:
        corner = wanted[i]
        bench = Bench(board, corner.name, only, repeated)
        folder = keep if len(wanted) == 1 else keep / f"corner{i + 1}"
        return run_corner(
            board,
            firing,
            corner,
            bench,
            folder,
            lambda share: report(i, share),
            time_limit=crew.time_limit,
            cancel=crew.cancel,
            also=also,
            measure=measure,
            pictured=pictured,
            assembled=assembled,
        )

    return list(crew.pool.map(one, range(len(wanted))))


def by_corner(results: Iterable[CornerResult]) -> Iterable[list[Finding]]:
    """Each corner's findings; those of a corner whose audit failed count for nothing."""
    for r in results:
        if r.trial is None:
            continue
        if r.audit.proven:
            yield list(r.trial.findings)
        else:
            broken = next((e.criterion for e in reversed(r.audit.entries) if not e.passed), "not run twice")
            yield unproven(r.trial.findings, f"audit failed, {broken}")


def worst(runs: Sequence[Sequence[Finding]]) -> list[Finding]:
    """Of every question the worst answer among the corners, broken limits first.

    Of corners that read alike the first is named, so that the last digits of a run do not choose it.
    Where a corner whose audit failed reads worse than the answer that is kept, the sentence says so.
    """
    kept: dict[tuple[str, str, str, str], Finding] = {}
    for findings in runs:
        for f in findings:
            if f.key not in kept or _clearly_worse(f, kept[f.key]):
                kept[f.key] = f
    for f in (f for findings in runs for f in findings if f.verdict == "unproven"):
        mine = kept[f.key]
        worse = f.value > mine.value if f.worse == "high" else f.value < mine.value
        if worse and mine.verdict != "unproven":
            more = f"; unproven, but worse: {in_units(f.value, f.unit)} ({f.corner})"
            kept[f.key] = replace(mine, sentence=mine.sentence + more)
    found = kept.values()
    if any(f.check == "overheating" and f.verdict == "fail" for f in found):
        # What figures would be at a temperature that no junction may reach is no question any more.
        found = [f for f in found if f.check != "warming"]  # type: ignore[assignment]
    return sorted(found, key=severity)


def _clearly_worse(one: Finding, kept: Finding) -> bool:
    """Whether a finding is worse than the one that is kept, by more than rounding."""
    if one.verdict == kept.verdict and one.lasting == kept.lasting:
        scale = max(abs(one.value), abs(kept.value), abs(kept.limit or 0.0))
        if one.limit == kept.limit and abs(one.value - kept.value) <= _ALIKE * scale:
            return False
    return severity(one) < severity(kept)


def dips(board: Board, result: CornerResult) -> bool:
    """Whether the rail was too low for too long, or close to it."""
    limit = board.limits.brown_out
    return (
        limit is not None
        and result.trial is not None
        and any(d.lasting >= limit.lasting.min / 2 for d in result.trial.readings.guarded)
    )


def assumptions_of(board: Board, results: Iterable[CornerResult]) -> tuple[Assumption, ...]:
    """Every number that had to be supplied for these runs."""
    found = dict.fromkeys((*board.assumptions, *not_varied(board)))
    for r in results:
        if r.trial is not None:
            found.update(dict.fromkeys(r.trial.deck.assumptions))
    return tuple(found)


def timings_of(results: Sequence[CornerResult], elapsed: float) -> tuple[Timing, ...]:
    """Where the time of these runs went; `elapsed` by the clock. [s]"""
    return (
        Timing("simulation, all corners and repeats", sum(r.seconds["simulate"] for r in results)),
        Timing("readings", sum(r.seconds["read"] for r in results)),
        Timing("elapsed over all corners", elapsed),
    )


def failures_of(results: Iterable[CornerResult]) -> tuple[str, ...]:
    """Why corners came to nothing, in words."""
    return tuple(f"{r.corner.name}: {r.failure}" for r in results if r.failure is not None and not r.audit.proven)


def engine_of(results: Iterable[CornerResult]) -> str:
    """Name and version of the simulator."""
    return next((r.engine for r in results if r.trial), "ngspice")
