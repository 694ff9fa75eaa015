"""Lists of events as CSV: one pulse per line, for those whose pulses come out of a table or another program."""

from __future__ import annotations

import csv
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Annotated

from pydantic import Field, ValidationError

from boardsim.board.reader import Board, problems_of
from boardsim.board.toml_file import TomlFile
from boardsim.errors import InputError, Problem, QuantityError
from boardsim.firing.hold import KEYS, MOST_CHOPS
from boardsim.firing.pattern import (
    MOST_PULSES,
    Pattern,
    Pulse,
    by_start,
    checked_hold,
    refuse_early_end,
    refuse_mixed_holds,
    snapped,
)
from boardsim.parts.record import Name, Record, name_from, nearest, shortened
from boardsim.quantities import FREQUENCY, SHARE, TIME, Dimension, Quantity, computed, parse

LARGEST_FILE = 128 * 1024 * 1024  # [byte]; the most pulses that a pattern may have fill a third of it
_MOST_PROBLEMS = 20  # told one by one; a column in the wrong unit is a mistake in every line
_DELIMITERS = ",;\t"
_WHO = ("channel", "number", "label")  # number or label, whichever only one channel has; and either by its name
_COLUMNS = ("channel", "start", "width", "stop", "number", "label", *KEYS)
_DIMENSIONS: Mapping[str, Dimension] = {"hold": SHARE, "hold_frequency": FREQUENCY}  # of the others it is a time
_TITLE = re.compile(r"(\w+)\s*(?:[\[(]\s*([^\])]+?)\s*[\])])?")
_NUMBER = re.compile(r"[0-9]*\.?[0-9]+(?:[eE][+-]?[0-9]+)?|[0-9]+\.")


@dataclass(frozen=True)
class _Column:
    """Where a quantity stands in each line; `unit` in SI units where the title names one."""

    place: int
    unit: float | None


def read_events(path: Path, board: Board) -> Pattern:
    """Read a list of events for a board.

    Raises
    ------
    InputError
        With the mistakes found: file, line, what was found, what is allowed.

    Notes
    -----
    The first line that is neither empty nor begins with "#" names the columns: `channel` (its number, or its label on
    the board; `number` or `label` where a label looks like another channel's number), `start`, and either `width` or `stop`,
    in any order. Times carry their unit ("10 ms"), or the title does,
    in brackets: `start [ms]`. The columns `peak`, `hold` and `hold_frequency` are for pulses that are held; of others they are
    empty. Columns are separated by comma, semicolon or tab, numbers have a decimal point.
    """
    text = _text(path)
    lines = text.split("\n")
    wanted = [(k, line) for k, line in enumerate(lines, 1) if line.strip() and not line.lstrip().startswith("#")]
    if not wanted:
        raise InputError(
            [Problem(str(path), None, "is empty; the first line names the columns: channel, start, width")]
        )
    number, title = wanted[0]
    delimiter = max(_DELIMITERS, key=title.count)
    try:
        titles = _cells(title, delimiter)
    except QuantityError as err:
        raise InputError([Problem(str(path), number, str(err))]) from None
    columns = _columns(titles, path, number)
    names = {
        "label": {c.label: c.number for c in board.channels},
        "number": {str(c.number): c.number for c in board.channels},
    }
    problems: list[Problem] = []
    pulses: list[Pulse] = []
    chops = 0.0
    for k, line in wanted[1:]:
        try:
            pulses.append(_pulse(_cells(line, delimiter), columns, names, board))
        except QuantityError as err:
            problems.append(Problem(str(path), k, str(err)))
            if len(problems) == _MOST_PROBLEMS:
                problems.append(Problem(str(path), k, "mistakes below this line are not told; mend these first"))
                break
            continue
        if (last := pulses[-1]).hold is not None:
            chops += (last.width - last.hold.peak) * last.hold.frequency
        if chops > MOST_CHOPS:
            problems.append(Problem(str(path), k, f"with this line the list has more than {MOST_CHOPS} chops"))
            break
        if len(pulses) > MOST_PULSES:
            problems.append(Problem(str(path), k, f"with this line the list has more than {MOST_PULSES} pulses"))
            break
    if not problems and not pulses:
        problems.append(Problem(str(path), number, "no pulse follows the line of titles; write one per line"))
    if problems:
        raise InputError(problems)
    try:
        refuse_mixed_holds(pulses, board)
    except QuantityError as err:
        raise InputError([Problem(str(path), None, str(err))]) from None
    return Pattern(path, name_from(path.stem, "events"), None, by_start(pulses), span="the list's own")


