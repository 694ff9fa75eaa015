"""A package of Darlington sources with a clamp diode each, from its datasheet's figures."""

from __future__ import annotations

import math
from typing import Annotated, ClassVar, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Assumption, Part, listed
from boardsim.parts.bipolar import TEMPERATURE_ASSUMED, WITH_TEMPERATURE, saturated, straight_line, thermal
from boardsim.parts.diode import THERMAL_VOLTAGE, ForwardPoint, forward_parameters
from boardsim.parts.elements import GROUND, Bipolar, Element, Model, Resistor
from boardsim.parts.proof import Proof
from boardsim.parts.record import Record
from boardsim.parts.source_array_proofs import source_array_proofs
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
    in_units,
)

_GAIN = 50.0  # [1] of either NPN transistor, as in sink arrays (darlington.py)
_PNP_GAIN = 10.0  # [1] of the lateral PNP transistor that feeds them, from memory
_REVERSE_GAIN = 4.0  # [1] of the NPN transistors, see switches/npn.py
_PNP_REVERSE = 5.0  # [1], half of its forward gain: a lateral transistor is nearly symmetrical, from memory
_AREAS = 10.0  # [1] of the second NPN's emitter over the first's, from memory; only their product shows at the output
_INPUT_VOLTAGE = 0.65  # [V] of the input transistor's base at its current, from memory
_DIFFUSION = 1e-9  # [s] forward transit time of the NPN transistors, from memory; the PNP's storage is far longer
_CAPACITANCE = 10e-12  # [F] of the clamp diode at 0 V, a part of the output's own capacitance; from memory
_USUAL = "turn-off and test circuit of bipolar source arrays, from memory"


class SourcePoint(Record):
    """A typical voltage from the supply to an output that gives a current, at an input voltage, and the highest."""

    voltage: Annotated[Quantity, VOLTAGE]
    highest: Annotated[Quantity, VOLTAGE] | None = None
    current: Annotated[Quantity, CURRENT]
    input: Annotated[Quantity, VOLTAGE] = Field(description="input voltage at which this holds for every output")


class SourceInput(Record):
    """The typical input current at an input voltage, and the highest."""

    typical: Annotated[Quantity, CURRENT]
    highest: Annotated[Quantity, CURRENT] | None = None
    voltage: Annotated[Quantity, VOLTAGE]


class SourceSwitching(Record):
    """Delay between the halves of the falling edges of input and output, with a resistive load to ground."""

    turn_off: Annotated[Quantity, POSITIVE_TIME] = assume("2 us", POSITIVE_TIME, _USUAL)
    supply: Annotated[Quantity, VOLTAGE] = assume("35 V", VOLTAGE, _USUAL)
    load: Annotated[Quantity, POSITIVE_RESISTANCE] = assume("100 ohm", POSITIVE_RESISTANCE, _USUAL)
    input: Annotated[Quantity, VOLTAGE] | None = Field(
        default=None, description="high level of the input; the voltage of the first input_current if not given"
    )


class ClampPoint(ForwardPoint):
    """A typical point of the clamp diode's forward characteristic, and the highest voltage there."""

    highest: Annotated[Quantity, VOLTAGE] | None = None


