"""Value change dumps (IEEE 1364-2005, clause 18; IEEE 1800-2017, clause 21.7): levels of chosen signals over time.

pyvcd splits the text into its words, wherever lines end; what they mean together is checked here, since a dump that is
cut off, out of order or names what it never declared would otherwise read as a shorter capture.
"""

from __future__ import annotations

import io
from array import array
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from vcd.common import Timescale, VarType
from vcd.reader import (
    RealChange,
    ScalarChange,
    ScopeDecl,
    StringChange,
    Token,
    TokenKind,
    VarDecl,
    VCDParseError,
    VectorChange,
    tokenize,
)

from boardsim.errors import InputError, Problem
from boardsim.parts.record import nearest, shortened

_BUFFER = 1 << 20  # [byte]
_EXPONENT = {"s": 0, "ms": -3, "us": -6, "ns": -9, "ps": -12, "fs": -15}
_LEVELS = {"0": 0, "1": 1, 0: 0, 1: 1, "L": 0, "l": 0, "H": 1, "h": 1}  # the last four are weak levels of VHDL
_NO_LEVEL = set("xXzZuUwW-")
_NOT_LOGIC = {VarType.real, VarType.realtime, VarType.shortreal, VarType.real_parameter, VarType.string, VarType.event}
_SECTIONS = {TokenKind.DUMPVARS, TokenKind.DUMPALL, TokenKind.DUMPON, TokenKind.DUMPOFF}
_IN_HEADER = {TokenKind.SCOPE, TokenKind.UPSCOPE, TokenKind.VAR, TokenKind.TIMESCALE, TokenKind.ENDDEFINITIONS}
_MOST_NAMES = 12  # of signals, in a message


@dataclass(frozen=True)
class Levels:
    """One signal.

    Attributes
    ----------
    times : (n,) array
        When it takes each level, rising, in units of the dump.
    levels : (n,) array
        0 or 1, alternating; before the first it is unknown.
    """

    times: NDArray[np.int64]
    levels: NDArray[np.int8]


@dataclass(frozen=True)
class Dump:
    """The signals that were asked for.

    Attributes
    ----------
    unit : float
        Of its times, exactly as the file says. [s]
    first, last : int
        First and last time of the file, in units.
    last_line : int
        Number of the file's last line.
    signals : mapping
        By the name that was asked for.
    """

    path: Path
    unit: float
    first: int
    last: int
    last_line: int
    signals: Mapping[str, Levels]


def read_dump(path: Path, wanted: Mapping[str, str], blame: Callable[[str, str], Problem]) -> Dump:
    """Read the levels of some signals.

    Parameters
    ----------
    path : Path
    wanted : mapping
        Name of each signal by the word under which it is returned: its full name ("top.spi.clk") or any end of it that
        only one signal has ("spi.clk", "clk").
    blame : callable
        Makes the problem of a name that is not one signal of one bit, from its word and a text: the name stands in another file.

    Raises
    ------
    InputError
        If the file cannot be read, is no value change dump, is cut off, runs backwards in time, or has not exactly one
        such signal of one bit; with file and line.
    """
    reader = _Reader(path, wanted, blame)
    try:
        with path.open("rb") as handle:
            _refuse_cut_off(handle, reader)
            reader.read(handle)
    except (OSError, ValueError) as err:
        said = getattr(err, "strerror", None) or err
        raise InputError(
            [Problem(str(path), None, f"cannot be read: {said}; name an existing value change dump")]
        ) from err
    return reader.finished()


def _refuse_cut_off(handle: io.BufferedReader, reader: _Reader) -> None:
    """Refuse a file whose last line has no end, before anything is read: "#12" may be what is left of "#1250".

    The library relies on that end as well: it would look for ever for the end of a name that the file breaks off in.
    """
    lines, last = 1, b""
    while block := handle.read(_BUFFER):
        lines += block.count(b"\n")
        last = block[-1:]
    handle.seek(0)
    if not last:
        raise reader.refuse("is empty; a value change dump is expected", None)
    if last not in b"\n\r":
        raise reader.refuse(
            "is cut off: the last line has no end, so that nothing says whether it is complete; "
            "export the capture again, or remove that line",
            lines,
        )


