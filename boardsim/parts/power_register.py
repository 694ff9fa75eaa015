"""A shift register whose outputs are the switches: open-drain DMOS transistors with a clamp of their own, in one package."""

from __future__ import annotations

import math
from typing import Annotated, ClassVar, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import T_MODEL, Assumption, Stamp, listed
from boardsim.parts.elements import GROUND, Capacitor, CurrentLaw, Drive, Element, VoltageLaw
from boardsim.parts.power_proofs import power_proofs
from boardsim.parts.power_switching import GateShape, OutputSwitching, gate_shape
from boardsim.parts.proof import Proof
from boardsim.parts.record import Record
from boardsim.parts.register import Register
from boardsim.parts.temperature import LeakagePoint, grown, refuse_drift, reverse_current
from boardsim.quantities import (
    CAPACITANCE,
    CURRENT,
    ENERGY,
    GROWTH,
    POSITIVE_RESISTANCE,
    POSITIVE_TIME,
    TEMPERATURE,
    THERMAL_RESISTANCE,
    VOLTAGE,
    VOLTAGE_DRIFT,
    Quantity,
    assume,
    celsius,
    computed,
)

_GATE = 1e-9  # [F], any: with a conductance it makes the gate's time constants
_STEP = 10e-9  # [s], of the bit behind a gate; short against every output's delay
LIMIT_BEND = 8  # power of the bend into the current limit: within 1 % of no limit up to 70 % of it


class DrainResistance(Record):
    """A typical on-resistance, its highest where that is printed, and what it is measured at."""

    value: Annotated[Quantity, POSITIVE_RESISTANCE]
    highest: Annotated[Quantity, POSITIVE_RESISTANCE] | None = None
    current: Annotated[Quantity, CURRENT]
    rail: Annotated[Quantity, VOLTAGE] | None = Field(None, description="logic rail; supply_low if not given")
    at: Annotated[Quantity, TEMPERATURE] | None = Field(None, description="junction; 25 degC if not given")

    @property
    def kelvin(self) -> float:
        """25 degC if none was given. [K]"""
        return T_MODEL if self.at is None else self.at.typ


