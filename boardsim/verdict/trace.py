"""A scope trace as CSV: which line names the columns, which column is which, in which unit, and whether it can be used.

Oscilloscopes write some lines about themselves first, then the names of the columns, perhaps their units, then numbers, with comma,
semicolon or tab between them and a decimal point or comma in them.
"""

from __future__ import annotations

import contextlib
import csv
import math
import re
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from boardsim.errors import InputError, Problem, QuantityError
from boardsim.parts.record import nearest, shortened
from boardsim.quantities import Dimension, in_units, parse
from boardsim.verdict.findings import Floats

LARGEST_FILE = 256 * 2**20  # [byte]; some ten million points, more than any picture shows
FEWEST = 20  # points; of fewer neither an edge nor a difference can be told
_DELIMITERS = (";", "\t", ",")
_LOOKED_AT = 400  # lines from which the delimiter is told
_ANY = {"low": -math.inf, "high": math.inf, "zero": True, "scale_letters": False}
_DIMENSIONS = {
    "time": Dimension("time", "s", "1 ms", **_ANY),  # type: ignore[arg-type]
    "current": Dimension("current", "A", "1 mA", **_ANY),  # type: ignore[arg-type]
    "voltage": Dimension("voltage", "V", "1 mV", **_ANY),  # type: ignore[arg-type]
}
_PER_AMPERE = Dimension("scale of a current probe", "ohm", "100 mV/A", **_ANY)  # type: ignore[arg-type]
_TITLE = re.compile(r"(.*?)\s*(?:\[([^\]]*)\]|\(([^)]*)\)|\bin\s+(\S+)|/\s*(\S+))\s*")
_NUMBER = re.compile(r"[+-]?(?:[0-9]+(?:[.,][0-9]*)?|[.,][0-9]+)(?:[eE][+-]?[0-9]+)?|[+-]?(?:nan|inf(?:inity)?)", re.I)


@dataclass(frozen=True)
class Columns:
    """Which columns are asked for, by title or by number counted from 1.

    Attributes
    ----------
    time : str
    current, voltage : str or None
        Of the coil: through it, and across it. None where the trace has none.
    current_scale : str or None
        Of the probe or shunt that a current was taken with, such as "100 mV/A" or "0.1 ohm"; None where the column is in ampere.
    voltage_scale : float
        What a voltage is multiplied by, such as 10 for a probe that the oscilloscope did not know of. [1]
    """

    time: str
    current: str | None = None
    voltage: str | None = None
    current_scale: str | None = None
    voltage_scale: float = 1.0


@dataclass(frozen=True)
class Trace:
    """What an oscilloscope saw of one coil.

    Attributes
    ----------
    path : Path
    t : (n,) array
        Rising. [s]
    current, voltage : (n,) array or None
        Through the coil [A]; across it [V].
    assumed : tuple of str
        What the file does not say and was supposed.
    """

    path: Path
    t: Floats
    current: Floats | None
    voltage: Floats | None
    assumed: tuple[str, ...] = ()

    @property
    def waves(self) -> dict[str, Floats]:
        """What was measured, by its name: "current" [A], "voltage" [V]."""
        both = {"current": self.current, "voltage": self.voltage}
        return {name: y for name, y in both.items() if y is not None}


def read_trace(path: Path, columns: Columns) -> Trace:
    """Read a trace.

    Raises
    ------
    InputError
        With file and line: what was found, what is allowed, and which columns there are.

    Notes
    -----
    Of several titles above the numbers the nearest line counts that names all columns which are asked for. A unit stands behind the
    title in brackets ("CH1 [mA]", "Time (ms)"), or in a line of units below the titles; without one seconds, amperes and volts
    are taken, which is listed.
    """
    if columns.current is None and columns.voltage is None:
        raise InputError("name at least one column to compare: --current COLUMN, or --voltage COLUMN")
    rows = _rows(path)
    first = _first_numbers(path, rows)
    wanted = {"time": columns.time, "current": columns.current, "voltage": columns.voltage}
    places, units = _find(path, rows, first, {k: v for k, v in wanted.items() if v is not None})
    table = _numbers(path, rows[first:], places)
    factors, assumed = _factors(path, rows[first][0], units, columns)
    values = {name: table[:, i] * factors[name] for i, name in enumerate(places)}
    t = values.pop("time")
    _rises(path, t, [line for line, _ in rows[first:]])
    return Trace(path, t, values.get("current"), values.get("voltage"), tuple(assumed))


def _refuse(path: Path, text: str, line: int | None = None) -> InputError:
    return InputError([Problem(str(path), line, text)])


