"""What does the board do before its firmware runs? Switched on with any register contents, and reset in operation."""

from __future__ import annotations

import math
import random
import time
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from functools import partial
from pathlib import Path

import numpy as np

from boardsim.board.bridges import forwards
from boardsim.board.corners import corners, nominal_only
from boardsim.board.matrix import Line
from boardsim.board.reader import Board
from boardsim.circuit.boot import Boot, boot_deck, detail_of
from boardsim.circuit.deck import Deck, Window
from boardsim.firing.registers import ChainState, frame_time, shift_in
from boardsim.firing.schedule import Firing
from boardsim.parts.base import Assumption, Corner, listed
from boardsim.parts.clocked import Contents
from boardsim.parts.regulator import Regulator
from boardsim.quantities import Quantity, in_units
from boardsim.scenarios.all_corners import (
    assumptions_of,
    by_corner,
    engine_of,
    failures_of,
    run_corners,
    timings_of,
    worst,
)
from boardsim.scenarios.audited import CornerResult, unproven
from boardsim.scenarios.crew import Crew
from boardsim.scenarios.volley_choices import alike
from boardsim.verdict.findings import Finding, Result, Verdict, overall, severity
from boardsim.verdict.power_up import (
    BootReading,
    BootWatch,
    Uncommanded,
    harmless,
    release_assumed,
)
from boardsim.verdict.power_up_findings import judge_boot, quantity_of
from boardsim.verdict.studies import BootRow, PowerUp

NAME = "power-up"
SEED = 1
_SETTLED = 5.0  # L/R times
_LONGEST_PULSE = 0.1  # [s], that a reset interrupts; a slower coil is not followed to its settled current
_RESET_BEGINS = 1e-3  # [s]


@dataclass(frozen=True)
class _Done:
    """One boot, run in its corners."""

    boot: Boot
    watch: BootWatch
    results: list[CornerResult]
    findings: list[Finding]


def power_up(
    board: Board,
    keep: Path,
    strict: bool = False,
    crew: Crew | None = None,
    progress: Callable[[float], None] | None = None,
    seed: int | None = None,
) -> Result:
    """Switch a board on, and reset it in operation, and look what flows before the first enabled frame.

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
    seed : int
        Of the random contents; always the same if absent.

    Returns
    -------
    Result
        `study` is a `PowerUp`.

    Raises
    ------
    EngineMissing, EngineStopped
        If there is no engine, or the run was interrupted.
    InputError
        If the waveforms would not fit on the disk.

    Notes
    -----
    What a storage stage wakes up with is unknown (NXP 74HC595 rev. 6: clear does not touch it), so that every word has to be
    harmless. All ones turn on every switch that is on while its output is high, all zeros every other; where a board has both,
    a word that turns on all is added, as where a board has full bridges, whose coils get nothing of all ones. On a supply that gives way under them a coil carries most alone: one of every build
    does. A random word shows what else may come. A latch line that floats can at worst copy one unknown word over another. The corners are those with the supply high and the coils cold,
    which give every uncommanded current its highest value.
    """
    if crew is None:
        with Crew() as own:
            return power_up(board, keep, strict, own, progress, seed)
    chosen = SEED if seed is None else seed
    all_boots = list(boots(board, chosen))
    wanted = strong_corners(board)
    began = time.perf_counter()
    done = []
    for k, boot in enumerate(all_boots):
        share = None if progress is None else partial(_report, progress, k, len(all_boots))
        done.append(_run(board, boot, wanted, keep / f"{NAME}{k + 1}", crew, share))
    elapsed = time.perf_counter() - began
    results = [r for d in done for r in d.results]
    findings = worst([d.findings for d in done])
    proven = all(r.audit.proven for r in results)
    study = _study(board, done, wanted)
    shown = done[study.shown]
    deciding = next((r for r in shown.results if r.trial is not None and r.corner.name == study.corner), None)
    sampled = [r for r in results if r.trial is not None]
    return Result(
        board.name,
        NAME,
        max(b.duration for b in all_boots),
        overall(findings, proven, strict),
        tuple(findings),
        tuple(dict.fromkeys((*assumptions_of(board, sampled), *_assumed(board)))),
        tuple(replace(r.audit, corner=f"{r.corner.name}; {d.boot.name}") for d in done for r in d.results),
        tuple(_told(board, all_boots, chosen)),
        None,
        deciding.trial.deck.text(deciding.trial.settings) if deciding is not None and deciding.trial else "",
        timings_of(results, elapsed),
        failures_of(results),
        engine_of(results),
        strict,
        study=study,
    )


