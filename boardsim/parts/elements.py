"""Plain circuit elements, the signals that are read from them, and the ports that the audit sums. Values only."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any, Literal


@dataclass(frozen=True)
class Resistor:
    """Between two nodes. [ohm]"""

    name: str
    a: str
    b: str
    ohms: float


@dataclass(frozen=True)
class Inductor:
    """Between two nodes; its current flows from a to b inside. [H]"""

    name: str
    a: str
    b: str
    henries: float


@dataclass(frozen=True)
class Capacitor:
    """Between two nodes. [F]"""

    name: str
    a: str
    b: str
    farads: float


@dataclass(frozen=True)
class Model:
    """A .model line: device type, parameters in SI units, and flags that stand without a value; ngspice's own names."""

    name: str
    type: str
    parameters: Mapping[str, float]
    flags: tuple[str, ...] = ()


@dataclass(frozen=True)
class Junction:
    """A diode between anode and cathode."""

    name: str
    anode: str
    cathode: str
    model: Model
    area: float = 1.0


@dataclass(frozen=True)
class PowerMosfet:
    """A vertical MOSFET (ngspice VDMOS)."""

    name: str
    drain: str
    gate: str
    source: str
    model: Model


@dataclass(frozen=True)
class Bipolar:
    """A bipolar transistor (ngspice's Gummel-Poon model)."""

    name: str
    collector: str
    base: str
    emitter: str
    model: Model
    area: float = 1.0


@dataclass(frozen=True)
class Mosfet:
    """A MOSFET with a bulk (ngspice's levels 1 and 3); `size` holds L, W [m] and what else SPICE gives one."""

    name: str
    drain: str
    gate: str
    source: str
    bulk: str
    model: Model
    size: tuple[tuple[str, float], ...]


@dataclass(frozen=True)
class Ammeter:
    """A source of 0 V; the current through it counts from a to b."""

    name: str
    a: str
    b: str


@dataclass(frozen=True)
class Drive:
    """A voltage source that follows a register output: times [s] and levels [V], straight lines between."""

    name: str
    plus: str
    minus: str
    points: tuple[tuple[float, float], ...]


@dataclass(frozen=True)
class CurrentDrive:
    """A current that comes out of `plus` and goes back into `minus`: times [s] and currents [A], straight lines between."""

    name: str
    plus: str
    minus: str
    points: tuple[tuple[float, float], ...]


@dataclass(frozen=True)
class CurrentLaw:
    """A current from minus to plus through the source, given by an expression of node voltages. [A]"""

    name: str
    plus: str
    minus: str
    expression: str


@dataclass(frozen=True)
class Transfer:
    """A current from minus to plus through the source, in proportion to the voltage from a to b. [S]

    A law that is a straight line: ngspice works it out several times faster than an expression.
    """

    name: str
    plus: str
    minus: str
    a: str
    b: str
    siemens: float


@dataclass(frozen=True)
class AtRest:
    """The voltage of a node before anything happens, where it is known beforehand. [V]

    ngspice chooses its pivots at direct current, where an integrator has no diagonal element to speak of, and keeps them: without this
    they are the wrong ones for a step of picoseconds.
    """

    node: str
    volts: float


@dataclass(frozen=True)
class One:
    """A node named `ONE` at 1 V, however often it is asked for: what signals that begin elsewhere than at zero add."""


@dataclass(frozen=True)
class VoltageLaw:
    """A voltage from plus to minus, given by an expression of node voltages and of currents of ammeters. [V]"""

    name: str
    plus: str
    minus: str
    expression: str


@dataclass(frozen=True)
class ToDigital:
    """A comparator: digital node `out` is one while node `a` is above 0 V, and follows it after `delay`. [s]"""

    name: str
    a: str
    out: str
    delay: float


@dataclass(frozen=True)
class ToAnalog:
    """Digital nodes as voltages of 0 V and 1 V, that take `edge` from one to the other. [s]"""

    name: str
    inputs: tuple[str, ...]
    outputs: tuple[str, ...]
    edge: float


