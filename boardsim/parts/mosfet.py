"""A power MOSFET of either polarity, from its datasheet's typical figures; the N-channel one."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Annotated, ClassVar, Literal, Self

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import T_MODEL, Part
from boardsim.parts.elements import Model
from boardsim.parts.linear import ImpedancePoint, SafeAreaPoint, refuse_incoherent
from boardsim.parts.mosfet_channel import (
    BODY_EMISSION,
    BODY_RESISTANCE,
    Channel,
    body_saturation,
    mobility,
    only_bounds,
)
from boardsim.parts.mosfet_charge import GateFigures, gate_capacitances
from boardsim.parts.mosfet_proofs import mosfet_proofs
from boardsim.parts.proof import Proof
from boardsim.parts.record import Record
from boardsim.parts.temperature import (
    HOTTEST,
    LeakagePoint,
    grown,
    in_celsius,
    junction_at,
    refuse_drift,
    reverse_current,
)
from boardsim.parts.vendor.model import A_MODEL, vendors_model
from boardsim.quantities import (
    CAPACITANCE,
    CHARGE,
    CURRENT,
    ENERGY,
    GROWTH,
    INDUCTANCE,
    POSITIVE_RESISTANCE,
    POSITIVE_TIME,
    RESISTANCE,
    TEMPERATURE,
    THERMAL_RESISTANCE,
    TIME,
    TRANSCONDUCTANCE,
    VOLTAGE,
    VOLTAGE_DRIFT,
    Quantity,
    assume,
    celsius,
    computed,
)

_BODY_DIODE_POTENTIAL = 0.75  # [V], grading exponent 1/2: an abrupt junction, from memory
_BODY_DRIFT = -2e-3  # [V/K] of the body diode's forward voltage at 1 A, silicon, common practice
_SUBTHRESHOLD = 0.1  # [V], ngspice's own default for the rounding near threshold
_ROUNDS = 60  # until threshold and channel agree
_BREAKDOWN_CURRENT = 250e-6  # [A], at which V_(BR)DSS is specified, common practice


class OnResistance(Record):
    """A typical R_DS(on), the gate voltage it is given for, and the drain current it is measured at where that is printed.

    A point `at` another junction temperature than 25 degC shows how the resistance grows with it.
    """

    value: Annotated[Quantity, POSITIVE_RESISTANCE]
    gate: Annotated[Quantity, VOLTAGE]
    current: Annotated[Quantity, CURRENT] | None = None
    at: Annotated[Quantity, TEMPERATURE] | None = None

    @property
    def kelvin(self) -> float:
        """25 degC if none was given. [K]"""
        return T_MODEL if self.at is None else self.at.typ


class SwitchingTimes(Record):
    """Typical switching times, and the resistive circuit that they are measured in."""

    supply: Annotated[Quantity, VOLTAGE]
    load: Annotated[Quantity, POSITIVE_RESISTANCE]
    gate_resistor: Annotated[Quantity, RESISTANCE]
    drive: Annotated[Quantity, VOLTAGE]
    delay_on: Annotated[Quantity, POSITIVE_TIME] | None = None
    rise: Annotated[Quantity, POSITIVE_TIME] | None = None
    delay_off: Annotated[Quantity, POSITIVE_TIME] | None = None
    fall: Annotated[Quantity, POSITIVE_TIME] | None = None
    edge: Annotated[Quantity, TIME] = assume(
        "5 ns", TIME, "rise and fall of the pulse generator in such circuits, few datasheets print it, from memory"
    )


class Mosfet(Part):
    """An enhancement power MOSFET with its ratings. Typical figures shape the model; ratings judge it.

    All numbers are those of an N-channel part, or magnitudes: a P-channel part is its mirror image.
    """

    mirrored: ClassVar[bool] = False
    """Whether voltages and currents have the opposite sign, as those of a P-channel part."""
    breakdown: Annotated[Quantity, VOLTAGE]
    gate_rating: Annotated[Quantity, VOLTAGE] | None = None
    continuous_current: Annotated[Quantity, CURRENT] | None = None
    pulse_current: Annotated[Quantity, CURRENT] | None = None
    avalanche_current: Annotated[Quantity, CURRENT] | None = None
    avalanche_energy: Annotated[Quantity, ENERGY] | None = None
    avalanche_repetitive: Annotated[Quantity, ENERGY] | None = None
    threshold: Annotated[Quantity, VOLTAGE]
    threshold_current: Annotated[Quantity, CURRENT] = assume(
        "250 uA", CURRENT, "test current of most datasheets, common practice"
    )
    on_resistance: Annotated[tuple[OnResistance, ...], Field(min_length=1)]
    input_capacitance: Annotated[Quantity, CAPACITANCE]
    output_capacitance: Annotated[Quantity, CAPACITANCE]
    reverse_capacitance: Annotated[Quantity, CAPACITANCE]
    capacitance_voltage: Annotated[Quantity, VOLTAGE] = assume(
        "25 V", VOLTAGE, "test voltage of most datasheets, common practice"
    )
    gate_drain_charge: Annotated[Quantity, CHARGE]
    charge_voltage: Annotated[Quantity, VOLTAGE]
    charge_gate: Annotated[Quantity, VOLTAGE] | None = None
    charge_current: Annotated[Quantity, CURRENT] | None = None
    gate_charge: Annotated[Quantity, CHARGE] | None = None
    gate_source_charge: Annotated[Quantity, CHARGE] | None = None
    gate_resistance: Annotated[Quantity, RESISTANCE] = assume(
        "2 ohm", RESISTANCE, "internal gate resistance, from memory"
    )
    switching: SwitchingTimes | None = None
    source_inductance: Annotated[Quantity, INDUCTANCE] | None = Field(
        default=None,
        description="of the package, from its lead to the chip; counts in the proof of the switching times",
    )
    drain_inductance: Annotated[Quantity, INDUCTANCE] | None = Field(
        default=None,
        description="of the package, from its lead to the chip; counts in the proof of the switching times",
    )
    transconductance: Annotated[Quantity, TRANSCONDUCTANCE] | None = Field(
        default=None, description="g_fs; a band such as 21 to 60 S only bounds it"
    )
    transconductance_current: Annotated[Quantity, CURRENT] | None = None
    transconductance_voltage: Annotated[Quantity, VOLTAGE] | None = None
    source_drain: Annotated[Quantity, VOLTAGE] | None = Field(
        default=None, description="forward voltage of the body diode; a band such as 0.6 to 1.3 V only bounds it"
    )
    source_drain_current: Annotated[Quantity, CURRENT] | None = None
    thermal_resistance: Annotated[Quantity, THERMAL_RESISTANCE] | None = None
    junction_rating: Annotated[Quantity, TEMPERATURE] | None = None
    safe_area: tuple[SafeAreaPoint, ...] = Field(
        (), description="single pulses of the safe operating area, read at the voltage at which the switch works"
    )
    thermal_impedance: tuple[ImpedancePoint, ...] = Field(
        (), description="from junction to case for a single pulse of a length"
    )
    threshold_drift: Annotated[Quantity, VOLTAGE_DRIFT] | None = Field(
        None, description="of the threshold with temperature"
    )
    breakdown_drift: Annotated[Quantity, VOLTAGE_DRIFT] | None = Field(
        None, description="of the breakdown with temperature"
    )
    on_resistance_growth: Annotated[Quantity, GROWTH] | None = Field(
        None, description="per kelvin, compounded; or give on_resistance at another temperature"
    )
    leakage: tuple[LeakagePoint, ...] = Field(
        (), description="zero gate voltage drain current at the rated voltage, at one or two temperatures"
    )
    model: vendors_model(("drain", "gate", "source"), "vdmos", "nmos") = Field(None, description=A_MODEL)  # type: ignore[valid-type]

    @model_validator(mode="after")
    def _coherent(self) -> Self:
        for needs, needed in (
            ("transconductance", ("transconductance_current", "transconductance_voltage")),
            ("source_drain", ("source_drain_current",)),
        ):
            for name in needed:
                if (getattr(self, needs) is None) != (getattr(self, name) is None):
                    raise QuantityError(f'"{needs}" and "{name}" go together: a figure and what it is measured at')
        self.parameters(self.breakdown.typ)
        if self.leakage:
            reverse_current(self.leakages(), T_MODEL)
        for p in self.on_resistance:
            if p.kelvin != T_MODEL and p.gate.typ not in [
                q.gate.typ for q in self.on_resistance if q.kelvin == T_MODEL
            ]:
                raise QuantityError(
                    f'on_resistance at {celsius(p.kelvin)} needs one at 25 degC (without "at") and the same gate voltage of {p.gate} beside it'
                )
        if self.gate_charge is not None and self.charge_gate is None:
            raise QuantityError('"gate_charge" needs "charge_gate", the gate voltage up to which it counts')
        self._sensible_drifts()
        refuse_incoherent(self.safe_area, self.thermal_impedance, self.junction_rating)
        return self

    def _sensible_drifts(self) -> None:
        refuse_drift("breakdown_drift", self.drift_of_breakdown.typ, self.breakdown.typ)
        left = self.threshold.typ + self.drift_of_threshold.typ * (HOTTEST - T_MODEL)
        if left <= 0:
            raise QuantityError(
                f"threshold_drift of {self.drift_of_threshold} leaves no threshold at {celsius(HOTTEST)}; datasheets print some "
                "-0.3 %/K of the threshold"
            )
        if any(p.kelvin != T_MODEL for p in self.on_resistance):
            if self.on_resistance_growth is not None:
                raise QuantityError("give on_resistance at another temperature or on_resistance_growth, not both")
            if self.growth.typ < 0:
                raise QuantityError("on_resistance has to rise with temperature, and its points at another one fall")

    def proofs(self) -> tuple[Proof, ...]:
        """What its datasheet prints, measured on the model as the datasheet measures it."""
        return mosfet_proofs(self)

    def card(self, name: str, parameters: Mapping[str, float]) -> Model:
        """ngspice's model of these parameters, in this part's polarity.

        Notes
        -----
        With the flag `pchan` ngspice's VDMOS takes all voltages and currents with the opposite sign; its threshold is then
        written as a negative number, all else as for an N-channel part.

        References
        ----------
        ngspice manual, VDMOS model, parameter pchan.
        """
        if not self.mirrored:
            return Model(name, "VDMOS", parameters)
        return Model(name, "VDMOS", {**parameters, "VTO": -parameters["VTO"]}, ("pchan",))

    def leakages(self) -> list[tuple[float, float]]:
        """Temperatures and zero gate voltage drain currents that were given, temperatures rising. [K], [A]"""
        return sorted((p.kelvin, p.current.typ) for p in self.leakage)

    @property
    def drift_of_breakdown(self) -> Quantity:
        """Of the breakdown voltage; assumed where it was not given. [V/K]"""
        return self.breakdown_drift or assume(
            f"{1e-3 * self.breakdown.typ:.4g} V/K",
            VOLTAGE_DRIFT,
            "0.1 %/K of the breakdown voltage, between what datasheets of 30 V and 55 V parts print (0.07 and 0.13 %/K)",
        )

    @property
    def drift_of_threshold(self) -> Quantity:
        """Of the threshold; assumed where it was not given. [V/K]"""
        return self.threshold_drift or assume(
            f"{-3e-3 * self.threshold.typ:.4g} V/K",
            VOLTAGE_DRIFT,
            "-0.3 %/K of the threshold: -3 mV/K at 1 V, -7 mV/K at 2.3 V, from memory",
        )

    @property
    def growth(self) -> Quantity:
        """Of the on-resistance with temperature, compounded. [1/K]

        From the point that is farthest from 25 degC where there are some at another temperature; assumed where nothing was given.
        """
        cold = {p.gate.typ: p.value.typ for p in self.on_resistance if p.kelvin == T_MODEL}
        hot = [p for p in self.on_resistance if p.kelvin != T_MODEL]
        if hot:
            p = max(hot, key=lambda p: abs(p.kelvin - T_MODEL))
            found = float((p.value.typ / cold[p.gate.typ]) ** (1 / (p.kelvin - T_MODEL))) - 1
            return computed(found, "1/K", f"on_resistance at {celsius(p.kelvin)}")
        return self.on_resistance_growth or assume(
            "0.4 %/K", GROWTH, "per kelvin, compounded: 1.5 times at 125 degC, as an Infineon note has it"
        )

    @property
    def spread(self) -> Quantity:
        """Printed maximum over typical on-resistance, where it is largest; its lower end likewise. [1]"""
        cold = [p.value for p in self.on_resistance if p.kelvin == T_MODEL]
        low, high = min(v.min / v.typ for v in cold), max(v.max / v.typ for v in cold)
        return Quantity(1.0, min(low, 1.0), max(high, 1.0), "1", self.on_resistance[0].value.origin)

    def implied(self) -> dict[str, Quantity]:
        """What follows from its numbers, or is assumed for want of one."""
        found = {"breakdown drift": self.drift_of_breakdown, "on resistance growth": self.growth}
        return found if self.model is not None else {"threshold drift": self.drift_of_threshold, **found}

    def at_temperature(self, breakdown: float, t: float, spread: float = 1.0, shift: float = 0.0) -> dict[str, float]:
        """Parameters of ngspice's VDMOS model at a junction temperature.

        Parameters
        ----------
        breakdown : float
            Drain voltage at which the channel-less device conducts 250 uA, at `t`. [V]
        t : float
            Junction temperature. [K]
        spread : float
            On-resistance over the typical one. [1]
        shift : float
            Threshold from the typical one. [V]

        Returns
        -------
        dict
            ngspice's names, SI units.

        Raises
        ------
        QuantityError
            If the figures contradict each other; names them.

        Notes
        -----
        From the parameters at 25 degC: V_TO moves by the threshold's drift times (t - 25 degC) and by its shift; R_D grows as R_DS(on) does,
        R(t) = R (1 + a)^(t - 25 degC) (`grown`); K_P is such that R_DS(on) at the highest gate voltage grows by the same
        factor although the channel's overdrive has changed. At a gate voltage near the threshold the resistance then grows
        less, as it does on real parts, whose threshold falls. The body diode moves by -2 mV/K (common practice). The
        capacitances and charges stay: they hardly depend on temperature. From -55 to 175 degC.
        """
        found = self.parameters(breakdown)
        if t == T_MODEL and spread == 1.0 and shift == 0.0:
            return found
        factor = spread * grown(1.0, self.growth.typ, t)
        v_to = found["VTO"] + shift + self.drift_of_threshold.typ * (t - T_MODEL)
        gate = max(p.gate.typ for p in self.on_resistance)
        k_p = found["KP"] * overdrive(gate, found["VTO"]) / (overdrive(gate, v_to) * factor)
        i_s, n = junction_at(found["IS"], found["N"], 1.0, _BODY_DRIFT, t)
        return {
            **found,
            "VTO": v_to,
            "KP": k_p,
            "RD": found["RD"] * factor,
            "IS": i_s,
            "N": n,
            "TNOM": in_celsius(t),
        }

    def parameters(self, breakdown: float) -> dict[str, float]:
        """Parameters of ngspice's VDMOS model from the datasheet's typical figures.

        Parameters
        ----------
        breakdown : float
            Drain voltage at which the channel-less device conducts 250 uA. [V]

        Returns
        -------
        dict
            ngspice's names, SI units.

        Raises
        ------
        QuantityError
            If the figures contradict each other; names them.

        Notes
        -----
        R_DS(on) = R_D + (1 + theta u) / (K_P (u - v / 2)), v being what the channel drops at the printed current, from the
        points at the lowest and the highest gate voltage, or from one with half of it as R_D; V_GS(th) is where
        I = K_P u^2 / 2; theta from the transconductance where it is printed (`mobility`), else 0; u = k ln(1 + exp((V_GS - V_TO) / k)) with k = 0.1 V is the model's overdrive. The gate's
        capacitances follow from C_iss, C_rss, Q_gd and, where it is printed, Q_g (`gate_capacitances`). Output capacitance
        as an abrupt junction. The body diode from V_SD where it is printed. At 25 degC; `at_temperature` takes them elsewhere.

        References
        ----------
        ngspice manual, VDMOS model (equations of the gate-drain capacitance and of the triode region).
        """
        points = sorted(
            (p.gate.typ, p.value.typ, p.current.typ if p.current is not None else 0.0)
            for p in self.on_resistance
            if p.kelvin == T_MODEL
        )
        if not points:
            raise QuantityError('on_resistance needs a point at 25 degC (one without "at")')
        v_th, i_th = self.threshold.typ, self.threshold_current.typ
        if points[0][0] <= v_th:
            raise QuantityError(
                f"on_resistance at a gate voltage of {points[0][0]:.3g} V, below the threshold of {v_th:.3g} V"
            )
        v_to, found = v_th, Channel(math.inf, 0.0, 0.0)
        for _ in range(_ROUNDS):  # threshold, channel and what it drops depend weakly on each other
            found = self._channel(points, v_to, found)
            if not (0 < found.k_p < math.inf) or found.r_d < 0:
                raise QuantityError(
                    "on_resistance at the gate voltages given and threshold contradict each other: the resistance must fall "
                    "with gate voltage, and not faster than the channel alone; use the typical figures of one table"
                )
            above = math.sqrt(2 * i_th / found.k_p) / _SUBTHRESHOLD
            v_to = v_th - _SUBTHRESHOLD * (above + math.log(-math.expm1(-above)))
        k_p, r_d, fall = found.k_p, found.r_d, found.fall
        c_iss, c_oss, c_rss = (
            c.typ for c in (self.input_capacitance, self.output_capacitance, self.reverse_capacitance)
        )
        if not c_rss < min(c_iss, c_oss):
            raise QuantityError("reverse_capacitance must be smaller than input_capacitance and output_capacitance")
        if not (self.charge_voltage.typ > v_th and v_to > 0):
            raise QuantityError(
                f"charge_voltage must be above the threshold of {v_th:.3g} V"
                if v_to > 0
                else f"threshold_current of {i_th:.3g} A is more than a channel of this on_resistance carries at its threshold"
            )
        figures = GateFigures(
            c_iss,
            c_rss,
            self.capacitance_voltage.typ,
            self.gate_drain_charge.typ,
            self.charge_voltage.typ,
            v_th,
            v_to,
            self.gate_charge.typ if self.gate_charge is not None else None,
            self.charge_gate.typ if self.charge_gate is not None else None,
        )
        junction = (c_oss - c_rss) * math.sqrt(1 + self.capacitance_voltage.typ / _BODY_DIODE_POTENTIAL)
        return {
            "VTO": v_to,
            "KSUBTHRES": _SUBTHRESHOLD,
            "KP": k_p / (1 - fall * v_to),  # ngspice's THETA counts from V_GS = 0
            "THETA": fall / (1 - fall * v_to),
            "RD": r_d,
            "RS": 0.0,
            "RG": self.gate_resistance.typ,
            "RB": BODY_RESISTANCE,
            **gate_capacitances(figures),
            "CJO": junction,
            "VJ": _BODY_DIODE_POTENTIAL,
            "M": 0.5,
            "IS": body_saturation(self.source_drain, self.source_drain_current, T_MODEL),
            "N": BODY_EMISSION,
            "TT": 50e-9,
            "BV": breakdown,
            "IBV": _BREAKDOWN_CURRENT,
            "TNOM": 25.0,
        }

    def _channel(self, points: Sequence[tuple[float, float, float]], v_to: float, before: Channel) -> Channel:
        """The channel of the first and the last of the points, with what it drops and how it falls off as `before`."""
        x, r = [], []
        for gate, ohms, amperes in (points[0], points[-1]):
            u = overdrive(gate, v_to)
            drop = amperes * (ohms - before.r_d) if before.k_p < math.inf else 0.0
            x.append((1 + before.fall * u) / max(u - drop / 2, u / 2))
            r.append(ohms)
        if len(points) == 1:
            k_p, r_d = 2 * x[0] / r[0], r[0] / 2
        else:
            k_p = (x[0] - x[1]) / (r[0] - r[1]) if r[0] > r[1] and x[0] > x[1] else math.inf
            r_d = r[0] - x[0] / k_p
        g, at = self.transconductance, self.transconductance_current
        if g is None or at is None or only_bounds(g) or not 0 < k_p < math.inf:
            return Channel(k_p, r_d, 0.0)
        wanted = mobility(k_p, v_to, r_d + before.fall / k_p, g.typ, at.typ)
        return Channel(k_p, r_d, 0.5 * (before.fall + wanted))


class NMosfet(Mosfet):
    """An N-channel part."""

    role: ClassVar[str] = "component"
    kind: Literal["n-mosfet"] = "n-mosfet"


def overdrive(v_gs: float, v_to: float) -> float:
    """The model's effective overdrive, rounded near the threshold. [V]

    Parameters
    ----------
    v_gs, v_to : float
        Gate voltage and the model's threshold. [V]

    Notes
    -----
    k ln(1 + exp((V_GS - V_TO) / k)), k = 0.1 V.

    References
    ----------
    ngspice manual, VDMOS model, parameter KSUBTHRES.
    """
    x = (v_gs - v_to) / _SUBTHRESHOLD
    return _SUBTHRESHOLD * (max(x, 0.0) + math.log1p(math.exp(-abs(x))))
