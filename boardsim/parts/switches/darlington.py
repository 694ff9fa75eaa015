"""One output of a sink array as the switch of a channel, and what the outputs of a package add up to."""

from __future__ import annotations

from typing import ClassVar, Literal

from boardsim.parts.array_stage import ArrayStage
from boardsim.parts.base import Corner, Stamp, Total, named_part
from boardsim.parts.bipolar import (
    breakdown_junction,
)
from boardsim.parts.darlington import DarlingtonArray
from boardsim.parts.elements import (
    Ammeter,
    Port,
    Probe,
    Signal,
    current,
    plus,
    scaled,
    voltage,
)
from boardsim.parts.heat import junction_heat
from boardsim.parts.rules import BreakdownRule, DriveRule, Limit, MeanRule, PeakRule, Rule

_SUBSTRATE = 1e-14  # [A], saturation current of the junction from the isolating substrate to the collector, from memory
_LEAST_JUNCTIONS = 1.2  # [V] across two bases that conduct, from memory


class DarlingtonStage(ArrayStage):
    """One output of the package: the register's output at its input, ground at its emitter, the coil at its collector."""

    role: ClassVar[str] = "switch"
    kind: Literal["darlington-array"] = "darlington-array"
    part: named_part(DarlingtonArray)  # type: ignore[valid-type]

    junctions: ClassVar[float] = _LEAST_JUNCTIONS

    def stamp(self, name: str, pin: str, load: str, corner: Corner, rail: str = "") -> Stamp:
        """The sink between the register's node `pin` and the coil's node `load`."""
        part: DarlingtonArray = self.part
        volts = corner.take(part.output_voltage, "breakdown")
        inside = f"{name}_ci"
        meter = Ammeter(f"{name}_d", load, inside)
        sunk, driven = current(meter), scaled(1 / part.input_resistance.typ, voltage(pin, f"{name}_b1"))
        holds = part.stored(volts)
        return Stamp(
            elements=(
                meter,
                *part.sink(name, pin, inside),
                breakdown_junction(f"{name}_bv", inside, volts, _SUBSTRATE, part.output_capacitance.typ),
            ),
            # The house's names for voltage and current of a switch, whatever its kind.
            probes=(
                Probe("v_ds", voltage(inside), "V"),
                Probe("i_d", sunk, "A"),
                Probe("v_in", voltage(pin), "V"),
                Probe("i_in", driven, "A"),
            ),
            ports=(Port("switch", (("v_ds", "i_d"), ("v_in", "i_in")), holds=holds),),
            rules=self._rules(volts),
            totals=self._totals(corner, plus(sunk, driven)),
            assumptions=part.assumed(),
        )

    def _rules(self, volts: float) -> tuple[Rule, ...]:
        part: DarlingtonArray = self.part
        no_avalanche = Limit(None, "J", "energy", "", "avalanche energy")
        rating = Limit.of(part.output_current, "output current", "A", "current")
        source = str(part.on_voltage[0].voltage.origin) if part.on_voltage else ""
        return (
            BreakdownRule(
                "overvoltage",
                "v_ds",
                "i_d",
                volts,
                Limit.of(part.output_voltage, "output voltage", "V", "voltage", part.output_voltage.min),
                Limit(None, "A", "current", "", "avalanche current"),
                no_avalanche,
                no_avalanche,
                "output voltage",
            ),
            DriveRule(
                "under-drive",
                "v_in",
                "i_d",
                part.needs() or ((0.0, 1.0),),  # without a need every current is above what is known
                Limit(None, "V", None, source, "input voltage for the on-state"),
                "destroy",
                "input voltage of the switch",
                "a higher logic rail, or a switch that is specified at this input voltage",
            ),
            PeakRule("overcurrent", "i_d", rating, "destroy", "peak current of the switch", "choose a larger switch"),
            MeanRule(
                "overcurrent",
                ("i_d",),
                rating,
                "destroy",
                "average current of the switch",
                "choose a larger switch, or fire less often",
            ),
        )

    def _totals(self, corner: Corner, to_ground: Signal) -> tuple[Total, Total]:
        """What the outputs of one package add up to: the current of its ground pin, and its heat."""
        part: DarlingtonArray = self.part
        return (
            Total(
                PeakRule(
                    "overcurrent",
                    "i_ground",
                    Limit.of(part.total_current, "total ground current", "A", "current"),
                    "destroy",
                    "ground current of the package",
                    "fewer channels of one package at once, or spread them over more packages",
                ),
                to_ground,
                "A",
            ),
            Total(
                junction_heat(
                    part.title or "array",
                    "package",
                    (("v_ds", "i_d"), ("v_in", "i_in")),
                    part.thermal_resistance,
                    part.junction_rating,
                    corner.ambient,
                    "fire less often, or spread the channels over more packages",
                ),
            ),
        )
