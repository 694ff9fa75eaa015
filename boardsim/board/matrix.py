"""A matrix of coils: lines that coils share, where they cross, and laying them out with every mistake at its place."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from boardsim.board.ranges import HIGHEST, read_range, write_range
from boardsim.board.toml_file import Keys, TomlFile
from boardsim.errors import Problem, QuantityError
from boardsim.parts.base import Part
from boardsim.parts.diode import Diode

if TYPE_CHECKING:
    from boardsim.board.schema import Chain, ChannelRange

LINES_FROM = HIGHEST + 1
"""Numbers of lines as places of a deck begin here, above those of all channels."""
_TIES = {"high": "to the rail", "low": "to ground"}


@dataclass(frozen=True)
class Line:
    """A row or a column: one switch with its clamp and one register output, which all coils along it share.

    Attributes
    ----------
    number : int
        Its place in decks and readings; no channel has it.
    label, stem : str
        "row 2", and what names of its nodes begin with.
    output, bit : int
        Register output, and bit of the firmware's image.
    switch, clamp : Part
        Of these roles.
    package : str
        Which one of several lines' packages its switch is in; empty where it has one of its own.
    channels : tuple of int
        Whose coils lie along it.
    """

    number: int
    label: str
    stem: str
    output: int
    bit: int
    switch: Any  # a part of role "switch"
    clamp: Any  # a part of role "clamp"
    package: str
    channels: tuple[int, ...]


@dataclass(frozen=True)
class Crossing:
    """Where a channel's coil lies: from a row, through a diode where there is one, to a column."""

    row: Line
    column: Line
    diode: Diode | None

    @property
    def build(self) -> tuple[object, ...]:
        """What a circuit knows of it: crossings of lines that are built alike are alike."""
        lines = ((one.switch, one.clamp, one.package, len(one.channels)) for one in (self.row, self.column))
        return (*lines, self.diode)


def cross(
    group: ChannelRange, text: str, numbers: tuple[int, ...], lines: list[Line], file: TomlFile, problems: list[Problem]
) -> tuple[Crossing, ...]:
    """The crossings of a range with a matrix, in the order of its channels: row by row.

    Parameters
    ----------
    group : ChannelRange
        Whose `matrix` is given.
    text : str
        Its key in the file.
    numbers : tuple of int
        Its channels.
    lines : list of Line
        Of the ranges before; those of this one are added.
    file : TomlFile
    problems : list of Problem
        What is wrong is added; the result is then empty.
    """
    keys: Keys = ("channels", text)
    before = len(problems)
    problems += _mistakes(group, keys, file)
    matrix = group.matrix
    assert matrix is not None  # asked for of such ranges only
    found: dict[str, tuple[int, ...]] = {}
    for name in ("rows", "columns", "row_bits", "column_bits"):
        given = getattr(matrix, name)
        try:
            if given is not None:
                found[name] = read_range(given)
        except QuantityError as err:
            problems.append(file.problem_at((*keys, "matrix", name), str(err)))
    for bits, outputs in (("row_bits", "rows"), ("column_bits", "columns")):
        if bits in found and outputs in found and len(found[bits]) != len(found[outputs]):
            said = f"names {len(found[bits])} where there are {len(found[outputs])} {outputs}"
            problems.append(file.problem_at((*keys, "matrix", bits), said))
    if len(problems) == before and len(numbers) != (count := len(found["rows"]) * len(found["columns"])):
        sides = " and ".join(_count(len(found[name]), name.removesuffix("s")) for name in ("rows", "columns"))
        said = f"names {_count(len(numbers), 'channel')}, where {sides} cross {count} times"
        problems.append(file.problem_at(keys, said))
    if len(problems) > before:
        return ()
    width = len(found["columns"])
    along = {
        "row": [numbers[r * width : (r + 1) * width] for r in range(len(found["rows"]))],
        "column": [numbers[c::width] for c in range(width)],
    }
    rows, columns = (
        _lines(kind, found[f"{kind}s"], found.get(f"{kind}_bits"), switch, clamp, along[kind], lines)
        for kind, switch, clamp in (
            ("row", matrix.row_switch, matrix.row_clamp),
            ("column", group.switch, group.clamp),
        )
    )
    return tuple(Crossing(row, column, matrix.diode) for row in rows for column in columns)


