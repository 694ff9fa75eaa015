"""What does this pattern do to this board? Every corner run, audited, judged; the worst of each finding reported."""

from __future__ import annotations

import os
import threading
import time
from collections.abc import Callable, Iterable, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace
from pathlib import Path

from boardsim.board.corners import corners, nominal_only, not_varied, slow_rail
from boardsim.board.reader import Board
from boardsim.engine.run import DEFAULT_TIME_LIMIT
from boardsim.firing.pattern import Pattern
from boardsim.firing.schedule import Firing, fire
from boardsim.parts.base import Assumption
from boardsim.quantities import in_units
from boardsim.scenarios.audited import CornerResult, run_corner, unproven
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding, Result, Timing, Traces, overall, severity
from boardsim.verdict.switching import judge_switching


def fire_pattern(
    board: Board,
    pattern: Pattern,
    keep: Path,
    strict: bool = False,
    time_limit: float = DEFAULT_TIME_LIMIT,
    progress: Callable[[float], None] | None = None,
    workers: int | None = None,
) -> Result:
    """Fire a pattern on a board.

    Parameters
    ----------
    keep : Path
        Where deck and log of a failed run are kept.
    strict : bool
        Whether a missing limit counts as broken.
    time_limit : float
        Per run of the engine. [s]
    progress : callable
        Told the share of the work done, from any thread.
    workers : int
        Corners at a time; the number of cores if absent.

    Raises
    ------
    EngineMissing, EngineStopped
        If there is no engine, or the run was interrupted.
    InputError
        If the waveforms would not fit on the disk.
    """
    began = time.perf_counter()
    firing = fire(board, pattern)
    spent_firing = time.perf_counter() - began
    only = nominal_only(board)
    wanted = list(corners(board, min(p.width for p in pattern.pulses)))
    shares = dict.fromkeys((c.name for c in wanted), 0.0)
    lock, cancel = threading.Lock(), threading.Event()

    def report(name: str, share: float) -> None:
        if progress is not None:
            with lock:
                shares[name] = max(shares[name], share)
                progress(sum(shares.values()) / len(shares))

    def one(i: int) -> CornerResult:
        corner = wanted[i]
        bench = Bench(board, corner.name, only)
        folder = keep if len(wanted) == 1 else keep / f"corner{i + 1}"
        return run_corner(
            board, firing, corner, bench, folder, lambda s: report(corner.name, s), time_limit=time_limit, cancel=cancel
        )

    began = time.perf_counter()
    with ThreadPoolExecutor(max_workers=workers or os.cpu_count() or 1) as pool:
        try:
            results = list(pool.map(one, range(len(wanted))))
            longest = slow_rail(board)
            if longest is not None and any(_dips(board, r) for r in results):
                wanted.append(longest)
                shares[longest.name] = 0.0
                results.append(one(len(wanted) - 1))
        finally:
            cancel.set()  # nothing runs any more, unless something went wrong: then the pool need not wait for it
    spent_running = time.perf_counter() - began

    findings = worst([*_by_corner(results), judge_switching(board, firing)])
    if not any(r.trial for r in results):
        findings = [f for f in findings if f.verdict == "fail"]  # what is left was never put to a circuit
    proven = all(r.audit.proven for r in results)
    sampled = [r for r in results if r.trial is not None]
    return Result(
        board.name,
        pattern.name,
        firing.duration,
        overall(findings, proven, strict),
        tuple(findings),
        _assumptions(board, sampled),
        tuple(r.audit for r in results),
        _firing_sentences(board, firing),
        _traces(board, firing, sampled),
        _deciding_deck(findings, sampled),
        (
            Timing("register frames", spent_firing),
            Timing("simulation, all corners and repeats", sum(r.seconds["simulate"] for r in results)),
            Timing("readings", sum(r.seconds["read"] for r in results)),
            Timing("elapsed over all corners", spent_running),
        ),
        tuple(f"{r.corner.name}: {r.failure}" for r in results if r.failure is not None and not r.audit.proven),
        next((r.engine for r in results if r.trial), "ngspice"),
    )


