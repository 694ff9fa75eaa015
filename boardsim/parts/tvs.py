"""A transient suppressor diode, from its breakdown band, its clamping voltage and its pulse power."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Annotated, ClassVar, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import NOMINAL, T_MODEL, Corner, Part, Stamp, listed
from boardsim.parts.diode import SETTLE, THERMAL_VOLTAGE
from boardsim.parts.elements import (
    GROUND,
    CurrentDrive,
    Element,
    Junction,
    Model,
    Port,
    Probe,
    Resistor,
    Signal,
    voltage,
)
from boardsim.parts.heat import junction_heat
from boardsim.parts.proof import AtEnd, Proof
from boardsim.parts.rules import Limit, MeanRule, PeakRule, PulseRule, Rule
from boardsim.parts.temperature import in_celsius, refuse_drift, reverse_current, thermal_voltage
from boardsim.parts.vendor.beside import in_its_band, stored
from boardsim.parts.vendor.model import A_MODEL, typical, vendors_model
from boardsim.parts.zener import steady_current
from boardsim.quantities import (
    CAPACITANCE,
    CURRENT,
    POSITIVE_TIME,
    POWER,
    TEMPERATURE,
    THERMAL_RESISTANCE,
    VOLTAGE,
    VOLTAGE_DRIFT,
    Quantity,
    assume,
    in_units,
)

_SATURATION, _EMISSION = 1e-12, 1.1  # [A], [1] of the junction in forward direction, from memory; it hardly counts
_HALF = 0.5  # share of its peak to which a pulse's length counts, as in 10/1000 us


class Tvs(Part):
    """A transient suppressor used in breakdown, wherever a Zener can be.

    Notes
    -----
    V = V_BR + R (I - I_T) + V_T ln(I / I_T) with V_T = 26 mV. R is what lies between the highest breakdown voltage at
    I_T and the highest clamping voltage V_C at the peak current I_PP: the two are printed for the same part, the one at
    the upper end. R = (V_C - V_BR,max - V_T ln(I_PP / I_T)) / (I_PP - I_T). V_C is printed for a 10/1000 us pulse at whose
    peak the junction is hot already; at the lower currents of coils a cooler one holds up to some per cent less, so that
    peaks are upper bounds. Between standard points no type prints more.

    V_BR moves by `drift` with the junction temperature of the run, the leakage doubles every 10 K.

    A bidirectional one is two such junctions face to face, one of which conducts forwards: the printed voltages are those
    of both, and N V_T ln(I_PP / I_T) of the forward one is in its R as well. Without `bidirectional` the
    forward direction is a plain junction. A leakage resistance lets the nodes beside it find their level.

    The pulse power P_PP = V_C I_PP is rated for a 10/1000 us pulse, 1 ms to half of its peak, once; a longer pulse is
    held against less (see `PulseRule`). Pulses that repeat are judged by average power and heat besides.
    """

    role: ClassVar[str] = "component"
    kind: Literal["tvs"] = "tvs"
    stand_off: Annotated[Quantity, VOLTAGE]
    breakdown: Annotated[Quantity, VOLTAGE]
    test_current: Annotated[Quantity, CURRENT]
    clamping_voltage: Annotated[Quantity, VOLTAGE]
    clamping_current: Annotated[Quantity, CURRENT]
    peak_power: Annotated[Quantity, POWER] | None = Field(None, description="of a 10/1000 us pulse")
    pulse_length: Annotated[Quantity, POSITIVE_TIME] = assume(
        "1 ms", POSITIVE_TIME, "peak pulse power is given for a 10/1000 us pulse, common practice"
    )
    power: Annotated[Quantity, POWER] | None = None
    thermal_resistance: Annotated[Quantity, THERMAL_RESISTANCE] | None = None
    junction_rating: Annotated[Quantity, TEMPERATURE] | None = None
    bidirectional: Annotated[bool, Field(strict=True)] = False
    leakage: Annotated[Quantity, CURRENT] = assume("1 uA", CURRENT, "at the stand-off voltage, from memory")
    capacitance: Annotated[Quantity, CAPACITANCE] = assume(
        "1 nF", CAPACITANCE, "suppressor of some hundred watts at 0 V, from memory"
    )
    drift: Annotated[Quantity, VOLTAGE_DRIFT] | None = Field(
        None, description="of its breakdown voltage with temperature"
    )
    model: vendors_model(("anode", "cathode"), "d") = Field(None, description=A_MODEL)  # type: ignore[valid-type]

    @model_validator(mode="after")
    def _coherent(self) -> Tvs:
        if self.stand_off.typ >= self.breakdown.min:
            raise QuantityError("stand_off must be below the lowest breakdown voltage")
        if self.clamping_current.typ <= self.test_current.typ:
            raise QuantityError("clamping_current must be above the test_current of the breakdown voltage")
        if self.resistance < 0:
            raise QuantityError("clamping_voltage must be above the highest breakdown voltage")
        refuse_drift("drift", self.breakdown_drift.typ, self.breakdown.typ)
        return self

    @property
    def breakdown_drift(self) -> Quantity:
        """Of the breakdown voltage; assumed where it was not given. [V/K]

        References
        ----------
        ST SM15T series, figure 3: dV_BR = a_T (t - 25 degC) V_BR(25 degC); a_T of 0.1 %/K from memory.
        """
        return self.drift or assume(
            f"{1e-3 * self.breakdown.typ:.4g} V/K", VOLTAGE_DRIFT, "0.1 %/K of the breakdown voltage, from memory"
        )

    def implied(self) -> dict[str, Quantity]:
        """What is assumed for want of a number."""
        return {"drift": self.breakdown_drift}

    @property
    def clamping(self) -> Quantity:
        """What its corners vary: its breakdown voltage at the test current; a vendor's model has its own. [V]"""
        return typical(self.breakdown, self.model)

    @property
    def lowest(self) -> float:
        """The least breakdown voltage at the test current. [V]"""
        return self.breakdown.min

    @property
    def resistance(self) -> float:
        """The straight part of its characteristic. [ohm]"""
        i_t, i_pp = self.test_current.typ, self.clamping_current.typ
        slope = THERMAL_VOLTAGE * (
            1 + (_EMISSION if self.bidirectional else 0)
        )  # of the one that conducts forwards too
        exponential = slope * math.log(i_pp / i_t)
        return (self.clamping_voltage.typ - self.breakdown.max - exponential) / (i_pp - i_t)

    def proofs(self) -> tuple[Proof, ...]:
        """Breakdown at the test current, and the clamping voltage of a part at the upper end at the peak current."""
        i_t, i_pp = self.test_current.typ, self.clamping_current.typ
        upper = Corner("upper end", {"clamp_voltage": "max"})
        if self.model is not None:  # of a typical part, which clamps between its own breakdown and the printed maximum
            ends = Quantity(
                self.clamping_voltage.typ,
                self.breakdown.min,
                self.clamping_voltage.typ,
                "V",
                self.clamping_voltage.origin,
            )
            at_peak = self._proof(f"clamping voltage at {in_units(i_pp, 'A')}", ends, i_pp, NOMINAL)
            return (
                self._proof(f"breakdown voltage at {in_units(i_t, 'A')}", self.breakdown, i_t, NOMINAL),
                replace(at_peak, shapes=False, why="the printed clamping voltage is a maximum"),
            )
        return (
            self._proof(f"breakdown voltage at {in_units(i_t, 'A')}", self.breakdown, i_t, NOMINAL),
            self._proof(
                f"clamping voltage at {in_units(i_pp, 'A')}, breakdown at its upper end",
                self.clamping_voltage,
                i_pp,
                upper,
            ),
        )

    def _proof(self, quantity: str, printed: Quantity, amperes: float, corner: Corner) -> Proof:
        held = "a"
        return Proof(
            quantity,
            "V",
            printed,
            (
                CurrentDrive("test", held, GROUND, steady_current(amperes)),
                *self.stamp("x", "suppressor", held, GROUND, (), corner).elements,
            ),
            SETTLE,
            AtEnd(voltage(held)),
            why="the model passes through both points",
        )

    def stamp(self, name: str, label: str, positive: str, negative: str, through: Signal, corner: Corner) -> Stamp:
        """The suppressor with `positive` at its cathode; `through` is the current from positive to negative."""
        name_of = self.title or label
        v, i = f"v_{label}", f"i_{label}"
        v_br = corner.take(self.breakdown, "clamp_voltage") + corner.drifted(self.breakdown_drift.typ)
        leak = reverse_current([(T_MODEL, self.leakage.typ)], corner.junction)
        elements: tuple[Element, ...] = (
            *self._junctions(name, positive, negative, v_br, corner.junction),
            Resistor(f"{name}_leak", positive, negative, self.stand_off.typ / leak),
        )
        holds = 0.5 * self.capacitance.typ * self.clamping_voltage.typ**2
        beside = Stamp()
        assumed = listed(
            name_of, leakage=self.leakage, capacitance=self.capacitance, drift_of_the_voltage=self.breakdown_drift
        )
        if self.model is not None:
            i_t, drifted = self.test_current.typ, corner.drifted(self.breakdown_drift.typ)
            beside = in_its_band(self.model, name, label, self.breakdown, i_t, drifted, name_of, corner.junction)
            device = self.model.part(name, {"anode": negative, "cathode": positive}, corner.junction)
            elements = (device, *beside.elements)
            moves = listed(name_of, drift_of_the_voltage=self.breakdown_drift)
            assumed = (*self.model.told(name_of), stored(name_of, "capacitance"), *moves)
        return Stamp(
            elements=elements,
            probes=(Probe(v, voltage(positive, negative), "V"), Probe(i, through, "A"), *beside.probes),
            ports=(Port(label, ((v, i),), holds=holds),),
            rules=(*self._rules(name_of, label, v, i, corner), *beside.rules),
            assumptions=assumed,
        )

    def _junctions(self, name: str, positive: str, negative: str, v_br: float, t: float) -> tuple[Element, ...]:
        i_t = self.test_current.typ
        r = max(self.resistance, 1e-3)
        model = {
            "IS": _SATURATION,
            "N": _EMISSION,
            "RS": r / 2 if self.bidirectional else r,
            "BV": v_br - r * i_t,
            "IBV": i_t,
            "CJO": self.capacitance.typ,
            "TNOM": in_celsius(t),
        }
        if not self.bidirectional:
            return (Junction(name, negative, positive, Model(f"{name}_m", "D", model)),)
        model["BV"] -= _EMISSION * thermal_voltage(t) * math.log(i_t / _SATURATION)  # what the other one takes forwards
        model["CJO"] *= 2  # two in series make the printed one
        both = Model(f"{name}_m", "D", model)
        middle = f"{name}_x"
        return (Junction(name, middle, positive, both), Junction(f"{name}_b", middle, negative, both))

    def _rules(self, part: str, label: str, v: str, i: str, corner: Corner) -> tuple[Rule, ...]:
        peak = Limit.of(self.peak_power, "peak pulse power", "W", "power")
        return (
            PeakRule(
                "overcurrent",
                i,
                Limit.of(self.clamping_current, "peak pulse current", "A", "current"),
                "destroy",
                f"peak current of the {label}",
                "choose a larger suppressor",
                part=part,
            ),
            PulseRule(
                "surge",
                (v, i),
                peak,
                ((self.pulse_length.typ, peak.value),) if peak.value is not None else (),
                self.power.typ if self.power is not None else 0.0,
                _HALF,
                "destroy",
                f"pulse power of the {label}",
                "choose a larger suppressor",
                part=part,
            ),
            MeanRule(
                "overpower",
                (v, i),
                Limit.of(self.power, "steady-state power", "W", "power"),
                "destroy",
                f"average power of the {label}",
                "choose a larger suppressor, or fire less often",
                part=part,
            ),
            junction_heat(
                part,
                label,
                ((v, i),),
                self.thermal_resistance,
                self.junction_rating,
                corner.ambient,
                "choose a larger suppressor, more copper around it, or fire less often",
            ),
        )
