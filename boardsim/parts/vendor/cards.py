"""Statements -> definitions: subcircuits, models, parameters and functions, and the element lines in them."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field

from boardsim.parts.record import shortened
from boardsim.parts.vendor.expressions import KNOWN_FUNCTIONS, Expression, Function, parse
from boardsim.parts.vendor.text import Place, Statement

ELEMENTS = {
    "r": "resistors",
    "c": "capacitors",
    "l": "inductors",
    "d": "diodes",
    "q": "bipolar transistors",
    "m": "MOSFETs",
    "v": "constant voltages",
    "i": "constant currents",
    "e": "controlled voltages",
    "g": "controlled currents",
    "f": "controlled currents",
    "h": "controlled voltages",
    "b": "laws",
    "x": "subcircuits",
}
_NOT = {
    "a": "code models can read and write files",
    "k": "coupled inductors are not translated",
    "s": "programs close their switches by different laws",
    "w": "programs close their switches by different laws",
    "j": "junction FETs are not translated",
    "t": "lines are not translated",
    "u": "lines and digital parts are not translated",
    "z": "MESFETs and IGBTs are not translated",
}
_STATEMENTS = ".subckt, .ends, .model, .param, .func, .include and .lib FILE"
_NAME = re.compile(r"[a-z0-9_][a-z0-9_.+\-]*")
_ASSIGNED = re.compile(r"(?<![<>=!\w.])([a-z_][a-z0-9_.]*)\s*=(?!=)")


@dataclass(frozen=True)
class ModelCard:
    """A .model: what device it is of, its parameters, and its flags such as nchan. Display words are kept as text."""

    place: Place
    name: str
    device: str
    parameters: dict[str, str]
    flags: tuple[str, ...] = ()


@dataclass
class Definitions:
    """What stands at one level: in a file, or in one subcircuit."""

    parameters: dict[str, tuple[Expression, Place]] = field(default_factory=dict)
    functions: dict[str, Function] = field(default_factory=dict)
    models: dict[str, ModelCard] = field(default_factory=dict)


@dataclass
class Subcircuit(Definitions):
    """A .subckt with its pins, its `formal` parameters, which a caller may give, and its element lines."""

    name: str = ""
    place: Place = field(default_factory=lambda: Place("", 0))
    pins: tuple[str, ...] = ()
    formal: tuple[str, ...] = ()
    lines: list[Statement] = field(default_factory=list)


@dataclass
class Library(Definitions):
    """Everything that the files of a model define."""

    subcircuits: dict[str, Subcircuit] = field(default_factory=dict)


def read_library(statements: tuple[Statement, ...]) -> Library:
    """Sort statements into definitions.

    Raises
    ------
    ModelTextError
        If one is not allowed, is not understood, or is there twice.
    """
    library = Library()
    inside: Subcircuit | None = None
    for s in statements:
        if not s.text.startswith("."):
            _check_element(s, inside)
            assert inside is not None
            inside.lines.append(s)
            continue
        word, _, rest = s.text.partition(" ")
        rest = rest.strip()
        if word == ".subckt":
            if inside is not None:
                raise s.place.refuse(f'a subcircuit inside "{inside.name}" is not read; write one after the other')
            inside = _header(rest, s.place)
            _once(library.subcircuits, inside.name, "subcircuit", s.place)
            library.subcircuits[inside.name] = inside
        elif word == ".ends":
            if inside is None:
                raise s.place.refuse(f"{shortened(s.text)!r} ends nothing that was begun")
            if rest not in ("", inside.name):
                raise s.place.refuse(
                    f".ends is followed by {shortened(rest)!r}; the name of the subcircuit that was begun, "
                    f"{shortened(inside.name)!r}, or nothing is allowed, on this line and on those below that begin with +"
                )
            inside = None
        else:
            _define(word, rest, inside if inside is not None else library, s.place)
    if inside is not None:
        raise inside.place.refuse(f'.subckt "{inside.name}" is not ended by .ends')
    return library


def _define(word: str, rest: str, to: Definitions, place: Place) -> None:
    if word == ".model":
        card = _model(rest, place)
        _once(to.models, card.name, "model", place)
        to.models[card.name] = card
    elif word in (".param", ".params", ".parameters"):
        for name, text in assignments(rest, place):
            _once(to.parameters, name, "parameter", place)
            to.parameters[name] = (parse(text, place), place)
    elif word in (".func", ".function"):
        name, function = _function(rest, place)
        _once(to.functions, name, "function", place)
        to.functions[name] = function
    elif word in (".option", ".options", ".temp"):
        raise place.refuse(f"{word} would change the whole board's run; allowed: {_STATEMENTS}")
    else:
        raise place.refuse(f"{shortened(word)!r} is not allowed in a model; allowed: {_STATEMENTS}")


def _check_element(s: Statement, inside: Subcircuit | None) -> None:
    letter = s.text[0]
    allowed = ", ".join(f"{k.upper()}" for k in ELEMENTS)
    if letter not in ELEMENTS or not _NAME.fullmatch(s.text.split(maxsplit=1)[0]):
        # What has as many words as an element line is told why its kind is not taken; a command is not.
        why = f" ({_NOT[letter]})" if letter in _NOT and len(s.text.split()) > 3 else ""
        raise s.place.refuse(
            f"{shortened(s.text)!r} is not allowed in a model{why}; element lines may begin with {allowed}"
        )
    if inside is None:
        raise s.place.refuse(f"{shortened(s.text)!r} stands outside of any .subckt")


def _once(known: Mapping[str, object], name: str, what: str, place: Place) -> None:
    if name in known:
        raise place.refuse(f'{what} "{shortened(name)}" is defined twice')


def _header(text: str, place: Place) -> Subcircuit:
    words, given = split_assignments(text, place)
    if len(words) < 2 or not all(_NAME.fullmatch(w) for w in words):
        raise place.refuse(".subckt needs a name and its pins")
    name, *pins = words
    if "0" in pins or "gnd" in pins:
        raise place.refuse(f'.subckt "{shortened(name)}": 0 and gnd are the ground of every circuit and no pins')
    if len(set(pins)) != len(pins):
        raise place.refuse(f'.subckt "{shortened(name)}" has two pins of one name')
    parameters = {key: (parse(value, place), place) for key, value in given.items()}
    return Subcircuit(parameters, name=name, place=place, pins=tuple(pins), formal=tuple(parameters))


def split_assignments(text: str, place: Place) -> tuple[list[str], dict[str, str]]:
    """Words, and what is assigned after them; `params:` between the two is left out.

    Raises
    ------
    ModelTextError
        If something is assigned twice.
    """
    first = _ASSIGNED.search(text)
    words = re.sub(r"\bparams\s*:", " ", text[: first.start()] if first else text).split()
    given = dict[str, str]()
    for key, value in assignments(text[first.start() :], place) if first else ():
        if key in given:
            raise place.refuse(f'"{shortened(key)}" is given twice')
        given[key] = value
    return words, given


def assignments(text: str, place: Place) -> Iterator[tuple[str, str]]:
    """Names and the text of what they are: from each `name =` to the next.

    Raises
    ------
    ModelTextError
        If something stands before the first one, or a value is missing.
    """
    found = list(_ASSIGNED.finditer(text))
    before = text[: found[0].start()] if found else text
    if before.strip(" \t,"):
        raise place.refuse(f"{shortened(before.strip())!r} is not understood; name = value is needed")
    for one, after in zip(found, [*found[1:], None], strict=True):
        value = text[one.end() : after.start() if after else len(text)].strip(" \t,")
        if not value:
            raise place.refuse(f'"{shortened(one[1])}" has no value')
        yield one[1], value


def _model(text: str, place: Place) -> ModelCard:
    found = re.fullmatch(r"(\S+)\s+([a-z0-9]+)\s*(.*)", text)
    if not found or not _NAME.fullmatch(found[1]):
        raise place.refuse(".model needs a name and a type, such as .model NAME D(IS=1e-12)")
    rest = found[3].strip()
    if rest.startswith("("):
        if not rest.endswith(")"):
            raise place.refuse(".model: a bracket is not closed")
        rest = rest[1:-1]
    elif rest.startswith(":"):
        raise place.refuse("a model made from another one (AKO:) is not read; write its parameters")
    flags, parameters = split_assignments(rest, place)
    return ModelCard(place, found[1], found[2], parameters, tuple(f.strip(",") for f in flags))


def _function(text: str, place: Place) -> tuple[str, Function]:
    found = re.fullmatch(r"([a-z_][a-z0-9_]*)\s*\(([^()]*)\)\s*=?\s*(.+)", text)
    if not found:
        raise place.refuse(".func needs a name, arguments and an expression, such as .func f(x) {2*x}")
    name, arguments = found[1], tuple(a.strip() for a in found[2].split(","))
    if name in KNOWN_FUNCTIONS or name in ("v", "i"):
        raise place.refuse(f'"{name}" is a function already')
    if not all(re.fullmatch(r"[a-z_][a-z0-9_]*", a) for a in arguments) or len(set(arguments)) != len(arguments):
        raise place.refuse(f'the arguments of "{shortened(name)}" have to be different names')
    return name, Function(arguments, parse(found[3], place))
