"""A package of Darlington sinks with a common clamp diode each, from its datasheet's figures."""

from __future__ import annotations

import math
from typing import Annotated, ClassVar, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Assumption, Corner, Part, Stamp, Total, listed, named_part
from boardsim.parts.bipolar import (
    Saturation,
    breakdown_junction,
    saturated,
    straight_line,
    thermal,
    with_highest,
)
from boardsim.parts.diode import THERMAL_VOLTAGE, ForwardPoint, forward_parameters
from boardsim.parts.elements import (
    GROUND,
    Ammeter,
    Bipolar,
    Capacitor,
    CurrentDrive,
    Drive,
    Element,
    Junction,
    Model,
    Port,
    Probe,
    Resistor,
    Signal,
    current,
    plus,
    scaled,
    voltage,
)
from boardsim.parts.heat import junction_heat
from boardsim.parts.proof import AtEnd, Between, Proof
from boardsim.parts.record import Record
from boardsim.parts.rules import BreakdownRule, DriveRule, Limit, MeanRule, PeakRule, Rule
from boardsim.quantities import (
    CAPACITANCE,
    CURRENT,
    POSITIVE_RESISTANCE,
    POSITIVE_TIME,
    TEMPERATURE,
    THERMAL_RESISTANCE,
    VOLTAGE,
    Quantity,
    assume,
)

_GAIN = 50.0  # [1] of either transistor: 2500 together, where datasheets that print a gain guarantee 1000, from memory
_REVERSE_GAIN = 4.0  # [1], see npn.py
_SUBSTRATE = 1e-14  # [A], saturation current of the junction from the isolating substrate to the collector, from memory
# [F] at 0 V, of either transistor, from memory: nodes with less make ngspice's step collapse. They add some 25 ns to the turn-on.
_BASE_CAPACITANCE, _FEEDBACK_CAPACITANCE = 2e-12, 0.5e-12
_BASE_RESISTANCE = 50.0  # [ohm] of the first transistor, from memory: 25 mV at its 0.5 mA, in no printed voltage
_PROOF_TIME = 1e-4  # [s]
_RAMP_TIME = 1e-3  # [s], of the input; slow beside all delays
_USUAL = "delays and test circuit of bipolar sink arrays, from memory"


class InputCurrent(Record):
    """The typical input current at an input voltage, output open, and the highest."""

    typical: Annotated[Quantity, CURRENT]
    highest: Annotated[Quantity, CURRENT] | None = None
    voltage: Annotated[Quantity, VOLTAGE]


class OnVoltage(Record):
    """The input voltage that every output needs at most to sink a current with `across` at the output."""

    voltage: Annotated[Quantity, VOLTAGE]
    current: Annotated[Quantity, CURRENT]
    across: Annotated[Quantity, VOLTAGE]


class ClampPoint(ForwardPoint):
    """A typical point of the clamp diode's forward characteristic, and the highest voltage there."""

    highest: Annotated[Quantity, VOLTAGE] | None = None


class Switching(Record):
    """Delays between the halves of the edges with a resistive load: output falling (turn-on) and rising (turn-off)."""

    turn_on: Annotated[Quantity, POSITIVE_TIME] = assume("20 ns", POSITIVE_TIME, _USUAL)
    turn_off: Annotated[Quantity, POSITIVE_TIME] = assume("130 ns", POSITIVE_TIME, _USUAL)
    supply: Annotated[Quantity, VOLTAGE] = assume("50 V", VOLTAGE, _USUAL)
    load: Annotated[Quantity, POSITIVE_RESISTANCE] = assume("163 ohm", POSITIVE_RESISTANCE, _USUAL)
    capacitance: Annotated[Quantity, CAPACITANCE] = assume("15 pF", CAPACITANCE, _USUAL)
    input: Annotated[Quantity, VOLTAGE] = assume("3 V", VOLTAGE, _USUAL)


