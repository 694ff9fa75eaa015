"""The library for people and for programs: tables of parts, of one part's numbers, and of proofs."""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping, Sequence
from typing import Any

from rich import box
from rich.console import Console
from rich.table import Table
from rich.text import Text

from boardsim.quantities import Quantity, celsius, in_units
from boardsim.report.wording import many, plain
from boardsim.verdict.proving import PartProofs, ProofLine

SCHEMA = "boardsim-proofs/1"
_EXACT = 1e-3  # share of a printed number within which it is met exactly
_STYLES = {"pass": "green", "fail": "bold red", "unproven": "bold magenta"}


def print_parts(rows: Sequence[tuple[str, str, Mapping[str, Quantity], str]], console: Console) -> None:
    """Print parts by kind.

    Parameters
    ----------
    rows : sequence of (kind, name, ratings, source)
        Parts of one kind together.
    console : rich.console.Console
    """
    if not rows:
        console.print("no part of the library fits")
        return
    table = _grid("part", "main ratings", "source")
    last = ""
    for kind, name, ratings, source in rows:
        if kind != last:
            if last:
                table.add_section()
            table.add_row(Text(plain(kind), "bold"), "", "")
            last = kind
        said = ", ".join(f"{field.replace('_', ' ')} {_rating(q)}" for field, q in ratings.items())
        table.add_row(Text(f"  {plain(name)}"), Text(said), Text(plain(source)))
    console.print(table)
    console.print(f"\n{many(len(rows), 'part')}; `boardsim parts show NAME` says where each number is from")


def _rating(q: Quantity) -> str:
    return in_units(q.typ, q.unit)


def print_part(name: str, kind: str, details: Sequence[tuple[str, Quantity | str | None]], console: Console) -> None:
    """Print every number of a part with unit, band and source.

    Parameters
    ----------
    name, kind : str
    details : sequence of (field, value)
        None where the part does not give it.
    console : rich.console.Console
    """
    console.print(Text(f"{plain(name)}, {plain(kind)}", "bold"))
    console.print()
    table = _grid("number", "value", "band", "source")
    sources: dict[str, int] = {}
    for field, value in details:
        if field in ("kind", "title"):
            continue
        if isinstance(value, Quantity):
            number = sources.setdefault(str(value.origin), len(sources) + 1)
            table.add_row(Text(field), Text(_written(value.typ, value.unit)), Text(_band(value)), Text(f"[{number}]"))
        else:
            table.add_row(Text(field), Text(plain(value if value is not None else "not given")), "", "")
    console.print(table)
    console.print()
    for source, number in sources.items():
        console.print(Text(plain(f"[{number}] {source}")))


def _written(value: float, unit: str) -> str:
    """Kelvin above any thermal resistance's scale is a temperature, which people read in degrees Celsius."""
    if unit == "1/K":
        return f"{value:.3%}/K"
    return celsius(value) if unit == "K" and value > 200 else in_units(value, unit)


def _band(q: Quantity) -> str:
    """A band; an end that equals the typical value was not given."""
    if not q.toleranced:
        return ""
    ends = []
    if q.min < q.typ:
        ends.append(f"from {_written(q.min, q.unit)}")
    if q.max > q.typ:
        ends.append(f"up to {_written(q.max, q.unit)}")
    return " ".join(ends)


def print_proofs(parts: Sequence[PartProofs], console: Console) -> None:
    """Print what is printed, what the models do, and how far apart they are; the sum of it last."""
    for part in parts:
        if not part.lines:
            continue
        console.print(Text(f"{plain(part.part)}, {plain(part.kind)}", "bold"))
        table = _grid("verdict", "quantity", "printed", "modelled", "deviation", "allowed")
        for line in part.lines:
            table.add_row(
                Text(line.verdict, _STYLES[line.verdict]),
                Text(plain(line.proof.quantity)),
                Text(_printed(line)),
                Text("-" if line.value is None else in_units(line.value, line.proof.unit)),
                Text("-" if line.deviation is None else f"{100 * line.deviation:+.1f} %"),
                Text(_allowed(line)),
            )
        console.print(table)
        for line in part.lines:
            if line.reason:
                why = f" ({line.proof.why})" if line.proof.why else ""
                console.print(Text(plain(f"{line.verdict}: {line.proof.quantity}: {line.reason}{why}")))
        memory = [line.proof.quantity for line in part.lines if "memory" in line.proof.printed.origin.source]
        if memory:
            console.print(Text(plain(f"from memory, not from a datasheet: {', '.join(memory)}"), "dim"))
        console.print()
    without = [part.part for part in parts if not part.lines]
    if without:
        console.print(
            Text(plain(f"nothing to prove, their numbers are used as they are printed: {', '.join(without)}"))
        )
    counts = Counter(line.verdict for part in parts for line in part.lines)
    said = ", ".join(f"{counts[v]} {v}" for v in ("fail", "unproven", "pass") if counts[v])
    proven = sum(1 for part in parts if part.lines)
    exact = sum(
        1 for part in parts for line in part.lines if line.deviation is not None and abs(line.deviation) < _EXACT
    )
    console.print(f"{many(sum(counts.values()), 'printed number')} of {many(proven, 'part')}: {said or 'none'}")
    if exact:
        console.print(
            f"{exact} of them are met within {_EXACT:.1%}: most of these shape the model, which passes through them by construction"
        )


def _printed(line: ProofLine) -> str:
    printed = line.proof.printed
    if not line.proof.shapes:
        return f"{in_units(printed.min, line.proof.unit)} to {in_units(printed.max, line.proof.unit)}"
    band = _band(printed)
    return in_units(printed.typ, line.proof.unit) + (f" ({band})" if band else "")


def _allowed(line: ProofLine) -> str:
    if not line.proof.shapes:
        return "the band"
    share = f"{100 * line.proof.tolerance:.3g} %"
    return f"{share}, the band" if line.proof.printed.toleranced else share


def proofs_to_dict(parts: Sequence[PartProofs], status: int) -> dict[str, Any]:
    """Proofs as plain values for JSON; numbers in SI units.

    Parameters
    ----------
    parts : sequence of PartProofs
    status : int
        Exit status of all.
    """
    return {
        "schema": SCHEMA,
        "engine": next((part.engine for part in parts if part.engine), ""),
        "status": status,
        "parts": [
            {"part": part.part, "kind": part.kind, "proofs": [_line(line) for line in part.lines]} for part in parts
        ],
    }


def _line(line: ProofLine) -> dict[str, Any]:
    printed = line.proof.printed
    return {
        "quantity": line.proof.quantity,
        "unit": line.proof.unit,
        "printed": {"typ": printed.typ, "min": printed.min, "max": printed.max},
        "source": str(printed.origin),
        "shapes": line.proof.shapes,
        "modelled": line.value,
        "deviation": line.deviation,
        "tolerance": line.proof.tolerance,
        "why": line.proof.why,
        "verdict": line.verdict,
        "reason": line.reason,
        "points": list(line.points),
    }


def _grid(*titles: str) -> Table:
    table = Table(box=box.SIMPLE_HEAD, show_edge=False, pad_edge=False, padding=(0, 2, 0, 0))
    for title in titles:
        numbers = title in ("modelled", "deviation")
        table.add_column(title, justify="right" if numbers else "left", overflow="fold")
    return table
