"""How many channels can be fired at once? From one to all, the worst choice of so many, in every corner, audited."""

from __future__ import annotations

import math
import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from pathlib import Path

from boardsim.board.bridges import forwards
from boardsim.board.corners import not_varied
from boardsim.board.ranges import write_range
from boardsim.board.reader import Board
from boardsim.errors import InputError, QuantityError
from boardsim.parts.base import Corner
from boardsim.parts.copper import T_20C
from boardsim.quantities import POSITIVE_TIME, parse
from boardsim.scenarios.all_corners import timings_of
from boardsim.scenarios.audited import CornerResult
from boardsim.scenarios.crew import Crew
from boardsim.scenarios.volley_closeups import closeups_of
from boardsim.scenarios.volley_runs import Runs, Tried
from boardsim.scenarios.volley_words import answer_of, firing_sentences, notes_on
from boardsim.verdict.findings import CornerAudit, Result, overall
from boardsim.verdict.studies import Volley

EACH_UP_TO = 32  # channels; beyond that not every number is run
_PER_OCTAVE = 4  # numbers that are run at least from there on, between one number and its double
_TIMES = 6  # time constants after which 0.25 % of a change is left


def volley(
    board: Board,
    keep: Path,
    strict: bool = False,
    crew: Crew | None = None,
    progress: Callable[[float], None] | None = None,
    width: float | None = None,
    at_least: int | None = None,
) -> Result:
    """Find how many channels a board can fire at once.

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
    width : float
        Of the pulse; long enough for currents and rail to settle if absent, see `settled_width`. [s]
    at_least : int
        How many must pass; the board's most_on if absent.

    Returns
    -------
    Result
        With a `Volley` as its study, the answer as its first finding, and the findings of the number that is wanted
        (of the largest that passes, if none is).

    Raises
    ------
    EngineMissing, EngineStopped
        If there is no engine, or the run was interrupted.
    InputError
        If more channels are asked for than there are, the board has a matrix, or the waveforms would not fit on the disk.

    Notes
    -----
    What counts is what the hardware stands. How many channels the firmware may turn on, and which of them exclude each
    other, is left out: the answer is there to be held against it.
    """
    if crew is None:
        with Crew() as own:
            return volley(board, keep, strict, own, progress, width, at_least)
    count = len(forwards(board))
    check_wanted(board, at_least)
    wanted = at_least if at_least is not None else board.limits.most_on
    wanted = None if wanted is None else min(wanted, count)
    began = time.perf_counter()
    runs = Runs(board, settled_width(board) if width is None else width, keep, strict, crew, progress)
    most = _find_most(runs, count, wanted)
    shown = runs.tried[wanted if wanted is not None else max(most, 1)]
    decides = runs.tried.get(most + 1, shown)  # the first that does not pass, if any
    answer = answer_of(runs, most, wanted, at_least)
    closeups = closeups_of(runs, answer, shown)
    spent = time.perf_counter() - began
    if progress is not None:
        progress(1.0)
    findings = (answer, *shown.findings)
    rests_on = {n: t for n, t in runs.tried.items() if n <= max(most, shown.step.on) or t.step.proven}
    results = [r for t in runs.tried.values() for r in t.results]
    return Result(
        board.name,
        "volley",
        runs.duration,
        overall(findings, True, strict),  # what is not proven and counts is so in the findings themselves
        findings,
        tuple(dict.fromkeys((*board.assumptions, *not_varied(board), *runs.assumptions))),
        _audits(rests_on),
        firing_sentences(runs, width is None),
        None,
        runs.deck(decides.trigger),
        timings_of(results, spent),
        notes_on(runs, answer, shown, decides, rests_on),
        next((r.engine for r in results if r.engine), "ngspice"),
        strict,
        closeups,
        _study(runs, most, wanted),
    )


def read_width(text: str) -> float:
    """Width of a pulse as users write it. [s]

    Raises
    ------
    InputError
        If it is no time with a unit, or has a tolerance.

    Examples
    --------
    >>> read_width("10 ms")
    0.01
    """
    try:
        read = parse(text, POSITIVE_TIME)
    except QuantityError as err:
        raise InputError(f"--width: {err}") from None
    if read.toleranced:
        raise InputError(f"--width: {text!r}: a commanded time has no tolerance; leave it out")
    return read.typ


def check_wanted(board: Board, at_least: int | None) -> None:
    """Refuse to ask for more channels than there are, or for any choice of channels of a matrix.

    Raises
    ------
    InputError
        If so many channels cannot be on at once, or some of them would turn others on.
    """
    if board.lines:
        raise InputError(
            f"volley fires any choice of channels together, and {board.name} has a matrix, where two coils of different rows and "
            "columns turn on others as well; ask with the patterns that its firmware sends (boardsim fire)"
        )
    count = len(forwards(board))
    if at_least is not None and not 1 <= at_least <= count:
        channels = "1 channel" if count == 1 else f"{count} channels"
        raise InputError(f"{at_least} at once are asked for, and {board.name} has {channels}; ask for 1 to {count}")


