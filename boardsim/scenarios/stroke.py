"""How wide must a pulse be? One channel fired with ever wider pulses, each from rest, in every corner, audited."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Sequence
from dataclasses import replace
from pathlib import Path

from boardsim.board.ranges import write_labels, write_range
from boardsim.board.reader import Board, Channel
from boardsim.errors import InputError
from boardsim.firing.pattern import snapped
from boardsim.firing.registers import frame_time
from boardsim.parts.kinds import kinds
from boardsim.quantities import in_units
from boardsim.scenarios.all_corners import (
    assumptions_of,
    by_corner,
    engine_of,
    failures_of,
    timings_of,
    worst,
)
from boardsim.scenarios.audited import CornerResult
from boardsim.scenarios.crew import Crew
from boardsim.scenarios.stroke_sweep import Sweep, least_width, swept
from boardsim.scenarios.stroke_words import answer_of, firing_sentence
from boardsim.verdict.findings import CornerAudit, Finding, Result, overall
from boardsim.verdict.strokes_study import StrokeStudy, motion_rules

NAME = "stroke"
_FIRMWARE = ("count",)  # shapes of findings about what the firmware is told to keep
_PULSES_OWN = ("warming", "pulse-timing", "lost-pulse")  # checks on the question's own pulses


def stroke(
    board: Board,
    keep: Path,
    strict: bool = False,
    crew: Crew | None = None,
    progress: Callable[[float], None] | None = None,
    channel: int | None = None,
    width: float | None = None,
) -> Result:
    """Fire a channel with ever wider pulses and look how its moving part travels, hits, stays and comes back.

    Parameters
    ----------
    board : Board
    keep : Path
        Where deck and log of a failed run are kept.
    strict : bool
        Whether a missing limit counts as broken.
    crew : Crew
        Who runs the corners; one of its own if absent.
    progress : callable
        Told the share of the work done, from any thread.
    channel : int
        Which; if absent the first channel of every distinct build whose coil moves something.
    width : float
        The pulse that has to work; any if absent. [s]

    Returns
    -------
    Result
        `study` is a `StrokeStudy`; the answer is the first finding of each channel.

    Raises
    ------
    EngineMissing, EngineStopped
        If there is no engine, or the run was interrupted.
    InputError
        If no coil of the board moves anything, the board has no such channel, the chain cannot make the pulse, or the waveforms
        would not fit on the disk.

    Notes
    -----
    A pulse works if the moving part arrives (by its latest arrival, or else before the end of the pulse), hits within its band, is
    held in where it arrived before the end of the pulse, and comes back; all of it in every corner. The channel is alone on its board.
    Pulses of one run follow each other with pauses in which everything comes to rest: the readings say whether it has, and where it
    has not the run is made again with pauses of twice the length.
    """
    if crew is None:
        with Crew() as own:
            return stroke(board, keep, strict, own, progress, channel, width)
    chosen = chosen_channels(board, channel)
    check_width(board, width)
    width = None if width is None else snapped(width)
    began = time.perf_counter()
    sweeps, findings = [], []
    for k, one in enumerate(chosen):
        alone = replace(board, channels=(one,), exclusive=())
        sweep = Sweep(alone, one, keep if len(chosen) == 1 else keep / f"channel{one.number}", crew)
        for share in swept(sweep, width):
            if progress is not None:
                progress((k + share) / len(chosen))
        sweeps.append(sweep)
        findings.append(_found(sweep, width))
    results = [r for s in sweeps for r in s.results]
    spent = time.perf_counter() - began
    together = worst(findings)
    proven = all(r.audit.proven for r in results)
    sampled = [r for r in results if r.trial is not None]
    return Result(
        board.name,
        NAME,
        sum(s.duration for s in sweeps),
        overall(together, proven, strict),
        tuple(together),
        assumptions_of(board, sampled),
        tuple(audit for s in sweeps for audit in _audits(s)),
        tuple(firing_sentence(s.channel.label, s.widths, s.pause, frame_time(board.chain)) for s in sweeps),
        None,
        _deck(sampled),
        timings_of(results, spent),
        (*(several[0].sentence for several in findings if several[0].verdict == "pass"), *failures_of(results)),
        engine_of(results),
        strict,
        study=StrokeStudy(tuple(s.row(width) for s in sweeps)),
    )


def _audits(sweep: Sweep) -> Iterator[CornerAudit]:
    """One audit for each corner in which all runs are proven, and one for each run that is not."""
    label = sweep.channel.label
    for corner in sweep.corners:
        mine = [r.audit for r in sweep.results if r.corner == corner]
        entries = tuple(e for audit in mine if audit.proven for e in audit.entries)
        if entries:
            yield CornerAudit(f"{corner.name}, {label}", entries, True)
        for audit in mine:
            if not audit.proven:
                yield replace(audit, corner=f"{corner.name}, {label}")


def _deck(results: Sequence[CornerResult]) -> str:
    """The deck of the first corner, with the last widths."""
    last = results[-1] if results else None
    return "" if last is None or last.trial is None else last.trial.deck.text(last.trial.settings)


def moving_kinds() -> str:
    """The kinds of coil that say what they move, in words."""
    return " or ".join(f'"{name}"' for name, kind in kinds("coil").items() if "motion" in kind.model_fields)


def chosen_channels(board: Board, number: int | None) -> list[Channel]:
    """The channel of a number; without one the first channel of every distinct build that moves something and lets it come back.

    Raises
    ------
    InputError
        If there is no such channel, or its coil moves nothing.
    """
    known = [c.number for c in board.channels]
    if number is not None and number not in known:
        raise InputError(f"channel {number} is not on the board {board.path.name}; it has {write_range(known)}")
    asked = [c for c in board.channels if number is None or c.number == number]
    able = [c for c in asked if motion_rules(c) and c.opposite is None]
    if not able:
        which = write_labels([c.label for c in asked])
        raise InputError(
            f"{which}: nothing is known of what the coil moves, or it does not come back by itself: a stroke needs a coil of kind "
            f"{moving_kinds()} with its motion (travel, mass, spring_preload, ...), and no full bridge"
        )
    builds: dict[tuple[object, ...], Channel] = {}
    for c in able:
        builds.setdefault(c.build, c)
    return list(builds.values())


def check_width(board: Board, width: float | None) -> None:
    """Refuse a pulse that the chain of registers cannot make.

    Raises
    ------
    InputError
        If it is shorter than a register frame.
    """
    if width is not None and width < least_width(board):
        raise InputError(
            f"--width: a pulse of {in_units(width, 's')} is shorter than a register frame and the pause after it, "
            f"{in_units(least_width(board), 's')}: the chain of {board.path.name} cannot make it; ask for a longer one"
        )


def _found(sweep: Sweep, width: float | None) -> list[Finding]:
    """The answer, what its width is held against, and what else the runs broke."""
    row = sweep.row(width)
    guard = sweep.board.limits.guard_band.typ
    found = [answer_of(row, guard)]
    asked = [] if width is None else [sweep.at_width.get((corner, width), []) for corner in sweep.points]
    found += worst(asked)
    if width is None:  # a blow without a band is in view, whichever width would be taken
        all_of = [[f for f in several if f.verdict == "limit-missing"] for several in sweep.at_width.values()]
        found += worst(all_of)
    others = worst([*by_corner(sweep.results)])
    return [*found, *(f for f in others if f.shape not in _FIRMWARE and f.check not in _PULSES_OWN)]