class DarlingtonArray(Part):
    """Sinks of two transistors each, in one package. Typical figures shape the model; ratings judge it.

    Notes
    -----
    Each output: a resistor from the input to the base of the first transistor, a resistor across each base-emitter
    junction, both collectors at the output behind one resistance, the second emitter at ground. A junction from the
    substrate (ground) to the output conducts below ground and at the voltage rating, and has all of the capacitance. The diodes to the common pin belong
    to the clamp that uses them. Typical gain throughout; ignores Early effect, high-level injection, heat, and that
    outputs of one package share the resistance of its ground pin.
    """

    role: ClassVar[str] = "component"
    kind: Literal["darlington-array"] = "darlington-array"
    outputs: Annotated[int, Field(strict=True, ge=1, le=16)]
    output_voltage: Annotated[Quantity, VOLTAGE]
    output_current: Annotated[Quantity, CURRENT] | None = None
    total_current: Annotated[Quantity, CURRENT] | None = None
    thermal_resistance: Annotated[Quantity, THERMAL_RESISTANCE] | None = None
    junction_rating: Annotated[Quantity, TEMPERATURE] | None = None
    saturation: Annotated[tuple[Saturation, ...], Field(min_length=2)]
    input_current: Annotated[tuple[InputCurrent, ...], Field(min_length=1)]
    on_voltage: tuple[OnVoltage, ...] = ()
    input_resistance: Annotated[Quantity, POSITIVE_RESISTANCE]
    first_resistance: Annotated[Quantity, POSITIVE_RESISTANCE] = Field(
        description="across base and emitter of the first transistor"
    )
    second_resistance: Annotated[Quantity, POSITIVE_RESISTANCE] = Field(
        description="across base and emitter of the second transistor"
    )
    clamp_forward: Annotated[tuple[ClampPoint, ...], Field(min_length=1)] | None = None
    clamp_current: Annotated[Quantity, CURRENT] | None = None
    switching: Switching = Switching()
    output_capacitance: Annotated[Quantity, CAPACITANCE] = assume(
        "15 pF", CAPACITANCE, "isolation of one output against the substrate at 0 V, from memory"
    )

    @model_validator(mode="after")
    def _coherent(self) -> DarlingtonArray:
        self.parameters()
        if self.clamp_forward is not None:
            forward_parameters([(p.voltage.typ, p.current.typ) for p in self.clamp_forward])
        return self

    def parameters(self) -> dict[str, float]:
        """What the model of one output consists of, from the datasheet's typical figures.

        Returns
        -------
        dict
            Saturation currents of both transistors (first, second) [A], resistance in the collectors [ohm],
            forward transit times of both (fast, slow) [s].

        Raises
        ------
        QuantityError
            If the figures contradict each other; names them.

        Notes
        -----
        In saturation only the first transistor is saturated; the second works at a collector voltage above its base's:

        - V_CE(sat) = V_BE2 + V_T ln(F_1 / R_1) + R I_C with V_BE2 = V_T ln(I_C2 / I_S2), where F_1 and R_1 follow from
          the first transistor's currents (`saturated`) and I_C = I_C1 + I_C2 from the second's gain and resistor:
          R and I_S2 by least squares over the saturation points.
        - Input current I_I at V_I with the output open: V_I - R_I I_I = V_BE1 + V_BE2. The first transistor feeds the
          second's collector backwards, the whole of I_I ends in the second's emitter and its resistor: I_S1.
        - Turn-on (charge control, J. L. Moll): a constant base current I_B makes I_C1 = I_B t / T_F1, which charges the second
          base: I_C2 = I_B t^2 / (2 T_F1 T_F2). It is half the load's current I_L at t = sqrt(T_F1 T_F2 I_L / I_B).
        - Turn-off: the first transistor's current falls in B T_F1 ln(1 + I_C1 / (B I_off)), I_off being what the input
          resistor draws from its base; then the second's halves in B T_F2 ln 2. With the turn-on: T_F1 and T_F2.

        Known miss: the model turns on in about 45 ns where 20 ns are printed. The capacitances without which ngspice's step
        collapses take the difference to charge; beside a coil's milliseconds it decides nothing.

        The turn-off delay of a real array is storage in the first transistor for the most part. The model has no T_R, since
        ngspice's step collapses on it at the latch edge; T_F2 stands in for it.

        The gain of either transistor is assumed as 50: few datasheets print one for types with an input resistor. The
        voltages depend on its logarithm only. Valid at 25 degC from some milliamperes to the highest saturation point.

        References
        ----------
        ngspice manual, BJT model. Schematic of one output: TI ULN2803A, SLRS049H (Feb 2017), section 8.2.
        """
        volts = {p.current.typ: 0.6 for p in self.saturation}  # [V] of V_BE2, bettered below
        offset = slope = second = 0.0
        for _ in range(50):
            points = []
            for p in self.saturation:
                i_c2, first = self._split(p.current.typ, p.base.typ, volts[p.current.typ])
                points.append((p.current.typ, p.voltage.typ - first - thermal(i_c2, 1.0)))
            offset, slope = straight_line(points)
            second = math.exp(-offset / THERMAL_VOLTAGE)
            volts = {p.current.typ: thermal(p.current.typ, second) for p in self.saturation}
        if slope <= 0 or not 0.3 < min(volts.values()) < 1.2:
            raise QuantityError(
                "saturation does not rise with the current as that of a Darlington transistor does, whose second junction alone takes "
                "0.3 V to 1.2 V; use the typical figures of one table"
            )
        first = self._first(second)
        fast, slow = self._transit(first, second)
        return {"first": first, "second": second, "collector": slope, "fast": fast, "slow": slow}

    def _transit(self, first: float, second: float) -> tuple[float, float]:
        """T_F1 and T_F2 from the delays of the switching test circuit. [s], [s]"""
        s = self.switching
        load = s.supply.typ / s.load.typ
        i_c1 = load / _GAIN
        v_1, v_2 = thermal(i_c1, first), thermal(load, second)
        beside = v_1 / self.first_resistance.typ
        on = (s.input.typ - v_1 - v_2) / self.input_resistance.typ - beside
        if on <= i_c1 / _GAIN:
            raise QuantityError(
                f"an input of {s.input} does not turn the load of {s.load} at {s.supply} on; use input, load and supply of the "
                "table's switching test circuit"
            )
        off = (v_1 + v_2) / self.input_resistance.typ + beside
        product = s.turn_on.typ**2 * on / load
        first_share, second_share = _GAIN * math.log1p(i_c1 / (_GAIN * off)), _GAIN * math.log(2)
        root = s.turn_off.typ**2 - 4 * first_share * second_share * product
        if root < 0:
            raise QuantityError(
                f"switching with a turn_on of {s.turn_on} and a turn_off of {s.turn_off}: two transistors that take so long to turn on "
                "take longer to turn off; use the typical figures of one table"
            )
        slow = (s.turn_off.typ + math.sqrt(root)) / (2 * second_share)
        return product / slow, slow

    def _split(self, i_c: float, i_b: float, v_be: float) -> tuple[float, float]:
        """Collector current of the second transistor [A] and saturation voltage of the first [V].

        The second junction voltage stands for the first's in the current of the first's resistor.
        """
        base1 = i_b - v_be / self.first_resistance.typ
        if base1 <= 0:
            raise QuantityError(
                f"first_resistance takes all of the input current of {i_b:.3g} A that a saturation point is given with"
            )
        # I_E1 = I_C1 + I_B1 + what flows beside it = I_C2 / B + V_BE2 / R_2, and I_C = I_C1 + I_C2.
        needed = v_be / self.second_resistance.typ - i_b
        i_c2 = (i_c - needed) / (1 + 1 / _GAIN)
        i_c1 = i_c - i_c2
        forward, reverse = saturated(max(i_c1, 0.0), base1, _GAIN, _REVERSE_GAIN)
        return i_c2, THERMAL_VOLTAGE * math.log(forward / reverse)

    def _first(self, second: float) -> float:
        """Saturation current of the first transistor, from the input current with an open output. [A]"""
        p = self.input_current[0]
        i_i = p.typical.typ
        both = p.voltage.typ - self.input_resistance.typ * i_i
        v_be2 = 0.5
        for _ in range(50):
            emitter = i_i - v_be2 / self.second_resistance.typ
            if emitter <= 0 or both <= v_be2:
                raise QuantityError(
                    f"input_current of {p.typical} at {p.voltage} does not fit input_resistance and second_resistance: "
                    f"{both:.3g} V are left for two junctions"
                )
            i_c2 = emitter / (1 + 1 / _GAIN)
            v_be2 = thermal(i_c2, second)
        base1 = i_i - (both - v_be2) / self.first_resistance.typ
        forward, _ = saturated(-i_c2, base1, _GAIN, _REVERSE_GAIN)
        if not (base1 > 0 and forward > 0 and 0.3 < both - v_be2 < 1.2):
            raise QuantityError(
                f"input_current of {p.typical} at {p.voltage} leaves {both - v_be2:.3g} V for the first junction, which takes "
                "0.3 V to 1.2 V; check it with input_resistance and first_resistance"
            )
        return forward * math.exp(-(both - v_be2) / THERMAL_VOLTAGE)

    def sink(self, name: str, pin: str, output: str) -> tuple[Element, ...]:
        """The two transistors and resistors of one output."""
        found = self.parameters()
        b1, b2, c = f"{name}_b1", f"{name}_b2", f"{name}_c"
        shared = {
            "BF": _GAIN,
            "BR": _REVERSE_GAIN,
            "CJE": _BASE_CAPACITANCE,
            "CJC": _FEEDBACK_CAPACITANCE,
            "TNOM": 25.0,
        }
        one = {"IS": found["first"], "TF": found["fast"], "RB": _BASE_RESISTANCE, **shared}
        two = {"IS": found["second"], "TF": found["slow"], **shared}
        return (
            Resistor(f"{name}_in", pin, b1, self.input_resistance.typ),
            Resistor(f"{name}_be1", b1, b2, self.first_resistance.typ),
            Resistor(f"{name}_be2", b2, GROUND, self.second_resistance.typ),
            Resistor(f"{name}_rc", output, c, found["collector"]),
            Bipolar(f"{name}_1", c, b1, b2, Model("first", "NPN", one)),
            Bipolar(f"{name}_2", c, b2, GROUND, Model("second", "NPN", two)),
        )

    def needs(self) -> tuple[tuple[float, float], ...]:
        """Pairs of output current and the input voltage that every output needs at most for it. [A], [V]"""
        return tuple(sorted((p.current.typ, p.voltage.typ) for p in self.on_voltage))

    def assumed(self) -> tuple[Assumption, ...]:
        """What was assumed of the package."""
        why = "2500 together, where datasheets that print a gain guarantee 1000, from memory"
        return (
            *listed(
                "switch",
                output_capacitance=self.output_capacitance,
                turn_on_delay=self.switching.turn_on,
                turn_off_delay=self.switching.turn_off,
            ),
            Assumption("switch", "gain of each of two transistors", f"{_GAIN:g}", why),
        )

    def proofs(self) -> tuple[Proof, ...]:
        """Its saturation voltages, input currents, on-state currents, clamp diode, and delays."""
        return (
            *(self._saturation_proof(p) for p in self.saturation),
            *(self._input_proof(p) for p in self.input_current),
            *(self._on_proof(p) for p in self.on_voltage),
            *(self._clamp_proof(p) for p in self.clamp_forward or ()),
            *(() if self.switching.turn_off.assumed() else self._switching_proofs(self.switching)),
        )

    def _saturation_proof(self, point: Saturation) -> Proof:
        return Proof(
            f"V_CE(sat) at {point.current} with {point.base}",
            "V",
            point.printed,
            (
                *self.sink("dut", "input", "out"),
                CurrentDrive("input", "input", GROUND, _steady(point.base.typ)),
                CurrentDrive("output", "out", GROUND, _steady(point.current.typ)),
            ),
            _PROOF_TIME,
            AtEnd(voltage("out")),
            why="a resistance that grows with the current is taken as a straight one",
        )

    def _input_proof(self, point: InputCurrent) -> Proof:
        meter = Ammeter("input", "source", "input")
        return Proof(
            f"input current at {point.voltage}, output open",
            "A",
            with_highest(point.typical, point.highest),
            (
                *self.sink("dut", "input", "out"),
                Drive("source", "source", GROUND, _steady(point.voltage.typ)),
                meter,
                Resistor("open", "out", GROUND, 1e9),
            ),
            _PROOF_TIME,
            AtEnd(current(meter)),
        )

    def _on_proof(self, point: OnVoltage) -> Proof:
        """The input rises slowly from a little below 0 V, until the output sinks the current."""
        meter = Ammeter("output", "supply", "out")
        below, rise = 0.1, 2 * point.voltage.typ
        ramp = ((0.0, -below), (_RAMP_TIME, rise - below))
        return Proof(
            f"input voltage for {point.current} at V_CE {point.across}",
            "V",
            Quantity(point.voltage.typ, 0.0, point.voltage.typ, "V", point.voltage.origin),
            (
                *self.sink("dut", "input", "out"),
                Drive("source", "input", GROUND, ramp),
                Drive("supply", "supply", GROUND, _steady(point.across.typ)),
                meter,
            ),
            _RAMP_TIME,
            Between(voltage("input"), 0.0, "rise", current(meter), point.current.typ, "rise", factor=rise / _RAMP_TIME),
            why="a guarantee for the weakest output bounds the typical one from above only",
            shapes=False,
        )

    def _clamp_proof(self, point: ClampPoint) -> Proof:
        assert self.clamp_forward is not None
        i_s, n, r_s = forward_parameters([(p.voltage.typ, p.current.typ) for p in self.clamp_forward])
        return Proof(
            f"forward voltage of the clamp diode at {point.current}",
            "V",
            with_highest(point.voltage, point.highest),
            (
                Junction("dut", "a", GROUND, Model("dut_m", "D", {"IS": i_s, "N": n, "RS": r_s, "TNOM": 25.0})),
                CurrentDrive("through", "a", GROUND, _steady(point.current.typ)),
            ),
            _PROOF_TIME,
            AtEnd(voltage("a")),
        )

    def _switching_proofs(self, s: Switching) -> tuple[Proof, Proof]:
        """Between the halves of the edges of input and output."""
        on, off, edge, high = 1e-6, 3e-6, 5e-9, s.input.typ
        points = ((0.0, 0.0), (on, 0.0), (on + edge, high), (off, high), (off + edge, 0.0))
        elements: tuple[Element, ...] = (
            *self.sink("dut", "input", "out"),
            Drive("source", "input", GROUND, points),
            Drive("supply", "supply", GROUND, ((0.0, s.supply.typ), (1.0, s.supply.typ))),
            Resistor("load", "supply", "out", s.load.typ),
            Capacitor("load", "out", GROUND, s.capacitance.typ),
        )
        output, source = voltage("out"), voltage("input")
        half = 0.5 * s.supply.typ
        return (
            Proof(
                "delay to the output's falling edge",
                "s",
                s.turn_on,
                elements,
                2 * off,
                Between(source, high / 2, "rise", output, half, "fall"),
                tolerance=0.3,
                why="the formula leaves out that the junctions have to be charged first",
            ),
            Proof(
                "delay to the output's rising edge",
                "s",
                s.turn_off,
                elements,
                2 * off,
                Between(source, high / 2, "fall", output, half, "rise"),
                tolerance=0.3,
                why="the formula takes the two transistors one after the other",
            ),
        )


