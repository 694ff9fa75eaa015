"""One output of a source array as a switch between the rail and a coil, and what the outputs of a package add up to."""

from __future__ import annotations

from typing import ClassVar, Literal

from boardsim.parts.array_stage import ArrayStage
from boardsim.parts.base import Corner, Stamp, Total, listed, named_part
from boardsim.parts.bipolar import breakdown_junction
from boardsim.parts.diode import EMISSION, junction_parameters
from boardsim.parts.elements import (
    GROUND,
    Ammeter,
    Junction,
    Model,
    Port,
    Probe,
    Signal,
    current,
    scaled,
    voltage,
)
from boardsim.parts.heat import junction_heat
from boardsim.parts.rules import BreakdownRule, DriveRule, Limit, MeanRule, PeakRule, Rule
from boardsim.parts.source_array import SourceArray
from boardsim.parts.temperature import in_celsius
from boardsim.quantities import VOLTAGE_DRIFT, assume

_LEAST_JUNCTION = 0.6  # [V] across a base that conducts, from memory
_DRIFT = assume("-2 mV/K", VOLTAGE_DRIFT, "forward voltage of a silicon junction against temperature, common practice")


class SourceStage(ArrayStage):
    """One output of the package: the register's output at its input, the rail at its supply pin, coils at its output.

    Notes
    -----
    The package's diode from ground to the output is stamped with it, since nobody can leave it out; `clamp = { kind =
    "built-in" }` says that it is meant to take the coil's current. Its forward voltage is that of `clamp_forward` at 25 degC, with
    -2 mV/K.
    """

    role: ClassVar[str] = "switch"
    side: ClassVar[Literal["low", "high"]] = "high"
    kind: Literal["source-array"] = "source-array"
    part: named_part(SourceArray)  # type: ignore[valid-type]

    junctions: ClassVar[float] = _LEAST_JUNCTION

    def clamped(self) -> bool:
        """Always: by the diode from ground in the package."""
        return True

    def stamp(self, name: str, pin: str, load: str, corner: Corner, rail: str = "") -> Stamp:
        """The source from node `rail` to the coil's node `load`, driven by the register's node `pin`."""
        part: SourceArray = self.part
        volts = corner.take(part.output_voltage, "breakdown")
        supply, inside = f"{name}_vs", f"{name}_o"
        feed, out = Ammeter(f"{name}_d", rail, supply), Ammeter(f"{name}_out", inside, load)
        diode = Ammeter(f"{name}_g", GROUND, f"{name}_a")
        fed, given, clamped = current(feed), current(out), current(diode)
        driven = scaled(1 / part.input_resistance.typ, voltage(pin, f"{name}_b0"))
        i_s, n, r_s = junction_parameters(part.clamp_forward, _DRIFT, EMISSION, corner.junction)
        figures = {"IS": i_s, "N": n, "RS": r_s, "CJO": part.clamp_capacitance, "TNOM": in_celsius(corner.junction)}
        holds = part.stored(2 * volts) + part.carriers()
        return Stamp(
            elements=(
                feed,
                out,
                diode,
                *part.source(name, pin, supply, inside),
                breakdown_junction(f"{name}_bv", supply, volts, farads=part.output_capacitance.typ, emitter=inside),
                Junction(f"{name}_cd", f"{name}_a", inside, Model(f"{name}_m", "D", figures)),
            ),
            # The house's names for voltage and current of a switch, whatever its kind: the current is that from the rail.
            probes=(
                Probe("v_ds", voltage(supply, inside), "V"),
                Probe("i_d", fed, "A"),
                Probe("v_in", voltage(pin), "V"),
                Probe("i_in", driven, "A"),
                Probe("v_supply", voltage(supply), "V"),
                Probe("v_out", voltage(inside), "V"),
                Probe("i_out", scaled(-1, given), "A"),
                Probe("v_array diode", scaled(-1, voltage(inside)), "V"),
                Probe("i_array diode", clamped, "A"),
                Probe("vr_array diode", voltage(inside), "V"),
            ),
            # What goes into the package at all of its pins; ground is the reference.
            ports=(Port("switch", (("v_supply", "i_d"), ("v_out", "i_out"), ("v_in", "i_in")), holds=holds),),
            rules=(*self._rules(volts), *self._diode_rules()),
            totals=self._totals(corner, fed),
            assumptions=(*part.assumed(), *listed("array diode", drift_of_the_forward_voltage=_DRIFT)),
        )

    def _rules(self, volts: float) -> tuple[Rule, ...]:
        part: SourceArray = self.part
        no_avalanche = Limit(None, "J", "energy", "", "avalanche energy")
        rating = Limit.of(part.output_current, "output current", "A", "current")
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
                "voltage from the supply to the output",
            ),
            DriveRule(
                "under-drive",
                "v_in",
                "i_d",
                part.needs(),
                Limit(None, "V", None, str(part.saturation[0].input.origin), "input voltage for the on-state"),
                "destroy",
                "input voltage of the switch",
                "a higher logic rail, or a switch that is specified at this input voltage",
            ),
            PeakRule(
                "overvoltage",
                "v_in",
                Limit.of(part.input_rating, "input voltage", "V", "voltage"),
                "destroy",
                "input voltage of the switch",
                "a resistor in the input",
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

    def _diode_rules(self) -> tuple[Rule, ...]:
        part: SourceArray = self.part
        rating = Limit.of(part.clamp_current, "clamp diode current", "A", "current")
        own = "a diode of its own beside the array"
        return (
            PeakRule("overcurrent", "i_array diode", rating, "destroy", "peak current of the array diode", own),
            MeanRule("overcurrent", ("i_array diode",), rating, "destroy", "average current of the array diode", own),
            PeakRule(
                "overvoltage",
                "vr_array diode",
                Limit.of(part.output_voltage, "output voltage", "V", "voltage", part.output_voltage.min),
                "destroy",
                "reverse voltage of the array diode",
                "an array of a higher voltage",
            ),
        )

    def _totals(self, corner: Corner, fed: Signal) -> tuple[Total, Total]:
        """What the outputs of one package add up to: the current of its supply pin, and its heat."""
        part: SourceArray = self.part
        return (
            Total(
                PeakRule(
                    "overcurrent",
                    "i_supply_pin",
                    Limit.of(part.total_current, "total supply current", "A", "current"),
                    "destroy",
                    "supply current of the package",
                    "fewer lines of one package at once, or spread them over more packages",
                ),
                fed,
                "A",
            ),
            Total(
                junction_heat(
                    part.title or "array",
                    "package",
                    (("v_supply", "i_d"), ("v_out", "i_out"), ("v_in", "i_in")),
                    part.thermal_resistance,
                    part.junction_rating,
                    corner.ambient,
                    "fire less often, or spread the channels over more packages",
                ),
            ),
        )
