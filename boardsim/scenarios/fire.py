"""What does this pattern do to this board? Every corner run, audited, judged; the worst of each finding reported."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Sequence
from dataclasses import replace
from functools import partial
from pathlib import Path

from boardsim.board.corners import corners, slow_rail
from boardsim.board.reader import Board
from boardsim.circuit.assemble import Detail, assemble, refuse_too_many
from boardsim.firing.pattern import Pattern
from boardsim.firing.schedule import Firing, fire
from boardsim.quantities import in_units
from boardsim.scenarios.all_corners import (
    assumptions_of,
    by_corner,
    dips,
    engine_of,
    failures_of,
    run_corners,
    timings_of,
    worst,
)
from boardsim.scenarios.audited import CornerResult, Measure
from boardsim.scenarios.crew import Crew
from boardsim.verdict.closeups import Closeup, take_closeups, wants_closeup
from boardsim.verdict.findings import EdgeTimes, Finding, Result, Timing, Traces, overall
from boardsim.verdict.firmware import judge_firmware, not_given
from boardsim.verdict.hold import assumptions_of_holds, told_of_holds
from boardsim.verdict.logic_rail import judge_sagged_chain
from boardsim.verdict.motion_closeups import by_motion
from boardsim.verdict.recorded import assumptions_of_capture, judge_recorded, told
from boardsim.verdict.switching import judge_switching


def fire_pattern(
    board: Board,
    pattern: Pattern,
    keep: Path,
    strict: bool = False,
    crew: Crew | None = None,
    progress: Callable[[float], None] | None = None,
    measure: Measure | None = None,
    pictured: bool = True,
    firmware: bool = True,
    detail: Detail = "edges",
) -> Result:
    """Fire a pattern on a board.

    Parameters
    ----------
    keep : Path
        Where deck and log of a failed run are kept.
    strict : bool
        Whether a missing limit counts as broken.
    crew : Crew
        Who runs the corners; one of its own if absent.
    progress : callable
        Told the share of the work done, from any thread.
    measure, pictured
        See `run_corner`.
    firmware : bool
        Whether the rules for the firmware are judged; a question's own pulses are not the firmware's.
    detail : {"edges", "clocked"}
        Registers as their known output edges, or flip-flop by flip-flop.

    Raises
    ------
    EngineMissing, EngineStopped
        If there is no engine, or the run was interrupted.
    InputError
        If the waveforms would not fit on the disk, or the pattern is too long for clocked registers.
    """
    if crew is None:
        with Crew() as own:
            return fire_pattern(board, pattern, keep, strict, own, progress, measure, pictured, firmware, detail)
    began = time.perf_counter()
    firing = fire(board, pattern)
    spent_firing = time.perf_counter() - began
    if detail == "clocked":
        refuse_too_many(board, firing)
    switching = [*judge_switching(board, firing), *judge_recorded(board, firing)]
    switching += judge_firmware(board, firing) if firmware else []
    wanted = corners(board, min(p.width for p in pattern.pulses), any(p.hold is not None for p in pattern.pulses))
    began = time.perf_counter()
    made = partial(assemble, detail=detail)
    run = partial(run_corners, board, firing, also=switching, measure=measure, pictured=pictured, assembled=made)
    results = run(wanted, keep, crew, progress)
    longest = slow_rail(board)
    if longest is not None and any(dips(board, r) for r in results):
        results += run((longest,), keep / "longest", crew)
    spent_running = time.perf_counter() - began

    sagged = judge_sagged_chain(board, firing, [r.trial.readings for r in results if r.trial is not None])
    findings = worst([*by_corner(results), switching, sagged])
    if not any(r.trial for r in results):
        findings = [f for f in findings if f.verdict == "fail"]  # what is left was never put to a circuit
    proven = all(r.audit.proven for r in results)
    sampled = [r for r in results if r.trial is not None]
    shown = _shown(sampled)
    return Result(
        board.name,
        pattern.name,
        firing.duration,
        overall(findings, proven, strict),
        tuple(findings),
        (
            *assumptions_of(board, sampled),
            *assumptions_of_capture(board, firing),
            *assumptions_of_holds(board, firing),
        ),
        tuple(r.audit for r in results),
        _firing_sentences(board, firing, firmware, detail),
        _traces(board, firing, shown),
        _deciding_deck(findings, sampled),
        (Timing("register frames", spent_firing), *timings_of(results, spent_running)),
        failures_of(results),
        engine_of(results),
        strict,
        _closeups(findings, board, firing, sampled, shown) if pictured else (),
        edges=edge_times(board, firing),
        motions=_motions(findings, sampled) if pictured else (),
    )


def edge_times(board: Board, firing: Firing) -> tuple[EdgeTimes, ...]:
    """Every pulse as asked for, as the controller's timer has it, and as its output shows it."""
    return tuple(
        EdgeTimes(
            m.pulse.channel,
            board.channel(m.pulse.channel).label,
            (m.pulse.start, m.pulse.stop),
            (m.timed.start, m.timed.stop),
            None if m.swallowed else (m.start, m.stop),
        )
        for m in firing.moved
    )