def _steady(value: float) -> tuple[tuple[float, float], ...]:
    """A source that does not change."""
    return ((0.0, value), (_PROOF_TIME, value))


class DarlingtonStage(Part):
    """One output of the package: the register's output at its input, ground at its emitter, the coil at its collector."""

    role: ClassVar[str] = "switch"
    kind: Literal["darlington-array"] = "darlington-array"
    part: named_part(DarlingtonArray)  # type: ignore[valid-type]

    active: ClassVar[Literal["high", "low"]] = "high"
    """Output level that turns the coil on."""

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this stage: where its output breaks down."""
        return {"breakdown": self.part.output_voltage}

    def held_off(self) -> bool:
        """Always: the resistors across its base-emitter junctions are in the package."""
        return True

    def per_package(self) -> int:
        """Outputs of the package. [1]"""
        return int(self.part.outputs)

    def stamp(self, name: str, pin: str, drain: str, corner: Corner) -> Stamp:
        """The sink between the register's node `pin` and the coil's node `drain`."""
        part: DarlingtonArray = self.part
        volts = corner.take(part.output_voltage, "breakdown")
        inside = f"{name}_ci"
        meter = Ammeter(f"{name}_d", drain, inside)
        sunk, driven = current(meter), scaled(1 / part.input_resistance.typ, voltage(pin, f"{name}_b1"))
        holds = 0.5 * part.output_capacitance.typ * volts**2
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