def _lines(
    kind: str,
    outputs: tuple[int, ...],
    bits: tuple[int, ...] | None,
    switch: Any,
    clamp: Any,
    along: Sequence[tuple[int, ...]],
    lines: list[Line],
) -> list[Line]:
    """Lines of one kind, numbered over the board; they are added to those before."""
    first = sum(one.label.startswith(kind) for one in lines)
    packages = packages_of(switch, outputs, [one.package for one in lines])
    made = [
        Line(
            LINES_FROM + len(lines) + i,
            f"{kind} {first + i}",
            f"{kind}{first + i}",
            output,
            output if bits is None else bits[i],
            switch,
            clamp,
            packages[i],
            along[i],
        )
        for i, output in enumerate(outputs)
    ]
    lines += made
    return made


def packages_of(switch: Any, outputs: Sequence[int], before: Sequence[str]) -> list[str]:
    """Which package each of some switches of one range or one kind of line is in, numbered over the board.

    Parameters
    ----------
    switch : Part
        Of role "switch".
    outputs : sequence of int
        Register outputs that drive them, in order.
    before : sequence of str
        Packages that the board has already.
    """
    if not switch.per_package():
        return [""] * len(outputs)
    name = switch.part.title or switch.kind
    first = 1 if switch.in_the_chain else len({p for p in before if p.rpartition(" ")[0] == name}) + 1
    return [f"{name} {first + switch.package_of(i, output)}" for i, output in enumerate(outputs)]


def _mistakes(group: ChannelRange, keys: Keys, file: TomlFile) -> Iterator[Problem]:
    """What cannot be of a matrix, whatever its ranges are."""
    matrix = group.matrix
    assert matrix is not None  # asked for of such ranges only
    for name in ("outputs", "bits"):
        if getattr(group, name) is not None:
            said = f"a matrix names the register's {name} of its rows and columns; leave {name} out"
            yield file.problem_at((*keys, name), said)
    sides: tuple[tuple[Keys, Any, str, str], ...] = (
        ((*keys, "matrix", "row_switch"), matrix.row_switch, "high", "row"),
        ((*keys, "switch"), group.switch, "low", "column"),
    )
    for where, switch, side, kind in sides:
        if switch.side != side:
            said = f"{switch.kind} ties a line {_TIES[switch.side]}; a {kind} needs a switch that ties it {_TIES[side]}"
            yield file.problem_at(where, said)
    row_clamp: Part = matrix.row_clamp
    if problem := row_clamp.beside(matrix.row_switch):
        yield file.problem_at((*keys, "matrix", "row_clamp"), problem)
    clamps: tuple[tuple[Keys, Part], ...] = (
        ((*keys, "matrix", "row_clamp"), row_clamp),
        ((*keys, "clamp"), group.clamp),
    )
    for where, clamp in clamps:
        if clamp.at_the_coil():
            said = 'is at = "coil", and every coil of a matrix shares its lines with others; leave at out'
            yield file.problem_at(where, said)


def claim(
    group: ChannelRange,
    text: str,
    crossings: Sequence[Crossing],
    claimed: Mapping[str, dict[int, str]],
    chain: Chain,
    file: TomlFile,
    problems: list[Problem],
) -> None:
    """Complain of outputs and bits of a matrix that are taken already, twice in itself, or outside the chain."""
    matrix = group.matrix
    assert matrix is not None  # asked for of such ranges only
    blamed: set[int] = set()
    for what, names in (("output", ("rows", "columns")), ("bit", ("row_bits", "column_bits"))):
        for name, kind in zip(names, ("row", "column"), strict=True):
            own = getattr(matrix, name) is not None
            keys: Keys = ("channels", text, "matrix", name if own else f"{kind}s")
            lines = {line.number: line for line in (getattr(c, kind) for c in crossings)}
            values = [n for n in (getattr(one, what) for one in lines.values()) if own or n not in blamed]
            for n in values:
                if (other := claimed[what].get(n)) is not None:
                    said = f'{what} {n} is already taken by channels."{other}"'
                    problems.append(file.problem_at(keys, said))
                    blamed.add(n)
                claimed[what][n] = text
            if beyond := [n for n in values if n >= chain.outputs]:
                outside = f"{what}{'s' if len(beyond) > 1 else ''} {write_range(beyond)} outside the chain"
                problems.append(file.problem_at(keys, f"{outside}, which has outputs 0-{chain.outputs - 1}"))
                blamed.update(beyond)


def _count(n: int, what: str) -> str:
    """ "1 row" or "4 rows"."""
    return f"{n} {what}" if n == 1 else f"{n} {what}s"