class EventsFile(Record):
    """A list of events, and how long to look: a shot that is not fired again at once."""

    name: Name | None = None
    events: str = Field(description="list of events (.csv), relative to this file")
    duration: Annotated[Quantity, TIME] | None = Field(
        None, description="look at least this long, over which averages are taken; the list's own length if absent"
    )


def events_of(file: TomlFile, board: Board) -> Pattern:
    """The pattern of a list of events that a TOML file names.

    Raises
    ------
    InputError
        If the file, or the list that it names, cannot be used; says where.
    """
    try:
        raw = EventsFile.model_validate(file.data)
    except ValidationError as err:
        raise InputError(problems_of(err, file)) from None
    if not raw.events.strip():
        raise InputError([file.problem_at(("events",), "names no file")])
    found = read_events(file.path.parent / raw.events, board)
    duration = raw.duration
    if duration is not None:
        if duration.toleranced:
            raise InputError([file.problem_at(("duration",), "a commanded time has no tolerance; leave it out")])
        refuse_early_end(file, duration.typ, found.pulses)
        found = replace(found, duration=duration.typ, span="the list's")
    return replace(found, name=raw.name or name_from(file.path.stem, "events"))


def _text(path: Path) -> str:
    def refuse(text: str, line: int | None = None) -> InputError:
        return InputError([Problem(str(path), line, text)])

    try:
        with path.open("rb") as handle:
            raw = handle.read(LARGEST_FILE + 1)
    except (OSError, ValueError) as err:
        said = getattr(err, "strerror", None) or err
        raise refuse(f"cannot be read: {said}; name an existing list of events") from err
    if len(raw) > LARGEST_FILE:
        raise refuse(f"is larger than {LARGEST_FILE // 2**20} MiB, which no list of {MOST_PULSES} pulses is")
    try:
        return raw.decode("utf-8-sig")  # spreadsheets put a byte order mark first
    except UnicodeDecodeError as err:
        line = raw[: err.start].count(b"\n") + 1
        raise refuse("is not UTF-8 text; save the list as CSV in UTF-8", line) from err


def _cells(line: str, delimiter: str) -> list[str]:
    try:
        (cells,) = csv.reader([line.strip()], delimiter=delimiter, skipinitialspace=True, strict=True)
    except (csv.Error, ValueError) as err:
        raise QuantityError(
            f"is not CSV: {err}; close every quotation mark, and break no line within a value"
        ) from None
    return [cell.strip() for cell in cells]


def _columns(titles: list[str], path: Path, line: int) -> Mapping[str, _Column]:
    """The columns by name.

    Raises
    ------
    InputError
        If a title is not known, stands twice, or one is missing.
    """
    problems: list[str] = []
    found: dict[str, _Column] = {}
    for place, title in enumerate(titles):
        match = _TITLE.fullmatch(title)
        name = match[1].lower() if match else title
        if name not in _COLUMNS:
            problems.append(
                f'column "{shortened(title)}" is not known{nearest(name, [*_COLUMNS])}; known: {", ".join(_COLUMNS)}'
            )
        elif name in found:
            problems.append(f'column "{name}" stands twice; leave one out')
        else:
            unit = match[2] if match else None
            try:
                found[name] = _Column(place, None if unit is None else _one(unit, name))
            except QuantityError as err:
                problems.append(f'column "{shortened(title)}": {err}')
            if name in _WHO and unit is not None:
                problems.append(f'column "{name}" has no unit; write its number or its label')
    if not problems:
        who = [name for name in _WHO if name in found]
        problems += [] if who else ['column "channel" is missing']
        problems += [f'columns "{who[0]}" and "{who[1]}" both name channels; leave one out'] if len(who) > 1 else []
        problems += [] if "start" in found else ['column "start" is missing']
        if ("width" in found) == ("stop" in found):
            problems.append('needs one of the columns "width" and "stop", and not both')
    if problems:
        raise InputError([Problem(str(path), line, text) for text in problems])
    return found


