"""A vendor's subcircuit at one temperature -> plain elements with numbers, and nodes and names of our own."""

from __future__ import annotations

import re
from collections import ChainMap
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field

from boardsim.parts.elements import (
    GROUND,
    Ammeter,
    Bipolar,
    Capacitor,
    CurrentDrive,
    CurrentLaw,
    Drive,
    Element,
    Inductor,
    Junction,
    Mosfet,
    PowerMosfet,
    Resistor,
    VoltageLaw,
)
from boardsim.parts.record import nearest, shortened
from boardsim.parts.vendor.cards import Definitions, Library, ModelCard, Subcircuit, split_assignments
from boardsim.parts.vendor.devices import MEASURED, TNOM, Worked, device_model, passive
from boardsim.parts.vendor.expressions import Function, Scope, Work, number_of, parse, resolved, volts, written
from boardsim.parts.vendor.text import Place, Statement, some_of

_DEEPEST = 8  # subcircuits within subcircuits
_MOST = 2000  # elements of one part
_MOST_LINES = 5000  # of all subcircuits, each as often as it is used: calls of empty ones make no element
_LONGEST_LAWS = 200_000  # characters of all laws of one part as they stand in a deck
SIDE = 1e-4  # [m], length and width of a MOSFET that names none, as in SPICE
_TOKEN = re.compile(r"\{[^{}]*\}|[^\s(),{}=]+")
_BY_LAW = re.compile(r"\s(value|table)\b")
_TEMPERATURE = {"tc1", "tc2", "tnom", *MEASURED}  # of a resistor's, capacitor's or inductor's model
_GROUNDS = ("0", "gnd")


@dataclass
class Flat:
    """What a part comes to.

    Attributes
    ----------
    elements : list of Element
    remarks : dict
        What is told about its models, each once, by the line of the model.
    lines, characters : int
        Lines that were worked through, and length of the laws so far.
    work : Work
        What its expressions took so far.
    """

    elements: list[Element] = field(default_factory=list)
    remarks: dict[str, None] = field(default_factory=dict)
    lines: int = 0
    characters: int = 0
    work: Work = field(default_factory=Work)


def flatten(library: Library, top: Subcircuit, name: str, pins: Mapping[str, str], celsius: float) -> Flat:
    """A subcircuit as plain elements.

    Parameters
    ----------
    library : Library
    top : Subcircuit
    name : str
        Prefix of every element and inner node.
    pins : mapping of the subcircuit's pins to nodes of the deck
    celsius : float
        Junction temperature, which TEMP and TEMPER in expressions are too. [degC]

    Raises
    ------
    ModelTextError
        If a line is not understood, or cannot be translated without a change of what it means.
    """
    found = Flat()
    _Instance(library, top, found, name, dict(pins), {}, celsius, 0).add()
    return found


def flat_model(card: ModelCard, library: Library, celsius: float) -> Worked:
    """A .model of its own at a temperature. [degC]

    Raises
    ------
    ModelTextError
        As `device_model` does.
    """
    values = _Values([library], {}, celsius, Work())
    return device_model(card, lambda e: number_of(e, values.scope(), card.place), celsius)


class _Values:
    """Parameters by name: what an instance is given, then its own, then the file's; worked out when asked for."""

    def __init__(self, levels: Sequence[Definitions], given: Mapping[str, float], celsius: float, work: Work):
        self.levels, self.known, self.celsius, self.work = levels, dict(given), celsius, work
        self.waiting: list[str] = []
        # The inner one's comes first; looked up, not copied, since a part may call its subcircuits thousands of times.
        self.functions: Mapping[str, Function] = ChainMap(*(level.functions for level in levels))

    def scope(self) -> Scope:
        return Scope(self.value, self.functions, self.work)

    def value(self, name: str) -> float | None:
        if name in self.known:
            return self.known[name]
        level = next((x for x in self.levels if name in x.parameters), None)
        if level is None:
            return self.celsius if name in ("temp", "temper") else None
        expression, place = level.parameters[name]
        if name in self.waiting or len(self.waiting) > 50:
            raise place.refuse(f'parameter "{shortened(name)}" hangs on itself, or on too many others')
        self.waiting.append(name)
        self.known[name] = number_of(expression, self.scope(), place)
        self.waiting.pop()
        return self.known[name]


