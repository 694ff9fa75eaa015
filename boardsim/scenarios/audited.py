"""One corner of one pattern, run until its audit holds: coarse and fine, and finer where that fails."""

from __future__ import annotations

import math
import shutil
import threading
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path

from boardsim.board.reader import Board, Channel
from boardsim.circuit.assemble import assemble, windows
from boardsim.circuit.deck import MANY_BRIDGES, Deck, Settings, Window
from boardsim.engine.run import DEFAULT_TIME_LIMIT, Engine
from boardsim.engine.waves import Waves
from boardsim.errors import DeckRejected, EngineCrash, EngineTimeout, InputError, NoConvergence
from boardsim.firing.schedule import Firing
from boardsim.parts.base import Corner
from boardsim.verdict.audit import POINTS, density, passivity, refinement
from boardsim.verdict.bench import Bench
from boardsim.verdict.closeups import Closeup, take_closeups
from boardsim.verdict.findings import AuditEntry, CornerAudit, Finding, Reading
from boardsim.verdict.judge import judge
from boardsim.verdict.readings import Readings, take_readings

# Gear's method, since the trapezoidal rule fails passivity on clamped coils at any tolerance worth its time. A rung
# takes at least 1.5 times the points of the one before on most boards; those from the third on are for what fails.
LADDER = (
    Settings("gear", 1.5e-4, 500e-6),
    Settings("gear", 2e-5, 500e-6),
    Settings("gear", 2.5e-6, 250e-6),
    Settings("gear", 3e-7, 120e-6),
    # The peak of a ringing that one run misses by chance between two points is told from two others that do not.
    Settings("gear", 4e-8, 60e-6),
)
FINE = 1  # the rung that findings are usually read from, and that decks are written with
_SHORTEST_STEP = 5e-6  # [s], of the first rung: a faster coil is left to the engine's own estimate
_STEPS_PER_TAU = (6, 10, 16, 25, 40)  # at least, whatever the engine's own error estimate allows


def fitted(ladder: Sequence[Settings], board: Board) -> tuple[Settings, ...]:
    """The ladder with steps that the fastest coil of the board can be followed with.

    The engine's estimate of its error alone lets it step over most of an exponential when nothing else happens. A clamp
    that is a resistor R_x takes the current down with L / (R + R_x), one that is a capacitor makes it swing with sqrt(L C): as
    many steps then fall on a sixth of its period.
    """
    tau = min(_fastest(c, board.supply.voltage.max) for c in board.channels)
    counts = (*_STEPS_PER_TAU, *[_STEPS_PER_TAU[-1]] * len(ladder))
    return tuple(
        replace(s, max_step=min(s.max_step, max(tau, _SHORTEST_STEP * _STEPS_PER_TAU[0]) / n))
        for s, n in zip(ladder, counts, strict=False)
    )


def _fastest(channel: Channel, volts: float) -> float:
    """The shortest time in which a coil's current changes, fed with this voltage. [V] -> [s]"""
    henries, clamps = channel.coil.least_inductance(volts), [d.clamp for d in channel.drivers]
    farads = min((c.swings_with() for c in clamps if c.swings_with()), default=0.0)
    decay: float = henries / max(channel.coil.resistance.max + sum(c.in_the_way() for c in clamps), 1e-3)
    return min(decay, math.sqrt(henries * farads)) if farads else decay


Progress = Callable[[float], None]
Measure = Callable[[Waves, Deck], tuple[Reading, ...]]
Assemble = Callable[[Board, Firing, Corner, Window], Deck]

# Where a big capacitor's charge is rounded, a picosecond step makes microamperes of it: then Newton's method cannot
# meet the usual absolute tolerance. It is still far below any current that decides.
LOOSE_ABSTOL = 1e-5  # [A]