def _rows(path: Path) -> list[tuple[int, list[str]]]:
    """Lines that are not empty as cells, with their numbers."""
    try:
        with path.open("rb") as handle:
            raw = handle.read(LARGEST_FILE + 1)
    except (OSError, ValueError) as err:
        said = getattr(err, "strerror", None) or err
        raise _refuse(path, f"cannot be read: {said}; name an existing trace, exported as CSV") from err
    if len(raw) > LARGEST_FILE:
        raise _refuse(path, f"is larger than {LARGEST_FILE // 2**20} MiB; export the pulse only, or fewer points")
    coding = "utf-16" if raw[:2] in (b"\xff\xfe", b"\xfe\xff") else "utf-8-sig"
    try:
        text = raw.decode(coding)
    except UnicodeDecodeError:
        text = raw.decode("latin-1")  # older oscilloscopes write a micro sign so
    if "\0" in text:
        raise _refuse(path, "is no text; export the trace as CSV")
    lines = text.splitlines()
    delimiter = _delimiter(lines)
    found = []
    try:
        for k, cells in enumerate(csv.reader(lines, delimiter=delimiter), 1):
            stripped = [cell.strip() for cell in cells]
            while stripped and not stripped[-1]:
                stripped.pop()  # many end each line with a delimiter
            if stripped:
                found.append((k, stripped))
    except csv.Error as err:
        raise _refuse(path, f"cannot be read as CSV: {err}") from None
    if not found:
        raise _refuse(path, "is empty; export the trace as CSV")
    return found


def _delimiter(lines: Sequence[str]) -> str:
    """What most lines of numbers are separated by: the first of semicolon, tab and comma that makes two or more of them."""
    sample = [line for line in lines if line.strip()][-_LOOKED_AT:]
    counts = {
        d: sum(_all_numbers([c.strip() for c in next(csv.reader([line], delimiter=d), [])]) for line in sample)
        for d in _DELIMITERS
    }
    return max(_DELIMITERS, key=lambda d: counts[d])


def _all_numbers(cells: Sequence[str]) -> bool:
    filled = [c for c in cells if c]
    return len(filled) >= 2 and all(_NUMBER.fullmatch(c) for c in filled)


def _first_numbers(path: Path, rows: list[tuple[int, list[str]]]) -> int:
    """The first of the lines of numbers: two of them follow each other, as wide as most."""
    wide = Counter(len(cells) for _, cells in rows if _all_numbers(cells))
    if not wide:
        raise _refuse(path, "holds no line of two or more numbers; export time and channels as columns of one CSV file")
    most = wide.most_common(1)[0][0]
    fits = [len(cells) == most and _all_numbers(cells) for _, cells in rows]
    return next((k for k in range(len(rows) - 1) if fits[k] and fits[k + 1]), fits.index(True))


def _find(
    path: Path, rows: list[tuple[int, list[str]]], first: int, wanted: dict[str, str]
) -> tuple[dict[str, int], dict[str, str | None]]:
    """Place and unit of every column that is asked for."""
    above = [cells for _, cells in rows[:first]][::-1]
    named: dict[str, int] = {}
    titles: list[str] = []
    for cells in above:
        plain = [_split(cell)[0] for cell in cells]
        here = {k: i for k, v in wanted.items() if (i := _place(v, cells, plain)) is not None}
        if len(here) > len(named) or not titles:
            named, titles = here, cells
    width = len(rows[first][1])
    for k, v in wanted.items():
        if k not in named and v.isdecimal() and 1 <= int(v) <= width:
            named[k] = int(v) - 1
    for k, v in wanted.items():
        if k not in named:
            known = [t for t in titles if t] or [str(n) for n in range(1, width + 1)]
            raise _refuse(
                path,
                f'there is no column "{shortened(v)}" for --{k}{nearest(v, known)}; there are: {", ".join(map(shortened, known))}'
                f" (or 1 to {width}, by number)",
            )
        if named[k] >= width:
            raise _refuse(path, f'column "{shortened(v)}" has a title and no numbers below it', rows[first][0])
    for a in named:
        for b in named:
            if a < b and named[a] == named[b]:
                raise _refuse(path, f'--{a} and --{b} name one column, "{shortened(wanted[a])}"; name two')
    below = above[above.index(titles) - 1] if titles in above[1:] else []
    units = {}
    for k, place in named.items():
        beside = _split(titles[place])[1] if place < len(titles) else None
        under = below[place].strip("()[]") if place < len(below) else None
        units[k] = beside or under or None
    return named, units


