"""The expressions of models: a checked grammar, worked out to numbers or to laws of voltages and currents.

What programs read differently is refused, since a wrong number would look right: `^` (a power in one, exclusive or in
another), a power that is not whole of what may be negative (ngspice 39 takes pow(-2, 3) as 8), a minus directly before a
power. `pwr(x, y)` is |x|^y here, as its inventors have it; ngspice's own gives it the sign of x.
"""

from __future__ import annotations

import itertools
import math
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import ClassVar

from boardsim.parts.elements import GROUND
from boardsim.parts.record import shortened
from boardsim.parts.vendor.text import Place

_LONGEST = 4000  # characters of an expression
_DEEPEST = 30  # brackets within brackets
_DEEPEST_LAW = 120  # levels of a law that hangs on voltages; each term of a sum is one
_DEEPEST_TOGETHER = 150  # levels of expressions that wait for each other; each takes three of Python's thousand calls
_MOST = 20_000  # parts of an expression once functions are written out
_LONGEST_LAW = 8000  # characters of a law as it stands in a deck
_MOST_WORK = 50_000  # parts of all expressions of one model; a large macro model has some thousands
_HIGHEST_POWER = 16  # that is written as a product

_SCALES = {
    "t": 1e12,
    "g": 1e9,
    "meg": 1e6,
    "k": 1e3,
    "mil": 25.4e-6,
    "m": 1e-3,
    "u": 1e-6,
    "n": 1e-9,
    "p": 1e-12,
    "f": 1e-15,
}
_NUMBER = re.compile(r"(\d+\.?\d*|\.\d+)(e[+-]?\d+)?")
_LETTERS = re.compile(r"(meg|mil|[tgkmunpf])?(v|volts?|a|amps?|f|farads?|h|henr(?:y|ies)|ohms?|s|sec|hz|c|degc|w)?")
_WORD = re.compile(r"[a-z_][a-z0-9_.]*")
_SIGNS = re.compile(r"\*\*|<=|>=|==|!=|&&|\|\||[-+*/()<>&|!?:,^~]")
_NODE = re.compile(r"\s*([a-z0-9_.+\-]+)\s*")


@dataclass(frozen=True)
class Number:
    """A constant, in SI units."""

    value: float
    size: ClassVar[int] = 1
    depth: ClassVar[int] = 1


@dataclass(frozen=True)
class Name:
    """A parameter, or an argument of a function."""

    name: str
    size: ClassVar[int] = 1
    depth: ClassVar[int] = 1


@dataclass(frozen=True)
class Call:
    """A function, an operator ("+", "<", "?:", "-x", "not"), or a voltage ("v") of nodes or current ("i") of a source.

    `size` counts everything in it, what stands there several times as often; `depth` its levels, of which each operator of a
    sum is one.
    """

    what: str
    inside: tuple[Expression, ...]
    places: tuple[str, ...] = ()
    size: int = field(init=False, compare=False)
    depth: int = field(init=False, compare=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "size", 1 + sum(x.size for x in self.inside))
        object.__setattr__(self, "depth", 1 + max((x.depth for x in self.inside), default=0))


Expression = Number | Name | Call


@dataclass(frozen=True)
class Function:
    """A .func of a model."""

    arguments: tuple[str, ...]
    body: Expression


def read_number(text: str, place: Place) -> float:
    """A number as SPICE writes it, such as 4.7k, 10pF, 2MEG.

    Raises
    ------
    ModelTextError
        If it is none, or programs read it differently.
    """
    negative = text.startswith("-")
    body = text[1:] if text[:1] in "+-" and len(text) > 1 else text
    value, end = _number(body, 0, place)
    if end != len(body):
        raise place.refuse(f"{shortened(text)!r} is not a number")
    return -value if negative else value


