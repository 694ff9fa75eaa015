"""Several scenarios together: one findings.json, one junit.xml, one table."""

from __future__ import annotations

import contextlib
import json
from collections import Counter
from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import Any

from rich import box
from rich.console import Console
from rich.table import Table
from rich.text import Text

from boardsim.errors import EXIT_LIMIT_BROKEN, EXIT_PASS, EXIT_UNPROVEN, EXIT_WRONG_INPUT, Problem
from boardsim.quantities import in_units
from boardsim.report.folder import make_ready
from boardsim.report.json_report import result_to_dict, write_json
from boardsim.report.junit import write_joint_junit
from boardsim.report.terminal import print_section, sentences_table
from boardsim.report.wording import grouped, many, plain, standing
from boardsim.verdict.expectations import IDLE, Outcome
from boardsim.verdict.findings import CAUTIONS, Finding

SCHEMA = "boardsim-scenarios/1"
SCHEMA_FILE = Path(__file__).with_name("scenarios.schema.json")
_WORDS = {EXIT_PASS: "pass", EXIT_LIMIT_BROKEN: "fail", EXIT_WRONG_INPUT: "wrong input", EXIT_UNPROVEN: "unproven"}
_STYLES = {"pass": "green", "fail": "bold red", "unproven": "bold magenta", "wrong input": "bold red"}


def remove_gone(out: Path, folders: Iterable[Path]) -> None:
    """Take away the results of scenarios that an earlier run had and this one has not: they were renamed or removed.

    Raises
    ------
    InputError
        If they cannot be removed.
    """
    kept = {folder.as_posix() for folder in folders}
    try:
        before = json.loads((out / "findings.json").read_text(encoding="utf-8"))
        earlier = [str(s["folder"]) for s in before["scenarios"]] if before["schema"] == SCHEMA else []
    except (OSError, ValueError, KeyError, TypeError):
        return  # nothing of ours is there
    for name in earlier:
        folder = out / name
        if name not in kept and folder.resolve().is_relative_to(out.resolve()) and folder.is_dir():
            make_ready(folder)
            with contextlib.suppress(OSError):
                folder.rmdir()  # only if nothing else is in it
                folder.parent.rmdir()


def write_collection(outcomes: Sequence[Outcome], problems: Sequence[Problem], status: int, out: Path) -> None:
    """Write junit.xml and findings.json of several scenarios, each whole or not at all.

    Parameters
    ----------
    outcomes : sequence of Outcome
    problems : sequence of Problem
        Mistakes in files that kept scenarios from being run.
    status : int
        Exit status of all together.
    out : Path
        Where to.

    Raises
    ------
    InputError
        If a file cannot be written.
    """
    write_joint_junit(outcomes, problems, out / "junit.xml")
    write_json(out / "findings.json", collection_to_dict(outcomes, problems, status))


def collection_to_dict(outcomes: Sequence[Outcome], problems: Sequence[Problem], status: int) -> dict[str, Any]:
    """Several scenarios as plain values for JSON; every finding names its scenario."""
    dicts = [(o, result_to_dict(o.result)) for o in outcomes if o.result is not None]
    findings = [{"scenario": o.name, **f} for o, d in dicts for f in d["findings"]]
    for f in findings:
        del f["picture"]  # it stands in the scenario's own findings.json
    assumptions = {tuple(a.values()): a for _, d in dicts for a in d["assumptions"]}
    return {
        "schema": SCHEMA,
        "verdict": _WORDS[status],
        "status": status,
        "scenarios": [_scenario(o) for o in outcomes],
        "problems": [{"file": p.file, "line": p.line, "text": p.text} for p in problems],
        "findings": findings,
        "assumptions": list(assumptions.values()),
        "audit": {
            "passed": bool(dicts) and all(d["audit"]["passed"] for _, d in dicts),
            "entries": [{"scenario": o.name, **e} for o, d in dicts for e in d["audit"]["entries"]],
        },
        "cautions": list(CAUTIONS),
    }


