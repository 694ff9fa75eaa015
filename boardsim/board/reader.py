"""Board file -> Board: validated, parts resolved by name, channels laid out; every mistake with its place."""

from __future__ import annotations

import difflib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from boardsim.board.boost import boosted_channels
from boardsim.board.bridges import backwards, refuse_wrong_bridges, with_opposites
from boardsim.board.chain_outputs import refuse_wrong_outputs
from boardsim.board.enable import EnableLine, enable_lines
from boardsim.board.matrix import Crossing, Line, claim, cross, packages_of
from boardsim.board.power_up import PowerUpTable
from boardsim.board.ranges import read_range, write_range
from boardsim.board.schema import BoardFile, Chain, ChannelRange, Deratings, Limits
from boardsim.board.shelves import Shelves, problems_in, read_shelves
from boardsim.board.toml_file import Keys, TomlFile, read_toml
from boardsim.errors import InputError, Problem, QuantityError
from boardsim.parts.base import Assumption, Part, Surroundings, kinds_of, listed
from boardsim.parts.boost import Boost
from boardsim.parts.bulk import Bulk
from boardsim.parts.cable import Cable
from boardsim.parts.charging import ChargingResistor
from boardsim.parts.coil import Coil
from boardsim.parts.controller import Controller
from boardsim.parts.diode import Diode
from boardsim.parts.kinds import kinds
from boardsim.parts.leads import Leads
from boardsim.parts.logic import LogicRail
from boardsim.parts.record import name_from, named_like, nearest, said, shortened
from boardsim.parts.register import Register
from boardsim.parts.regulator import Regulator
from boardsim.parts.supply import Supply
from boardsim.quantities import Origin, Quantity

_NONE = -1  # output and bit of a channel that has none of its own: no table of outputs has it


@dataclass(frozen=True)
class Channel:
    """One coil with its switch and its clamp, driven by one register output.

    Where rows and columns cross it takes both lines' outputs: `output` and `bit` are then none, `switch` and `clamp` those of
    the column. Whoever asks what drives coils asks `Board.drivers`.
    """

    number: int
    output: int
    bit: int
    label: str
    coil: Coil
    coil_name: str
    switch: Any  # a part of role "switch"
    clamp: Any  # a part of role "clamp"
    leads: Leads | None = None  # between coil and board; none: the coil sits on the board
    package: str = ""  # which one of several channels' packages its switch is in, such as "array 2"
    opposite: int | None = None  # the channel that drives the same coil the other way, of a full bridge
    forwards: bool = True  # whether it drives the coil forwards; the other way round its readings change sign
    crossing: Crossing | None = None  # of a matrix

    @property
    def stem(self) -> str:
        """What names of its nodes begin with."""
        return f"c{self.number}"

    @property
    def drivers(self) -> tuple[Channel | Line, ...]:
        """Whose switches have to be on for its coil to be: row and column, or its own."""
        return (self,) if self.crossing is None else (self.crossing.row, self.crossing.column)

    @property
    def outputs(self) -> tuple[int, ...]:
        """Register outputs that have to be active for its coil to be on."""
        return tuple(d.output for d in self.drivers)

    @property
    def bits(self) -> tuple[int, ...]:
        """Bits of the firmware's image that mean it."""
        return tuple(d.bit for d in self.drivers)

    @property
    def diode(self) -> Diode | None:
        """In series with its coil."""
        return None if self.crossing is None else self.crossing.diode

    @property
    def held_off(self) -> bool:
        """Whether a switch of its own resistors keeps its coil off while nothing drives the registers' outputs."""
        return any(d.switch.held_off() for d in self.drivers)

    @property
    def build(self) -> tuple[object, ...]:
        """What a circuit knows of it beside the package: channels of one build differ in their names only."""
        own = (self.coil, self.coil_name, self.switch, self.clamp, self.leads)
        return own if self.crossing is None else (*own, *self.crossing.build)