def _number(text: str, at: int, place: Place) -> tuple[float, int]:
    found = _NUMBER.match(text, at)
    if not found:
        raise place.refuse(f"{shortened(text[at:])!r} is not a number")
    end = found.end()
    tail = re.compile(r"[a-z_0-9.]*").match(text, end)
    letters = tail[0] if tail else ""
    scaled = _LETTERS.fullmatch(letters)
    if not scaled or (not scaled[1] and letters[:1] in ("a", "f")):
        hint = {
            "a": "; a unit that begins with a is atto to some programs and the unit to others, leave it out",
            "f": "; a unit that begins with f is femto to SPICE and the unit to people, leave it out",
        }.get(letters[:1] if scaled else "", "")
        raise place.refuse(
            f"{shortened(found[0] + letters)!r} is not a number that every program reads alike; allowed after the digits: t, g, meg, "
            f"k, m, u, n, p, f and a unit{hint}"
        )
    value = float(found[0]) * _SCALES.get(scaled[1] or "", 1.0)
    if not math.isfinite(value):
        raise place.refuse(f"{shortened(found[0])!r} is larger than any number of a model")
    return value, end + len(letters)


def parse(text: str, place: Place) -> Expression:
    """Read an expression, with or without the braces around it.

    Raises
    ------
    ModelTextError
        If it is none, or means different things to different programs.
    """
    text = text.strip()
    if text.startswith("{") and text.endswith("}"):
        text = text[1:-1].strip()
    if not text:
        raise place.refuse("a value is missing")
    if len(text) > _LONGEST:
        raise place.refuse(f"an expression of {len(text)} characters is longer than the {_LONGEST} that are read")
    return _Reader(text, place).whole()


class _Reader:
    """Recursive descent: ?: below || below && below comparisons below sums below products below signs below powers."""

    def __init__(self, text: str, place: Place):
        self.text, self.place = text, place
        self.at = self.depth = 0

    def refuse(self, said: str) -> Exception:
        return self.place.refuse(f"in the expression {shortened(self.text)!r}: {said}")

    def whole(self) -> Expression:
        found = self.choice()
        if self.at < len(self.text):
            raise self.refuse(f"{shortened(self.text[self.at :])!r} is not understood here")
        return found

    def blanks(self) -> None:
        while self.at < len(self.text) and self.text[self.at] in " \t":
            self.at += 1

    def sign(self) -> str:
        """The operator that comes next, without taking it."""
        self.blanks()
        found = _SIGNS.match(self.text, self.at)
        if found and found[0] in ("^", "~"):
            raise self.refuse(
                f"{found[0]!r} is a power to some programs and a logical operation to others; write ** or pwr()"
            )
        return found[0] if found else ""

    def take(self, *signs: str) -> str:
        found = self.sign()
        if found in signs:
            self.at += len(found)
            self.blanks()
            return found
        return ""

    def need(self, sign: str) -> None:
        if not self.take(sign):
            raise self.refuse(f"{sign!r} is missing before {shortened(self.text[self.at :])!r}")

    def choice(self) -> Expression:
        self.depth += 1
        if self.depth > _DEEPEST:
            raise self.refuse(f"it nests more than {_DEEPEST} levels deep")
        found = self.chain(0)
        if self.take("?"):
            first = self.choice()
            self.need(":")
            found = Call("?:", (found, first, self.choice()))
        self.depth -= 1
        return found

    _LEVELS = (("||", "|"), ("&&", "&"), ("<", ">", "<=", ">=", "==", "!="), ("+", "-"), ("*", "/"))

    def chain(self, level: int) -> Expression:
        if level == len(self._LEVELS):
            return self.signed()
        found = self.chain(level + 1)
        while sign := self.take(*self._LEVELS[level]):
            found = Call({"|": "||", "&": "&&"}.get(sign, sign), (found, self.chain(level + 1)))
            if level == 2 and self.sign() in self._LEVELS[2]:
                raise self.refuse("two comparisons in a row; use brackets")
        return found

    def signed(self) -> Expression:
        self.depth += 1
        if self.depth > _DEEPEST:
            raise self.refuse(f"it nests more than {_DEEPEST} levels deep")
        sign = self.take("-", "+", "!")
        if not sign:
            found = self.power()
        else:
            found = self.signed()
            if isinstance(found, Call) and found.what == "**" and sign == "-":
                raise self.refuse("a minus directly before a power; use brackets")
            found = {"-": Call("-x", (found,)), "!": Call("not", (found,))}.get(sign, found)
        self.depth -= 1
        return found

    def power(self) -> Expression:
        found = self.atom()
        if self.take("**"):
            exponent = self.signed()
            found = Call("**", (found, exponent))
            if self.sign() == "**" or (isinstance(exponent, Call) and exponent.what == "**"):
                raise self.refuse("a power of a power; use brackets")
        return found

    def atom(self) -> Expression:
        if self.take("("):
            found = self.choice()
            self.need(")")
            return Call("()", (found,))  # remembered until it is clear that no sign stands before a bare power
        self.blanks()
        word = _WORD.match(self.text, self.at)
        if word:
            self.at = word.end()
            return self.word(word[0])
        value, self.at = _number(self.text, self.at, self.place)
        return Number(value)

    def word(self, word: str) -> Expression:
        if not self.take("("):
            return Name(word)
        if word in ("v", "i"):
            return Call(word, (), self.probed(word))
        inside = [self.choice()]
        while self.take(","):
            inside.append(self.choice())
        self.need(")")
        return Call(word, tuple(inside))

    def probed(self, word: str) -> tuple[str, ...]:
        """The nodes of a voltage or the source of a current, taken as they stand."""
        end = self.text.find(")", self.at)
        names = self.text[self.at : end].split(",") if end >= 0 else []
        found = [m[1] for n in names if (m := _NODE.fullmatch(n))]
        if len(found) != len(names) or len(found) not in ((1, 2) if word == "v" else (1,)):
            raise self.refuse(f"{word}(...) takes {'one or two nodes' if word == 'v' else 'one voltage source'}")
        self.at = end + 1
        return tuple(found)