def _scenario(o: Outcome) -> dict[str, Any]:
    counts = Counter(standing(f) for f in o.result.findings) if o.result is not None else Counter[str]()
    return {
        "name": o.name,
        "folder": o.folder.as_posix(),
        "question": o.question,
        "board": o.result.board if o.result is not None else None,
        "verdict": o.result.verdict if o.result is not None else None,
        "expected": str(o.expectation),
        "as_expected": o.status == EXIT_PASS,
        "status": o.status,
        "surprises": list(o.surprises),
        "counts": dict(counts),
        "seconds": round(o.seconds, 3),
        "notes": list(o.result.notes) if o.result is not None else [],
    }


def print_collection(
    outcomes: Sequence[Outcome], problems: Sequence[Problem], status: int, console: Console, out: Path
) -> None:
    """Print a short table of several scenarios, what is not as expected, and the verdict as the last line.

    Parameters
    ----------
    outcomes : sequence of Outcome
    problems : sequence of Problem
        Mistakes in files that kept scenarios from being run; printed elsewhere, counted here.
    status : int
        Exit status of all together.
    console : rich.console.Console
    out : Path
        Where the files are.
    """
    if outcomes:
        console.print(_table(outcomes, console.width))
    for o in outcomes:
        bad = _what_counts(o)
        if o.status == EXIT_PASS or not (bad or o.surprises):
            continue
        console.print()
        console.print(Text(plain(o.name), "bold"))
        for said in o.surprises:
            console.print(Text(f"  {plain(said)}"))
        if bad:
            console.print(sentences_table(grouped(bad)))
    accepted = [
        (o, g) for o in outcomes if o.result is not None for g in grouped(f for f in o.result.findings if f.excused)
    ]
    if accepted:
        console.print()
        console.print(Text("Accepted", "bold"))
        for o, group in accepted:
            console.print(Text(f"  {plain(o.name)}"))
            console.print(sentences_table([group]))
    # What a scenario has to say about itself stands in its own report; here only what asks for something to be done.
    notes = [
        f"{o.name}: {note}"
        for o in outcomes
        if o.result is not None
        for note in o.result.notes
        if o.status != EXIT_PASS or note.startswith(IDLE)
    ]
    print_section(console, "Notes", notes)
    console.print()
    fine = sum(o.status == EXIT_PASS for o in outcomes)
    word = _WORDS[status]
    wrong = f"; {many(len(problems), 'mistake')} in files" if problems else ""
    line = Text.assemble(("verdict: ", "bold"), (word, _STYLES[word]), " - ")
    line.append(plain(f"{fine} of {many(len(outcomes), 'scenario')} as expected{wrong}. All files in {out}"))
    console.print(line, soft_wrap=True)


def _what_counts(o: Outcome) -> list[Finding]:
    """The findings that break limits, other than those that the scenario is to show or that are accepted."""
    if o.result is None:
        return []
    broken = ("fail", "unproven", "limit-missing") if o.result.strict else ("fail", "unproven")
    return [f for f in o.result.findings if f.verdict in broken and not f.excused and not o.expectation.foresees(f)]


def _table(outcomes: Sequence[Outcome], width: int) -> Table:
    table = Table(box=box.SIMPLE_HEAD, show_edge=False, pad_edge=False, padding=(0, 2, 0, 0))
    table.add_column("")
    longest = max((len(plain(o.name)) for o in outcomes), default=0)
    # Names stay whole where there is room: they are what one searches for.
    table.add_column("scenario", overflow="fold", no_wrap=longest <= width - 68)
    table.add_column("time", justify="right", no_wrap=True)
    for title in ("came out", "expected", "findings"):
        table.add_column(title, overflow="fold")
    for o in outcomes:
        word = "as expected" if o.status == EXIT_PASS else _WORDS[o.status]
        table.add_row(
            Text(word, "green" if o.status == EXIT_PASS else _STYLES[word]),
            Text(plain(o.name)),
            in_units(o.seconds, "s", 2),
            o.verdict,
            str(o.expectation),
            _counts(o),
        )
    return table


def _counts(o: Outcome) -> str:
    if o.result is None:
        return "-"
    found = Counter(standing(f) for f in o.result.findings)
    shown = [
        f"{found[word]} {word}" for word in ("fail", "accepted", "unproven", "limit-missing", "tight") if found[word]
    ]
    return ", ".join(shown) or f"{found['pass']} pass"