@dataclass(frozen=True)
class Board:
    """Parts and how they are connected.

    `around` is None where no ambient was given; `all_off` are the channels of that rule, all where none are named.
    """

    path: Path
    name: str
    supply: Supply
    cable: Cable
    bulk: Bulk
    logic: LogicRail
    chain: Chain
    channels: tuple[Channel, ...]
    limits: Limits
    exclusive: tuple[tuple[tuple[int, ...], int, str], ...]
    derating: Deratings
    around: Surroundings | None
    junction_rise: Quantity
    assumptions: tuple[Assumption, ...]
    libraries: tuple[Path, ...] = ()  # the user's folders of parts that the board was read with
    controller: Controller | None = None  # none: what drives the chain was not described
    all_off: tuple[int, ...] = ()
    power_up: PowerUpTable = field(default_factory=PowerUpTable)
    enable_lines: tuple[EnableLine, ...] = ()
    boost: Boost | None = None
    boosted: tuple[int, ...] = ()  # channels of its bank
    charging: ChargingResistor | None = None  # between the cable and the bulk capacitor

    @property
    def spi_mode(self) -> int:
        """In which the controller sends; 0 where it was not described."""
        return 0 if self.controller is None else int(self.controller.spi_mode)

    @property
    def lines(self) -> tuple[Line, ...]:
        """Rows and columns, by number."""
        lines = {d.number: d for c in self.channels for d in c.drivers if isinstance(d, Line)}
        return tuple(lines[number] for number in sorted(lines))

    @property
    def drivers(self) -> tuple[Channel | Line, ...]:
        """Whoever has a switch, a clamp and a register output: channels that share none, then lines."""
        return (*(c for c in self.channels if c.crossing is None), *self.lines)

    def channel(self, number: int) -> Channel:
        """The channel of a number.

        Raises
        ------
        KeyError
            If the board has no such channel.
        """
        for channel in self.channels:
            if channel.number == number:
                return channel
        raise KeyError(number)


class _Shelf:
    """Finds parts by name: in the board file first, then in the user's folders, then in the library."""

    def __init__(self, file: TomlFile, shelves: Shelves):
        self.shelves = shelves
        self.local: dict[str, dict[str, Any]] = {}
        self.coils: dict[str, dict[str, Any]] = {}
        for shelf, section in ((self.local, "parts"), (self.coils, "coils")):
            table = file.data.get(section)
            if isinstance(table, dict):
                shelf.update({k: v for k, v in table.items() if isinstance(v, dict)})
        self.found: dict[tuple[str, str], Part] = {}
        self.name = file.path.name
        self.folder = file.path.parent

    @property
    def context(self) -> dict[str, Any]:
        """What records of the file itself need to be read; `folder` is where names of model files count from."""
        return {"find": self.find, "kind_of": self.kind_of, "origin": self.origin, "folder": self.folder}

    def origin(self, field: str | None) -> Origin:
        """Where the numbers of the file itself come from."""
        return Origin("given", self.name)

    def kind_of(self, name: str) -> str:
        """The kind of the switch that a part or the one of the nearest name is; empty if there is none like it."""
        known = {n: e.kind for n, e in self.shelves.items()} | {
            n: str(r.get("kind", "")) for n, r in self.local.items()
        }
        kind = known.get(name, "")
        if kind in kinds("switch"):
            return kind
        close = difflib.get_close_matches(name, [n for n, k in known.items() if k in kinds("switch")], n=1)
        return known[close[0]] if close and name not in known else ""

    def find(self, cls: type[Part], name: str, *others: type[Part]) -> Part:
        """The part of a class (or of one of several) and name, as pydantic asks for it.

        Raises
        ------
        PydanticCustomError
            If there is none, or it is of another kind.
        """
        classes = {c.model_fields["kind"].default: c for c in (cls, *others)}
        kind = kinds_of(cls, *others)
        mine: Mapping[str, Any] = self.coils if cls.role == "coil" else self.local
        record: Mapping[str, Any] | None = mine.get(name)
        context = self.context
        if record is None and (entry := self.shelves.get(name)) is not None:
            context |= {"origin": entry.origin, "folder": entry.folder}
            record = entry.body
        if record is None:
            same = [n for n, e in self.shelves.items() if e.kind in classes and n not in mine]
            same += [n for n, r in mine.items() if r.get("kind", "coil") in classes]
            known = ", ".join(sorted(same)) or "none"
            raise said(
                f'{kind} "{shortened(name)}" is neither in this file nor in the library'
                f"{nearest(shortened(name), same)}; known: {known}"
            )
        named = record.get("kind", next(iter(classes)))
        wanted = classes.get(named) if isinstance(named, str) else None
        if wanted is None:
            found = named_like(shortened(str(record["kind"])) or "part without a kind")
            raise said(f'"{name}" is {found}; {named_like(kind)} is needed here')
        key = wanted.model_fields["kind"].default, name  # one part, whoever asks for it
        if key not in self.found:
            try:
                self.found[key] = wanted.model_validate({"title": name, **record}, context=context)
            except ValidationError as err:
                raise said(f'"{name}" has mistakes of its own') from err
        return self.found[key]