class PowerRegister(Register):
    """Outputs that sink a coil's current each, and clamp it when they turn off. Typical figures shape the model; ratings judge it.

    Notes
    -----
    An output that is on conducts I = u I_0(v), bent into its current limit, with v = (R_0 + R_1 I_0) I_0 through the on-resistances
    printed at 25 degC. u is 1 at the lowest printed logic rail, and follows its bit through a gate (`gate_shape`). On-resistance
    grows with the junction's temperature, R (1 + a)^(t - 25 degC), and the limit falls as it grows (both are the channel's
    mobility, from memory). A junction to ground breaks down at the clamp voltage: a sharp clamp, as a Zener from drain to gate makes
    the transistor, whatever the sheet calls it. Without logic rail, or with output enable high, outputs are off; they never float.
    Between printed logic rails conductances lie on straight lines, beyond them they stay. Ignores heat between the outputs of
    a package within a pulse, and the resistance of the ground pins that they share.
    """

    role: ClassVar[str] = "register"
    kind: Literal["power-shift-register"] = "power-shift-register"
    open_drain: ClassVar[bool] = True
    serial_resistance: Annotated[Quantity, POSITIVE_RESISTANCE] = Field(
        description="of the serial output, which drives the next register"
    )
    on_resistance: Annotated[tuple[DrainResistance, ...], Field(min_length=1)]
    on_resistance_growth: Annotated[Quantity, GROWTH] | None = Field(
        None, description="per kelvin, compounded; or give on_resistance at another temperature"
    )
    current_limit: Annotated[Quantity, CURRENT] | None = Field(
        None, description="to which an output limits its own current; none if it does not"
    )
    clamp_voltage: Annotated[Quantity, VOLTAGE] = Field(description="where an output that is off begins to conduct")
    clamp_test_current: Annotated[Quantity, CURRENT] = assume(
        "1 mA", CURRENT, "at which data sheets of this class print the clamp voltage, TI SLIS032A, from memory"
    )
    clamp_drift: Annotated[Quantity, VOLTAGE_DRIFT] | None = Field(None, description="of the clamp with temperature")
    output_current: Annotated[Quantity, CURRENT] | None = Field(
        None, description="continuous, of one output while the others carry it too"
    )
    pulse_current: Annotated[Quantity, CURRENT] | None = Field(None, description="of one output, in a short pulse")
    pulse_lasting: Annotated[Quantity, POSITIVE_TIME] = assume(
        "100 us",
        POSITIVE_TIME,
        "pulses that pulsed drain currents of this class are rated for, TI SLIS032A, from memory",
    )
    total_current: Annotated[Quantity, CURRENT] | None = Field(
        None, description="of all outputs of one package together, continuous"
    )
    total_pulse_current: Annotated[Quantity, CURRENT] | None = Field(
        None,
        description="of all outputs of one package together, in a pulse of pulse_lasting; total_current if not given",
    )
    avalanche_current: Annotated[Quantity, CURRENT] | None = Field(None, description="into the clamp of one output")
    avalanche_energy: Annotated[Quantity, ENERGY] | None = Field(
        None, description="of a single pulse into the clamp of one output, the others idle"
    )
    avalanche_from: Annotated[Quantity, TEMPERATURE] = assume(
        "25 degC", TEMPERATURE, "junction from which single-pulse energies are rated, common practice"
    )
    avalanche_repetitive: Annotated[Quantity, ENERGY] | None = Field(
        None, description="of each of many pulses into the clamp of one output"
    )
    avalanche_package: Annotated[Quantity, ENERGY] | None = Field(
        None, description="into the clamps of all outputs of one package together, at one time"
    )
    chip_cools_in: Annotated[Quantity, POSITIVE_TIME] = assume(
        "50 ms",
        POSITIVE_TIME,
        "in which the heat of a clamp leaves the chip: 5 mJ/K of 3 by 2.5 by 0.4 mm of silicon times 10 K/W into the frame of the "
        "package, from memory; clamp energies within it add up",
    )
    leakage: tuple[LeakagePoint, ...] = Field(
        (), description="off-state drain current near the clamp voltage, at one or two temperatures"
    )
    output_capacitance: Annotated[Quantity, CAPACITANCE] = assume(
        "100 pF", CAPACITANCE, "of an output at 0 V, a DMOS transistor of some ohms with its pin, from memory"
    )
    gate_capacitance: Annotated[Quantity, CAPACITANCE] = assume(
        "50 pF", CAPACITANCE, "of the gate inside, a DMOS transistor of some ohms, from memory"
    )
    switching: OutputSwitching = OutputSwitching()
    thermal_resistance: Annotated[Quantity, THERMAL_RESISTANCE] | None = None
    junction_rating: Annotated[Quantity, TEMPERATURE] | None = None

    @model_validator(mode="after")
    def _coherent(self) -> PowerRegister:
        if not self._cold:
            raise QuantityError(
                'on_resistance needs a point at 25 degC (without "at") and its lowest rail; list it before those elsewhere'
            )
        for p in self.on_resistance:
            if p.kelvin != T_MODEL and self._beside(p) is None:
                raise QuantityError(
                    f'on_resistance at {celsius(p.kelvin)} needs one at 25 degC (without "at") with the same current and rail'
                )
        if any(p.kelvin != T_MODEL for p in self.on_resistance):
            if self.on_resistance_growth is not None:
                raise QuantityError("give on_resistance at another temperature or on_resistance_growth, not both")
            if self.growth.typ < 0:
                raise QuantityError("on_resistance has to rise with temperature, and its points at another one fall")
        if self.current_limit is not None and self.current_limit.typ <= max(p.current.typ for p in self.on_resistance):
            raise QuantityError(f"current_limit of {self.current_limit} is not above the currents of on_resistance")
        if self.leakage:
            reverse_current(self.leakages(), T_MODEL)
        refuse_drift("clamp_drift", self.drift_of_clamp.typ, self.clamp_voltage.typ)
        top = self.junction_rating
        if top is not None and self.avalanche_energy is not None and top.min <= self.avalanche_from.max:
            raise QuantityError(
                f"junction_rating of {celsius(top.min)} is not above avalanche_from, {celsius(self.avalanche_from.max)}: a junction that "
                "begins at its rating stands no clamp energy at all; datasheets rate it from 25 degC, and print 150 degC for the junction"
            )
        self.gate  # noqa: B018  # says what is wrong with the times
        return self

    def _rail(self, point: DrainResistance) -> float:
        return (point.rail or self.supply_low).typ

    @property
    def _cold(self) -> tuple[DrainResistance, ...]:
        """Points at 25 degC and the lowest printed rail, by current."""
        lowest = min(map(self._rail, self.on_resistance))
        found = [p for p in self.on_resistance if p.kelvin == T_MODEL and self._rail(p) == lowest]
        return tuple(sorted(found, key=lambda p: p.current.typ))

    def _beside(self, point: DrainResistance) -> DrainResistance | None:
        """The point at 25 degC that one at another temperature is compared with."""
        for p in self.on_resistance:
            if p.kelvin == T_MODEL and p.current.typ == point.current.typ and self._rail(p) == self._rail(point):
                return p
        return None

    @property
    def resistances(self) -> tuple[float, float]:
        """R_0 and R_1 of v = (R_0 + R_1 I) I at 25 degC and the lowest printed rail. [ohm], [ohm/A]

        Notes
        -----
        A straight line through the points, by least squares where there are more than two; one that falls counts as level at
        their mean. R_1 is what is left of the channel's gate voltage as the current grows.
        """
        points = [(p.current.typ, p.value.typ) for p in self._cold]
        n = len(points)
        mean_i, mean_r = sum(i for i, _ in points) / n, sum(r for _, r in points) / n
        spread = sum((i - mean_i) ** 2 for i, _ in points)
        slope = sum((i - mean_i) * (r - mean_r) for i, r in points) / spread if spread > 0 else 0.0
        slope = min(max(slope, 0.0), 0.99 * mean_r / mean_i)
        return mean_r - slope * mean_i, slope

    @property
    def growth(self) -> Quantity:
        """Of the on-resistance with temperature, compounded; assumed where nothing was given. [1/K]"""
        hot = [p for p in self.on_resistance if p.kelvin != T_MODEL]
        if hot:
            p = max(hot, key=lambda p: abs(p.kelvin - T_MODEL))
            beside = self._beside(p)
            assert beside is not None  # by validation
            found = float((p.value.typ / beside.value.typ) ** (1 / (p.kelvin - T_MODEL))) - 1
            return computed(found, "1/K", f"on_resistance at {celsius(p.kelvin)}")
        return self.on_resistance_growth or assume(
            "0.48 %/K", GROWTH, "1.62 times at 125 degC, TI SLIS032A (TPIC6B595), p. 4, for parts of this class"
        )

    @property
    def spread(self) -> Quantity:
        """Printed maximum over typical on-resistance, where it is largest. [1]"""
        cold = [p for p in self.on_resistance if p.kelvin == T_MODEL]
        most = max((p.highest or p.value).max / p.value.typ for p in cold)
        return Quantity(1.0, 1.0, max(most, 1.0), "1", self.on_resistance[0].value.origin)

    @property
    def drift_of_clamp(self) -> Quantity:
        """Of the clamp voltage; assumed where it was not given. [V/K]"""
        return self.clamp_drift or assume(
            f"{1e-3 * self.clamp_voltage.typ:.4g} V/K",
            VOLTAGE_DRIFT,
            "0.1 %/K of the clamp voltage, as breakdown voltages of MOSFETs from 30 to 55 V have it",
        )

    def leakages(self) -> list[tuple[float, float]]:
        """Temperatures and off-state currents that were given, temperatures rising. [K], [A]"""
        return sorted((p.kelvin, p.current.typ) for p in self.leakage)

    def conducts(self, volts: float) -> float:
        """Current of an output that is on, at 25 degC and without its limit. [V] -> [A]"""
        r_0, r_1 = self.resistances
        return 2 * volts / (r_0 + math.sqrt(r_0**2 + 4 * r_1 * abs(volts)))

    @property
    def gate(self) -> GateShape:
        """How outputs follow their bits."""
        return gate_shape(self.switching, self.conducts)

    @property
    def propagation(self) -> Quantity:
        """From the latch edge to where an output begins to follow: what its delays leave beside its edges. [s]

        Datasheets of this class count delays from output enable; from the latch they are taken as the same.
        """
        return computed(
            self.gate.dead, "s", "delays and edges of switching, counted from the latch as from output enable"
        )

    @property
    def output_edge(self) -> Quantity:
        """Of the bit behind a gate; the output's own edges are the gate's. [s]"""
        return computed(_STEP, "s", "a step that is short against the delays of switching")

    @property
    def output_resistance(self) -> Quantity:
        """Of an output as a logic pin: there is none but the serial one. [ohm]"""
        return self.serial_resistance

    def implied(self) -> dict[str, Quantity]:
        """What follows from its numbers, or is assumed for want of one."""
        return {
            "on resistance growth": self.growth,
            "clamp drift": self.drift_of_clamp,
            "propagation": self.propagation,
        }

    def assumed(self) -> tuple[Assumption, ...]:
        """What had to be supplied for the timing of a chain of these."""
        name = self.title or "register"
        why = "not given: the worst that it can be"
        found = (
            ()
            if "clears" in self.model_fields_set
            else (Assumption(name, "clear", "empties the shift stage only", why),)
        )
        return super().assumed() + found

    def of_one_output(self) -> tuple[Assumption, ...]:
        """What had to be supplied for an output as a switch."""
        s, start = self.switching, self.avalanche_from
        rated = "junction from which its clamp energy is rated"
        found = (Assumption("switch", rated, celsius(start.typ), start.origin.source),) if start.assumed() else ()
        return found + listed(
            "switch",
            clamp_test_current=self.clamp_test_current,
            drift_of_the_clamp=self.drift_of_clamp,
            growth_of_the_on_resistance=self.growth,
            output_capacitance=self.output_capacitance,
            capacitance_of_its_gate=self.gate_capacitance,
            pulse_that_its_current_is_rated_for=self.pulse_lasting,
            time_in_which_its_chip_cools=self.chip_cools_in,
            turn_on_delay=s.turn_on,
            turn_off_delay=s.turn_off,
            falling_edge=s.fall,
            rising_edge=s.rise,
        )

    def rails(self) -> tuple[tuple[float, float], ...]:
        """Logic rails at which an on-resistance is printed, rising, and the conductance there over that at the lowest. [V], [1]"""
        first = self._cold[0]
        found = {
            self._rail(p): first.value.typ / p.value.typ
            for p in self.on_resistance
            if p.kelvin == T_MODEL and p.current.typ == first.current.typ
        }
        return tuple(sorted(found.items()))

    def conductance_law(self, rail: str) -> str:
        """Conductance over that at the lowest printed logic rail, as an expression of the rail's voltage. [1]"""
        points = self.rails()
        if len(points) == 1:
            return "1"
        return f"pwl({rail},{','.join(f'{v!r},{share!r}' for v, share in points)})"

    def gated(self, name: str, pin: str, bit: str, rail: str) -> tuple[Element, ...]:
        """The gate of an output: node `pin` is the share at which it conducts, 1 V for what is printed.

        Parameters
        ----------
        name, pin : str
            Of the element, and the node that goes to the channel's switch.
        bit : str
            0 to 1 while the output is to be on, as an expression.
        rail : str
            Voltage of the logic rail, as an expression. [V]

        Notes
        -----
        dg/dt = q (1 - g) / t_on - (1 - q) g / t_off, and u = g / (g + b (1 - g)); see `gate_shape`.
        """
        found, node = self.gate, f"{name}_gate"
        up = f"({bit})*(1-V({node}))*{_GATE / found.on!r}"
        down = f"(1-({bit}))*V({node})*{_GATE / found.off!r}"
        on = f"max(V({node}),0)"
        law = f"{self.conductance_law(rail)}*{on}/({on}+{found.shape!r}*(1-{on}))"
        return (
            CurrentLaw(node, node, GROUND, f"{up}-{down}"),
            Capacitor(node, node, GROUND, _GATE),
            VoltageLaw(f"{name}_on", pin, GROUND, law),
        )

    def sink(self, name: str, pin: str, drain: str, t: float = T_MODEL, spread: float = 1.0) -> tuple[Element, ...]:
        """The transistor of an output between `drain` and ground, without its clamp; node `pin` says how well it conducts.

        Parameters
        ----------
        t : float
            Junction temperature. [K]
        spread : float
            On-resistance over the typical one. [1]
        """
        factor = spread * grown(1.0, self.growth.typ, t)
        r_0, r_1 = (factor * r for r in self.resistances)
        free, v = f"{name}_free", f"V({drain})"
        conducted = f"V({pin})*2*{v}/({r_0!r}+sqrt({r_0 * r_0!r}+{4 * r_1!r}*abs({v})))"
        if self.current_limit is None:
            return (CurrentLaw(name, GROUND, drain, conducted),)
        limit = self.current_limit.typ / grown(1.0, self.growth.typ, t)
        bent = f"V({free})*pow(1+pow(V({free})*V({free})*{1 / limit**2!r},{LIMIT_BEND // 2}),{-1 / LIMIT_BEND!r})"
        return VoltageLaw(free, free, GROUND, conducted), CurrentLaw(name, GROUND, drain, bent)

    def drive(self, name: str, pin: str, points: tuple[tuple[float, float], ...]) -> Stamp:
        """One output whose bits are known, as voltages at its logic rail [s], [V]; node `pin` goes to the channel's switch."""
        volts = max(level for _, level in points) or 1.0  # of one that is never on nothing follows
        bit = f"V({name}_in)*{1 / volts!r}"
        return Stamp(elements=(Drive(name, f"{name}_in", GROUND, points), *self.gated(name, pin, bit, repr(volts))))

    def follows(
        self, name: str, pin: str, bit: str, drives: str, rail: str, lets_go: bool, idle: str, loads_rail: bool
    ) -> tuple[Element, ...]:
        """One output that follows its bit: its gate comes up while it drives and its bit is one, and goes down otherwise.

        It takes no current to speak of from the rail, and is off while it does not drive: it neither floats nor leaks into a gate.
        """
        return self.gated(name, pin, f"{bit}*{drives}", f"V({rail})")

    def proofs(self) -> tuple[Proof, ...]:
        """Its on-resistances, clamp voltage, current limit, and delays and edges."""
        return power_proofs(self)