def _report(progress: Callable[[float], None], k: int, n: int, share: float) -> None:
    progress((k + share) / n)


def strong_corners(board: Board) -> tuple[Corner, ...]:
    """The corners of a board in which coils draw most: supply high and coils cold, with every kind of clamp."""
    found = corners(board)
    return tuple(c for c in found if c.ends.get("supply") != "min" and c.winding != "hot" and not _weak(c)) or found[:1]


def _weak(corner: Corner) -> bool:
    return corner.ends.get("coil_resistance") == "max" or corner.ends.get("logic") == "min"


def boots(board: Board, seed: int) -> Iterator[Boot]:
    """Every way in which the board is brought up; the random word is made from `seed`."""
    width = board.chain.outputs
    ones = (1 << width) - 1
    dice = random.Random(seed)
    words = {
        "storage all ones": ones,
        "storage all zeros": 0,
        f"storage random (random number {seed})": dice.getrandbits(width),
    }
    driving = [d for d in board.drivers if isinstance(d, Line) or d.forwards]
    on = sum(1 << d.output for d in driving if d.switch.active == "high")
    bridges = sum(1 << c.output for c in board.channels if c.opposite is not None)
    if (any(d.switch.active == "low" for d in board.drivers) and on) or bridges:
        words["storage with every coil on"] = on
    alone = [build[0] for build in alike(board)]
    if len(alone) < len(forwards(board)):
        off = ones & ~(on | bridges)
        words["storage with one coil of each build on"] = off ^ sum(
            {1 << output for n in alone for output in board.channel(n).outputs}
        )
    for name, word in words.items():
        yield _switched_on(board, name, Contents(dice.getrandbits(width) if "random" in name else word, word), True)
    line = board.chain.output_enable
    floating = line is not None and line.rests is None
    if floating or not all(c.held_off for c in board.channels):
        yield _switched_on(board, "storage all ones, what floats drifts to off", Contents(ones, ones), False)
    yield _reset(board)


def _switched_on(board: Board, name: str, contents: Contents, leans_on: bool) -> Boot:
    """From no rail at all to the first frame, all off, and its release."""
    table, chain = board.power_up, board.chain
    coils = _rise(table.coils_at.typ, table.coils_rise.typ)
    at, rise = logic_comes(board)
    logic = _rise(at, rise)
    first = at + rise + table.first_frame.max
    enabled = _enabled(board, first)
    duration = enabled + _release_time(board)
    return Boot(
        name,
        contents,
        leans_on,
        (*logic, (duration + 1.0, 1.0)),
        (*coils, (duration + 1.0, 1.0)),
        ((first, 0),),
        ((first + frame_time(chain) + chain.latch_time.typ, duration + 1.0),),
        0.0,
        enabled,
        duration,
    )


def logic_comes(board: Board) -> tuple[float, float]:
    """When the logic rail begins to rise, and how long it takes; one that hangs on the coil rail comes with that. [s]

    Notes
    -----
    A regulator's output counts as full when the coil rail is, and its capacitor has been charged with what its ceiling
    leaves beside the load, C V / (I - I_load); at once where no ceiling was given.
    """
    table, part = board.power_up, board.logic
    if not isinstance(part, Regulator):
        return table.logic_at.typ, table.logic_rise.typ
    spare = None if part.current_ceiling is None else part.current_ceiling.min - part.load.max
    charging = 0.0 if spare is None else part.capacitance.max * part.voltage.max / spare
    return table.coils_at.typ, table.coils_rise.typ + charging