def library_part(name: str) -> Part:
    """A part of the library by its name.

    Raises
    ------
    InputError
        If there is none; names the nearest.
    """
    shelves = read_shelves()
    part = shelves[name].part(name) if name in shelves else None
    if part is None:
        raise InputError(f'the library has no part "{name}"{nearest(name, list(shelves))}')
    return part


def read_board(path: Path, libraries: Sequence[Path] = ()) -> Board:
    """Read a board file.

    Parameters
    ----------
    path : Path
    libraries : sequence of Path
        The user's folders of parts, beside the folder `library` next to the board file.

    Raises
    ------
    InputError
        With every mistake found: file, line, what was found, what is allowed.
    """
    file = read_toml(path, "board")
    if "pulses" in file.data and "supply" not in file.data:
        raise InputError([file.problem((), "is a pattern; name the board first, then the pattern")])
    shelf = _Shelf(file, read_shelves(libraries, path))
    try:
        board = BoardFile.model_validate(file.data, context=shelf.context)
    except ValidationError as err:
        raise InputError(problems_of(err, file)) from None
    problems: list[Problem] = []
    channels = with_opposites(_lay_out(board, file, problems), board)
    _refuse_shared_labels(channels, file, problems)
    exclusive = []
    numbers = {c.number for c in channels}
    for i, group in enumerate(board.limits.exclusive):
        keys: Keys = ("limits", "exclusive", i, "channels")
        members = _range(group.channels, file, keys, problems)
        if unknown := [n for n in members if n not in numbers]:
            problems.append(file.problem_at(keys, f"{_listed('channel', unknown)} not on this board"))
        exclusive.append((members, group.most, group.reason or ""))
    silent = board.limits.all_off
    all_off = tuple(sorted(numbers))
    if silent is not None and silent.channels is not None:
        all_off = _range(silent.channels, file, ("limits", "all_off", "channels"), problems)
        if unknown := [n for n in all_off if n not in numbers]:
            keys = ("limits", "all_off", "channels")
            problems.append(file.problem_at(keys, f"{_listed('channel', unknown)} not on this board"))
    brown_out = board.limits.brown_out
    if brown_out is not None and brown_out.voltage.max >= board.supply.voltage.min:
        text = f"brown_out.voltage of {brown_out.voltage} is not below the supply's lowest voltage of {board.supply.voltage.min:g} V"
        problems.append(file.problem(("limits", "brown_out"), text))
    problems += _of_the_logic_rail(board, file)
    problems += refuse_wrong_outputs(board, file)
    problems += refuse_wrong_bridges(board, file)
    enables = enable_lines(board, channels, file, problems)
    boosted = boosted_channels(board, channels, file, problems)
    if problems:
        raise InputError(sorted(problems, key=lambda p: p.line or 0))
    around = None
    assumed = listed("chain", latch_time=board.chain.latch_time) + listed(
        "limits", guard_band=board.limits.guard_band, pulse_error=board.limits.pulse_error
    )
    assumed += (*_of_the_chain(board), *(number for line in enables for number in line.assumed()))
    if board.ambient is not None:
        around = Surroundings(board.ambient.min, board.ambient.max, board.junction_rise.typ)
        assumed += listed("board", junction_rise=board.junction_rise)
    else:
        assumed += (
            Assumption(
                "board",
                "ambient",
                "not given",
                "windings and cable are taken at the temperature of their given resistance, semiconductors at 25 degC",
            ),
        )
    return Board(
        path,
        board.name or name_from(path.resolve().parent.name, "board"),
        board.supply,
        board.cable,
        board.bulk,
        board.logic,
        board.chain,
        tuple(sorted(channels, key=lambda c: c.number)),
        board.limits,
        tuple(exclusive),
        board.derating,
        around,
        board.junction_rise,
        assumed,
        tuple(libraries),
        board.controller,
        all_off,
        board.power_up,
        enables,
        board.boost,
        boosted,
        board.charging,
    )