def _firing_sentences(board: Board, firing: Firing, firmware: bool, detail: Detail) -> tuple[str, ...]:
    rules = not_given(board) if firmware else ""
    missing = (rules,) if rules else ()
    if firing.goes_on:
        said = f"powers and temperatures are averages {firing.averaged_over}, as if it were fired again and again"
        missing = (f"{said}; a duration in the TOML file that names it says how long it is until then", *missing)
    if firing.recorded is not None:
        return (*told(firing), *missing)
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
        lines += _rounded(board, firing)
        lines += told_of_holds(board, firing)
    if detail == "clocked":
        lines.append("the registers were run flip-flop by flip-flop, clocked by their lines")
    return (*lines, *missing)


def _rounded(board: Board, firing: Firing) -> Iterator[str]:
    """What the controller's tick and jitter add, told by the pulse that the tick moves most."""
    tick = board.controller.tick.typ if board.controller is not None else 0.0
    if tick > 0:
        m = max(firing.moved, key=lambda m: abs(m.timed.start - m.pulse.start) + abs(m.timed.stop - m.pulse.stop))
        asked, timer, output = (
            f"{in_units(on, 's', 6)} to {in_units(off, 's', 6)}"
            for on, off in ((m.pulse.start, m.pulse.stop), (m.timed.start, m.timed.stop), (m.start, m.stop))
        )
        moved = sum(m.rounded is not None for m in firing.moved)
        if not moved:
            yield f"the timer's tick of {in_units(tick, 's')} moves no pulse"
        else:
            yield (
                f"the timer's tick of {in_units(tick, 's')} moves {moved} of {len(firing.moved)} pulses; the most, "
                f"{board.channel(m.pulse.channel).label}: asked {asked}, timer {timer}, output {'nothing' if m.swallowed else output}"
            )
    if firing.jitter > 0:
        yield f"each edge may come up to {in_units(firing.jitter, 's')} later still (jitter); all edges stand in edges.csv"


def _shown(results: Sequence[CornerResult]) -> CornerResult | None:
    """Pictures show the corner in which the rail is lowest."""
    return min(
        results, key=lambda r: r.trial.readings.low[None, "v_rail"][0] if r.trial else float("inf"), default=None
    )


def _closeups(
    findings: Sequence[Finding],
    board: Board,
    firing: Firing,
    results: Sequence[CornerResult],
    shown: CornerResult | None,
) -> tuple[Closeup, ...]:
    """One for each finding that wants one, from the corner that it names; in the order of the findings."""
    taken = {(c.finding, r.corner.name): c for r in results if r.trial is not None for c in r.trial.closeups}
    in_view = shown.corner.name if shown is not None else ""
    found: list[Closeup] = []
    for f in filter(wants_closeup, findings):
        one = taken.get((f.key, f.corner or in_view))
        found += [one] if one is not None else take_closeups(None, None, board, firing, [f], f.corner)
    return tuple(found)


def _motions(findings: Sequence[Finding], results: Sequence[CornerResult]) -> tuple[Closeup, ...]:
    """Of every kind of coil that moves something what its worst finding shows, from the corner that this names."""
    shown = {r.corner.name: r.trial for r in results if r.trial is not None}
    found: dict[str, Closeup] = {}
    for f in sorted(findings, key=by_motion):
        trial = shown.get(f.corner)
        taken = () if trial is None else (c for c in trial.closeups if c.finding == f.key and c.speeds is not None)
        for closeup in taken:
            found.setdefault(f.part, closeup)
    return tuple(found.values())


def _traces(board: Board, firing: Firing, shown: CornerResult | None) -> Traces | None:
    if shown is None or shown.trial is None:
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
        ceiling.min if ceiling else None,
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
