"""Scenario files: which questions are put to a board, under which conditions, and what they are expected to come to."""

from __future__ import annotations

import datetime
import os
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BeforeValidator, Field, ValidationError

from boardsim.board.conditions import Conditions, under
from boardsim.board.ranges import read_range, write_range
from boardsim.board.reader import Board, problems_of, read_board
from boardsim.board.toml_file import Keys, TomlFile, read_toml
from boardsim.errors import InputError, Problem, QuantityError
from boardsim.firing.pattern import Pattern
from boardsim.firing.sources import read_source
from boardsim.parts.record import Name, Record, said, shown
from boardsim.quantities import POSITIVE_TIME, TEMPERATURE, VOLTAGE, Quantity
from boardsim.verdict.expectations import Expectation, Expected, KnownFailure

FILE_NAME = "scenarios.toml"
_ONLY_FOR = {
    "pattern": ("fire",),
    "channel": ("release", "stroke"),
    "every_clamp": ("release",),
    "width": ("volley", "stroke"),
    "at_least": ("volley",),
    "random": ("power-up",),
}


def _day(value: Any) -> datetime.date:
    if isinstance(value, datetime.date) and not isinstance(value, datetime.datetime):
        return value
    if isinstance(value, str):
        try:
            return datetime.date.fromisoformat(value)
        except ValueError:
            pass
    raise said(f"{shown(value)} is not a day; write it such as 2027-06-30")


def _words(text: str) -> str:
    if not text.strip():
        raise said('"reason" is empty; say why the failure is lived with')
    return text


Day = Annotated[datetime.date, BeforeValidator(_day, json_schema_input_type=datetime.date)]


class KnownRecord(Record):
    """A broken limit that is known and accepted until a day."""

    check: Name = Field(description='which check, such as "overlap"')
    channels: str | None = Field(None, description="on which channels; anywhere if absent")
    part: Name | None = None
    quantity: str | None = None
    reason: Annotated[str, AfterValidator(_words)] = Field(description="why it is lived with, for the report")
    until: Day = Field(description="last day; from the next on it counts as broken again")


class ConditionsRecord(Record):
    """What a run assumes of the surroundings in place of what the board file says."""

    ambient: Annotated[Quantity, TEMPERATURE] | None = None
    supply: Annotated[Quantity, VOLTAGE] | None = None


class ScenarioRecord(Record):
    """One question put to a board."""

    question: Literal["fire", "release", "volley", "stroke", "chain", "power-up"] = "fire"
    board: str | None = Field(None, description="board file, relative to this one; the file's own if absent")
    pattern: str | None = Field(None, description="for fire: pattern file, relative to this one")
    channel: Annotated[int, Field(strict=True, ge=0)] | None = Field(
        None, description="for release and stroke: which channel"
    )
    every_clamp: bool | None = Field(None, strict=True, description="for release: every kind of clamp side by side")
    width: Annotated[Quantity, POSITIVE_TIME] | None = Field(
        None, description="for volley and stroke: width of the pulse"
    )
    at_least: Annotated[int, Field(strict=True, ge=1)] | None = Field(
        None, description="for volley: how many channels must pass at once; the board's most_on if absent"
    )
    random: Annotated[int, Field(strict=True, ge=0)] | None = Field(
        None, description="for power-up: random number from which random register contents are made"
    )
    conditions: ConditionsRecord = ConditionsRecord()
    strict: bool | None = Field(
        None, strict=True, description="whether a missing limit counts as broken; the file's own if absent"
    )
    expect: Expected | None = Field(None, description="the worst verdict that is all right, or fail")
    breaks: tuple[Name, ...] = Field((), description="the checks that have to break, and no others")
    accepted: tuple[KnownRecord, ...] = ()


class ScenarioFile(Record):
    """The scenarios of a board; its `board`, `strict` and `accepted` hold for all of them."""

    board: str = "board.toml"
    strict: bool = Field(False, strict=True)
    accepted: tuple[KnownRecord, ...] = ()
    scenarios: Annotated[dict[Name, ScenarioRecord], Field(min_length=1)]


@dataclass(frozen=True)
class Scenario:
    """One question, ready to be run.

    Attributes
    ----------
    name : str
        As its file calls it.
    path : Path
        Of the file.
    question : {"fire", "release", "volley", "stroke", "chain", "power-up"}
    board : Board
        Under the scenario's conditions.
    pattern : Pattern or None
        For fire.
    channel, every_clamp, width, at_least, random
        As in the file. Width in [s].
    conditions : str
        What differs from the board file, in words; empty if nothing does.
    """

    name: str
    path: Path
    question: Literal["fire", "release", "volley", "stroke", "chain", "power-up"]
    board: Board
    pattern: Pattern | None
    channel: int | None
    every_clamp: bool
    width: float | None
    at_least: int | None
    conditions: str
    strict: bool
    expectation: Expectation
    known: tuple[KnownFailure, ...]
    random: int | None = None


def find_files(paths: Iterable[Path]) -> tuple[Path, ...]:
    """Every scenario file at or below the paths, in a fixed order; folders whose name begins with a dot are left out.

    Raises
    ------
    InputError
        If a path does not exist, or there is no scenario file at or below it.
    """
    found: dict[Path, Path] = {}
    for path in paths:
        try:
            here = [path] if path.is_file() else sorted(_below(path)) if path.is_dir() else None
            missing = here is None and not path.exists()
        except (OSError, ValueError) as err:
            raise InputError(f"{str(path)[:200]}: cannot be read: {getattr(err, 'strerror', None) or err}") from None
        if here is None:
            what = "there is no such file or folder" if missing else "is neither a file nor a folder"
            raise InputError(f"{path}: {what}")
        if not here:
            raise InputError(f"{path}: no {FILE_NAME} at or below it; write one beside a board")
        for one in here:
            # Boards and patterns are found beside the file: one text linked into two folders is two files.
            found.setdefault(one.parent.resolve() / one.name, one)
    return tuple(found.values())