def _of_the_logic_rail(board: BoardFile, file: TomlFile) -> list[Problem]:
    """What cannot be, of a logic rail: a reset at its own voltage, a supply below it, a rise of its own where it has none."""
    found: list[Problem] = []
    rail: LogicRail = board.logic
    level = board.limits.logic_brown_out
    if level is not None and level.voltage.max >= rail.voltage.min:
        text = f"logic_brown_out.voltage of {level.voltage} is not below the logic rail's lowest voltage of {rail.voltage.min:g} V"
        found.append(file.problem(("limits", "logic_brown_out"), text))
    if not isinstance(rail, Regulator):
        return found
    needed = rail.needed_input(rail.voltage.max)
    if needed > board.supply.voltage.min:
        text = (
            f"the {rail.kind} needs {needed:.4g} V for {rail.voltage}, and the supply gives {board.supply.voltage.min:g} V at least; "
            "lower the dropout or the logic rail, or raise the supply"
        )
        found.append(file.problem(("logic",), text))
    if rail.current_ceiling is not None and rail.load.max >= rail.current_ceiling.min:
        text = f"the load of {rail.load} is not below the regulator's current ceiling of {rail.current_ceiling}"
        found.append(file.problem(("logic", "load"), text))
    for key in ("logic_at", "logic_rise"):
        if key in board.power_up.model_fields_set:
            text = f"the logic rail comes from the coil rail through a {rail.kind} and rises with it; leave {key} out"
            found.append(file.problem(("power_up", key), text))
    return found


def _of_the_chain(board: BoardFile) -> tuple[Assumption, ...]:
    """What had to be supplied of controller, lines and register."""
    chain = board.chain
    found = (board.controller or Controller()).assumed()
    if board.controller is None:
        text = "nothing is known of its levels; its serial port and timer are as follows"
        found = (Assumption("controller", "controller", "not given", text), *found)
    lines = (("data", chain.data_line), ("clock", chain.clock_line), ("latch", chain.latch_line))
    if any(line.pull is not None for _, line in lines):
        found += listed("controller", level_current=(board.controller or Controller()).level_current)
    for name, line in lines:
        found += listed(f"line {name}", series=line.series, capacitance=line.capacitance)
    register: Register = chain.register_
    if chain.decoupling is not None:
        found += listed("chain", inductance_of_the_logic_supply=chain.supply_inductance)
        found += listed(register.title or "register", power_dissipation_capacitance=register.power_capacitance)
    return found + register.assumed()


def _range(text: str, file: TomlFile, keys: Keys, problems: list[Problem]) -> tuple[int, ...]:
    try:
        return read_range(text)
    except QuantityError as err:
        problems.append(file.problem_at(keys, str(err)))
        return ()


def _listed(what: str, numbers: list[int]) -> str:
    """ "channel 3 is" or "channels 3-5 are"."""
    return f"{what} {write_range(numbers)} is" if len(numbers) == 1 else f"{what}s {write_range(numbers)} are"


