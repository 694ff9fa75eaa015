"""Plain elements -> PySpice's circuit."""

from __future__ import annotations

from collections.abc import Iterable

from PySpice.Spice.ElementParameter import ModelPositionalParameter
from PySpice.Spice.Netlist import Circuit, FixedPinElement

from boardsim.parts.elements import (
    Ammeter,
    Bipolar,
    Capacitor,
    CurrentDrive,
    Drive,
    Element,
    Inductor,
    Junction,
    Model,
    PowerMosfet,
    Resistor,
    VoltageLaw,
)

TITLE = "boardsim deck"


class VerticalMosfet(FixedPinElement):  # type: ignore[misc]  # PySpice has no types
    """ngspice's VDMOS: an M line with three nodes; PySpice's own MOSFET insists on a bulk node."""

    PREFIX = "M"
    PINS = ("drain", "gate", "source")
    model = ModelPositionalParameter(position=0, key_parameter=True)


class Builder:
    """Collects elements; identical models are written once."""

    def __init__(self) -> None:
        self._circuit = Circuit(TITLE)
        self._models: dict[tuple[str, tuple[tuple[str, float], ...]], str] = {}

    def add(self, elements: Iterable[Element]) -> None:
        """Add elements to the netlist."""
        c = self._circuit
        for e in elements:
            match e:
                case Resistor():
                    c.R(e.name, e.a, e.b, e.ohms)
                case Inductor():
                    c.L(e.name, e.a, e.b, e.henries)
                case Capacitor():
                    c.C(e.name, e.a, e.b, e.farads)
                case Junction():
                    c.D(e.name, e.anode, e.cathode, model=self._model(e.model))
                case PowerMosfet():
                    VerticalMosfet(c, e.name, e.drain, e.gate, e.source, model=self._model(e.model))
                case Bipolar():
                    c.BJT(e.name, e.collector, e.base, e.emitter, model=self._model(e.model))
                case Ammeter():
                    c.V(e.name, e.a, e.b, 0)
                case Drive():
                    c.PieceWiseLinearVoltageSource(e.name, e.plus, e.minus, values=list(e.points))
                case CurrentDrive():
                    # An I source's current flows from its first node through it to the second.
                    c.PieceWiseLinearCurrentSource(e.name, e.minus, e.plus, values=list(e.points))
                case VoltageLaw():
                    c.BehavioralSource(e.name, e.plus, e.minus, voltage_expression=e.expression)

    def _model(self, model: Model) -> str:
        key = (model.type, tuple(sorted(model.parameters.items())))
        if key not in self._models:
            # A name that contains "vdmos" sends ngspice 39 into an endless loop while it reads the deck.
            self._models[key] = f"model{len(self._models)}"
            self._circuit.model(self._models[key], model.type, **model.parameters)
        return self._models[key]

    def netlist(self) -> str:
        """The text of elements and models."""
        return str(self._circuit)