@dataclass(frozen=True)
class Trial:
    """One run of one deck; `measured` is what the scenario asked for beyond findings."""

    deck: Deck
    settings: Settings
    readings: Readings
    findings: tuple[Finding, ...]
    audit: tuple[AuditEntry, ...]
    closeups: tuple[Closeup, ...] = ()
    measured: tuple[Reading, ...] = ()

    @property
    def sound(self) -> bool:
        """Whether the run passes by itself, before it is compared with another."""
        return all(entry.passed for entry in self.audit)


@dataclass(frozen=True)
class CornerResult:
    """What a corner came to: the run that is reported, if any run came to an end, and the audit."""

    corner: Corner
    trial: Trial | None
    audit: CornerAudit
    seconds: dict[str, float] = field(default_factory=dict)
    failure: Exception | None = None
    engine: str = ""


@dataclass
class _Job:
    """One corner's deck on one engine, and how long each stage of it took."""

    engine: Engine
    deck: Deck
    firing: Firing
    bench: Bench
    floor: float
    seconds: dict[str, float]
    also: Sequence[Finding]
    measure: Measure | None
    pictured: bool

    def run_either(self, settings: Settings, progress: Progress) -> Trial:
        """Run; where that does not converge, once more with another absolute tolerance of currents.

        Event-driven devices make picosecond steps of their own, so that a deck with them begins with the looser one;
        so does one with many bridges, whose resting legs otherwise set the points.
        """
        tries = [settings, replace(settings, abstol=LOOSE_ABSTOL)]
        looser = self.deck.digital or self.deck.bridges >= MANY_BRIDGES
        first, second = reversed(tries) if looser else tries
        try:
            return self.run(first, progress)
        except NoConvergence:
            return self.run(second, progress)

    def run(self, settings: Settings, progress: Progress) -> Trial:
        """Simulate, read, judge, and audit the run by itself."""
        clock = time.perf_counter()
        with self.engine.run(self.deck, settings, progress) as waves:
            self.seconds["simulate"] += time.perf_counter() - clock
            clock = time.perf_counter()
            readings = take_readings(waves, self.deck, self.firing)
            findings = judge(readings, self.deck, self.firing, self.bench)
            corner, board = self.bench.corner, self.bench.board
            shown = [*findings, *self.also]
            closeups = take_closeups(waves, self.deck, board, self.firing, shown, corner) if self.pictured else ()
            measured = self.measure(waves, self.deck) if self.measure is not None else ()
        self.seconds["read"] += time.perf_counter() - clock
        audit = tuple(check(readings, corner, str(settings), self.floor) for check in (passivity, density))
        return Trial(self.deck, settings, readings, tuple(findings), audit, closeups, measured)


