"""A low-side logic-level N-MOSFET and its gate network, as the switch of a channel."""

from __future__ import annotations

from dataclasses import replace
from typing import Annotated, ClassVar, Literal

from boardsim.parts.base import Corner, Part, Stamp, named_part
from boardsim.parts.elements import GROUND, Element, Resistor, plus, scaled, voltage
from boardsim.parts.linear import linear_rules
from boardsim.parts.mosfet import NMosfet
from boardsim.parts.mosfet_stamp import Place, mosfet_stamp
from boardsim.parts.rules import Rule
from boardsim.parts.vendor.model import typical
from boardsim.quantities import POSITIVE_RESISTANCE, RESISTANCE, Quantity


class NMosfetStage(Part):
    """The transistor with its gate resistor and pull-down; source at ground, drain at the coil."""

    role: ClassVar[str] = "switch"
    kind: Literal["n-mosfet"] = "n-mosfet"
    part: named_part(NMosfet)  # type: ignore[valid-type]
    gate: Annotated[Quantity, RESISTANCE]
    pulldown: Annotated[Quantity, POSITIVE_RESISTANCE] | None = None

    active: ClassVar[Literal["high", "low"]] = "high"
    """Output level that turns the coil on."""

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this stage: where the transistor breaks down, its on-resistance and its threshold."""
        part: NMosfet = self.part
        varied = {"breakdown": part.breakdown, "on_resistance": part.spread, "threshold": part.threshold}
        return {key: typical(q, part.model) for key, q in varied.items()}

    def steady_input(self, volts: float, resistance: float) -> float:
        """Through gate resistor and pull-down; a gate by itself takes none. [V], [ohm] -> [A]"""
        return 0.0 if self.pulldown is None else volts / (resistance + self.gate.min + self.pulldown.min)

    def edge_input(self, volts: float, resistance: float) -> tuple[float, float]:
        """The gate's charge, through the gate resistor. [V], [ohm] -> [C], [A]

        Notes
        -----
        Printed gate charge, in proportion where the gate goes higher than it was printed for; else C_iss V + Q_gd, the charge of
        the capacitances and of the plateau. The charge counts as a store that is empty at first: I_0 = V / R.
        """
        part: NMosfet = self.part
        given, at = part.gate_charge, part.charge_gate
        charge = part.input_capacitance.max * volts + part.gate_drain_charge.max
        if given is not None and at is not None:
            charge = given.max * max(volts / at.typ, 1.0)
        return charge, volts / (resistance + self.gate.min + part.gate_resistance.min)

    def held_off(self) -> bool:
        """Whether it has a pull-down."""
        return self.pulldown is not None

    def control(self, name: str) -> str:
        """The gate."""
        return f"{name}_g"

    def linear(self, corner: Corner) -> tuple[Rule, ...]:
        """Its safe area and its thermal impedance, as far as they are given."""
        part: NMosfet = self.part
        return linear_rules(
            part.safe_area, part.thermal_impedance, part.junction_rating, part.thermal_resistance, corner
        )

    def stamp(self, name: str, pin: str, load: str, corner: Corner, rail: str = "") -> Stamp:
        """The stage between the register's node `pin` and the coil's node `load`."""
        gate = self.control(name)
        r_gate = max(self.gate.typ, 1e-2)
        into_gate = scaled(1 / r_gate, voltage(pin, gate))
        network: list[Element] = [Resistor(f"{name}_gate", pin, gate, r_gate)]
        if self.pulldown is not None:
            network.append(Resistor(f"{name}_pulldown", gate, GROUND, self.pulldown.typ))
            into_gate = plus(into_gate, scaled(-1 / self.pulldown.typ, voltage(gate)))
        found = mosfet_stamp(self.part, name, Place(load, gate, GROUND), into_gate, corner)
        return replace(found, elements=(*found.elements, *network))
