"""A low-side NPN transistor from its datasheet's figures, and its base network."""

from __future__ import annotations

import itertools
import math
from typing import Annotated, ClassVar, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Assumption, Corner, Part, Stamp, listed, named_part
from boardsim.parts.bipolar import (
    GRADING,
    JUNCTION_POTENTIAL,
    TEMPERATURE_ASSUMED,
    WITH_TEMPERATURE,
    Saturation,
    breakdown_junction,
    junction_capacitance,
    saturated,
    straight_line,
    thermal,
)
from boardsim.parts.diode import THERMAL_VOLTAGE
from boardsim.parts.elements import (
    GROUND,
    Ammeter,
    Bipolar,
    Element,
    Model,
    Port,
    Probe,
    Resistor,
    VendorsPart,
    current,
    plus,
    scaled,
    voltage,
)
from boardsim.parts.heat import junction_heat
from boardsim.parts.npn_proofs import npn_proofs
from boardsim.parts.proof import Proof
from boardsim.parts.record import Record
from boardsim.parts.rules import BreakdownRule, DriveRule, HeatRule, Limit, MeanRule, PeakRule
from boardsim.parts.vendor.beside import held_off, stored
from boardsim.parts.vendor.model import A_MODEL, vendors_model
from boardsim.quantities import (
    CAPACITANCE,
    CURRENT,
    FREQUENCY,
    POSITIVE_RESISTANCE,
    TEMPERATURE,
    THERMAL_RESISTANCE,
    TIME,
    VOLTAGE,
    Quantity,
    assume,
    in_units,
)

_REVERSE_GAIN = (
    4.0  # [1], of small epitaxial switching transistors where one saturation point leaves it open, from memory
)
_REVERSE_GAINS = tuple(0.25 * 1.1**k for k in range(47))  # [1], what is tried where several points decide: 0.25 to 20
_TYPICAL_OVER_LEAST = 1.5  # [1], of gains where only the least is printed, from memory
_CLEARLY_MORE = 1.05  # [1], typical over least gain, or a weakly driven transistor would carry just what is allowed


_LEAST_JUNCTION = 0.6  # [V] across a base that conducts, from memory


class Gain(Record):
    """The static gain I_C / I_B outside saturation: bare numbers, since they are counts of nothing but themselves."""

    current: Annotated[Quantity, CURRENT]
    least: Annotated[int, Field(strict=True, ge=1)]
    typical: Annotated[int, Field(strict=True, ge=1)] | None = None

    @property
    def typ(self) -> float:
        """The typical gain; 1.5 times the least where it was not given. [1]"""
        return float(self.typical) if self.typical is not None else _TYPICAL_OVER_LEAST * self.least