# ------------------------------------------------------------------------------------------------------ names and numbers


@dataclass
class Work:
    """How much was worked out for one model so far, so that many expressions together stay bounded as well as each.

    `depth` is how deep in expressions the work is: a parameter that waits for another one adds its own levels to it.
    """

    steps: int = 0
    depth: int = 0


@dataclass(frozen=True)
class Scope:
    """What names mean where an expression stands.

    Attributes
    ----------
    value : callable
        The number of a parameter; None where there is none of this name.
    functions : mapping of name to Function
    work : Work
        Of the model, which all its scopes share.
    """

    value: Callable[[str], float | None]
    functions: Mapping[str, Function]
    work: Work = field(default_factory=Work)


def resolved(found: Expression, scope: Scope, place: Place) -> Expression:
    """Put numbers for parameters, write functions out, and work out what is constant.

    Raises
    ------
    ModelTextError
        If a name is not known, or a number cannot be worked out.
    """
    return _Resolver(scope, place).resolve(found, {})


def number_of(found: Expression, scope: Scope, place: Place) -> float:
    """The number that an expression comes to.

    Raises
    ------
    ModelTextError
        If it hangs on voltages or currents, or cannot be worked out.
    """
    result = resolved(found, scope, place)
    if not isinstance(result, Number):
        raise place.refuse("a constant is needed here, and this hangs on voltages or currents, or is a comparison")
    return result.value