class _Instance:
    def __init__(
        self,
        library: Library,
        circuit: Subcircuit,
        out: Flat,
        prefix: str,
        nodes: dict[str, str],
        given: Mapping[str, float],
        celsius: float,
        depth: int,
    ):
        self.library, self.circuit, self.out, self.prefix, self.nodes = library, circuit, out, prefix, nodes
        self.celsius, self.depth = celsius, depth
        self.values = _Values((circuit, library), given, celsius, out.work)
        self.connected: set[str] = set(nodes)
        self.probed: list[tuple[str, Place]] = []
        self.meters: dict[str, str] = {}
        self.place = circuit.place

    def add(self) -> None:
        """Every line of the subcircuit."""
        names: set[str] = set()
        for s in self.circuit.lines:
            own = s.text.split(maxsplit=1)[0]
            if own in names:
                raise s.place.refuse(f'element "{shortened(own)}" is there twice')
            names.add(own)
            if own.startswith("v"):
                self.meters[own] = f"{self.prefix}_{len(names)}v"
        for i, s in enumerate(self.circuit.lines, 1):
            self.place = s.place
            if len(self.out.elements) > _MOST:
                raise s.place.refuse(f"a part of more than {_MOST} elements is too large for a board of many")
            self.out.lines += 1
            if self.out.lines > _MOST_LINES:
                raise s.place.refuse(f"a part of more than {_MOST_LINES} lines, calls counted out, is no model")
            self.line(s, f"{self.prefix}_{i}")
        for node, place in self.probed:
            if node not in self.connected:
                raise place.refuse(f"V({shortened(node)}) reads a node that nothing is connected to")

    def line(self, s: Statement, name: str) -> None:
        text, letter = s.text, s.text[0]
        handler: Callable[[str, str], None] = {
            "r": self.passive,
            "c": self.passive,
            "l": self.passive,
            "d": self.diode,
            "q": self.bipolar,
            "m": self.mosfet,
            "v": self.source,
            "i": self.source,
            "e": self.controlled,
            "g": self.controlled,
            "f": self.mirrored,
            "h": self.mirrored,
            "b": self.law,
            "x": self.inner,
        }[letter]
        handler(text, name)

    # ----------------------------------------------------------------------------------------------------- what lines hold

    def node(self, name: str) -> str:
        """The deck's node, which the name is connected to from now on."""
        self.connected.add(name)
        return self.found(name)

    def found(self, name: str) -> str:
        if name in _GROUNDS:
            self.connected.add(name)
            return GROUND
        if name not in self.nodes:
            self.nodes[name] = f"{self.prefix}_n{len(self.nodes)}"
        return self.nodes[name]

    def read(self, name: str) -> str:
        """The deck's node of a voltage in an expression."""
        self.probed.append((name, self.place))
        return self.found(name)

    def meter(self, name: str) -> str:
        """The deck's voltage source whose current is meant."""
        if name not in self.meters:
            raise self.place.refuse(
                f"I({shortened(name)}): currents are read from voltage sources of the same subcircuit only; it has: "
                f"{some_of(sorted(self.meters))}"
            )
        return f"V{self.meters[name]}"

    def number(self, text: str) -> float:
        return number_of(parse(text, self.place), self.values.scope(), self.place)

    def written(self, text: str) -> str:
        expression = resolved(parse(text, self.place), self.values.scope(), self.place)
        law = written(expression, self.read, self.meter, self.place)
        self.out.characters += len(law)
        if self.out.characters > _LONGEST_LAWS:
            raise self.place.refuse(f"laws of more than {_LONGEST_LAWS} characters together are too long for a deck")
        return law

    def words(self, text: str, allowed: Sequence[str], least: int, most: int) -> tuple[list[str], dict[str, str]]:
        """Words after the element's own name, and what is assigned."""
        head, given = split_assignments(text, self.place)
        words = _TOKEN.findall(" ".join(head))[1:]
        for key in given:
            if key not in allowed:
                raise self.place.refuse(
                    f'"{shortened(key)}" of {shortened(text.split()[0])!r} is not translated; known here: {", ".join(allowed) or "nothing"}'
                )
        if not least <= len(words) <= most:
            raise self.place.refuse(
                f"{shortened(text)!r} has {len(words)} words after its name, and {least} to {most} are understood"
            )
        return words, given

    def card(self, name: str) -> ModelCard:
        for level in (self.circuit, self.library):
            if name in level.models:
                return level.models[name]
        known = [*self.circuit.models, *self.library.models]
        raise self.place.refuse(
            f'model "{shortened(name)}" is not defined in this file{nearest(name, known)}; defined: {some_of(known)}'
        )

    def worked(self, name: str, *devices: str) -> Worked:
        card = self.card(name)
        if card.device not in devices:
            raise self.place.refuse(
                f'model "{shortened(name)}" is of type {card.device.upper()}, and {" or ".join(devices).upper()} is needed'
            )
        found = device_model(card, lambda e: number_of(e, self.values.scope(), card.place), self.celsius)
        self.out.remarks.update({f"{card.place}: {r}": None for r in found.remarks})
        return found

    def put(self, *elements: Element) -> None:
        self.out.elements += elements

    # ------------------------------------------------------------------------------------------------------------- elements

    def passive(self, text: str, name: str) -> None:
        letter = text[0]
        words, given = self.words(text, (letter, "tc", "tc1", "tc2", *(() if letter == "r" else ("rser",))), 2, 4)
        a, b, *rest = words
        models = [w for w in rest if w in self.circuit.models or w in self.library.models]
        values = [w for w in rest if w not in models] + ([given[letter]] if letter in given else [])
        if len(values) != 1 or len(models) > 1:
            raise self.place.refuse(f"{shortened(text)!r} needs two nodes and one value")
        size = self.number(values[0]) * self.growth(given)
        if models:
            card = self.card(models[0])
            if card.device != {"r": "res", "c": "cap", "l": "ind"}[letter]:
                raise self.place.refuse(
                    f'model "{shortened(models[0])}" is of type {card.device.upper()}, which does not fit here'
                )
            if given.keys() & {"tc", "tc1", "tc2"} and card.parameters.keys() & _TEMPERATURE:
                raise self.place.refuse(
                    f'{shortened(text)!r} has temperature coefficients beside those of its model "{shortened(models[0])}"; programs '
                    "differ about which count, and from what temperature: give them in one of the two places"
                )
            size *= passive(card, lambda e: number_of(e, self.values.scope(), card.place), self.celsius)
        if size < 0:
            raise self.place.refuse(f"{shortened(text)!r} comes to {size:g}; no part has less than nothing")
        first, last = self.node(a), self.node(b)
        series = self.number(given["rser"]) if "rser" in given else 0.0
        if series < 0:
            raise self.place.refuse(f"rser comes to {series:g}; no part has less than nothing")
        if series and size:
            self.put(Resistor(f"{name}s", first, f"{name}_s", series))
            first = f"{name}_s"
        if size == 0 and letter == "l":
            self.put(Resistor(f"{name}s", first, last, series) if series else Ammeter(name, first, last))
        elif size == 0 and letter == "r":
            self.put(Ammeter(name, first, last))  # ngspice would make a milliohm of it
        elif letter == "r":
            self.put(Resistor(name, first, last, size))
        elif letter == "l":
            self.put(Inductor(name, first, last, size))
        elif size:
            self.put(Capacitor(name, first, last, size))

    def growth(self, given: Mapping[str, str]) -> float:
        """1 + TC1 dT + TC2 dT^2 from 27 degC: SPICE's nominal temperature, which only .options could change. [1]"""
        both = [self.number(t) for t in re.split(r"[\s,]+", given["tc"])] if "tc" in given else []
        if len(both) > 2 or (both and ("tc1" in given or "tc2" in given)):
            raise self.place.refuse("tc takes one or two numbers, and tc1 and tc2 in its place")
        first, second = [*both, 0.0, 0.0][:2]
        first += self.number(given["tc1"]) if "tc1" in given else 0.0
        second += self.number(given["tc2"]) if "tc2" in given else 0.0
        shift = self.celsius - TNOM
        return 1 + first * shift + second * shift**2

    def area(self, words: list[str], given: Mapping[str, str]) -> float:
        texts = [*words, *([given["area"]] if "area" in given else [])]
        if len(texts) > 1:
            raise self.place.refuse("an area is given twice")
        size = self.number(texts[0]) if texts else 1.0
        if size <= 0:
            raise self.place.refuse(f"an area of {size:g} is none")
        return size

    def diode(self, text: str, name: str) -> None:
        (a, k, model, *rest), given = self.words(text, ("area",), 3, 4)
        found = self.worked(model, "d").model
        self.put(Junction(name, self.node(a), self.node(k), found, self.area(rest, given)))

    def bipolar(self, text: str, name: str) -> None:
        words, given = self.words(text, ("area",), 4, 6)
        models = [
            i for i in (3, 4) if i < len(words) and (words[i] in self.circuit.models or words[i] in self.library.models)
        ]
        at = models[0] if models else 3
        model = self.worked(words[at], "npn", "pnp").model
        if at == 4 and (model.parameters.get("CJS") or model.parameters.get("ISS")):
            raise self.place.refuse("a substrate that takes current is not translated; leave out CJS and ISS")
        c, b, e = (self.node(n) for n in words[:3])
        self.put(Bipolar(name, c, b, e, model, self.area(words[at + 1 :], given)))

    def mosfet(self, text: str, name: str) -> None:
        sizes = ("l", "w", "ad", "as", "pd", "ps", "nrd", "nrs")
        words, given = self.words(text, sizes, 4, 5)
        *nodes, model = words
        found = self.worked(model, "vdmos", "nmos", "pmos")
        ends = [self.node(n) for n in nodes]
        if found.model.type == "VDMOS":
            if given:
                raise self.place.refuse("a VDMOS has no length and width")
            if len(ends) == 4 and ends[3] != ends[2]:
                raise self.place.refuse("the bulk of a VDMOS is its source; name the same node for both")
            self.put(PowerMosfet(name, ends[0], ends[1], ends[2], found.model))
            return
        if len(ends) != 4:
            raise self.place.refuse("a MOSFET of this level has drain, gate, source and bulk")
        size = {"l": SIDE, "w": SIDE, **dict(found.size), **{k: self.number(t) for k, t in given.items()}}
        if size["l"] <= 0 or size["w"] <= 0:
            raise self.place.refuse("length and width have to be above nothing")
        if below := [key.upper() for key, value in size.items() if value < 0]:
            raise self.place.refuse(f"{', '.join(below)} below nothing; no part has less")
        self.put(Mosfet(name, ends[0], ends[1], ends[2], ends[3], found.model, tuple(size.items())))

    def source(self, text: str, name: str) -> None:
        words, _ = self.words(text, (), 2, 4)
        a, b, *rest = words
        rest = rest[1:] if rest[:1] == ["dc"] else rest
        if len(rest) > 1:
            raise self.place.refuse(f"{shortened(text)!r}: a source of a part can be constant only")
        value = self.number(rest[0]) if rest else 0.0
        plus, minus, steady = self.node(a), self.node(b), ((0.0, value), (1.0, value))
        if text[0] == "i":
            # SPICE counts the current from the first node through the source to the second, where it comes out.
            self.put(CurrentDrive(name, minus, plus, steady))
        else:
            own = self.meters[text.split(maxsplit=1)[0]]
            self.put(Drive(own, plus, minus, steady) if value else Ammeter(own, plus, minus))

    def controlled(self, text: str, name: str) -> None:
        word = _BY_LAW.search(text)
        head, rest = (text[: word.start()], text[word.end() :]) if word else (text, "")
        law = re.fullmatch(r"\s*=?\s*(\{[^{}]*\}|[^{}]+)", rest) if word and word[1] == "value" else None
        table = re.fullmatch(r"\s*(\{[^{}]*\})\s*=?\s*([^{}=]+)", rest) if word and word[1] == "table" else None
        if law:
            (a, b), _ = self.words(head, (), 2, 2)
            self.driven(text[0], name, a, b, self.written(law[1]))
        elif table:
            (a, b), _ = self.words(head, (), 2, 2)
            points = ", ".join(_TOKEN.findall(table[2]))
            self.driven(text[0], name, a, b, self.written(f"table({table[1][1:-1]}, {points})"))
        else:
            self.refuse_special(text)
            (a, b, c, d, gain), _ = self.words(text, (), 5, 5)
            law_text = f"({self.number(gain)!r}) * {volts(self.read(c), self.read(d))}"
            self.driven(text[0], name, a, b, law_text)

    def refuse_special(self, text: str) -> None:
        for word in ("poly", "laplace", "freq", "chebyshev", "table", "pwl", "vcvs", "vccs", "delay"):
            if re.search(rf"\b{word}\b", text):
                raise self.place.refuse(
                    f"{word.upper()} is not translated; write VALUE = {{ ... }} of the voltages that are meant"
                )

    def driven(self, letter: str, name: str, a: str, b: str, law: str) -> None:
        """A voltage (E, H, B with V) or a current (G, F, B with I) by a law, from the first node through it to the second."""
        plus, minus = self.node(a), self.node(b)
        if letter in "eh":
            self.put(VoltageLaw(name, plus, minus, law))
        else:
            self.put(CurrentLaw(name, minus, plus, law))

    def mirrored(self, text: str, name: str) -> None:
        self.refuse_special(text)
        (a, b, source, gain), _ = self.words(text, (), 4, 4)
        self.driven(text[0], name, a, b, f"({self.number(gain)!r}) * i({self.meter(source)})")

    def law(self, text: str, name: str) -> None:
        found = re.fullmatch(r"\S+\s+(\S+)\s+(\S+)\s+([vi])\s*=(?!=)\s*(.+)", text)
        if not found:
            raise self.place.refuse(f"{shortened(text)!r}: two nodes and V = ... or I = ... are understood")
        self.driven("e" if found[3] == "v" else "g", name, found[1], found[2], self.written(found[4]))

    def inner(self, text: str, name: str) -> None:
        head, given = split_assignments(text, self.place)
        words = _TOKEN.findall(" ".join(head))[1:]
        if len(words) < 2:
            raise self.place.refuse(f"{shortened(text)!r} needs nodes and a subcircuit")
        *nodes, which = words
        circuit = self.library.subcircuits.get(which)
        if circuit is None:
            known = list(self.library.subcircuits)
            raise self.place.refuse(
                f'subcircuit "{shortened(which)}" is not defined in this file{nearest(which, known)}'
            )
        if len(nodes) != len(circuit.pins):
            raise self.place.refuse(f'"{shortened(which)}" has {len(circuit.pins)} pins; found {len(nodes)} nodes')
        if self.depth >= _DEEPEST:
            raise self.place.refuse(f"subcircuits nest more than {_DEEPEST} levels deep")
        if unknown := [k for k in given if k not in circuit.formal]:
            raise self.place.refuse(
                f'"{shortened(unknown[0])}" is no parameter of "{shortened(which)}"{nearest(unknown[0], list(circuit.formal))}'
            )
        values = {k: self.number(t) for k, t in given.items()}
        ends = dict(zip(circuit.pins, (self.node(n) for n in nodes), strict=True))
        _Instance(self.library, circuit, self.out, name, ends, values, self.celsius, self.depth + 1).add()