def settled_width(board: Board) -> float:
    """How long a pulse must be for coil currents and the coil rail to settle in any corner. [s]

    Notes
    -----
    Six times the sum of the slowest time constants, rounded up to two digits: exp(-6), 0.25 % of a change is left then.

    Coils: L/R; where the supply is at its ceiling, 2 L/R. There the rail obeys C dv/dt = I - n i and each of n coils
    L di/dt = v - R i, so that s^2 + s R/L + n/(L C) = 0: what rings decays with 2 L/R (Kirchhoff; exact for alike coils).

    Rail: C (R_source + R_cable + ESR); where all channels together may reach the ceiling I, C V / I besides. A capacitor
    C that a load R drains towards I R does so with R C, and the ceiling is only reached where V / R > I. They may where
    their coils draw more than a third of it: what clamps draw while a coil is on is not counted here.

    Both with the largest inductance, capacitance and voltage and the smallest, coldest winding that was given.
    """
    cold = Corner("cold", {"coil_resistance": "min"}, "cold")
    windings = [c.coil.ohms(cold, board.around) for c in forwards(board)]
    coils = max(c.coil.inductances[1] / r for c, r in zip(forwards(board), windings, strict=True))
    warmest = board.around.ambient_high if board.around else T_20C
    resistance = board.supply.resistance.typ + board.cable.loop(warmest).typ + board.bulk.esr.max
    resistance += board.charging.resistance.max if board.charging is not None else 0.0
    ceiling = board.supply.current_ceiling
    if ceiling is not None and board.supply.voltage.max * sum(1 / r for r in windings) > ceiling.min / 3:
        coils *= 2
        resistance += board.supply.voltage.max / ceiling.min
    exact = _TIMES * (coils + board.bulk.capacitance.max * resistance)
    digit = 10.0 ** (math.floor(math.log10(exact)) - 1)
    return float(f"{math.ceil(exact / digit) * digit:.2g}")


def _find_most(runs: Runs, count: int, wanted: int | None) -> int:
    """Run numbers of channels until it is sure how many pass; the largest of which, and of all smaller ones run, all do.

    Notes
    -----
    Each number up to 32. Beyond that four to the octave, the number wanted, and halving of the gap in which the verdict
    changes until it lies between neighbours; then the neighbours of these as well, since halving supposes that what
    fails goes on failing.
    """
    planned = {*range(1, min(count, EACH_UP_TO) + 1), count, *([wanted] if wanted else [])}
    n = EACH_UP_TO
    while n < count:
        planned |= {m for m in range(n, 2 * n, n // _PER_OCTAVE) if m < count}
        n *= 2
    runs.weigh(planned)
    runs.run(planned)
    while True:
        most, broken = _edge(runs.tried)
        if broken is None:
            return most
        gap = {(most + broken) // 2} if broken - most > 1 else {most - 1, broken + 1} & {*range(1, count + 1)}
        if gap <= {*runs.tried}:
            return most
        runs.run(gap)


def _edge(tried: Mapping[int, Tried]) -> tuple[int, int | None]:
    """The last number before any that does not pass, and the first that does not, of those that were run."""
    most = 0
    for n in sorted(tried):
        if not tried[n].passes:
            return most, n
        most = n
    return most, None


def _study(runs: Runs, most: int, wanted: int | None) -> Volley:
    brown_out, ceiling = runs.board.limits.brown_out, runs.board.supply.current_ceiling
    return Volley(
        tuple(runs.tried[n].step for n in sorted(runs.tried)),
        most,
        wanted,
        runs.width,
        brown_out.voltage.max if brown_out else None,
        brown_out.lasting.min if brown_out else None,
        ceiling.min if ceiling else None,
    )


def _audits(tried: Mapping[int, Tried]) -> tuple[CornerAudit, ...]:
    """One audit for each corner with all numbers that are proven there, one for each run that is not.

    Every entry names its number of channels.
    """
    held: dict[str, list[tuple[int, CornerResult]]] = {}
    failed: list[CornerAudit] = []
    for n in sorted(tried):
        for r in tried[n].results:
            if r.audit.proven:
                held.setdefault(r.corner.name, []).append((n, r))
            else:
                failed.append(_named(r.audit.corner, [(n, r)], False))
    return (*(_named(corner, several, True) for corner, several in held.items()), *failed)


def _named(corner: str, results: Sequence[tuple[int, CornerResult]], proven: bool) -> CornerAudit:
    numbers = write_range([n for n, _ in results])
    entries = tuple(replace(e, corner=f"{corner}; {n} at once") for n, r in results for e in r.audit.entries)
    return CornerAudit(f"{corner} ({numbers} at once)", entries, proven)