class _Resolver:
    def __init__(self, scope: Scope, place: Place):
        self.scope, self.place, self.count = scope, place, 0

    def resolve(self, found: Expression, arguments: Mapping[str, Expression]) -> Expression:
        """What an expression comes to. Operators in a row are taken one after the other, and only brackets go deeper."""
        if self.scope.work.depth >= _DEEPEST_TOGETHER:
            raise self.place.refuse(
                f"expressions nest more than {_DEEPEST_TOGETHER} levels deep, counted through the functions and parameters that "
                "they wait for"
            )
        self.scope.work.depth += 1
        row: list[Call] = []
        while isinstance(found, Call) and found.what in _IN_A_ROW:
            self.counted()
            row.append(found)
            found = found.inside[0]
        result = self.one(found, arguments)
        for call in reversed(row):
            result = self.simplified(Call(call.what, (result, self.resolve(call.inside[1], arguments))))
        self.scope.work.depth -= 1
        return result

    def counted(self) -> None:
        """One more step, within what an expression and a model may take."""
        self.count += 1
        if self.count > _MOST:
            raise self.place.refuse("an expression grows without bound once its functions are written out")
        self.scope.work.steps += 1
        if self.scope.work.steps > _MOST_WORK:
            raise self.place.refuse(
                f"the expressions of this model have more than {_MOST_WORK} parts once functions are written out"
            )

    def one(self, found: Expression, arguments: Mapping[str, Expression]) -> Expression:
        self.counted()
        if isinstance(found, Number):
            return found
        if isinstance(found, Name):
            if found.name in arguments:
                return arguments[found.name]
            value = self.scope.value(found.name)
            if value is None:
                value = math.pi if found.name == "pi" else None
            if value is None:
                raise self.place.refuse(
                    f'"{shortened(found.name)}" is no parameter of this model; it cannot be worked out'
                )
            return Number(value)
        inside = tuple([self.resolve(x, arguments) for x in found.inside])
        if found.what in self.scope.functions:
            function = self.scope.functions[found.what]
            if len(inside) != len(function.arguments):
                raise self.place.refuse(
                    f'"{shortened(found.what)}" takes {len(function.arguments)} arguments; found {len(inside)}'
                )
            return self.resolve(function.body, dict(zip(function.arguments, inside, strict=True)))
        if found.what == "()":
            return inside[0]
        return self.simplified(Call(_ALIASES.get(found.what, found.what), inside, found.places))

    def simplified(self, call: Call) -> Expression:
        what, inside = call.what, call.inside
        if call.size > _MOST:
            raise self.place.refuse("an expression grows without bound once its functions are written out")
        if call.depth > _DEEPEST_LAW:
            raise self.place.refuse(
                f"a law of more than {_DEEPEST_LAW} levels; each term that hangs on a voltage or current adds one: split it, such as "
                "into several B lines"
            )
        if what in ("v", "i"):
            return call
        if what not in _RULES:
            hint = "; it changes with time or by chance" if what in _MOVING else ""
            raise self.place.refuse(
                f'function "{shortened(what)}" is not translated{hint}; known: {", ".join(KNOWN_FUNCTIONS)}'
            )
        least, most = _RULES[what]
        if not least <= len(inside) <= most:
            raise self.place.refuse(f'"{what}" with {len(inside)} arguments is not understood')
        for x in inside[: _CONDITIONS.get(what, 0)]:
            if not _is_condition(x):
                raise self.place.refuse(
                    "a condition has to be a comparison; programs differ about what number counts as true"
                )
        self.check(call)
        if all(isinstance(x, Number) or x in (_TRUE, _FALSE) for x in inside):
            return self.worked_out(what, inside)
        return call

    def check(self, call: Call) -> None:
        """What is understood in one way only where some argument is a constant."""
        what, inside = call.what, call.inside
        for x in inside[_CONDITIONS.get(what, 0) :]:
            if _is_condition(x):
                raise self.place.refuse("a comparison stands where a number is needed; write if(comparison, 1, 0)")
        constant = [x.value if isinstance(x, Number) else None for x in inside]
        if what == "**":
            power = constant[1]
            whole = power is not None and power == int(power) and 0 <= power <= _HIGHEST_POWER
            if not whole and not (power is not None and _never_negative(inside[0])):
                raise self.place.refuse(
                    "programs differ about a power that is not a whole number of what may be negative; write pwr(x, y) for |x|^y"
                )
        if what in ("pwr", "pwrs") and (constant[1] is None or constant[1] <= 0):
            raise self.place.refuse(f"{what}(x, y) is translated for a constant y above 0 only")
        if what == "limit" and not (constant[1] is not None and constant[2] is not None and constant[1] <= constant[2]):
            raise self.place.refuse("limit(x, low, high) is translated for constants with low not above high only")
        if what == "table":
            points = constant[1:]
            rising = [x for x in points[::2] if x is not None]
            if None in points or len(points) % 2 or any(b <= a for a, b in itertools.pairwise(rising)):
                raise self.place.refuse("table(x, x1, y1, x2, y2, ...) needs constants with x1, x2, ... rising")

    def worked_out(self, what: str, inside: tuple[Expression, ...]) -> Expression:
        numbers = [x.value if isinstance(x, Number) else x == _TRUE for x in inside]
        try:
            value = _EVALUATED[what](*numbers)
        except (ArithmeticError, ValueError):
            raise self.place.refuse(
                f'"{what}" of {", ".join(f"{n:g}" for n in numbers)} cannot be worked out'
            ) from None
        if isinstance(value, bool):
            return _TRUE if value else _FALSE
        if not math.isfinite(value):
            raise self.place.refuse(f'"{what}" comes to a number that is not finite')
        return Number(float(value))