def _reset(board: Board) -> Boot:
    """Every coil on as the firmware means it, then a reset: pins float until the first frame, all off."""
    chain = board.chain
    off = shift_in(ChainState(chain.outputs), 0, chain)
    image = sum({1 << bit for c in forwards(board) for bit in c.bits})
    on = _RESET_BEGINS + frame_time(chain)
    reset = on + min(_SETTLED * _slowest(board), _LONGEST_PULSE)
    first = reset + board.power_up.first_frame.max
    enabled = _enabled(board, first)
    duration = enabled + _release_time(board)
    steady = ((0.0, 1.0), (duration + 1.0, 1.0))
    return Boot(
        "every channel was on",
        Contents(off.shift, off.storage),
        True,
        steady,
        steady,
        ((_RESET_BEGINS, image), (first, 0)),
        ((-1.0, reset), (first + frame_time(chain) + chain.latch_time.typ, duration + 1.0)),
        reset + board.power_up.reset_off.min,
        enabled,
        duration,
        reset,
    )


def _rise(at: float, rise: float) -> tuple[tuple[float, float], ...]:
    start = ((0.0, 0.0), (at, 0.0)) if at > 0 else ((0.0, 0.0),)
    return (*start, (at + rise, 1.0))


def _enabled(board: Board, first: float) -> float:
    """When outputs are enabled with a defined frame: the latch edge, or a latch time later when a pin enables them. [s]"""
    line = board.chain.output_enable
    wait = board.chain.latch_time.typ if line is not None and line.pin else 0.0
    return first + frame_time(board.chain) + wait


def _slowest(board: Board) -> float:
    return max(c.coil.inductances[1] / c.coil.resistance.min for c in board.channels)


def _release_time(board: Board) -> float:
    """Long enough for the peaks at turn-off, which all channels that are on share. [s]"""
    return _SETTLED * _slowest(board)


def _run(
    board: Board,
    boot: Boot,
    wanted: Sequence[Corner],
    keep: Path,
    crew: Crew,
    progress: Callable[[float], None] | None,
) -> _Done:
    """Run one boot in all its corners, audited like any run, and judge it."""
    watch = BootWatch(board, boot)
    none = np.zeros((0, 2))
    firing = Firing(boot.duration, {}, {c.number: none for c in board.channels}, (), (), (), (), len(boot.frames), 0.0)
    firing = replace(firing, lines={line.number: none for line in board.lines})
    detail = detail_of(board, boot)

    def made(on: Board, _firing: Firing, corner: Corner, _window: Window) -> Deck:
        return boot_deck(on, boot, corner, detail)

    results = run_corners(board, firing, wanted, keep, crew, progress, measure=watch, pictured=False, assembled=made)
    nominal = nominal_only(board)
    runs = [_named(findings, boot) for findings in by_corner(results)]
    for r in results:
        taken = watch.found.get(r.corner.name)
        if r.trial is None or taken is None:
            continue
        mine = judge_boot(board, boot, taken, r.corner, nominal)
        runs.append(mine if r.audit.proven else unproven(mine, "audit failed"))
    return _Done(boot, watch, results, worst(runs))


def _named(findings: Sequence[Finding], boot: Boot) -> list[Finding]:
    """What the parts themselves suffer; the sentence says in which boot."""
    return [replace(f, sentence=f"{f.sentence} (at power-up, {boot.name})") for f in findings]


def _study(board: Board, done: Sequence[_Done], wanted: Sequence[Corner]) -> PowerUp:
    rows = tuple(_row(board, d, wanted) for d in done)
    # Of equally many coils switch-on is shown, which tells more than a reset.
    shown = max(range(len(rows)), key=lambda k: (rows[k].count, done[k].boot.reset is None, rows[k].energy or 0.0, -k))
    found = list(done[shown].watch.found.values())
    reading = max(found, key=_energy, default=None)
    boot = done[shown].boot
    return PowerUp(
        rows,
        shown,
        reading.corner if reading is not None else "",
        boot.since,
        boot.until,
        boot.frames[-1][0],
        min(harmless(board, c, corner) for c in board.channels for corner in wanted),
        reading.waves if reading is not None else {},
        boot.reset,
        "off" if board.chain.register_.open_drain else "high impedance",
    )


def _energy(reading: BootReading) -> float:
    return sum(u.energy for u in reading.channels.values())


