"""What stands on standard output after a run: a table, the sentences that matter, and the verdict last."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from pathlib import Path

from rich import box
from rich.console import Console
from rich.padding import Padding
from rich.table import Table
from rich.text import Text

from boardsim.board.ranges import write_labels
from boardsim.quantities import in_units
from boardsim.report.wording import (
    Group,
    assumed_alike,
    grouped,
    many,
    percent,
    plain,
    standing,
    value_and_limit,
    verdict_reason,
    when,
)
from boardsim.verdict.findings import CAUTIONS, Result
from boardsim.verdict.studies import Cell
from boardsim.verdict.studies import Table as StudyTable

# Sentences printed at most; a board of a hundred different channels must not push its verdict out of sight.
MOST_SENTENCES = 12
# Below this many columns the table would break words and numbers; the same rows are then printed as blocks.
NARROWEST_TABLE = 90

_STYLES: dict[str, str] = {
    "accepted": "bold blue",
    "fail": "bold red",
    "unproven": "bold magenta",
    "limit-missing": "bold cyan",
    "tight": "bold yellow",
    "pass": "green",
}


def print_result(result: Result, console: Console, picture: Path | None, folder: Path) -> None:
    """Print a result for people: the findings, what they hang on, and the verdict as the last line.

    Parameters
    ----------
    result : Result
        What to print.
    console : rich.console.Console
        Where to.
    picture : Path or None
        The overview picture, if one was drawn.
    folder : Path
        Where the files of this run are.
    """
    groups = grouped(result.findings)
    heading = f"{result.board}, pattern {result.pattern}, {in_units(result.duration, 's')}"
    console.print(_text(heading, "bold"))
    console.print()
    if result.study is not None:
        console.print(study_table(result.study.table, console.width))
        console.print()
    if groups:
        console.print(_table(groups) if console.width >= NARROWEST_TABLE else _blocks(groups))
    _sentences(console, [g for g in groups if g.worst.verdict != "pass"])
    print_section(console, "Firing", result.firing)
    print_section(console, "Notes", result.notes)
    print_section(
        console,
        "Assumed, since the files do not say",
        [f"{where}: {a.quantity} {a.value} ({a.why})" for where, a in assumed_alike(result.assumptions)],
    )
    print_section(console, "Audit", _audit_lines(result))
    print_section(console, "Time", _time_line(result))
    print_section(console, "Cautions", CAUTIONS)
    # Not wrapped: a path broken over two lines can be neither copied nor searched for.
    console.print()
    line = Text.assemble(
        ("verdict: ", "bold"), (result.verdict, _STYLES[result.verdict]), f" - {verdict_reason(result)}. "
    )
    line.append(plain(f"Picture {picture}; all files in {folder}" if picture else f"All files in {folder}"))
    console.print(line, soft_wrap=True)


def _table(groups: Iterable[Group]) -> Table:
    table = Table(box=box.SIMPLE_HEAD, show_edge=False, pad_edge=False, padding=(0, 2, 0, 0))
    for title in ("verdict", "what was read", "worst at"):
        table.add_column(title, overflow="fold")
    rows = [_row(group) for group in groups]
    for title, index in (("value", 3), ("limit", 4), ("margin", 5)):
        # As wide as its widest number: a number that breaks before its unit is hard to read.
        widest = max(max(len(line) for line in row[index].plain.split("\n")) for row in rows)
        table.add_column(title, justify="right", overflow="fold", min_width=max(widest, len(title)))
    for row in rows:
        table.add_row(*row)
    return table


def study_table(table: StudyTable, width: int) -> Table:
    """What a scenario found beyond findings, with units on the numbers; row by row as text where it is too wide."""
    rows = [[_cell(value, column.unit) for value, column in zip(row, table.columns, strict=True)] for row in table.rows]
    words = [any(isinstance(row[i], str) for row in table.rows) for i in range(len(table.columns))]
    # No word is broken, and no number from its unit: lines are broken between words.
    least, whole = [], []
    for i, column in enumerate(table.columns):
        cells = [row[i].plain for row in rows]
        pieces = [piece for cell in cells for piece in (cell.split() if words[i] else [cell])]
        least.append(max(map(len, [*column.name.split(), *pieces])))
        whole.append(max(map(len, [column.name, *cells])))
    room = width - 2 * len(least)
    if sum(least) > room:
        blocks = Table.grid(padding=(0, 2, 0, 0))
        blocks.add_column(overflow="fold")
        for row in rows:
            named = [Text(f"{c.name} ") + cell for c, cell in zip(table.columns, row, strict=True)]
            blocks.add_row(Text("; ").join(named))
        return blocks
    wanted = sum(whole) - sum(least)
    share = min(1.0, (room - sum(least)) / wanted) if wanted else 1.0
    drawn = Table(box=box.SIMPLE_HEAD, show_edge=False, pad_edge=False, padding=(0, 1, 0, 0))
    for column, low, high, word in zip(table.columns, least, whole, words, strict=True):
        exactly = low + int((high - low) * share)
        drawn.add_column(column.name, justify="left" if word else "right", overflow="fold", width=exactly)
    for row in rows:
        drawn.add_row(*row)
    return drawn


def _cell(value: Cell, unit: str) -> Text:
    if value is None:
        return _text("-", "dim")
    if isinstance(value, str):
        return _text(value, _STYLES.get(value, ""))
    return _text(in_units(value, unit) if unit else f"{value:g}")


def _blocks(groups: Iterable[Group]) -> Table:
    blocks = Table.grid(padding=(0, 2, 0, 0))
    blocks.add_column(overflow="fold", min_width=len("limit-missing"))
    blocks.add_column(overflow="fold")
    for group in groups:
        verdict, read, where, value, limit, margin = _row(group)
        numbers = Text(", ").join([*value.split(), Text("limit ") + limit, Text("margin ") + margin])
        lines = [Text("; ").join(cell.split()) for cell in (read, where)]
        blocks.add_row(verdict, Text("\n").join([*lines, numbers]))
    return blocks


def _row(group: Group) -> tuple[Text, ...]:
    worst = group.worst
    value, limit = value_and_limit(worst)
    word = standing(worst)
    verdict = _text(word, _STYLES[word])
    if word == "fail":
        verdict.append(f"\n{worst.consequence}", "dim")
    return (
        verdict,
        _two_lines(worst.quantity, f"{worst.check}, {worst.part}" if worst.part else worst.check),
        _two_lines(group.where, worst.corner),
        _two_lines(value, *when(worst)),
        _text(limit),
        _text(percent(worst.margin)),
    )


def _two_lines(first: str, *second: str) -> Text:
    text = _text(first)
    for line in filter(None, second):
        text.append(f"\n{plain(line)}", "dim")
    return text


def _sentences(console: Console, groups: list[Group]) -> None:
    if groups:
        console.print()
        console.print(sentences_table(groups))
    if len(groups) > MOST_SENTENCES:
        console.print(_text(f"and {len(groups) - MOST_SENTENCES} more in findings.json"))


def sentences_table(groups: Sequence[Group]) -> Table:
    """What the worst finding of each group says, and for whom it holds as well; the first dozen groups."""
    lines = Table.grid(padding=(0, 2, 0, 0))
    lines.add_column(overflow="fold", min_width=max(len(standing(g.worst)) for g in groups))
    lines.add_column(overflow="fold")
    for group in groups[:MOST_SENTENCES]:
        worst, word = group.worst, standing(group.worst)
        sentence = _text(worst.sentence)
        if len(group.members) > 1:
            sentence.append(f" (the same for {plain(write_labels([f.label for f in group.members[1:]]))})", "dim")
        if "from memory" in worst.source:
            sentence.append(" [limit from memory: check it against your datasheet]", "dim")
        if worst.nominal_only:
            sentence.append(f" [nominal only: {', '.join(worst.nominal_only)}]", "dim")
        if worst.assumed:
            sentence.append(f" [hangs on assumed {', '.join(worst.assumed)}]", "dim")
        if worst.accepted is not None and worst.excused:
            sentence.append(f" [accepted until {worst.accepted.until}: {plain(worst.accepted.reason)}]", "dim")
        lines.add_row(_text(word, _STYLES[word]), sentence)
    return lines


def print_section(console: Console, title: str, lines: Iterable[str]) -> None:
    """Print lines under a title, as a list; nothing where there are none."""
    lines = list(lines)
    if not lines:
        return
    console.print()
    console.print(_text(title, "bold"))
    for line in lines:
        # Lines that follow on are set in further, so that each item can be told from the next.
        item = Table.grid()
        item.add_column(width=2)
        item.add_column(overflow="fold")
        item.add_row("-", _text(line))
        console.print(Padding(item, (0, 0, 0, 2)))


def _audit_lines(result: Result) -> list[str]:
    if not result.simulated:
        return ["nothing was simulated: printed levels and times, and lines as resistance and capacitance"]
    if not result.audit:
        return ["not audited: nothing here is proven"]
    lines = []
    held: dict[tuple[str, ...], list[str]] = {}
    for audit in result.audit:
        if audit.proven:
            held.setdefault(tuple(dict.fromkeys(e.criterion for e in audit.entries)), []).append(audit.corner)
        elif not audit.compared:
            lines.append(f"failed: {audit.corner}: no second run to compare with, so nothing here is proven")
        else:
            lines.append("failed: " + "; ".join(str(e) for e in audit.entries if not e.passed))
    for criteria, where in held.items():
        verb = "holds" if len(criteria) == 1 else "hold"
        lines.append(f"{_listed(criteria)} {verb} in {many(len(where), 'corner')}: {'; '.join(where)}")
    return lines


def _listed(words: Sequence[str]) -> str:
    return " and ".join([", ".join(words[:-1]), words[-1]] if len(words) > 1 else words)


def _time_line(result: Result) -> list[str]:
    # No sum: stages may overlap, and corners run side by side.
    stages: dict[str, float] = {}
    for timing in result.timings:
        stages[timing.stage] = stages.get(timing.stage, 0.0) + timing.seconds
    return ["; ".join(f"{stage} {in_units(seconds, 's', 2)}" for stage, seconds in stages.items())] if stages else []


def _text(text: str, style: str = "") -> Text:
    # Text, not markup: a name with square brackets is shown as it stands.
    return Text(plain(text), style)