_IN_A_ROW = ("+", "-", "*", "/")
_TRUE, _FALSE = Call("true", ()), Call("false", ())
_ALIASES = {"if": "?:", "log": "ln", "pow": "**", "stp": "u"}
_CONDITIONS = {"?:": 1, "&&": 2, "||": 2, "not": 1}
_MOVING = (
    "time",
    "ddt",
    "sdt",
    "idt",
    "idtmod",
    "delay",
    "absdelay",
    "rand",
    "random",
    "white",
    "gauss",
    "agauss",
    "unif",
    "aunif",
    "mc",
)
_UNARY = (
    "-x",
    "not",
    "abs",
    "sqrt",
    "exp",
    "ln",
    "log10",
    "sin",
    "cos",
    "tan",
    "atan",
    "sinh",
    "cosh",
    "tanh",
    "sgn",
    "u",
    "uramp",
)
_RULES: dict[str, tuple[int, int]] = {
    **dict.fromkeys(_UNARY, (1, 1)),
    **dict.fromkeys(
        ("+", "-", "*", "/", "<", ">", "<=", ">=", "==", "!=", "&&", "||", "**", "pwr", "pwrs", "min", "max"), (2, 2)
    ),
    "?:": (3, 3),
    "limit": (3, 3),
    "table": (3, 401),
}
KNOWN_FUNCTIONS = sorted(w for w in {*_RULES, *_ALIASES} if w.isalnum() and w not in ("not",))


def _is_condition(x: Expression) -> bool:
    return isinstance(x, Call) and x.what in ("<", ">", "<=", ">=", "==", "!=", "&&", "||", "not", "true", "false")


def _never_negative(x: Expression) -> bool:
    """Whether an expression cannot be below 0, whatever the voltages are."""
    if isinstance(x, Number):
        return x.value >= 0
    if isinstance(x, Name):
        return False
    if x.what in ("abs", "sqrt", "exp", "cosh", "pwr", "uramp", "u"):
        return True
    if x.what in ("+", "*", "/", "min"):
        return all(map(_never_negative, x.inside))
    if x.what == "max":
        return any(map(_never_negative, x.inside))
    if x.what == "?:":
        return all(map(_never_negative, x.inside[1:]))
    return (
        x.what == "**"
        and isinstance(x.inside[1], Number)
        and (x.inside[1].value % 2 == 0 or _never_negative(x.inside[0]))
    )


def _sign(x: float) -> float:
    return math.copysign(1.0, x) if x else 0.0


def _table(x: float, *points: float) -> float:
    xs, ys = points[::2], points[1::2]
    for x1, y1, x2, y2 in zip(xs, ys, xs[1:], ys[1:], strict=False):
        if x < x2:
            return y1 if x <= x1 else y1 + (y2 - y1) / (x2 - x1) * (x - x1)
    return ys[-1]


_EVALUATED: Mapping[str, Callable[..., float | bool]] = {
    "-x": lambda x: -x,
    "not": lambda x: not x,
    "abs": abs,
    "sqrt": math.sqrt,
    "exp": math.exp,
    "ln": math.log,
    "log10": math.log10,
    "sin": math.sin,
    "cos": math.cos,
    "tan": math.tan,
    "atan": math.atan,
    "sinh": math.sinh,
    "cosh": math.cosh,
    "tanh": math.tanh,
    "sgn": _sign,
    "u": lambda x: 1.0 if x > 0 else 0.0,
    "uramp": lambda x: max(x, 0.0),
    "+": lambda x, y: x + y,
    "-": lambda x, y: x - y,
    "*": lambda x, y: x * y,
    "/": lambda x, y: x / y,
    "<": lambda x, y: x < y,
    ">": lambda x, y: x > y,
    "<=": lambda x, y: x <= y,
    ">=": lambda x, y: x >= y,
    "==": lambda x, y: x == y,
    "!=": lambda x, y: x != y,
    "&&": lambda x, y: x and y,
    "||": lambda x, y: x or y,
    "**": math.pow,
    "pwr": lambda x, y: math.pow(abs(x), y),
    "pwrs": lambda x, y: math.copysign(math.pow(abs(x), y), x),
    "min": min,
    "max": max,
    "?:": lambda c, x, y: x if c else y,
    "limit": lambda x, low, high: min(max(x, low), high),
    "table": _table,
}


