"""Which channels hang on a boosted bank, and which cannot."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import TYPE_CHECKING

from boardsim.board.ranges import read_range, write_range
from boardsim.board.toml_file import Keys, TomlFile
from boardsim.errors import Problem, QuantityError

if TYPE_CHECKING:
    from boardsim.board.reader import Board, Channel
    from boardsim.board.schema import BoardFile


def boosted_channels(
    board: BoardFile, channels: Sequence[Channel], file: TomlFile, problems: list[Problem]
) -> tuple[int, ...]:
    """The channels of the bank, none where there is none; mistakes go to `problems`."""
    if board.boost is None:
        return ()
    keys: Keys = ("boost", "channels")
    try:
        numbers = read_range(board.boost.channels)
    except QuantityError as err:
        problems.append(file.problem_at(keys, str(err)))
        return ()
    problems += [file.problem_at(keys, text) for text in _wrong(numbers, channels)]
    volts, rail = board.boost.voltage, board.supply.voltage
    if volts.min <= rail.max:
        text = f"{volts} is not above the coil supply's highest voltage of {rail.max:g} V, and boosts nothing"
        problems.append(file.problem_at(("boost", "voltage"), text))
    if board.boost.least is not None and board.boost.least.max >= volts.min:
        text = f"{board.boost.least} is not below the {volts.min:g} V that the reservoir is charged to at least"
        problems.append(file.problem_at(("boost", "least"), text))
    return numbers


def _wrong(numbers: tuple[int, ...], channels: Sequence[Channel]) -> Iterator[str]:
    mine = [c for c in channels if c.number in numbers]
    known = {c.number for c in mine}
    if unknown := [n for n in numbers if n not in known]:
        yield f"{write_range(unknown)} {'is' if len(unknown) == 1 else 'are'} not on this board"
    if other := [c.number for c in mine if c.crossing or c.opposite is not None or c.switch.side != "low"]:
        yield f"the switches of {write_range(other)} lie between coil and rail; a bank feeds coils whose switches tie them to ground"
    shared = {c.package for c in mine if c.package} & {c.package for c in channels if c.number not in known}
    if shared:
        beside = [c.number for c in channels if c.package in shared and c.number not in known]
        yield f"{write_range(beside)} share a package with channels of the bank, and its common pin; name them too"


def feeds(board: Board, channel: Channel, rail: str, bank: str) -> str:
    """The node that a channel's coil hangs on: the coil rail's, or the bank's."""
    return bank if channel.number in board.boosted else rail