def _dips(board: Board, result: CornerResult) -> bool:
    """Whether the rail was too low for too long, or close to it."""
    limit = board.limits.brown_out
    return (
        limit is not None
        and result.trial is not None
        and any(d.lasting >= limit.lasting.min / 2 for d in result.trial.readings.guarded)
    )


def _by_corner(results: Iterable[CornerResult]) -> Iterable[list[Finding]]:
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

    Where a corner whose audit failed reads worse than the answer that is kept, the sentence says so.
    """
    kept: dict[tuple[str, str, str, str], Finding] = {}
    for findings in runs:
        for f in findings:
            if f.key not in kept or severity(f) < severity(kept[f.key]):
                kept[f.key] = f
    for f in (f for findings in runs for f in findings if f.verdict == "unproven"):
        mine = kept[f.key]
        worse = f.value > mine.value if f.worse == "high" else f.value < mine.value
        if worse and mine.verdict != "unproven":
            more = f"; unproven, but worse: {in_units(f.value, f.unit)} ({f.corner})"
            kept[f.key] = replace(mine, sentence=mine.sentence + more)
    return sorted(kept.values(), key=severity)


def _assumptions(board: Board, results: Sequence[CornerResult]) -> tuple[Assumption, ...]:
    found = dict.fromkeys((*board.assumptions, *not_varied(board)))
    for r in results:
        if r.trial is not None:
            found.update(dict.fromkeys(r.trial.deck.assumptions))
    return tuple(found)


def _firing_sentences(board: Board, firing: Firing) -> tuple[str, ...]:
    lines = [
        f"{firing.frames} register frames of {in_units(firing.frame_time, 's')} each "
        f"({board.chain.outputs} bits at {in_units(board.chain.clock.typ, 'Hz')} and the latch)"
    ]
    if firing.moved:
        late = max(firing.moved, key=lambda m: m.start - m.pulse.start)
        stretched = max(firing.moved, key=lambda m: abs((m.stop - m.start) - m.pulse.width))
        change = (stretched.stop - stretched.start) - stretched.pulse.width
        lines.append(
            f"pulses start up to {in_units(late.start - late.pulse.start, 's')} after they were asked for "
            f"({board.channel(late.pulse.channel).label}, {in_units(late.pulse.start, 's', 4)}); "
            f"their width changes by up to {in_units(abs(change) if abs(change) > 1e-12 else 0.0, 's')}"
        )
    return tuple(lines)


def _traces(board: Board, firing: Firing, results: Sequence[CornerResult]) -> Traces | None:
    """Pictures show the corner in which the rail is lowest."""
    if not results:
        return None
    shown = min(results, key=lambda r: r.trial.readings.low[None, "v_rail"][0] if r.trial else float("inf"))
    if shown.trial is None:
        return None
    e = shown.trial.readings.envelopes
    named = {"rail": "coil rail at the board", "total": "all coils together", "supply": "out of the supply"}
    rail, total, supply = (replace(e[k], label=named[k]) for k in ("rail", "total", "supply"))
    brown_out, ceiling = board.limits.brown_out, board.supply.current_ceiling
    return Traces(
        shown.corner.name,
        rail,
        total,
        supply,
        firing.on,
        {c.number: c.label for c in board.channels},
        brown_out.voltage.typ if brown_out else None,
        ceiling.typ if ceiling else None,
        shown.trial.readings.low[None, "v_rail"],
    )


def _deciding_deck(findings: Sequence[Finding], results: Sequence[CornerResult]) -> str:
    """The deck of the corner that the worst waveform finding names."""
    if not results:
        return ""
    by_name = {r.corner.name: r for r in results}
    chosen = next((by_name[f.corner] for f in findings if f.corner in by_name), results[0])
    assert chosen.trial is not None  # only corners that ran are handed over
    return chosen.trial.deck.text(chosen.trial.settings)
