"""A package of Darlington sinks with a clamp diode each, from its datasheet's figures."""

from __future__ import annotations

import math
from typing import Annotated, ClassVar, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Assumption, Part, listed
from boardsim.parts.bipolar import (
    TEMPERATURE_ASSUMED,
    WITH_TEMPERATURE,
    Saturation,
    saturated,
    straight_line,
    thermal,
)
from boardsim.parts.darlington_delays import (
    FIRST_COLLECTOR,
    FIRST_EMITTER,
    SECOND_COLLECTOR,
    SECOND_EMITTER,
    DelayCircuit,
    transit_times,
)
from boardsim.parts.darlington_proofs import darlington_proofs
from boardsim.parts.diode import THERMAL_VOLTAGE, ForwardPoint, forward_parameters
from boardsim.parts.elements import (
    GROUND,
    Bipolar,
    Element,
    Model,
    Resistor,
)
from boardsim.parts.proof import Proof
from boardsim.parts.record import Record
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

_GAIN = 50.0  # [1] of either transistor: 2500 together, where datasheets that print a gain guarantee 1000, from memory
_REVERSE_GAIN = 4.0  # [1], see switches/npn.py
_FARADS = ", ".join(f"{in_units(c, 'F')}" for c in (FIRST_EMITTER, FIRST_COLLECTOR, SECOND_EMITTER, SECOND_COLLECTOR))
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
    input: Annotated[Quantity, VOLTAGE] | None = Field(
        default=None, description="high level of the input; the voltage of the first input_current if not given"
    )


class DarlingtonArray(Part):
    """Sinks of two transistors each, in one package. Typical figures shape the model; ratings judge it.

    Notes
    -----
    Each output: a resistor from the input to the base of the first transistor, a resistor across each base-emitter
    junction, both collectors at the output behind one resistance, the second emitter at ground. A junction from the
    substrate (ground) to the output conducts below ground and at the voltage rating, and has the output's capacitance.
    The diodes to the common pin belong to the clamp that uses them. Typical gain throughout; ignores Early effect,
    high-level injection, heat, and that
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
            forward transit time of both (forward) and reverse transit time of the first (reverse) [s].

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
        - T_F of both transistors and T_R of the first from turn_on and turn_off, with the charges of the junctions
          counted (`transit_times`). What turns off late in a real array is the first transistor, which is saturated.

        The gain of either transistor is assumed as 50: few datasheets print one for types with an input resistor. The
        voltages depend on its logarithm only. Valid from some milliamperes to the highest saturation point; at 25 degC, and with
        what ngspice makes of it elsewhere (`WITH_TEMPERATURE`): the diffused resistors' own growth, some 0.1 %/K, is left out.

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
        t_f, t_r = self._transit(first, second)
        return {"first": first, "second": second, "collector": slope, "forward": t_f, "reverse": t_r}

    @property
    def input_high(self) -> float:
        """Input voltage of the switching test circuit; where it was not given that of the first input current. [V]"""
        given = self.switching.input
        return self.input_current[0].voltage.typ if given is None else given.typ

    def _transit(self, first: float, second: float) -> tuple[float, float]:
        """T_F of both transistors and T_R of the first, from the delays of the switching test circuit. [s], [s]"""
        s = self.switching
        load = s.supply.typ / s.load.typ
        v_1, v_2 = thermal(load / _GAIN, first), thermal(load, second)
        beside, ohms = v_1 / self.first_resistance.typ, self.input_resistance.typ
        on = (self.input_high - v_1 - v_2) / ohms - beside
        if on <= load / _GAIN**2:
            raise QuantityError(
                f"an input of {in_units(self.input_high, 'V')} does not turn the load of {s.load} at {s.supply} on; use input, load "
                "and supply of the table's switching test circuit"
            )
        circuit = DelayCircuit(
            gain=_GAIN,
            reverse_gain=_REVERSE_GAIN,
            supply=s.supply.typ,
            load=load,
            first=v_1,
            second=v_2,
            drive=(self.input_high - v_1 / 2) / ohms,
            on=on,
            off=(v_1 + v_2) / ohms + beside,
            beside=beside,
            leak=v_2 / self.second_resistance.typ,
        )
        return transit_times(circuit, s.turn_on.typ, s.turn_off.typ)

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
        shared = {"BF": _GAIN, "BR": _REVERSE_GAIN, "TF": found["forward"], **WITH_TEMPERATURE}
        one = {"IS": found["first"], "TR": found["reverse"], "CJE": FIRST_EMITTER, "CJC": FIRST_COLLECTOR, **shared}
        two = {"IS": found["second"], "CJE": SECOND_EMITTER, "CJC": SECOND_COLLECTOR, **shared}
        return (
            Resistor(f"{name}_in", pin, b1, self.input_resistance.typ),
            Resistor(f"{name}_be1", b1, b2, self.first_resistance.typ),
            Resistor(f"{name}_be2", b2, GROUND, self.second_resistance.typ),
            Resistor(f"{name}_rc", output, c, found["collector"]),
            Bipolar(f"{name}_1", c, b1, b2, Model("first", "NPN", one)),
            Bipolar(f"{name}_2", c, b2, GROUND, Model("second", "NPN", two)),
        )

    def stored(self, volts: float) -> float:
        """Energy that one output's capacitances hold at a voltage, at most. [J]"""
        return 0.5 * (self.output_capacitance.typ + FIRST_COLLECTOR + SECOND_COLLECTOR) * volts**2

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
            TEMPERATURE_ASSUMED,
            Assumption(
                "switch",
                "junction capacitances of its transistors",
                _FARADS,
                "from memory; some of the delays are theirs",
            ),
        )

    def proofs(self) -> tuple[Proof, ...]:
        """Its saturation voltages, input currents, on-state currents, clamp diode, and delays."""
        return darlington_proofs(self)