# ------------------------------------------------------------------------------------------------------------- as a law


def written(found: Expression, node: Callable[[str], str], source: Callable[[str], str], place: Place) -> str:
    """A resolved expression as a deck takes it, everything in brackets.

    Parameters
    ----------
    found : Expression
        As `resolved` returns it.
    node, source : callable
        The deck's own name of a node, and of the voltage source whose current is meant.
    place : Place

    Raises
    ------
    ModelTextError
        If it gets longer than a deck can take.

    Notes
    -----
    Whole powers are products, and functions that programs define differently are written with those that they do not.
    """
    law = _law(found, node, source, place)
    if len(law) > _LONGEST_LAW:
        raise place.refuse(f"an expression of {len(law)} characters once it is written out is longer than a deck takes")
    return law


def _law(found: Expression, node: Callable[[str], str], source: Callable[[str], str], place: Place) -> str:
    if isinstance(found, Number):
        return repr(found.value) if found.value >= 0 else f"({found.value!r})"
    if isinstance(found, Name):
        raise AssertionError(f"{found.name} was not resolved")
    what = found.what
    if what == "v":
        return volts(*(node(n) for n in found.places))
    if what == "i":
        return f"i({source(found.places[0])})"
    if what in ("true", "false"):
        return "(1 > 0)" if what == "true" else "(0 > 1)"
    inside = [written(x, node, source, place) for x in found.inside]
    match what:
        case "-x":
            return f"(0 - {inside[0]})"
        case "not":
            return f"(!{inside[0]})"
        case "?:":
            return f"({inside[0]} ? {inside[1]} : {inside[2]})"
        case "**":
            power = found.inside[1]
            assert isinstance(power, Number)
            if power.value == int(power.value) and 0 <= power.value <= _HIGHEST_POWER:
                return f"({' * '.join([inside[0]] * int(power.value)) or '1.0'})"
            return f"pow({inside[0]}, {inside[1]})"
        case "pwr":
            return f"pow(abs({inside[0]}), {inside[1]})"
        case "pwrs":
            return f"(sgn({inside[0]}) * pow(abs({inside[0]}), {inside[1]}))"
        case "u":
            return f"({inside[0]} > 0 ? 1.0 : 0.0)"
        case "uramp":
            return f"max({inside[0]}, 0.0)"
        case "limit":
            return f"min(max({inside[0]}, {inside[1]}), {inside[2]})"
        case "table":
            return _steps(inside)
        case "+" | "-" | "*" | "/" | "<" | ">" | "<=" | ">=" | "==" | "!=" | "&&" | "||":
            return f"({inside[0]} {what} {inside[1]})"
        case _:
            return f"{what}({', '.join(inside)})"


def volts(a: str, b: str = GROUND) -> str:
    """The voltage from one node of a deck to another, as a law takes it."""
    if a == b:
        return "0.0"
    if a == GROUND:
        return f"(0 - V({b}))"
    return f"V({a})" if b == GROUND else f"V({a}, {b})"


def _steps(inside: list[str]) -> str:
    """Straight lines between the points of a table, level beyond its ends."""
    x, xs, ys = inside[0], inside[1::2], inside[2::2]
    text = ys[-1]
    for i in range(len(xs) - 2, -1, -1):
        line = f"({ys[i]} + ({ys[i + 1]} - {ys[i]}) / ({xs[i + 1]} - {xs[i]}) * ({x} - {xs[i]}))"
        text = f"({x} < {xs[i + 1]} ? {line} : {text})"
    return f"({x} < {xs[0]} ? {ys[0]} : {text})"