def _below(top: Path) -> Iterator[Path]:
    """Scenario files in and below a folder, linked folders included, each folder once.

    Raises
    ------
    OSError
        If a folder cannot be read: a board that is left out must not look as if it passed.
    """

    def refuse(error: OSError) -> None:
        raise error

    seen: set[str] = set()
    for folder, inside, files in os.walk(top, followlinks=True, onerror=refuse):
        real = os.path.realpath(folder)
        inside[:] = [] if real in seen else sorted(name for name in inside if not name.startswith("."))
        if real not in seen and FILE_NAME in files:
            yield Path(folder) / FILE_NAME
        seen.add(real)


def read_scenarios(path: Path, libraries: Sequence[Path] = ()) -> tuple[tuple[Scenario, ...], tuple[Problem, ...]]:
    """Read a scenario file with its boards and patterns; `libraries` are the user's folders of parts.

    Returns
    -------
    tuple
        The scenarios that can be run, and every mistake found in those that cannot, in this file or in one it names.

    Raises
    ------
    InputError
        If the file itself cannot be used.
    """
    file = read_toml(path, "scenario")
    if "supply" in file.data and "scenarios" not in file.data:
        raise InputError([file.problem((), f"is a board; scenarios stand in a {FILE_NAME} beside it")])
    try:
        raw = ScenarioFile.model_validate(file.data)
    except ValidationError as err:
        raise InputError(problems_of(err, file)) from None
    problems: dict[Problem, None] = {}
    found = []
    for name, record in raw.scenarios.items():
        try:
            found.append(_scenario(name, record, raw, file, libraries))
        except InputError as err:
            problems.update(dict.fromkeys(err.problems or [file.problem(("scenarios", name), str(err))]))
    return tuple(found), tuple(problems)


def _scenario(
    name: str, record: ScenarioRecord, raw: ScenarioFile, file: TomlFile, libraries: Sequence[Path]
) -> Scenario:
    keys: Keys = ("scenarios", name)
    problems = _misplaced(record, file, keys)
    folder = file.path.parent
    board = read_board(folder / (record.board or raw.board), libraries)
    numbers = {c.number for c in board.channels}
    known = _known(record, file, (*keys, "accepted"), numbers, problems)
    common = ScenarioRecord(accepted=raw.accepted)
    known += _known(common, file, ("accepted",), numbers, problems)
    conditions = Conditions(record.conditions.ambient, record.conditions.supply)
    try:
        board = under(board, conditions)
    except QuantityError as err:
        problems.append(file.problem_at((*keys, "conditions", "supply"), str(err)))
    if record.channel is not None and record.channel not in numbers:
        text = f"channel {record.channel} is not on the board, which has {write_range(sorted(numbers))}"
        problems.append(file.problem_at((*keys, "channel"), text))
    if record.at_least is not None and record.at_least > len(numbers):
        text = f"{record.at_least} channels at once are more than the board's {len(numbers)}"
        problems.append(file.problem_at((*keys, "at_least"), text))
    if problems:
        raise InputError(problems)
    return Scenario(
        name,
        file.path,
        record.question,
        board,
        read_source(folder / record.pattern, board) if record.pattern is not None else None,
        record.channel,
        bool(record.every_clamp),
        record.width.typ if record.width is not None else None,
        record.at_least,
        str(conditions),
        raw.strict if record.strict is None else record.strict,
        Expectation("fail" if record.breaks else record.expect, record.breaks),
        tuple(known),
        record.random,
    )


def _misplaced(record: ScenarioRecord, file: TomlFile, keys: Keys) -> list[Problem]:
    """Keys that do not belong to the question, or contradict each other."""
    problems = []
    for key, questions in _ONLY_FOR.items():
        if getattr(record, key) is not None and record.question not in questions:
            named = " or ".join(f'"{question}"' for question in questions)
            text = f'belongs to question = {named}; this scenario asks "{record.question}"'
            problems.append(file.problem_at((*keys, key), text))
    if record.question == "fire" and record.pattern is None:
        problems.append(
            file.problem_at(keys, 'needs a "pattern", or another "question": release, volley, stroke, chain, power-up')
        )
    if record.breaks and record.expect not in (None, "fail"):
        text = f'names checks that have to break, but expect is "{record.expect}"; leave one of the two out'
        problems.append(file.problem_at((*keys, "breaks"), text))
    if record.width is not None and record.width.toleranced:
        problems.append(file.problem_at((*keys, "width"), "a commanded time has no tolerance; leave it out"))
    return problems


def _known(
    record: ScenarioRecord, file: TomlFile, keys: Keys, numbers: set[int], problems: list[Problem]
) -> list[KnownFailure]:
    found = []
    for i, known in enumerate(record.accepted):
        channels: tuple[int, ...] = ()
        if known.channels is not None:
            try:
                channels = read_range(known.channels)
            except QuantityError as err:
                problems.append(file.problem_at((*keys, i, "channels"), str(err)))
            if beyond := [n for n in channels if n not in numbers]:
                text = f"{'channel' if len(beyond) == 1 else 'channels'} {write_range(beyond)} not on the board, which has {write_range(sorted(numbers))}"
                problems.append(file.problem_at((*keys, i, "channels"), text))
        one = KnownFailure(known.check, known.reason, known.until, channels, known.part, known.quantity)
        found.append(replace(one, shared=keys == ("accepted",)))
    return found