def _lay_out(board: BoardFile, file: TomlFile, problems: list[Problem]) -> list[Channel]:
    """One Channel per number of each range; complains of what is claimed twice or lies outside the chain."""
    channels: list[Channel] = []
    lines: list[Line] = []
    claimed: dict[str, dict[int, str]] = {"channel": {}, "output": {}, "bit": {}}
    ranges = [(text, group, "") for text, group in board.channels.items()]
    ranges += [
        (text, backwards(text, group), "reverse_")
        for text, group in board.channels.items()
        if group.reverse is not None and group.matrix is None
    ]
    for text, group, prefix in ranges:
        keys: Keys = ("channels", text, "reverse") if prefix else ("channels", text)
        numbers = _range(group.reverse or "" if prefix else text, file, keys, problems)
        columns = {"outputs": numbers, "bits": numbers, "numbers": numbers}
        crossings: tuple[Crossing, ...] = ()
        if group.matrix is not None and numbers:
            columns |= {"outputs": (), "bits": ()}
            crossings = cross(group, text, numbers, lines, file, problems)
        for column in columns if group.matrix is None else ("numbers",):
            given = getattr(group, column)
            if given is not None:
                place = ("channels", text, prefix + column)
                told = bool(prefix) and column == "numbers"  # by the channels that these are the reverse of
                columns[column] = _range(given, file, place, [] if told else problems)
                if len(columns[column]) not in (0, len(numbers)) and not told:
                    problems.append(
                        file.problem_at(
                            place,
                            f"names {len(columns[column])} where the range has {len(numbers)} channels",
                        )
                    )
            elif column == "bits":
                columns[column] = columns["outputs"]
        if any(len(c) != len(numbers) for c in columns.values() if c or group.matrix is None):
            continue
        _claim(group, text, {"channel": numbers, **columns}, claimed, board.chain, file, problems, prefix)
        if group.matrix is not None:
            claim(group, text, crossings, claimed, board.chain, file, problems)
            for number, n, crossing in zip(numbers, columns["numbers"], crossings, strict=bool(crossings)):
                channels.append(replace(_channel(group, number, _NONE, _NONE, n, ""), crossing=crossing))
            continue
        before = [c.package for c in channels] + [line.package for line in lines]
        packages = packages_of(group.switch, columns["outputs"], before)
        for number, output, bit, n, package in zip(
            numbers, columns["outputs"], columns["bits"], columns["numbers"], packages, strict=True
        ):
            channels.append(_channel(group, number, output, bit, n, package))
    return channels


def _claim(
    group: ChannelRange,
    text: str,
    columns: Mapping[str, tuple[int, ...]],
    claimed: dict[str, dict[int, str]],
    chain: Chain,
    file: TomlFile,
    problems: list[Problem],
    prefix: str = "",
) -> None:
    """Complain of numbers that an earlier range has, or that lie outside the chain; once where one follows from another."""
    registers = "1 register has" if chain.count == 1 else f"{chain.count} registers have"
    blamed: set[int] = set()
    for what, column in (("channel", "channel"), ("output", "outputs"), ("bit", "bits")):
        own = column != "channel" and getattr(group, column) is not None
        blamed = set() if own else blamed
        whole: Keys = ("channels", text, "reverse") if prefix else ("channels", text)
        keys: Keys = ("channels", text, prefix + column) if own else whole
        values = columns[column]
        fresh = [n for n in values if n not in blamed]
        if twice := [n for n in fresh if n in claimed[what]]:
            other = claimed[what][twice[0]]
            problems.append(file.problem_at(keys, f'{_listed(what, twice)} already taken by channels."{other}"'))
        beyond = [n for n in fresh if n >= chain.outputs] if what != "channel" else []
        if beyond:
            problems.append(
                file.problem_at(
                    keys,
                    f"{_listed(what, beyond)} outside the chain: {registers} outputs 0-{chain.outputs - 1}",
                )
            )
        blamed.update(twice, beyond)
        claimed[what].update(dict.fromkeys(values, text))


def _channel(group: ChannelRange, number: int, output: int, bit: int, n: int, package: str) -> Channel:
    label = group.label.replace("{n}", str(n))
    coil = group.coil
    return Channel(
        number, output, bit, label, coil, coil.title or "coil", group.switch, group.clamp, group.leads, package
    )


def _refuse_shared_labels(channels: list[Channel], file: TomlFile, problems: list[Problem]) -> None:
    """Reports name a channel by its label: two channels of one name could not be told apart."""
    named: dict[str, int] = {}
    taken = {d.label for c in channels if c.crossing for d in c.drivers} & {c.label for c in channels}
    if taken:
        text = f'a channel is labelled "{min(taken)}", as a line of the matrix is called in reports; give another label'
        problems.append(file.problem(("channels",), text))
    for channel in channels:
        other = named.setdefault(channel.label, channel.number)
        if other != channel.number:
            text = f'channels {other} and {channel.number} are both labelled "{channel.label}"; put {{n}} into the label, or give other numbers'
            problems.append(file.problem(("channels",), text))
            return


def problems_of(err: ValidationError, file: TomlFile) -> list[Problem]:
    """pydantic's errors as problems with file and line; consequences of another mistake are left out."""
    return problems_in(err, file)