class Npn(Part):
    """An NPN transistor with its ratings. Typical figures shape the model; ratings and least gains judge it.

    Notes
    -----
    The model runs with the typical gain. That a transistor of the least gain stays in saturation is judged by its base
    current. Ignores the Early effect, the fall of gain at small currents, and breakdown between base and emitter.
    """

    role: ClassVar[str] = "component"
    kind: Literal["npn"] = "npn"
    breakdown: Annotated[Quantity, VOLTAGE] = Field(description="V_(BR)CEO, the collector-emitter voltage it stands")
    continuous_current: Annotated[Quantity, CURRENT] | None = None
    peak_current: Annotated[Quantity, CURRENT] | None = None
    gain: Annotated[tuple[Gain, ...], Field(min_length=1)]
    saturation: Annotated[tuple[Saturation, ...], Field(min_length=1)]
    base_emitter: Annotated[tuple[Saturation, ...], Field(min_length=1, description="V_BE(sat) at I_C and I_B")]
    thermal_resistance: Annotated[Quantity, THERMAL_RESISTANCE] | None = None
    junction_rating: Annotated[Quantity, TEMPERATURE] | None = None
    output_capacitance: Annotated[Quantity, CAPACITANCE] = assume(
        "10 pF", CAPACITANCE, "collector to base, transistor below an ampere, from memory"
    )
    capacitance_voltage: Annotated[Quantity, VOLTAGE] = assume(
        "10 V", VOLTAGE, "test voltage of most datasheets, common practice"
    )
    input_capacitance: Annotated[Quantity, CAPACITANCE] = assume(
        "30 pF", CAPACITANCE, "emitter to base at 0.5 V, transistor below an ampere, from memory"
    )
    transition_frequency: Annotated[Quantity, FREQUENCY] = assume(
        "200 MHz", FREQUENCY, "small switching transistor, from memory"
    )
    storage_time: Annotated[Quantity, TIME] = assume(
        "250 ns", TIME, "at the first saturation point, with the base current reversed, from memory"
    )
    model: vendors_model(("collector", "base", "emitter"), "npn") = Field(None, description=A_MODEL)  # type: ignore[valid-type]

    def device(self, name: str, collector: str, base: str, t: float) -> Bipolar | VendorsPart:
        """The transistor with its emitter at ground: as its vendor has it, or from its figures. `t` is the junction's. [K]"""
        if self.model is not None:
            found: VendorsPart = self.model.part(name, {"collector": collector, "base": base, "emitter": GROUND}, t)
            return found
        return Bipolar(name, collector, base, GROUND, Model(f"{name}_m", "NPN", self.parameters()))

    @model_validator(mode="after")
    def _coherent(self) -> Npn:
        for above, below in itertools.pairwise(sorted(self.gain, key=lambda g: g.current.typ)):
            if above.current.typ == below.current.typ:
                raise QuantityError(f"gain is given twice at {above.current}")
        parameters = self.parameters()
        for g in self.gain:
            modelled = parameters["BF"] / (1 + g.current.typ / parameters.get("IKF", math.inf))
            if modelled < _CLEARLY_MORE * g.least:
                raise QuantityError(
                    f"the least gain of {g.least} at {g.current} is not clearly below the typical gain of {modelled:.3g} there; "
                    "the typical gain shapes the model, and has to be at least 5 % more"
                )
        return self

    def parameters(self) -> dict[str, float]:
        """Parameters of ngspice's Gummel-Poon model from the datasheet's typical figures.

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
        With F = I_S exp(V_BE / V_T), R = I_S exp(V_BC / V_T) and q_b = (1 + sqrt(1 + 4 F / I_KF)) / 2:

        - Outside saturation I_C = F / q_b and I_B = F / B_F, hence h_FE = B_F / (1 + I_C / I_KF): B_F and I_KF from the
          point of highest gain and that of highest current; no I_KF where the gain does not fall.
        - In saturation V_CE = V_T ln(F / R) + R_C I_C, see `saturated`: of several points B_R and R_C by least squares,
          of one R_C alone, with B_R = 4.
        - V_BE = V_T ln(F / I_S) + R_B I_B: I_S and R_B from the first and the last point, of one I_S alone.
        - T_F = 1 / (2 pi f_T), which counts the junctions' share in f_T twice and is then a little slow.
        - T_R from the storage time t_s = tau_s ln((I_B1 + I_B2) / (I_C / B_F + I_B2)) with I_B1 = I_B2 = I_B and
          tau_s = a_F (T_F + a_R T_R) / (1 - a_F a_R), a = B / (1 + B) (Moll). High-level injection shortens it.

        Valid from about a hundredth of the rated current up to the highest current of its points; at 25 degC, and with what
        ngspice makes of it elsewhere (`WITH_TEMPERATURE`).

        References
        ----------
        ngspice manual, BJT model. J. L. Moll, "Large-signal transient response of junction transistors", Proc. IRE 42
        (1954), for the storage time.
        """
        b_f, knee = self._forward_gain()
        b_r, r_c = self._saturation(b_f, knee)
        i_s, r_b = self._base(b_f, b_r, knee)
        t_f = 1 / (2 * math.pi * self.transition_frequency.typ)
        a_f, a_r = b_f / (1 + b_f), b_r / (1 + b_r)
        point = self.saturation[0]
        i_b = point.base.typ
        tau = self.storage_time.typ / math.log(2 * i_b / (i_b + point.current.typ / b_f))
        found = {
            "IS": i_s,
            "BF": b_f,
            "BR": b_r,
            "RB": r_b,
            "RC": r_c,
            "CJE": self.input_capacitance.typ * (1 + 0.5 / JUNCTION_POTENTIAL) ** GRADING,
            "VJE": JUNCTION_POTENTIAL,
            "MJE": GRADING,
            "CJC": junction_capacitance(self.output_capacitance.typ, self.capacitance_voltage.typ),
            "VJC": JUNCTION_POTENTIAL,
            "MJC": GRADING,
            "TF": t_f,
            "TR": max((tau * (1 - a_f * a_r) / a_f - t_f) / a_r, 0.0),
            **WITH_TEMPERATURE,
        }
        return found if math.isinf(knee) else {**found, "IKF": knee}

    def _forward_gain(self) -> tuple[float, float]:
        """B_F [1] and I_KF [A]: 1 / h_FE is a straight line over the current."""
        best = max(self.gain, key=lambda g: g.typ)
        last = max(self.gain, key=lambda g: g.current.typ)
        if last.typ >= best.typ or last.current.typ <= best.current.typ:
            return best.typ, math.inf
        slope = (1 / last.typ - 1 / best.typ) / (last.current.typ - best.current.typ)
        at_nothing = 1 / best.typ - slope * best.current.typ
        if at_nothing <= 0:
            raise QuantityError(
                f"gain falls from {best.typ:.4g} at {best.current} to {last.typ:.4g} at {last.current}, faster than with the current"
            )
        return 1 / at_nothing, at_nothing / slope

    def _saturation(self, b_f: float, knee: float) -> tuple[float, float]:
        """B_R [1] and R_C [ohm]."""
        best = (math.inf, _REVERSE_GAIN, 0.0)
        for b_r in (_REVERSE_GAIN,) if len(self.saturation) == 1 else _REVERSE_GAINS:
            left = []
            for p in self.saturation:
                forward, reverse = saturated(p.current.typ, p.base.typ, b_f, b_r, knee)
                left.append((p.current.typ, p.voltage.typ - THERMAL_VOLTAGE * math.log(forward / reverse)))
            r_c = sum(i * v for i, v in left) / sum(i * i for i, _ in left)
            off = sum(((v - r_c * i) / p.voltage.typ) ** 2 for (i, v), p in zip(left, self.saturation, strict=True))
            if r_c >= 0 and off < best[0]:
                best = (off, b_r, r_c)
        if math.isinf(best[0]):
            p = self.saturation[0]
            raise QuantityError(
                f"saturation of {in_units(p.voltage.typ, 'V')} at {p.current} is less than the junctions alone make at this gain"
            )
        return best[1], best[2]

    def _base(self, b_f: float, b_r: float, knee: float) -> tuple[float, float]:
        """I_S [A] and R_B [ohm]."""
        points = []
        for p in self.base_emitter:
            forward, _ = saturated(p.current.typ, p.base.typ, b_f, b_r, knee)
            points.append((p.base.typ, p.voltage.typ - thermal(forward, 1.0)))
        points.sort()
        offset, r_b = straight_line([points[0], points[-1]])
        if r_b < 0:
            offset, r_b = straight_line(points)[0] if len(points) == 1 else sum(v for _, v in points) / len(points), 0.0
        return math.exp(-offset / THERMAL_VOLTAGE), r_b

    def needs(self) -> tuple[tuple[float, float], ...]:
        """Pairs of collector current and the base current that a transistor of the least gain needs for it. [A], [A]"""
        points = sorted((g.current.typ, g.current.typ / g.least) for g in self.gain)
        return ((0.0, 0.0), *points)

    def assumed(self) -> tuple[Assumption, ...]:
        """What was assumed of the transistor; of a vendor's model nothing."""
        if self.model is not None:
            return ()
        numbers = listed(
            "switch",
            output_capacitance=self.output_capacitance,
            capacitance_voltage=self.capacitance_voltage,
            input_capacitance=self.input_capacitance,
            transition_frequency=self.transition_frequency,
            storage_time=self.storage_time,
        )
        why = f"{_TYPICAL_OVER_LEAST:g} times the least gain, from memory"
        gains = [
            Assumption("switch", f"typical gain at {g.current}", f"{g.typ:.4g}", why)
            for g in self.gain
            if g.typical is None
        ]
        if len(self.saturation) == 1:
            why = "small switching transistor, from memory; one saturation point leaves it open"
            gains.append(Assumption("switch", "reverse gain", f"{_REVERSE_GAIN:g}", why))
        return (*numbers, *gains, TEMPERATURE_ASSUMED)

    def proofs(self) -> tuple[Proof, ...]:
        """Its saturation voltages, gains, base-emitter voltages and storage time."""
        return npn_proofs(self)