def _one(unit: str, column: str) -> float:
    """A unit of a column's quantity, in SI units.

    Raises
    ------
    QuantityError
        If it does not measure that.
    """
    return parse(f"1 {unit}", _dimension(column)).typ


def _dimension(column: str) -> Dimension:
    """What a column measures."""
    return _DIMENSIONS.get(column, TIME)


def _pulse(
    cells: list[str], columns: Mapping[str, _Column], names: Mapping[str, Mapping[str, int]], board: Board
) -> Pulse:
    """The pulse of one line.

    Raises
    ------
    QuantityError
        If it is none; says why.
    """
    if len(cells) != len(columns):
        raise QuantityError(f"has {len(cells)} columns where the titles name {len(columns)}")
    channel = _channel(cells, columns, names, board)
    times = dict(_values(cells, columns))
    start = snapped(times["start"])
    width = snapped(times["width"] if "width" in times else times["stop"] - start)
    if width <= 0:
        text = "a pulse of 0 s is none; give its on-time" if "width" in times else "the pulse stops before it starts"
        raise QuantityError(text)
    if not any(key in times for key in KEYS):
        return Pulse(channel, start, width)
    said = {key: computed(times[key], _dimension(key).unit, "given") for key in KEYS if key in times}
    return Pulse(channel, start, width, checked_hold(said, width, board, (channel,)))


def _channel(
    cells: list[str], columns: Mapping[str, _Column], names: Mapping[str, Mapping[str, int]], board: Board
) -> int:
    """The channel that a line names.

    Raises
    ------
    QuantityError
        If there is none, or if number and label mean two of them.
    """
    (title,) = (name for name in _WHO if name in columns)
    named = cells[columns[title].place]
    ways = ("number", "label") if title == "channel" else (title,)
    found = {way: names[way][named] for way in ways if named in names[way]}
    if not found:
        known = [name for way in ways for name in names[way]]
        allowed = "number or its label" if title == "channel" else title
        raise QuantityError(
            f"{title} {shortened(named)!r} is not on the board {board.path.name}{nearest(named, known)}; write its {allowed}"
        )
    if len({*found.values()}) > 1:
        other = board.channel(found["number"]).label
        raise QuantityError(
            f'channel {named!r} may be channel {found["number"]}, labelled "{other}", or channel {found["label"]}, labelled '
            f'"{named}"; name the column "number" or "label" in place of "channel"'
        )
    return next(iter(found.values()))


def _values(cells: list[str], columns: Mapping[str, _Column]) -> Iterator[tuple[str, float]]:
    """Every time of a line, and what it says of a hold: of a pulse that is not held these are empty. [s], [1], [Hz]

    Raises
    ------
    QuantityError
        If one is none.
    """
    for name, column in columns.items():
        text = cells[column.place]
        if name in _WHO or (name in KEYS and not text):
            continue
        if column.unit is None:
            found = parse(text, _dimension(name))
            if found.toleranced:
                what = "number" if name in _DIMENSIONS else "time"
                raise QuantityError(f"{name}: a commanded {what} has no tolerance; leave it out")
            yield name, found.typ
        elif _NUMBER.fullmatch(text):
            value = float(text) * column.unit
            _dimension(name).check(value, text)
            yield name, value
        else:
            raise QuantityError(
                f"{name}: {shortened(text)!r} is not a plain number; its unit stands in the title, the point is decimal"
            )
