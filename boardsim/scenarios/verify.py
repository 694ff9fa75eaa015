"""Do all scenarios come out as expected? Run side by side on all cores; each leaves a folder of whole files."""

from __future__ import annotations

import datetime
import threading
import time
from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor, as_completed
from dataclasses import replace
from pathlib import Path

from boardsim.errors import EXIT_LIMIT_BROKEN, EXIT_PASS, EXIT_UNPROVEN, EXIT_WRONG_INPUT, InputError
from boardsim.quantities import in_units
from boardsim.report.folder import make_ready, write_results
from boardsim.scenarios.chain import check_chain
from boardsim.scenarios.chosen import Chosen
from boardsim.scenarios.crew import Crew
from boardsim.scenarios.fire import fire_pattern
from boardsim.scenarios.plan import Scenario
from boardsim.scenarios.power_up import power_up
from boardsim.scenarios.release import release_channel
from boardsim.scenarios.stroke import stroke
from boardsim.scenarios.volley import volley
from boardsim.verdict.expectations import IDLE, Outcome, accept, compare
from boardsim.verdict.findings import Result

# Drawing changes settings of its library that all threads share.
_DRAWING = threading.Lock()


def run_scenario(
    scenario: Scenario, keep: Path, crew: Crew, progress: Callable[[float], None], today: datetime.date
) -> Result:
    """Put one question to its board; what is known and accepted is marked.

    Parameters
    ----------
    keep : Path
        Where deck and log of a failed run are kept.
    crew : Crew
    progress : callable
        Told the share of the work done, from any thread.
    today : datetime.date
        The day by which acceptances are judged.

    Raises
    ------
    EngineMissing, EngineStopped
        If there is no engine, or the run was interrupted.
    InputError
        If the question cannot be put to this board.
    """
    s = scenario
    match s.question:
        case "release":
            result = release_channel(s.board, keep, s.strict, crew, progress, s.channel, s.every_clamp)
        case "volley":
            result = volley(s.board, keep, s.strict, crew, progress, s.width, s.at_least)
        case "stroke":
            result = stroke(s.board, keep, s.strict, crew, progress, s.channel, s.width)
        case "chain":
            result = check_chain(s.board, s.strict)
        case "power-up":
            result = power_up(s.board, keep, s.strict, crew, progress, s.random)
        case "fire":
            assert s.pattern is not None  # a fire scenario without one is refused when it is read
            result = fire_pattern(s.board, s.pattern, keep, s.strict, crew, progress)
    if s.conditions:
        result = replace(result, notes=(f"conditions: {s.conditions} instead of the board file's", *result.notes))
    return accept(result, s.known, today)


def verify_all(
    chosen: Chosen,
    out: Path,
    crew: Crew,
    progress: Callable[[float], None],
    say: Callable[[str], None],
) -> list[Outcome]:
    """Run scenarios side by side and write the folder of each as soon as it is ready.

    Parameters
    ----------
    chosen : Chosen
    out : Path
        Folder of all.
    crew : Crew
        Who runs the engine, for all scenarios together.
    progress : callable
        Told the share of the work that is done, from any thread.
    say : callable
        Told in a line how each scenario came out when its files are written.

    Returns
    -------
    list of Outcome
        In the order of the scenarios.

    Raises
    ------
    EngineMissing, EngineStopped
        If there is no engine, or the runs were interrupted.
    InputError
        If a folder or a file cannot be written.
    """
    scenarios, folders = chosen.scenarios, chosen.folders
    homes = [s.path for s in scenarios]
    for folder in folders:
        make_ready(out / folder, homes)
    outcomes: dict[int, Outcome] = {}
    shares = [0.0] * len(scenarios)

    def report(i: int, share: float) -> None:
        shares[i] = max(shares[i], share)
        progress(sum(shares) / len(shares))

    def one(i: int) -> Outcome:
        s, began = scenarios[i], time.perf_counter()
        keep = out / folders[i]
        name = folders[i].as_posix()
        try:
            result = run_scenario(s, keep, crew, lambda share: report(i, share), chosen.today)
        except InputError as err:
            seconds = time.perf_counter() - began
            return Outcome(name, folders[i], s.question, s.expectation, None, EXIT_WRONG_INPUT, (str(err),), seconds)
        if not crew.cancel.is_set():
            with _DRAWING:
                write_results(result, keep)
        status, surprises = compare(result, s.expectation)
        seconds = time.perf_counter() - began
        return Outcome(name, folders[i], s.question, s.expectation, result, status, surprises, seconds)

    # One thread more than runs at a time: while one scenario is drawn, another keeps the engine busy.
    with ThreadPoolExecutor(max_workers=crew.size + 1) as pool:
        futures = {pool.submit(one, i): i for i in range(len(scenarios))}
        try:
            for future in as_completed(futures):
                o = outcomes[futures[future]] = future.result()
                manner = "as expected" if o.status == EXIT_PASS else "NOT AS EXPECTED"
                say(f"{len(outcomes)}/{len(scenarios)} {o.name}: {o.verdict}, {manner}, {in_units(o.seconds, 's', 2)}")
        finally:
            if len(outcomes) < len(scenarios):  # stopped, or without an engine: the rest need not be waited for
                crew.cancel.set()
                pool.shutdown(wait=False, cancel_futures=True)
    return _with_idle(scenarios, [outcomes[i] for i in range(len(scenarios))])


def _with_idle(scenarios: Sequence[Scenario], outcomes: Sequence[Outcome]) -> list[Outcome]:
    """Note, with the last scenario of a file, acceptances for the whole file that no scenario of it needs."""
    found = list(outcomes)
    for path in dict.fromkeys(s.path for s in scenarios):
        here = [i for i, s in enumerate(scenarios) if s.path == path]
        results = [r for i in here if (r := found[i].result) is not None]
        accepted = [(f, f.accepted.reason, f.accepted.until) for r in results for f in r.findings if f.accepted]
        idle = [
            k
            for k in dict.fromkeys(k for i in here for k in scenarios[i].known if k.shared)
            if not any(k.covers(f) and (k.reason, k.until) == (reason, until) for f, reason, until in accepted)
        ]
        last = found[here[-1]]
        if idle and last.result is not None and len(results) == len(here):
            notes = tuple(f"{IDLE} {k} ({k.reason}) occurs in no scenario any more: take it out" for k in idle)
            result = replace(last.result, notes=(*last.result.notes, *notes))
            found[here[-1]] = replace(last, result=result)
    return found


def status_of(outcomes: Sequence[Outcome], wrong_input: bool = False) -> int:
    """One exit status for several: wrong input, else a broken limit, else unproven, else pass."""
    found = {o.status for o in outcomes} | ({EXIT_WRONG_INPUT} if wrong_input else set())
    return next((s for s in (EXIT_WRONG_INPUT, EXIT_LIMIT_BROKEN, EXIT_UNPROVEN) if s in found), EXIT_PASS)