class NpnStage(Part):
    """The transistor with its base resistor and pull-down; emitter at ground, collector at the coil."""

    role: ClassVar[str] = "switch"
    kind: Literal["npn"] = "npn"
    part: named_part(Npn)  # type: ignore[valid-type]
    base: Annotated[Quantity, POSITIVE_RESISTANCE]
    pulldown: Annotated[Quantity, POSITIVE_RESISTANCE] | None = None

    active: ClassVar[Literal["high", "low"]] = "high"
    """Output level that turns the coil on."""

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this stage: where the transistor breaks down."""
        return {"breakdown": self.part.breakdown}

    def steady_input(self, volts: float, resistance: float) -> float:
        """Through the base resistor into base and pull-down, which a junction holds at 0.6 V at least (from memory). [A]"""
        return max(volts - _LEAST_JUNCTION, 0.0) / (resistance + self.base.min)

    def held_off(self) -> bool:
        """Whether it has a pull-down."""
        return self.pulldown is not None

    def stamp(self, name: str, pin: str, load: str, corner: Corner, rail: str = "") -> Stamp:
        """The stage between the register's node `pin` and the coil's node `load`."""
        part: Npn = self.part
        volts = corner.take(part.breakdown, "breakdown")
        parameters = part.parameters()
        base, inside = f"{name}_b", f"{name}_ci"
        meter = Ammeter(f"{name}_d", load, inside)
        into_base = scaled(1 / self.base.typ, voltage(pin, base))
        network: list[Element] = [Resistor(f"{name}_base", pin, base, self.base.typ)]
        if self.pulldown is not None:
            network.append(Resistor(f"{name}_pulldown", base, GROUND, self.pulldown.typ))
            into_base = plus(into_base, scaled(-1 / self.pulldown.typ, voltage(base)))
        # The junctions give back what they hold at the breakdown voltage, the base its carriers at about 1 V.
        carriers = part.storage_time.typ * max(p.base.typ for p in part.saturation)
        holds = 0.5 * parameters["CJC"] * volts**2 + 0.5 * (parameters["CJE"] + parameters["CJC"]) + carriers
        vendors = self._vendors(name, corner)
        return Stamp(
            elements=(
                meter,
                part.device(name, inside, base, corner.junction),
                breakdown_junction(f"{name}_bv", inside, volts),
                *network,
                *vendors.elements,
            ),
            # The house's names for voltage and current of a switch, whatever its kind.
            probes=(
                Probe("v_ds", voltage(inside), "V"),
                Probe("i_d", current(meter), "A"),
                Probe("v_be", voltage(base), "V"),
                Probe("i_b", into_base, "A"),
                *vendors.probes,
            ),
            ports=(Port("switch", (("v_ds", "i_d"), ("v_be", "i_b")), holds=holds),),
            rules=(*self._rules(volts, corner), *vendors.rules),
            assumptions=(*part.assumed(), *vendors.assumptions),
        )

    def _vendors(self, name: str, corner: Corner) -> Stamp:
        """What stands beside a vendor's model: one that shows whether it stands its rated voltage. Nothing beside ours."""
        part: Npn = self.part
        if part.model is None:
            return Stamp()
        at = f"{name}_off"
        nodes = {"collector": at, "base": GROUND, "emitter": GROUND}
        source = str(part.breakdown.origin)
        elements, probe, rule = held_off(part.model, name, nodes, at, part.breakdown.min, source, corner.junction)
        added = Assumption(
            "switch",
            "breakdown",
            str(part.breakdown),
            "a junction beside the vendor's model, as beside ours; corners vary it",
        )
        told = (*part.model.told("switch"), stored("switch", "capacitances and storage time"), added)
        return Stamp(elements=elements, probes=(probe,), rules=(rule,), assumptions=told)

    def _rules(
        self, volts: float, corner: Corner
    ) -> tuple[BreakdownRule | PeakRule | MeanRule | DriveRule | HeatRule, ...]:
        part: Npn = self.part
        no_avalanche = Limit(None, "J", "energy", "", "avalanche energy")
        peak = Limit.of(part.peak_current, "peak collector current", "A", "current")
        if part.peak_current is None:
            peak = Limit.of(
                part.continuous_current, "continuous collector current (no peak rating given)", "A", "current"
            )
        source = str(part.gain[0].current.origin)
        return (
            BreakdownRule(
                "overvoltage",
                "v_ds",
                "i_d",
                volts,
                Limit.of(part.breakdown, "collector-emitter voltage", "V", "voltage", part.breakdown.min),
                Limit(None, "A", "current", "", "avalanche current"),
                no_avalanche,
                no_avalanche,
                "collector-emitter voltage",
            ),
            DriveRule(
                "under-drive",
                "i_b",
                "i_d",
                part.needs(),
                Limit(None, "A", None, source, "base current by the least gain"),
                "destroy",
                "base current of the switch",
                "a smaller base resistor, or a transistor of higher gain: out of saturation it heats",
            ),
            PeakRule("overcurrent", "i_d", peak, "destroy", "peak current of the switch", "choose a larger switch"),
            MeanRule(
                "overcurrent",
                ("i_d",),
                Limit.of(part.continuous_current, "continuous collector current", "A", "current"),
                "destroy",
                "average current of the switch",
                "choose a larger switch, or fire less often",
            ),
            junction_heat(
                "",  # the placed rule names the switch
                "switch",
                (("v_ds", "i_d"), ("v_be", "i_b")),
                part.thermal_resistance,
                part.junction_rating,
                corner.ambient,
                "choose a larger switch, or fire less often",
            ),
        )