class SourceArray(Part):
    """Sources that give current from the supply pin to their outputs, in one package, with diodes from ground.

    Notes
    -----
    Each output: a resistor from the input to the base of an NPN transistor with a resistor at its emitter, which makes a
    current of the input voltage whatever the supply is; a PNP transistor at the supply with a resistor across its
    base-emitter junction, which that current drives; it feeds a Darlington follower of two NPN transistors with a resistor across
    each base-emitter junction, both collectors at the supply, and one resistance at the output. A diode from ground to the output
    (`clamp_forward`) belongs to the package and is always there. Typical figures shape the model; ratings judge it. Ignores
    Early effect, high-level injection, and that outputs share the resistance of the supply pin.
    """

    role: ClassVar[str] = "component"
    kind: Literal["source-array"] = "source-array"
    outputs: Annotated[int, Field(strict=True, ge=1, le=16)]
    output_voltage: Annotated[Quantity, VOLTAGE] = Field(description="highest from the supply to an output that is off")
    output_current: Annotated[Quantity, CURRENT] | None = None
    total_current: Annotated[Quantity, CURRENT] | None = Field(
        None, description="of the supply pin, all outputs together"
    )
    thermal_resistance: Annotated[Quantity, THERMAL_RESISTANCE] | None = None
    junction_rating: Annotated[Quantity, TEMPERATURE] | None = None
    saturation: Annotated[tuple[SourcePoint, ...], Field(min_length=2)]
    input_current: Annotated[tuple[SourceInput, ...], Field(min_length=1)]
    input_rating: Annotated[Quantity, VOLTAGE] | None = Field(None, description="highest input voltage")
    drive_current: Annotated[Quantity, CURRENT] = Field(
        description="typical supply current of one output that is on and gives nothing, at the first input_current's voltage"
    )
    input_resistance: Annotated[Quantity, POSITIVE_RESISTANCE]
    pnp_resistance: Annotated[Quantity, POSITIVE_RESISTANCE] = Field(description="across base and emitter of the PNP")
    first_resistance: Annotated[Quantity, POSITIVE_RESISTANCE] = Field(
        description="across base and emitter of the first follower"
    )
    second_resistance: Annotated[Quantity, POSITIVE_RESISTANCE] = Field(
        description="across base and emitter of the second follower"
    )
    clamp_forward: Annotated[tuple[ClampPoint, ...], Field(min_length=1)]
    clamp_current: Annotated[Quantity, CURRENT] | None = None
    switching: SourceSwitching = SourceSwitching()
    output_capacitance: Annotated[Quantity, CAPACITANCE] = assume(
        "15 pF", CAPACITANCE, "isolation of one output against the substrate at 0 V, from memory"
    )

    @model_validator(mode="after")
    def _coherent(self) -> SourceArray:
        self.parameters()
        forward_parameters([(p.voltage.typ, p.current.typ) for p in self.clamp_forward])
        return self

    def parameters(self) -> dict[str, float]:
        """What the model of one output consists of, from the datasheet's typical figures.

        Returns
        -------
        dict
            Gain [1], base voltage [V] and emitter resistance [ohm] of the input transistor (input_gain, base, emitter), saturation currents of the PNP and of both followers (pnp, first, second) [A], resistance at the output
            [ohm] (output), reverse transit time of the PNP [s] (reverse).

        Raises
        ------
        QuantityError
            If the figures contradict each other; names them.

        Notes
        -----
        - The input transistor is given just the gain that drive and input current show, I_D / I_I, and an emitter
          resistance R_E from V_I = R_I I_I + V_0 + R_E (I_I + I_D). V_0 is that of one junction, 0.65 V, or what a straight line
          through several input currents leaves: that of two, of an emission coefficient to match, where it is about 1.3 V.
        - V(supply to output) = V_T ln(F / R) of the PNP, which is saturated (`saturated`) + V_BE1 + V_BE2 + R I. With the
          emitter currents of both followers from their gain and resistors the junctions are V_T ln(I_C1 / I_S1) + V_T ln(I_C2
          / I_S2); I_S2 = 10 I_S1, since only their product shows. I_S and R by least squares over the saturation points.
        - Turn-off is the storage of the PNP, whose base loses its charge through its own resistor only:
          tau_s ln((I_B + I_off) / (I_C / B + I_off)) with tau_s = a_F a_R T_R / (1 - a_F a_R), a = B / (1 + B) (J. L. Moll).
          All of the printed turn-off is taken for it. Turn-on is shorter than that by far and is not shaped.

        Holds from some milliamperes to the highest saturation point, at 25 degC, and with what ngspice makes of it elsewhere
        (`WITH_TEMPERATURE`).

        References
        ----------
        Schematic of one output: Mitsubishi M54563P/FP (Aug. 1999), circuit diagram. ngspice manual, BJT model. J. L. Moll,
        "Large-signal transient response of junction transistors", Proc. IRE 42 (1954).
        """
        gain, base, emitter = self._input()
        points = [(p.current.typ, self._without_followers(p)) for p in self.saturation]
        offset, slope = straight_line(points)
        second = math.exp(-(offset - THERMAL_VOLTAGE * math.log(_AREAS)) / (2 * THERMAL_VOLTAGE))
        volts = thermal(self.saturation[0].current.typ, second)
        if slope <= 0 or not 0.3 < volts < 1.2:
            raise QuantityError(
                "saturation does not rise with the current as that of a source with two followers does, whose junctions alone take "
                "0.6 V to 2.4 V; use the typical figures of one table"
            )
        return {
            "input_gain": gain,
            "base": base,
            "emitter": emitter,
            "pnp": second / _AREAS,
            "first": second / _AREAS,
            "second": second,
            "output": slope,
            "reverse": self._reverse(),
        }

    def _input(self) -> tuple[float, float, float]:
        """Gain [1], base voltage [V] and emitter resistance [ohm] of the input transistor."""
        first = self.input_current[0]
        i_i, i_d, junction = first.typical.typ, self.drive_current.typ, _INPUT_VOLTAGE
        if len(self.input_current) > 1:
            junction, _ = straight_line([(p.typical.typ, p.voltage.typ) for p in self.input_current])
        left = first.voltage.typ - self.input_resistance.typ * i_i - junction
        if left < 0 or junction < 0.3:
            raise QuantityError(
                f"input_current of {first.typical} at {first.voltage} does not fit input_resistance: {left + junction:.3g} V are "
                f"left for junctions of {junction:.3g} V"
            )
        return i_d / i_i, junction, left / (i_i + i_d)

    def _followers(self, current: float, volts: float = 0.7) -> tuple[float, float, float]:
        """Collector currents of first and second follower, and what both need from the PNP, at an output current. [A]

        `volts` stands for each junction in the current of its resistor.
        """
        emitter2 = current - volts / self.second_resistance.typ
        emitter1 = emitter2 / (1 + _GAIN) + volts / self.second_resistance.typ
        needed = emitter1 / (1 + _GAIN) + volts / self.first_resistance.typ
        share = _GAIN / (1 + _GAIN)
        if emitter2 <= 0:
            raise QuantityError(f"saturation at {in_units(current, 'A')}: second_resistance takes all of it")
        return share * emitter1, share * emitter2, needed

    def _base(self, volts: float) -> float:
        """Base current of the PNP at an input voltage; its resistor takes the rest of the drive. [A]"""
        gain, junction, emitter = self._input()
        drive = gain * max(volts - junction, 0.0) / (self.input_resistance.typ + (1 + gain) * emitter)
        return drive - 0.7 / self.pnp_resistance.typ

    def _without_followers(self, p: SourcePoint) -> float:
        """What of a saturation point is left for saturation currents and resistance. [V]"""
        i_c1, i_c2, needed = self._followers(p.current.typ)
        base = self._base(p.input.typ)
        if base * _PNP_GAIN <= needed:
            raise QuantityError(
                f"an input of {p.input} gives the output stage {in_units(max(base, 0.0) * _PNP_GAIN, 'A')}, and {p.current} need "
                f"{in_units(needed, 'A')}; check drive_current, pnp_resistance and first_resistance"
            )
        forward, reverse = saturated(needed, base, _PNP_GAIN, _PNP_REVERSE)
        return p.voltage.typ - THERMAL_VOLTAGE * math.log(forward / reverse * i_c1 * i_c2)

    def _reverse(self) -> float:
        """T_R of the PNP, from the turn-off of the switching test circuit. [s]"""
        s = self.switching
        load = s.supply.typ / s.load.typ
        base, needed = self._base(self.input_high), self._followers(load)[2]
        off = 0.7 / self.pnp_resistance.typ
        if base <= needed / _PNP_GAIN:
            raise QuantityError(
                f"an input of {in_units(self.input_high, 'V')} does not turn the load of {s.load} at {s.supply} on; use input, load and "
                "supply of the table's switching test circuit"
            )
        a_f, a_r = _PNP_GAIN / (1 + _PNP_GAIN), _PNP_REVERSE / (1 + _PNP_REVERSE)
        stored = math.log((base + off) / (needed / _PNP_GAIN + off))
        return s.turn_off.typ / stored * (1 - a_f * a_r) / (a_f * a_r)

    @property
    def input_high(self) -> float:
        """Input voltage of the switching test circuit; where it was not given that of the first input current. [V]"""
        given = self.switching.input
        return self.input_current[0].voltage.typ if given is None else given.typ

    def source(self, name: str, pin: str, rail: str, output: str) -> tuple[Element, ...]:
        """The transistors and resistors of one output between its supply pin and its output."""
        found = self.parameters()
        b0, e0, bp, b1, b2, e2 = (f"{name}_{k}" for k in ("b0", "e0", "bp", "b1", "b2", "e2"))
        npn = {"BF": _GAIN, "BR": _REVERSE_GAIN, "TF": _DIFFUSION, **WITH_TEMPERATURE}
        emission = max(found["base"] / _INPUT_VOLTAGE, 1.0)
        start = self.drive_current.typ / math.exp(found["base"] / (emission * THERMAL_VOLTAGE))
        into = {"IS": start, "NF": emission, "BF": found["input_gain"], "BR": 0.1, **WITH_TEMPERATURE}
        pnp = {"IS": found["pnp"], "BF": _PNP_GAIN, "BR": _PNP_REVERSE, "TR": found["reverse"], **WITH_TEMPERATURE}
        return (
            Resistor(f"{name}_in", pin, b0, self.input_resistance.typ),
            Resistor(f"{name}_e", e0, GROUND, max(found["emitter"], 1e-3)),
            Bipolar(f"{name}_0", bp, b0, e0, Model("input", "NPN", into)),
            Resistor(f"{name}_bp", rail, bp, self.pnp_resistance.typ),
            Bipolar(f"{name}_p", b1, bp, rail, Model("pnp", "PNP", pnp)),
            Resistor(f"{name}_be1", b1, b2, self.first_resistance.typ),
            Resistor(f"{name}_be2", b2, e2, self.second_resistance.typ),
            Bipolar(f"{name}_1", rail, b1, b2, Model("first", "NPN", {"IS": found["first"], **npn})),
            Bipolar(f"{name}_2", rail, b2, e2, Model("second", "NPN", {"IS": found["second"], **npn})),
            Resistor(f"{name}_ro", e2, output, found["output"]),
        )

    def carriers(self) -> float:
        """Charge that the PNP's base holds at most, which it gives back within a volt. [C]"""
        highest = max([self.input_high, *(p.input.typ for p in self.saturation)])
        return self._reverse() * _PNP_REVERSE * self._base(2 * highest)  # whatever logic rail drives it

    def stored(self, volts: float) -> float:
        """Energy that one output's capacitances hold at a voltage, at most. [J]"""
        return 0.5 * (self.output_capacitance.typ + _CAPACITANCE) * volts**2

    def needs(self) -> tuple[tuple[float, float], ...]:
        """Pairs of output current and the input voltage at which every output gives it. [A], [V]"""
        return tuple(sorted((p.current.typ, p.input.typ) for p in self.saturation))

    @property
    def clamp_capacitance(self) -> float:
        """Of the clamp diode at 0 V. [F]"""
        return _CAPACITANCE

    def assumed(self) -> tuple[Assumption, ...]:
        """What was assumed of the package."""
        memory = "from memory; the voltages depend on the logarithm only"
        return (
            *listed(
                "switch",
                output_capacitance=self.output_capacitance,
                turn_off_delay=self.switching.turn_off,
            ),
            Assumption("switch", "gain of each of two followers", f"{_GAIN:g}", memory),
            Assumption("switch", "gain of the PNP transistor", f"{_PNP_GAIN:g}", memory),
            TEMPERATURE_ASSUMED,
        )

    def proofs(self) -> tuple[Proof, ...]:
        """Its saturation voltages, input and drive currents, clamp diode, and delay of turn-off."""
        return source_array_proofs(self)