def run_corner(
    board: Board,
    firing: Firing,
    corner: Corner,
    bench: Bench,
    keep: Path,
    progress: Progress,
    ladder: Sequence[Settings] = LADDER,
    time_limit: float = DEFAULT_TIME_LIMIT,
    cancel: threading.Event | None = None,
    also: Sequence[Finding] = (),
    measure: Measure | None = None,
    pictured: bool = True,
    assembled: Assemble = assemble,
) -> CornerResult:
    """Run a corner coarse and fine; accept the fine run if both pass by themselves and agree.

    Parameters
    ----------
    keep : Path
        Where deck and log of a failed run are kept.
    progress : callable
        Told the share of the corner's work that is done.
    ladder : sequence of Settings
        From coarse to fine.
    time_limit : float
        Per run. [s]
    cancel : threading.Event
        Ends the corner from another thread when set.
    also : sequence of Finding
        Findings that need no waveform, but whose close-ups show this corner's.
    measure : callable
        Takes further readings from a run's waveforms; two runs must agree on them as on findings.
    pictured : bool
        Whether close-ups are wanted.
    assembled : callable
        Makes the deck.

    Raises
    ------
    EngineMissing, EngineStopped
        If there is no engine to speak of, or it was interrupted.
    InputError
        If the waveforms would not fit on the disk.
    """
    clock = time.perf_counter()
    (window,) = windows(board, firing)
    deck = assembled(board, firing, corner, window)
    seconds = {"assemble": time.perf_counter() - clock, "simulate": 0.0, "read": 0.0}
    floor = 1e-3 * max(_full_energy(board, corner))
    entries: list[AuditEntry] = []
    trials: list[Trial] = []
    failure: Exception | None = None
    with Engine(keep, time_limit, cancel or threading.Event()) as engine:
        job = _Job(engine, deck, firing, bench, floor, seconds, also, measure, pictured)
        rungs = fitted(ladder, board)
        _fits(deck, rungs[0], engine.folder)
        for settings, (begin, end) in zip(rungs, (*_SHARES, *[(0.95, 0.95)] * len(ladder)), strict=False):
            try:
                trial = job.run_either(settings, _scaled(progress, begin, end))
            except NoConvergence as err:
                failure = err
                continue
            except (EngineTimeout, EngineCrash, DeckRejected) as err:
                failure = err
                break  # a finer run takes longer still, and what crashed once crashes again
            entries += trial.audit
            coarse = _coarser(trials, trial)
            trials.append(trial)
            if coarse is None:
                continue
            points = (coarse.readings.points, trial.readings.points)
            pair = f"{coarse.settings} against {settings}"
            measured = (coarse.measured, trial.measured)
            entry = refinement(coarse.findings, trial.findings, points, corner.name, pair, measured)
            entries.append(entry)
            if entry.passed and trial.sound and coarse.sound:
                decisive = (*coarse.audit, *trial.audit, entry)
                progress(1.0)
                engine.discard_kept()
                return CornerResult(
                    corner, trial, CornerAudit(corner.name, decisive, True), seconds, engine=engine.name
                )
    progress(1.0)
    last = trials[-1] if trials else None
    return CornerResult(corner, last, CornerAudit(corner.name, tuple(entries), False), seconds, failure, engine.name)


def _fits(deck: Deck, settings: Settings, folder: Path) -> None:
    """Refuse a pattern whose waveforms alone would fill the disk: most often a slip in a duration.

    Raises
    ------
    InputError
        If the fewest points that a run can have would take more than half of what is free.
    """
    least = (deck.window.stop - deck.window.start) / settings.max_step * (len(deck.vectors) + 1) * 8
    free = shutil.disk_usage(folder).free
    if least > free / 2:
        raise InputError(
            f"a pattern of {deck.window.stop:g} s would write at least {least / 2**20:.0f} MiB of waveforms for one run, and "
            f"{free / 2**20:.0f} MiB are free; shorten the pattern, or set TMPDIR to a larger disk"
        )


_SHARES = ((0.0, 0.35), (0.35, 0.95))  # of a corner's time that the first two runs take


def _scaled(progress: Progress, begin: float, end: float) -> Progress:
    return lambda share: progress(begin + (end - begin) * share)


def _coarser(before: Sequence[Trial], trial: Trial) -> Trial | None:
    """The last sound run that has few enough points for this one to be its refinement; else the first run."""
    candidates = [t for t in before if t.sound] or list(before)
    few = [t for t in candidates if trial.readings.points >= POINTS * t.readings.points]
    return few[-1] if few else candidates[0] if candidates else None


def _full_energy(board: Board, corner: Corner) -> list[float]:
    """What each coil holds at its steady current. [J]"""
    v = corner.take(board.supply.voltage, "supply")
    energies = []
    for channel in board.channels:
        r = channel.coil.ohms(corner, board.around)
        energies.append(channel.coil.held(v / r, corner))
    return energies


def unproven(findings: Sequence[Finding], why: str) -> list[Finding]:
    """The findings of a run whose audit failed: none of them counts."""
    return [replace(f, verdict="unproven", sentence=f"{f.sentence} (unproven: {why})") for f in findings]