@dataclass(frozen=True)
class Gate:
    """A digital gate: one where all inputs ("and") or any of them ("or") is one, or where its input is none ("inverter")."""

    name: str
    kind: Literal["and", "or", "inverter"]
    inputs: tuple[str, ...]
    out: str
    delay: float


@dataclass(frozen=True)
class FlipFlop:
    """A D flip-flop on the rising edge of its clock; all nodes digital, `set` and `reset` active at one, "" where it has none.

    `delay` counts from the clock edge to the output [s]; `start` is what it holds at first.
    """

    name: str
    data: str
    clock: str
    set: str
    reset: str
    out: str
    delay: float
    start: bool


@dataclass(frozen=True)
class VendorsPart:
    """A part whose model a vendor wrote: the plain elements that it comes to, and the file, for messages and decks."""

    name: str
    file: str
    elements: tuple[Element, ...]


Element = (
    Resistor
    | Inductor
    | Capacitor
    | Junction
    | PowerMosfet
    | Bipolar
    | Mosfet
    | VendorsPart
    | Ammeter
    | Drive
    | CurrentDrive
    | CurrentLaw
    | Transfer
    | AtRest
    | One
    | VoltageLaw
    | ToDigital
    | ToAnalog
    | Gate
    | FlipFlop
)

Signal = tuple[tuple[float, str], ...]
"""A linear combination of saved vectors: ((coefficient, "v(node)" or "i(element)"), ...)."""

GROUND = "0"
ONE = "one"
MODEL_FILE = "with a vendor's model read from"  # in a comment of a deck, before the name of the file


def voltage(a: str, b: str = GROUND) -> Signal:
    """The voltage from node a to node b. [V]"""
    return tuple((sign, f"v({node})") for sign, node in ((1.0, a), (-1.0, b)) if node != GROUND)


def current(element: Inductor | Ammeter | Drive) -> Signal:
    """The current through an element that has a branch of its own, from a (plus) to b. [A]"""
    return ((1.0, f"i({_PREFIX[type(element)]}{element.name})"),)


_PREFIX = {Inductor: "l", Ammeter: "v", Drive: "v"}


def scaled(factor: float, signal: Signal) -> Signal:
    """A signal times a number."""
    return tuple((factor * k, name) for k, name in signal)


def plus(*signals: Signal) -> Signal:
    """The sum of signals."""
    total: dict[str, float] = {}
    for signal in signals:
        for k, name in signal:
            total[name] = total.get(name, 0.0) + k
    return tuple((k, name) for name, k in total.items())


@dataclass(frozen=True)
class Probe:
    """A quantity of a part that is read from the waveforms, such as v_ds [V] or i_coil [A]."""

    quantity: str
    signal: Signal
    unit: str


@dataclass(frozen=True)
class Stored:
    """What a part stores, as a law of quantities that are read from it: arrays of the same length in, an array out. [J]"""

    quantities: tuple[str, ...]
    law: Callable[..., Any]


@dataclass(frozen=True)
class Port:
    """What the passivity audit sums for one part: pairs of voltage and current probes, current into the part.

    Attributes
    ----------
    part : str
        Name for messages.
    pairs : tuple of (voltage, current) quantity names
        Terminal power is the sum of their products. [W]
    holds : float
        Energy that the part's own capacitances can hold and return. [J]
    energy : Stored or None
        How much it stores, for a part whose store is not of that form. [J]
    store : tuple or None
        (quantity, value): the part stores value/2 x quantity^2 (L with its current, C with its voltage); the
        energy that it has dissipated, not the terminal energy, must then never fall.
    from_rest : bool
        Count voltages from their first value. A capacitor on a rail is as passive about its resting voltage as
        about 0 V, and rounding errors of its charge do not then count at the full rail voltage.
    """

    part: str
    pairs: tuple[tuple[str, str], ...]
    holds: float = 0.0
    store: tuple[str, float] | None = None
    from_rest: bool = False
    energy: Stored | None = None
