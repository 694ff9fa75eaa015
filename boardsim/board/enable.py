"""Enable lines in a board file: a pin of the controller that takes many channels off at once, whatever their outputs hold."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Annotated, Literal

from pydantic import Field

from boardsim.board.ranges import read_range, write_range
from boardsim.board.toml_file import Keys, TomlFile
from boardsim.errors import Problem, QuantityError
from boardsim.parts.base import Assumption, listed
from boardsim.parts.record import Record
from boardsim.quantities import TIME, Quantity, assume

if TYPE_CHECKING:
    from boardsim.board.reader import Board, Channel
    from boardsim.board.schema import BoardFile

GATE = "an output of the registers' own kind: its resistance and edge, for want of the gate's figures"


class EnableTable(Record):
    """A line that the controller's timer chops, and the channels that hang on it."""

    channels: str = Field(description="channels that are off while it is off, whatever their outputs hold")
    through: Literal["gates", "output-enable"] = Field(
        "gates",
        description="an AND gate between each output and its switch, or the output enable of whole registers, whose outputs "
        "then let go",
    )
    delay: Annotated[Quantity, TIME] = assume(
        "20 ns", TIME, "from the line to the outputs, a gate or output enable of logic of this class, from memory"
    )


@dataclass(frozen=True)
class EnableLine:
    """A line that the controller's timer chops; see `EnableTable`. `delay` is from its edge to the outputs'. [s]"""

    name: str
    channels: tuple[int, ...]
    through: Literal["gates", "output-enable"]
    delay: Quantity

    def assumed(self) -> tuple[Assumption, ...]:
        """What had to be supplied."""
        found = listed(f"enable line {self.name}", delay=self.delay)
        gates = Assumption(f"enable line {self.name}", "its gates", "like the registers' outputs", GATE)
        return (*found, gates) if self.through == "gates" else found


def on_lines(board: Board) -> dict[int, EnableLine]:
    """The enable line of each channel that hangs on one."""
    return {c: line for line in board.enable_lines for c in line.channels}


def enable_lines(
    board: BoardFile, channels: Sequence[Channel], file: TomlFile, problems: list[Problem]
) -> tuple[EnableLine, ...]:
    """The enable lines of a board; mistakes go to `problems`."""
    found: list[EnableLine] = []
    taken: dict[int, str] = {}
    for name, table in board.enable_lines.items():
        keys: Keys = ("enable_lines", name)
        try:
            numbers = read_range(table.channels)
        except QuantityError as err:
            problems.append(file.problem_at((*keys, "channels"), str(err)))
            continue
        mine = [c for c in channels if c.number in numbers]
        line = EnableLine(name, numbers, table.through, table.delay)
        wrong = [*_of_the_channels(line, mine, taken), *_of_the_way(line, mine, channels, board)]
        problems += [file.problem_at((*keys, key), text) for key, text in wrong]
        taken |= dict.fromkeys(numbers, name)
        found.append(line)
    return tuple(found)


def _of_the_channels(line: EnableLine, mine: Sequence[Channel], taken: dict[int, str]) -> Iterator[tuple[str, str]]:
    known = {c.number for c in mine}
    if unknown := [n for n in line.channels if n not in known]:
        yield "channels", f"{write_range(unknown)} {'is' if len(unknown) == 1 else 'are'} not on this board"
    if twice := [n for n in line.channels if n in taken]:
        yield "channels", f"{write_range(twice)} already {'hangs' if len(twice) == 1 else 'hang'} on {taken[twice[0]]}"
    if crossed := [c.number for c in mine if c.crossing is not None]:
        text = f"{write_range(crossed)} lie in a matrix, whose rows and columns have the outputs; chop them by register frames"
        yield "channels", text


def _of_the_way(
    line: EnableLine, mine: Sequence[Channel], everyone: Sequence[Channel], board: BoardFile
) -> Iterator[tuple[str, str]]:
    """Whether the line can act in the way that it is said to."""
    register = board.chain.register_
    if line.through == "gates":
        if register.open_drain:
            name = register.title or "this register"
            yield (
                "through",
                f'the outputs of {name} are the switches, with nothing between to gate; write "output-enable"',
            )
        return
    control = board.chain.output_enable
    if control is None or not control.pin:
        yield "through", "no controller pin drives output enable; write output_enable = { pin = true } in [chain]"
    size = register.outputs
    touched = {c.output // size for c in mine}
    if beside := [c.number for c in everyone if c.output // size in touched and c.number not in line.channels]:
        yield (
            "channels",
            f"output enable turns off whole registers: {write_range(beside)} sit on outputs of the same ones; name them too",
        )
    if loose := [c.number for c in mine if not c.held_off]:
        yield (
            "channels",
            f"nothing turns off the switches of {write_range(loose)} while output enable lets go of them; give each a pulldown",
        )