def _row(board: Board, done: _Done, wanted: Sequence[Corner]) -> BootRow:
    """A boot's readings, each in its worst corner; its verdict is that of its own findings."""
    by_name = {c.name: c for c in wanted}
    found = list(done.watch.found.values())
    worst_of: dict[int, Uncommanded] = {}
    counting: set[int] = set()
    for reading in found:
        for number, one in reading.channels.items():
            limit = harmless(board, board.channel(number), by_name[reading.corner])
            counting |= {number} if one.peak > limit else set()
            if number not in worst_of or one.peak > worst_of[number].peak:
                worst_of[number] = one
    loudest = max(worst_of, key=lambda n: worst_of[n].peak, default=None)
    mine = [f for f in done.findings if f.quantity == quantity_of(done.boot)]
    verdict: Verdict = min(mine, key=severity).verdict if mine else "unproven"
    return BootRow(
        ("after a reset, " if done.boot.reset is not None else "") + done.boot.name,
        f"{done.boot.contents.storage:0{math.ceil(board.chain.outputs / 4)}X}",
        worst_of[loudest].peak if loudest is not None else None,
        board.channel(loudest).label if loudest is not None and counting else "-",
        len(counting),
        max(map(_energy, found)) if found else None,
        any(f.consequence == "destroy" and f.verdict == "fail" for f in mine),
        verdict,
    )


def _assumed(board: Board) -> Iterator[Assumption]:
    """What had to be supposed for this question."""
    table, chain = board.power_up, board.chain
    yield from listed(
        "power-up",
        start_of_the_coil_rail=table.coils_at,
        rise_of_the_coil_rail=table.coils_rise,
        **_own_rail(board),
        first_frame=table.first_frame,
        current_that_does_not_matter=table.harmless,
        time_in_which_a_reset_has_to_turn_channels_off=table.reset_off,
    )
    if chain.output_enable is None:
        yield Assumption("chain", "output enable", "tied low", "not given: the wiring with which most goes wrong")
    if chain.clear is None:
        yield Assumption("chain", "clear", "tied high", "not given: it does not touch the storage stage")
    yield from dict.fromkeys(release_assumed(board))


def _own_rail(board: Board) -> dict[str, Quantity]:
    """How a logic rail of its own comes; one that hangs on the coil rail comes with that."""
    table = board.power_up
    own = {"start_of_the_logic_rail": table.logic_at, "rise_of_the_logic_rail": table.logic_rise}
    return {} if board.logic.derived else own


def _how_logic_comes(board: Board) -> str:
    at, rise = (in_units(t, "s") for t in logic_comes(board))
    if board.logic.derived:
        return f"logic rail through its {board.logic.kind}, counted as full {rise} after {at}"
    return f"logic rail from {at} on within {rise}"


def _told(board: Board, all_boots: Sequence[Boot], seed: int) -> Iterator[str]:
    """What was done, for the report."""
    chain, table = board.chain, board.power_up
    on = all_boots[0]
    yield (
        f"switched on: {_how_logic_comes(board)}, "
        f"coil rail from {in_units(table.coils_at.typ, 's')} on within {in_units(table.coils_rise.typ, 's')}; first register "
        f"frame, all off, at {in_units(on.frames[0][0], 's', 4)}, outputs enabled with it at {in_units(on.until, 's', 4)}"
    )
    yield (
        f"what the storage stage of {chain.count * chain.register_.outputs} outputs wakes up with is unknown: run with all "
        f"ones, all zeros and a random word (random number {seed})"
    )
    if any(c.opposite is not None for c in board.channels):
        yield "a full bridge whose outputs are both high gives its coil nothing: a word that drives every coil forwards is run too"
    elif all(d.switch.active == "high" for d in board.drivers):
        yield "all ones turn on every coil: each switch of this board is on while its output is high"
    if any("one coil" in boot.name for boot in all_boots):
        yield "one coil of each build alone shows what it carries where the others do not pull the rail down"
    reset = all_boots[-1].reset or 0.0
    yield f"reset at {in_units(reset, 's', 4)} with every channel on: registers keep their frame, pins float"
