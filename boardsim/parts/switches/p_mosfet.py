"""A high-side P-MOSFET whose gate a level shifter pulls down from the rail, as the switch of a channel."""

from __future__ import annotations

from dataclasses import replace
from typing import Annotated, Any, ClassVar, Literal

from pydantic import BeforeValidator, Field

from boardsim.parts.base import Corner, Part, Stamp, any_of, named_part
from boardsim.parts.elements import Ammeter, Element, Resistor, current, plus, scaled, voltage
from boardsim.parts.mosfet_stamp import Place, mosfet_stamp
from boardsim.parts.nested import nested
from boardsim.parts.p_mosfet import PMosfet
from boardsim.parts.switches.n_mosfet import NMosfetStage
from boardsim.parts.switches.npn import NpnStage
from boardsim.parts.zener import Zener
from boardsim.quantities import POSITIVE_RESISTANCE, RESISTANCE, Quantity

_SHIFTER = "level shifter"


def _by_its_resistor(value: Any) -> Any:
    """A level shifter without a kind: one with a base resistor is a bipolar one."""
    if isinstance(value, dict) and "kind" not in value:
        return {"kind": "npn" if "base" in value else "n-mosfet", **value}
    return value


class PMosfetStage(Part):
    """Source at the rail, drain at the coil, whose other end lies at ground.

    Notes
    -----
    The level shifter's output pulls the gate down: with R_u from the rail to the node below it, R_s from there to the level
    shifter and a level shifter that is fully on, V_GS = V R_u / (R_u + R_s), which is the whole rail without R_s. Turned off, the
    gate is taken back by the pull-up alone: dv/dt = V_GS / ((R_u + R_g) C_iss) at the start, and over the plateau the Miller
    charge Q_gd at (V_GS / (R_u + R_g)) A. A Zener between source and gate takes what the level shifter pulls beyond its voltage.
    """

    role: ClassVar[str] = "switch"
    side: ClassVar[Literal["low", "high"]] = "high"
    kind: Literal["p-mosfet"] = "p-mosfet"
    part: named_part(PMosfet)  # type: ignore[valid-type]
    gate: Annotated[Quantity, RESISTANCE] = Field(description="in series with the gate")
    pullup: Annotated[Quantity, POSITIVE_RESISTANCE] = Field(
        description="from the rail to the gate network: keeps the switch off, and turns it off"
    )
    series: Annotated[Quantity, POSITIVE_RESISTANCE] | None = Field(
        None, description="from the pull-up to the level shifter: divides the rail, so that less of it lies on the gate"
    )
    shifter: Annotated[any_of([NMosfetStage, NpnStage]), BeforeValidator(_by_its_resistor)] = Field(  # type: ignore[valid-type]
        description="low-side transistor that the register drives, with its own gate or base network"
    )
    zener: named_part(Zener) | None = Field(None, description="between source and gate, cathode at the rail")  # type: ignore[valid-type]

    active: ClassVar[Literal["high", "low"]] = "high"
    """Output level that turns the coil on."""

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this stage: where the transistor breaks down, its on-resistance and its threshold."""
        part: PMosfet = self.part
        return {"breakdown": part.breakdown, "on_resistance": part.spread, "threshold": part.threshold}

    def steady_input(self, volts: float, resistance: float) -> float:
        """What the level shifter takes. [V], [ohm] -> [A]"""
        return float(self.shifter.steady_input(volts, resistance))

    def edge_input(self, volts: float, resistance: float) -> tuple[float, float]:
        """What the level shifter takes of an edge. [V], [ohm] -> [C], [A]"""
        charge, amperes = self.shifter.edge_input(volts, resistance)
        return charge, amperes

    def held_off(self) -> bool:
        """Whether the level shifter has a pull-down: the switch itself always has its pull-up, but follows the level shifter."""
        return bool(self.shifter.held_off())

    def follows_within(self) -> float:
        """Three times what the pull-up takes for the gate's charge: (R_u + R_g) (C_iss + Q_gd / V_th). [s]"""
        part: PMosfet = self.part
        farads = part.input_capacitance.max + part.gate_drain_charge.max / part.threshold.typ
        return 3 * (self.pullup.max + self.gate.max) * farads

    def control(self, name: str) -> str:
        """The gate."""
        return f"{name}_g"

    def stamp(self, name: str, pin: str, load: str, corner: Corner, rail: str = "") -> Stamp:
        """The stage between the register's node `pin` and the coil's node `load`."""
        gate, below = self.control(name), f"{name}_u"
        low = below if self.series is None else f"{name}_v"
        r_gate = max(self.gate.typ, 1e-2)
        network: list[Element] = [
            Resistor(f"{name}_gate", gate, below, r_gate),
            Resistor(f"{name}_pullup", rail, below, self.pullup.typ),
        ]
        if self.series is not None:
            network.append(Resistor(f"{name}_series", below, low, self.series.typ))
        out_of_gate = scaled(1 / r_gate, voltage(gate, below))
        inside: list[tuple[str, Stamp]] = []
        if self.zener is not None:
            meter = Ammeter(f"{name}_gz", rail, f"{name}_gzk")
            network.append(meter)
            zener = self.zener.stamp(f"{name}_gz", "gate Zener", f"{name}_gzk", gate, current(meter), corner)
            inside.append((self.zener.title or "gate Zener", zener))
            out_of_gate = plus(out_of_gate, scaled(-1.0, current(meter)))
        shifter = self.shifter.stamp(f"{name}_x", pin, low, corner, rail)
        inside.append((self.shifter.part.title or _SHIFTER, nested(shifter, _SHIFTER, "_shifter")))
        place = Place(
            load,
            gate,
            rail,
            gate_too_high="a series resistor that divides the rail, a gate Zener, or a gate rating that stands it",
            gate_too_low="a smaller series resistor, or a switch that is specified at this gate voltage",
        )
        found = mosfet_stamp(self.part, name, place, out_of_gate, corner)
        return replace(found, elements=(*found.elements, *network), inside=tuple(inside))