@dataclass
class _Reader:
    """What has been read so far."""

    path: Path
    wanted: Mapping[str, str]
    blame: Callable[[str, str], Problem]
    line: int = 1
    scopes: list[str] = field(default_factory=list)
    timescale: Timescale | None = None
    declared: dict[str, list[str]] = field(default_factory=dict)
    sizes: dict[str, VarDecl] = field(default_factory=dict)
    defined: bool = False
    section: int | None = None
    time: int | None = None
    first: int | None = None
    place: dict[str, str] = field(default_factory=dict)
    times: dict[str, array[int]] = field(default_factory=dict)
    levels: dict[str, array[int]] = field(default_factory=dict)

    def refuse(self, text: str, line: int | None) -> InputError:
        return InputError([Problem(str(self.path), line, text)])

    def read(self, handle: io.BufferedReader) -> None:
        """Take in every word of the file.

        Raises
        ------
        InputError
            At the first that does not fit.
        """
        for token in self._tokens(handle):
            self.line = token.span.start.line
            kind, data = token.kind, token.data
            if isinstance(data, ScalarChange | VectorChange):
                self._change(data)
            elif kind is TokenKind.CHANGE_TIME:
                self._advance(token.time_change)
            elif isinstance(data, RealChange | StringChange):
                self._known(data.id_code)
                if (word := self.place.get(data.id_code)) is not None:
                    raise self.refuse(
                        f"{word} is {_plain(str(data.value))} here; a line of the bus is 0 or 1", self.line
                    )
            elif kind in _IN_HEADER:
                self._declare(token)
            elif kind in _SECTIONS:
                if self.section is not None:
                    raise self.refuse(f"begins a section within the one of line {self.section}", self.line)
                self.section = self.line
            elif kind is TokenKind.END:
                if self.section is None:
                    raise self.refuse("$end closes nothing here", self.line)
                self.section = None

    def _tokens(self, handle: io.BufferedReader) -> Iterator[Token]:
        try:
            yield from tokenize(handle, _BUFFER)
        except VCDParseError as err:
            said = str(err).partition(": ")[2]
            raise self.refuse(f"is no value change dump here, or is damaged: {_plain(said)}", err.loc.line) from None
        except (ValueError, UnicodeDecodeError) as err:
            # A number of thousands of digits, or a byte that is no ASCII: the library gives no place.
            raise self.refuse(f"is no value change dump after this line: {_plain(str(err))}", self.line) from None

    def _declare(self, token: Token) -> None:
        if self.defined:
            raise self.refuse("declares something after $enddefinitions; the dump is damaged", self.line)
        data = token.data
        if isinstance(data, Timescale):
            if data.magnitude not in (1, 10, 100):
                raise self.refuse(f"a timescale is 1, 10 or 100 of a unit; found {data.magnitude}", self.line)
            self.timescale = data
        elif isinstance(data, ScopeDecl):
            self.scopes.append(data.ident)
        elif isinstance(data, VarDecl):
            self.declared.setdefault(".".join([*self.scopes, data.ref_str]), []).append(data.id_code)
            self.sizes.setdefault(data.id_code, data)
        elif token.kind is TokenKind.UPSCOPE:
            if not self.scopes:
                raise self.refuse("$upscope leaves a scope that was never entered", self.line)
            self.scopes.pop()
        else:
            self._end_definitions()

    def _end_definitions(self) -> None:
        if self.timescale is None:
            raise self.refuse("the dump has no $timescale, so that its times mean nothing", self.line)
        self.defined = True
        problems = []
        for word, name in self.wanted.items():
            found = {i: n for n, ids in self.declared.items() for i in ids if n == name or n.endswith("." + name)}
            exact = {i: n for i, n in found.items() if n == name}
            found = exact or found
            if len(found) != 1:
                problems.append(self.blame(word, self._not_one(name, [*found.values()])))
                continue
            ((code, full),) = found.items()
            var = self.sizes[code]
            if var.size != 1 or var.type_ in _NOT_LOGIC:
                what = f"{var.size} bits wide" if var.size != 1 else f"of type {var.type_}"
                problems.append(self.blame(word, f'"{full}" is {what}; one line of the bus is needed'))
                continue
            other = self.place.setdefault(code, word)
            if other != word:
                problems.append(self.blame(word, f'"{full}" is the {other} too; they are different pins'))
        if problems:
            raise InputError(problems)
        self.times = {code: array("q") for code in self.place}
        self.levels = {code: array("b") for code in self.place}

    def _not_one(self, name: str, found: list[str]) -> str:
        if found:
            some = ", ".join(sorted(found)[:_MOST_NAMES])
            return f'"{shortened(name)}" could be any of {some} in {self.path.name}; write more of the name'
        names = sorted(self.declared)
        more = f" and {len(names) - _MOST_NAMES} more" if len(names) > _MOST_NAMES else ""
        ends = [*names, *(n.rpartition(".")[2] for n in names)]
        return (
            f'"{shortened(name)}" is not in {self.path.name}{nearest(name, ends)}; it has '
            f"{', '.join(shortened(n) for n in names[:_MOST_NAMES]) or 'no signals'}{more}"
        )

    def _advance(self, time: int) -> None:
        if not self.defined:
            raise self.refuse("a time stands before $enddefinitions; the dump is damaged", self.line)
        if self.time is not None and time < self.time:
            raise self.refuse(f"time goes back from #{self.time} to #{time}; the dump is damaged", self.line)
        if time >= 2**63:
            raise self.refuse(f"#{shortened(str(time))} is beyond what a time can be", self.line)
        self.time = time
        self.first = time if self.first is None else self.first

    def _known(self, code: str) -> None:
        if not self.defined:
            raise self.refuse("a value stands before $enddefinitions; the dump is damaged", self.line)
        if code not in self.sizes:
            raise self.refuse(
                f'"{shortened(code)}" is no signal that the dump declares; this line is damaged', self.line
            )

    def _change(self, data: ScalarChange | VectorChange) -> None:
        code = data.id_code
        if code not in self.times:
            self._known(code)
            return
        levels = self.levels[code]
        level = _LEVELS.get(data.value)
        if level is None:
            if str(data.value) in _NO_LEVEL and not levels:
                return  # unknown until its first level
            raise self.refuse(
                f"{self.place[code]} is {data.value!r} here; a line of the bus is 0 or 1 from its first level on",
                self.line,
            )
        if levels and levels[-1] == level:
            return
        # Values before the first time (a $dumpvars section may stand there) hold from the first time on.
        at = self.time if self.time is not None else -1
        times = self.times[code]
        if times and (times[-1] == at or times[-1] < 0) and at in (-1, self.first) and len(times) == 1:
            times.pop()  # what a signal begins with may be told twice
            levels.pop()
        elif times and times[-1] == at:
            # Up and down within one time: the file does not tell how long, and no register sees a pulse of nothing.
            raise self.refuse(
                f"{self.place[code]} changes twice at #{at}; the dump's timescale is too coarse for this signal",
                self.line,
            )
        times.append(at)
        levels.append(level)

    def finished(self) -> Dump:
        """What was read, if it is complete.

        Raises
        ------
        InputError
            If something is open at the end.
        """
        if not self.defined:
            raise self.refuse("is cut off, or no value change dump: $enddefinitions never comes", self.line)
        if self.section is not None:
            raise self.refuse(f"is cut off: the section of line {self.section} never ends", self.line)
        if self.time is None or self.first is None:
            raise self.refuse("is cut off: it holds no time at all", self.line)
        assert self.timescale is not None  # or the definitions would not have ended
        unit = float(f"{self.timescale.magnitude}e{_EXPONENT[self.timescale.unit.value]}")
        signals = {}
        for code, word in self.place.items():
            times = np.maximum(np.array(self.times[code], dtype=np.int64), self.first)
            signals[word] = Levels(times, np.array(self.levels[code], dtype=np.int8))
        return Dump(self.path, unit, self.first, self.time, self.line, signals)


def _plain(text: str) -> str:
    return shortened("".join(c if c.isprintable() else "?" for c in text))
