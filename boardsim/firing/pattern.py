"""Pattern files: pulses with start, channels, width, repetition and stagger."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

from pydantic import Field, ValidationError

from boardsim.board.enable import on_lines
from boardsim.board.ranges import read_range, write_range
from boardsim.board.reader import Board, problems_of
from boardsim.board.toml_file import TomlFile, read_toml
from boardsim.errors import InputError, Problem, QuantityError
from boardsim.firing.hold import KEYS, MOST_CHOPS, Hold, frame_chop, hold_of, slot_time
from boardsim.parts.record import Name, Record, name_from
from boardsim.quantities import FREQUENCY, SHARE, TIME, Quantity, in_units

if TYPE_CHECKING:
    from boardsim.firing.schedule import Firing

MOST_PULSES = 1_000_000


class PulseTrain(Record):
    """One entry of a pattern: a pulse on each of some channels, repeated."""

    channels: str
    start: Annotated[Quantity, TIME]
    width: Annotated[Quantity, TIME]
    repeat: Annotated[int, Field(strict=True, ge=1, le=MOST_PULSES)] = 1
    every: Annotated[Quantity, TIME] | None = None
    stagger: Annotated[Quantity, TIME] | None = None
    peak: Annotated[Quantity, TIME] | None = Field(None, description="full drive at the start of a pulse that is held")
    hold: Annotated[Quantity, SHARE] | None = Field(None, description="duty with which it is chopped after its peak")
    hold_frequency: Annotated[Quantity, FREQUENCY] | None = Field(None, description="of the chop")


class PatternFile(Record):
    """A firing pattern: pulse trains, and how long to look."""

    name: Name | None = None
    duration: Annotated[Quantity, TIME] | None = None
    pulses: Annotated[tuple[PulseTrain, ...], Field(min_length=1)]


def snapped(t: float) -> float:
    """A time to the picosecond: sums that are equal on paper must be one moment, not two an ulp apart. [s]

    Examples
    --------
    >>> 0.1 + 0.05 == 0.15, snapped(0.1 + 0.05) == 0.15
    (False, True)
    """
    return round(t, 12)


@dataclass(frozen=True)
class Pulse:
    """One commanded pulse on a channel, and what it does after its peak where it is held. [s]"""

    channel: int
    start: float
    width: float
    hold: Hold | None = None

    @property
    def stop(self) -> float:
        """When the channel is commanded off. [s]"""
        return snapped(self.start + self.width)


@dataclass(frozen=True)
class Pattern:
    """Pulses by start, and the time until which a run looks. [s]

    `recorded` is what the outputs really did, where the pulses were read from a capture of the bus; `span` says whose time
    averages are taken over.
    """

    path: Path
    name: str
    duration: float | None
    pulses: tuple[Pulse, ...]
    recorded: Firing | None = None
    span: str = "the pattern's"


def read_pattern(path: Path, board: Board) -> Pattern:
    """Read a pattern file for a board.

    Raises
    ------
    InputError
        With every mistake found: file, line, what was found, what is allowed.
    """
    return pattern_of(read_toml(path, "pattern"), board)


def pattern_of(file: TomlFile, board: Board) -> Pattern:
    """The pattern that a TOML file holds.

    Raises
    ------
    InputError
        With every mistake found: file, line, what was found, what is allowed.
    """
    if "supply" in file.data and "pulses" not in file.data:
        raise InputError([file.problem((), "is a board; name the board first, then the pattern")])
    try:
        raw = PatternFile.model_validate(file.data)
    except ValidationError as err:
        raise InputError(problems_of(err, file)) from None
    problems: list[Problem] = []
    pulses: list[Pulse] = []
    for i, train in enumerate(raw.pulses):
        pulses.extend(_expand(train, i, board, file, problems))
        if len(pulses) > MOST_PULSES:
            problems.append(
                file.problem_at(("pulses", i), f"with this entry the pattern has more than {MOST_PULSES} pulses")
            )
            break
    duration = raw.duration.typ if raw.duration else None
    if problems:
        raise InputError(problems)
    if duration is not None:
        refuse_early_end(file, duration, pulses)
    try:
        refuse_mixed_holds(pulses, board)
    except QuantityError as err:
        raise InputError([file.problem(("pulses",), str(err))]) from None
    return Pattern(file.path, raw.name or name_from(file.path.stem, "pattern"), duration, by_start(pulses))


def refuse_early_end(file: TomlFile, duration: float, pulses: Iterable[Pulse]) -> None:
    """Refuse a duration [s] that ends before the last pulse does.

    Raises
    ------
    InputError
        With its line.
    """
    last = max(p.stop for p in pulses)
    if last > duration * (1 + 1e-9):
        said = f"{in_units(duration, 's', 4)} ends before the last pulse does, at {in_units(last, 's', 4)}"
        raise InputError([file.problem_at(("duration",), said)])


def by_start(pulses: Iterable[Pulse]) -> tuple[Pulse, ...]:
    """Pulses in the order in which a pattern holds them."""
    return tuple(sorted(pulses, key=lambda p: (p.start, p.channel)))


def checked_hold(
    given: Mapping[str, Quantity | None], width: float, board: Board, channels: Iterable[int]
) -> Hold | None:
    """The hold of a pulse on a board, if it is held.

    Parameters
    ----------
    given : mapping of key to Quantity or None
        `peak` [s], `hold` [1], `hold_frequency` [Hz].
    width : float
        Of the pulse. [s]
    channels : iterable of int
        That are fired so.

    Raises
    ------
    QuantityError
        If they do not go together, or the board cannot chop so.
    """
    hold = hold_of(given, width)
    if hold is not None and not set(channels) <= {*on_lines(board)}:
        frame_chop(hold, slot_time(board.chain, board.controller))
    return hold


def refuse_mixed_holds(pulses: Iterable[Pulse], board: Board) -> None:
    """Refuse pulses that are held in different ways on one enable line, which has one duty and one frequency.

    Raises
    ------
    QuantityError
        With the line, and both.
    """
    first: dict[str, Hold] = {}
    lined = on_lines(board)
    for p in pulses:
        if p.hold is None or p.channel not in lined:
            continue
        name = lined[p.channel].name
        other = first.setdefault(name, p.hold)
        if (other.duty, other.frequency) != (p.hold.duty, p.hold.frequency):
            raise QuantityError(
                f"pulses on the enable line {name} are held with {_said(other)} and with {_said(p.hold)}; the line chops all of its "
                "channels alike: give them one hold and one hold_frequency"
            )


def _said(hold: Hold) -> str:
    return f"{100 * hold.duty:.3g} % at {hold.frequency:.4g} Hz"


def _expand(train: PulseTrain, index: int, board: Board, file: TomlFile, problems: list[Problem]) -> list[Pulse]:
    known = {c.number for c in board.channels}
    before = len(problems)
    keys = ("pulses", index)
    try:
        channels = read_range(train.channels)
    except QuantityError as err:
        problems.append(file.problem_at((*keys, "channels"), str(err)))
        return []
    if unknown := [n for n in channels if n not in known]:
        problems.append(
            file.problem_at(
                (*keys, "channels"),
                f"{'channel' if len(unknown) == 1 else 'channels'} {write_range(unknown)} "
                f"{'is' if len(unknown) == 1 else 'are'} not on the board {board.path.name}",
            )
        )
    for name in ("start", "width", "every", "stagger"):
        time: Quantity | None = getattr(train, name)
        if time is not None and time.toleranced:
            problems.append(file.problem_at((*keys, name), "a commanded time has no tolerance; leave it out"))
    if train.width.typ == 0:
        problems.append(file.problem_at((*keys, "width"), "a pulse of 0 s is none; give its on-time"))
    if train.repeat > 1 and (train.every is None or train.every.typ == 0):
        problems.append(file.problem_at((*keys, "repeat"), 'needs "every", the time from one start to the next'))
    if train.every is not None and train.repeat == 1:
        problems.append(file.problem_at((*keys, "every"), 'has no effect without "repeat"'))
    if len(channels) * train.repeat > MOST_PULSES:
        problems.append(file.problem_at((*keys, "repeat"), f"more than {MOST_PULSES} pulses"))
    if len(problems) > before:
        return []
    try:
        hold = checked_hold({key: getattr(train, key) for key in KEYS}, train.width.typ, board, channels)
    except QuantityError as err:
        at = next((key for key in ("hold_frequency", "hold", "peak") if getattr(train, key) is not None), "width")
        problems.append(file.problem_at((*keys, at), str(err)))
        return []
    if hold is not None and (train.width.typ - hold.peak) * hold.frequency * len(channels) * train.repeat > MOST_CHOPS:
        problems.append(file.problem_at((*keys, "hold_frequency"), f"more than {MOST_CHOPS} chops"))
        return []
    every = train.every.typ if train.every else 0.0
    stagger = train.stagger.typ if train.stagger else 0.0
    return [
        Pulse(channel, snapped(train.start.typ + k * every + i * stagger), train.width.typ, hold)
        for k in range(train.repeat)
        for i, channel in enumerate(channels)
    ]
