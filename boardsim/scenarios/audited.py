"""One corner of one pattern, run until its audit holds: coarse and fine, and finer where that fails."""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

from boardsim.board.reader import Board
from boardsim.circuit.assemble import assemble, windows
from boardsim.circuit.deck import Deck, Settings
from boardsim.engine.run import DEFAULT_TIME_LIMIT, Engine
from boardsim.errors import EngineTimeout, NoConvergence
from boardsim.firing.schedule import Firing
from boardsim.parts.base import Corner
from boardsim.verdict.audit import POINTS, density, passivity, refinement
from boardsim.verdict.findings import AuditEntry, CornerAudit, Finding
from boardsim.verdict.judge import Bench, judge
from boardsim.verdict.readings import Readings, take_readings

# Gear's method, since the trapezoidal rule fails passivity on clamped coils at any tolerance worth its time. Each
# rung takes at least 1.5 times the points of the one before on boards measured so far; the last two are for what fails.
LADDER = (
    Settings("gear", 3e-4, 500e-6),
    Settings("gear", 5e-5, 300e-6),
    Settings("gear", 1e-5, 150e-6),
    Settings("gear", 2e-6, 75e-6),
)

Progress = Callable[[float], None]


@dataclass(frozen=True)
class Trial:
    """One run of one deck."""

    deck: Deck
    settings: Settings
    readings: Readings
    findings: tuple[Finding, ...]
    audit: tuple[AuditEntry, ...]

    @property
    def passive(self) -> bool:
        """Whether the run is fit to be compared with."""
        return all(entry.passed for entry in self.audit if entry.criterion == "passivity")

    @property
    def sound(self) -> bool:
        """Whether the run is fit to be reported, refinement apart."""
        return all(entry.passed for entry in self.audit)


@dataclass(frozen=True)
class CornerResult:
    """What a corner came to: the run that is reported, if any run came to an end, and the audit."""

    corner: Corner
    trial: Trial | None
    audit: CornerAudit
    seconds: dict[str, float] = field(default_factory=dict)
    failure: Exception | None = None


def run_corner(
    board: Board, firing: Firing, corner: Corner, bench: Bench, keep: Path, progress: Progress,
    ladder: Sequence[Settings] = LADDER, time_limit: float = DEFAULT_TIME_LIMIT,
) -> CornerResult:  # fmt: skip
    """Run a corner coarse and fine; accept the fine run if both pass passivity and the readings agree.

    Raises
    ------
    EngineMissing, EngineCrash, DeckRejected
        If there is no engine to speak of, or it does not take the deck.
    """
    seconds = {"assemble": 0.0, "simulate": 0.0, "read": 0.0}
    clock = time.perf_counter()
    window = windows(board, firing)[0]
    deck = assemble(board, firing, corner, window)
    seconds["assemble"] = time.perf_counter() - clock
    floor = 1e-3 * max(_full_energy(board, corner))
    audit: list[AuditEntry] = []
    trials: list[Trial] = []
    failure: Exception | None = None
    with Engine(keep, time_limit) as engine:
        for rung, settings in enumerate(ladder):
            base = min(rung, 1) / 2 if rung < 2 else 0.9
            try:
                trial = _try(engine, deck, settings, firing, bench, floor, seconds, lambda s, b=base: progress(b + s / 2 if b < 0.9 else b))
            except (NoConvergence, EngineTimeout) as err:
                failure = err
                continue
            audit += trial.audit
            coarse = _coarser(trials, trial)
            trials.append(trial)
            if coarse is None:
                continue
            points = (coarse.readings.points, trial.readings.points)
            pair = f"{coarse.settings} against {settings}"
            entry = refinement(coarse.findings, trial.findings, points, corner.name, pair)
            audit.append(entry)
            if entry.passed and trial.sound and coarse.passive:
                decisive = (*(e for e in coarse.audit if e.criterion == "passivity"), *trial.audit, entry)
                progress(1.0)
                return CornerResult(corner, trial, CornerAudit(corner.name, decisive, True), seconds)
    progress(1.0)
    return CornerResult(corner, trials[-1] if trials else None, CornerAudit(corner.name, tuple(audit), False), seconds, failure)


def _coarser(before: Sequence[Trial], trial: Trial) -> Trial | None:
    """The last passive run that has few enough points for this one to be its refinement; else the first run."""
    candidates = [t for t in before if t.passive] or list(before)
    few = [t for t in candidates if trial.readings.points >= POINTS * t.readings.points]
    return (few[-1] if few else candidates[0]) if candidates else None


def _try(
    engine: Engine, deck: Deck, settings: Settings, firing: Firing, bench: Bench, floor: float, seconds: dict[str, float], progress: Progress
) -> Trial:
    clock = time.perf_counter()
    with engine.run(deck, settings, progress) as waves:
        seconds["simulate"] += time.perf_counter() - clock
        clock = time.perf_counter()
        readings = take_readings(waves, deck, firing)
    findings = judge(readings, deck, firing, bench)
    seconds["read"] += time.perf_counter() - clock
    entries = tuple(check(readings, bench.corner, str(settings), floor) for check in (passivity, density))
    return Trial(deck, settings, readings, tuple(findings), entries)


def _full_energy(board: Board, corner: Corner) -> list[float]:
    """What each coil holds at its steady current. [J]"""
    v = corner.take(board.supply.voltage, "supply")
    energies = []
    for channel in board.channels:
        r = channel.coil.winding(corner, board.around)
        energies.append(0.5 * corner.take(channel.coil.inductance, "inductance") * (v / r) ** 2)
    return energies


def unproven(findings: Sequence[Finding], why: str) -> list[Finding]:
    """The findings of a run whose audit failed: none of them counts."""
    return [replace(f, verdict="unproven", sentence=f"{f.sentence} (unproven: {why})") for f in findings]
