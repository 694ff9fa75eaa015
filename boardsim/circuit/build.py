"""Plain elements -> PySpice's circuit."""

from __future__ import annotations

from collections.abc import Iterable

from PySpice.Spice.ElementParameter import ModelPositionalParameter
from PySpice.Spice.Netlist import Circuit, FixedPinElement

from boardsim.parts.elements import (
    GROUND,
    MODEL_FILE,
    ONE,
    Ammeter,
    AtRest,
    Bipolar,
    Capacitor,
    CurrentDrive,
    CurrentLaw,
    Drive,
    Element,
    FlipFlop,
    Gate,
    Inductor,
    Junction,
    Model,
    Mosfet,
    One,
    PowerMosfet,
    Resistor,
    ToAnalog,
    ToDigital,
    Transfer,
    VendorsPart,
    VoltageLaw,
)

TITLE = "boardsim deck"
_PYSPICE = {"l": "length", "w": "width", "ad": "drain_area", "as": "source_area", "pd": "drain_perimeter", "ps": "source_perimeter",
            "nrd": "drain_number_square", "nrs": "source_number_square"}  # fmt: skip
LEAST_DELAY = 1e-9  # [s], of every digital device of ngspice


class VerticalMosfet(FixedPinElement):  # type: ignore[misc]  # PySpice has no types
    """ngspice's VDMOS: an M line with three nodes; PySpice's own MOSFET insists on a bulk node."""

    PREFIX = "M"
    PINS = ("drain", "gate", "source")
    model = ModelPositionalParameter(position=0, key_parameter=True)


class Builder:
    """Collects elements; identical models are written once."""

    def __init__(self) -> None:
        self._circuit = Circuit(TITLE)
        self._models: dict[tuple[str, tuple[str, ...], tuple[tuple[str, float], ...]], str] = {}
        self._vendors: set[str] = set()
        self._has_one = False

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
                    c.D(e.name, e.anode, e.cathode, model=self._model(e.model), **_area(e.area))
                case PowerMosfet():
                    VerticalMosfet(c, e.name, e.drain, e.gate, e.source, model=self._model(e.model))
                case Bipolar():
                    c.BJT(e.name, e.collector, e.base, e.emitter, model=self._model(e.model), **_area(e.area))
                case Mosfet():
                    size = {_PYSPICE.get(k, k): v for k, v in e.size}
                    c.M(e.name, e.drain, e.gate, e.source, e.bulk, model=self._model(e.model), **size)
                case VendorsPart():
                    self._vendors_part(e)
                case Ammeter():
                    c.V(e.name, e.a, e.b, 0)
                case Drive():
                    c.PieceWiseLinearVoltageSource(e.name, e.plus, e.minus, values=list(e.points))
                case CurrentDrive():
                    # An I source's current flows from its first node through it to the second.
                    c.PieceWiseLinearCurrentSource(e.name, e.minus, e.plus, values=list(e.points))
                case CurrentLaw():
                    # A B source's current flows from its first node through it to the second.
                    c.BehavioralSource(e.name, e.minus, e.plus, current_expression=e.expression)
                case Transfer():
                    c.VCCS(e.name, e.minus, e.plus, e.a, e.b, transconductance=e.siemens)
                case One():
                    self._one()
                case AtRest():
                    c.raw_spice += f".ic v({e.node})={e.volts!r}\n"
                case VoltageLaw():
                    c.BehavioralSource(e.name, e.plus, e.minus, voltage_expression=e.expression)
                case ToDigital() | ToAnalog() | Gate() | FlipFlop():
                    self._digital(e)

    def _one(self) -> None:
        if not self._has_one:
            self._has_one = True
            self._circuit.V(ONE, ONE, GROUND, 1)

    def _vendors_part(self, e: VendorsPart) -> None:
        """What a vendor's model comes to; the deck names its file, which messages about a failed run then can."""
        if e.file not in self._vendors:
            self._vendors.add(e.file)
            self._circuit.raw_spice += f"* {MODEL_FILE} {e.file}\n"
        self.add(e.elements)

    def _digital(self, e: ToDigital | ToAnalog | Gate | FlipFlop) -> None:
        """ngspice's event-driven devices ("A" lines), which PySpice has no elements for: vectors of nodes in brackets."""
        match e:
            case ToDigital():
                values = {"in_low": 0.0, "in_high": 0.0, "rise_delay": e.delay, "fall_delay": e.delay}
                nodes, model = f"[{e.a}] [{e.out}]", Model(e.name, "adc_bridge", values)
            case ToAnalog():
                values = {"out_low": 0.0, "out_high": 1.0, "t_rise": e.edge, "t_fall": e.edge}
                nodes = f"[{' '.join(e.inputs)}] [{' '.join(e.outputs)}]"
                model = Model(e.name, "dac_bridge", values)
            case Gate():
                values = {"rise_delay": e.delay, "fall_delay": e.delay}
                into = e.inputs[0] if e.kind == "inverter" else f"[{' '.join(e.inputs)}]"
                nodes, model = f"{into} {e.out}", Model(e.name, f"d_{e.kind}", values)
            case FlipFlop():
                # The output's own delay of 1 ns adds to that from the clock edge.
                delay = max(e.delay - LEAST_DELAY, LEAST_DELAY)
                values = {"clk_delay": delay, "rise_delay": LEAST_DELAY, "fall_delay": LEAST_DELAY, "ic": int(e.start)}
                values |= {"set_delay": LEAST_DELAY, "reset_delay": LEAST_DELAY}
                nodes = f"{e.data} {e.clock} {e.set or 'null'} {e.reset or 'null'} {e.out} null"
                model = Model(e.name, "d_dff", values)
        self._circuit.raw_spice += f"a{e.name} {nodes} {self._model(model)}\n"

    def _model(self, model: Model) -> str:
        key = (model.type, model.flags, tuple(sorted(model.parameters.items())))
        if key not in self._models:
            # A name that contains "vdmos" sends ngspice 39 into an endless loop while it reads the deck.
            self._models[key] = f"model{len(self._models)}"
            if model.flags:  # PySpice writes every parameter with a value
                inside = " ".join((*model.flags, *(f"{name}={value!r}" for name, value in model.parameters.items())))
                self._circuit.raw_spice += f".model {self._models[key]} {model.type} ({inside})\n"
            else:
                self._circuit.model(self._models[key], model.type, **model.parameters)
        return self._models[key]

    def netlist(self) -> str:
        """The text of elements and models."""
        return str(self._circuit)


def _area(area: float) -> dict[str, float]:
    return {} if area == 1.0 else {"area": area}