def _split(title: str) -> tuple[str, str | None]:
    """Name and unit of a title."""
    match = _TITLE.fullmatch(title)
    if not match or not match[1]:
        return title, None
    return match[1], next((g for g in match.groups()[1:] if g), None)


def _place(name: str, cells: Sequence[str], plain: Sequence[str]) -> int | None:
    for titles in (cells, plain):
        folded = [t.casefold() for t in titles]
        if folded.count(name.strip().casefold()) == 1:
            return folded.index(name.strip().casefold())
    return None


def _numbers(path: Path, rows: list[tuple[int, list[str]]], places: dict[str, int]) -> Floats:
    """The numbers of these columns, (n, len(places))."""
    found = np.empty((len(rows), len(places)))
    for k, (line, cells) in enumerate(rows):
        for i, (name, place) in enumerate(places.items()):
            cell = cells[place] if place < len(cells) else ""
            if not _NUMBER.fullmatch(cell):
                said = f"{shortened(cell)!r} is no number" if cell else "is empty"
                raise _refuse(path, f"{name}: {said}; every line below the titles needs one", line)
            value = float(cell.replace(",", "."))
            if not math.isfinite(value):
                raise _refuse(path, f"{name}: {cell!r} is no number that can be compared; leave such lines out", line)
            found[k, i] = value
    if len(found) < FEWEST:
        raise _refuse(
            path, f"has {len(found)} points; it takes at least {FEWEST} to compare a trace: export more of it"
        )
    return found


def _factors(
    path: Path, line: int, units: dict[str, str | None], columns: Columns
) -> tuple[dict[str, float], list[str]]:
    """What the columns are multiplied by to get SI units, and what was supposed of them."""
    found: dict[str, float] = {}
    assumed: list[str] = []
    probe = _probe(columns.current_scale)
    for name, unit in units.items():
        measures = "voltage" if name == "current" and probe is not None else name
        dimension = _DIMENSIONS[measures]
        if unit is None:
            assumed.append(f"the column of --{name} names no unit: taken as {dimension.unit}")
            found[name] = 1.0
        else:
            try:
                found[name] = _factor(unit, dimension)
            except QuantityError as err:
                raise _refuse(path, f"--{name}: {_hint(name, unit, probe) or err}", line - 1) from None
    if probe is not None:
        if "current" not in found:
            raise InputError("--current-scale is given and no --current COLUMN that it could hold for")
        found["current"] /= probe
    if "voltage" in found:
        if not math.isfinite(columns.voltage_scale) or columns.voltage_scale == 0:
            raise InputError("--voltage-scale must be a number other than 0, such as 10 for a 10:1 probe")
        found["voltage"] *= columns.voltage_scale
    return found, assumed


def _probe(scale: str | None) -> float | None:
    """Volts per ampere. [ohm]"""
    if scale is None:
        return None
    try:
        value = parse(scale, _PER_AMPERE)
    except QuantityError as err:
        raise InputError(f"--current-scale: {err}") from None
    if value.typ == 0 or value.toleranced:
        raise InputError(f'--current-scale "{shortened(scale)}": write one value other than 0, such as "100 mV/A"')
    return value.typ


def _factor(unit: str, dimension: Dimension) -> float:
    try:
        return parse(f"1 {unit}", dimension).typ
    except QuantityError:
        if len(unit) > 2 and unit != unit.lower():  # "Second", "VOLTS"
            with contextlib.suppress(QuantityError):
                return parse(f"1 {unit.lower()}", dimension).typ
        raise


def _hint(name: str, unit: str, probe: float | None) -> str:
    """What is most often wrong with a unit of this kind."""
    if name != "current":
        return ""
    other = _DIMENSIONS["voltage" if probe is None else "current"]
    try:
        _factor(unit, other)
    except QuantityError:
        return ""
    if probe is None:
        return f'its column is in {unit}; say what the probe or shunt gives with --current-scale, such as "100 mV/A" or "0.1 ohm"'
    return f"its column is in {unit} already; leave --current-scale out"


def _rises(path: Path, t: Floats, lines: Sequence[int]) -> None:
    """Refuse times that stand still or go back."""
    steps = np.diff(t)
    if (steps > 0).all():
        return
    k = int(np.argmax(steps <= 0))
    raise _refuse(
        path,
        f"time does not rise: {in_units(float(t[k]), 's', 6)} is followed by {in_units(float(t[k + 1]), 's', 6)}; export one sweep, with "
        "enough digits for each time to differ",
        lines[k + 1],
    )
