"""A rectifier diode, from its forward voltage at one or more currents."""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from typing import TYPE_CHECKING, Annotated, ClassVar, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import NOMINAL, T_MODEL, Assumption, Corner, Part, Stamp, listed
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
    scaled,
    voltage,
)
from boardsim.parts.heat import junction_heat
from boardsim.parts.proof import AtEnd, Proof
from boardsim.parts.record import Record
from boardsim.parts.rules import Limit, MeanRule, PeakRule, PulseRule, Rule
from boardsim.parts.temperature import (
    HOTTEST,
    LEAST_SATURATION,
    LeakagePoint,
    in_celsius,
    junction_at,
    reverse_current,
    thermal_voltage,
)
from boardsim.parts.vendor.beside import blocking, stored
from boardsim.parts.vendor.model import A_MODEL, vendors_model
from boardsim.quantities import (
    CAPACITANCE,
    CURRENT,
    POSITIVE_TIME,
    TEMPERATURE,
    THERMAL_RESISTANCE,
    TIME,
    VOLTAGE,
    VOLTAGE_DRIFT,
    Quantity,
    assume,
    celsius,
    in_units,
)

if TYPE_CHECKING:
    from boardsim.parts.led import Led

THERMAL_VOLTAGE = thermal_voltage(T_MODEL)  # [V] k T / q at 25 degC
_MOST_FOLDS = 250  # e-folds of current: about 11 V across the junction alone, more than stacked rectifiers have
_RECOVERY_CURRENTS = 0.5  # forward over reverse current at which recovery times are given (0.5 A, 1 A), common practice
EMISSION = 1.75  # silicon rectifier in its working range, from memory
RAMP, SETTLE = 1e-3, 10e-3  # [s], of a test current: from nothing to its value, and until it is read
_FAR = 20.0  # [K] from 25 degC, nearer than which rounding of the printed voltages decides the drift
_STEEPEST = 10e-3  # [V/K], three times what stacked junctions have, from memory
_DRIFT, _DRIFT_SHARE = 2e-3, 3e-3  # [V/K], [1/K] see Diode.drift
_BASE = 0.1  # share of its peak above which a half sine lasts for 94 % of its base, by which surge ratings count


class ForwardPoint(Record):
    """One typical point of the forward characteristic; a band where the datasheet prints the ends of one.

    A point `at` another junction temperature than 25 degC shows how the voltage moves with it.
    """

    voltage: Annotated[Quantity, VOLTAGE]
    current: Annotated[Quantity, CURRENT]
    at: Annotated[Quantity, TEMPERATURE] | None = None

    @property
    def kelvin(self) -> float:
        """25 degC if none was given. [K]"""
        return T_MODEL if self.at is None else self.at.typ


class SurgePoint(Record):
    """The highest current of a single pulse of a length."""

    current: Annotated[Quantity, CURRENT]
    lasting: Annotated[Quantity, POSITIVE_TIME]


def forward_parameters(points: Sequence[tuple[float, float]], emission: float = EMISSION) -> tuple[float, float, float]:
    """Saturation current, emission coefficient and series resistance of a diode from forward points.

    Parameters
    ----------
    points : sequence of (voltage, current)
        Typical forward points, currents rising. [V], [A]
    emission : float
        Emission coefficient that is taken where the points leave it open. [1]

    Returns
    -------
    tuple of float
        I_S [A], N [1], R_S [ohm].

    Raises
    ------
    QuantityError
        If currents or voltages do not rise, or a voltage is more than one junction can have.

    Notes
    -----
    V = N V_T ln(I / I_S) + R_S I at 25 degC. One point: N is taken as `emission` and R_S as 0. Two points: N likewise,
    R_S from the difference; where that would be negative, R_S = 0 and N from the difference. Where I_S would be below
    1e-28 A, which ngspice does not take, I_S is that and N and R_S follow from the points. More points: the first and the
    last are used that way.

    Examples
    --------
    >>> i_s, n, r_s = forward_parameters([(0.7, 0.01), (0.95, 1.0)])
    >>> round(n * THERMAL_VOLTAGE * math.log(1.0 / i_s) + r_s * 1.0, 6)
    0.95
    """
    v1, i1 = points[0]
    v2, i2 = points[-1]
    n, r_s = emission, 0.0
    if len(points) > 1:
        if not (i2 > i1 and v2 > v1):
            raise QuantityError("forward points must rise in voltage and current")
        r_s = (v2 - v1 - n * THERMAL_VOLTAGE * math.log(i2 / i1)) / (i2 - i1)
        if r_s < 0:
            r_s, n = 0.0, (v2 - v1) / (THERMAL_VOLTAGE * math.log(i2 / i1))
    folds = (v2 - r_s * i2) / (n * THERMAL_VOLTAGE)
    if folds <= 0:
        raise QuantityError("forward points rise more steeply than a junction with a series resistance does")
    if folds > _MOST_FOLDS:
        raise QuantityError(f"forward voltage {v2:.3g} V at {i2:.3g} A is more than that of one junction")
    if folds > math.log(i2 / LEAST_SATURATION):
        return _at_the_least(points)
    return i2 / math.exp(folds), n, r_s


def _at_the_least(points: Sequence[tuple[float, float]]) -> tuple[float, float, float]:
    """The same three numbers with the least saturation current that ngspice takes, N and R_S from the points.

    Below 1e-28 A ngspice's diode goes on with 1e-28 A without a word: a junction of 3 V would come out at 2 V.
    """
    (v1, i1), (v2, i2) = points[0], points[-1]
    f1, f2 = (THERMAL_VOLTAGE * math.log(i / LEAST_SATURATION) for i in (i1, i2))
    n, r_s = v2 / f2, 0.0
    if len(points) > 1:  # v = N f + R_S i at both
        r_s = (v2 * f1 - v1 * f2) / (i2 * f1 - i1 * f2)
        n = (v2 - r_s * i2) / f2
    if r_s < 0 or n <= 0:
        raise QuantityError(
            f"forward voltage {v2:.3g} V at {i2:.3g} A is more than that of one junction that rises as little as these points do"
        )
    return LEAST_SATURATION, n, r_s


class Diode(Part):
    """A diode with its ratings.

    Notes
    -----
    ngspice's junction diode at the run's junction temperature, without breakdown: a reverse voltage above the rating is
    reported, not clipped. The forward voltage moves as `forward_drift` or points at another temperature say
    (`junction_at`), a reverse current that was given as a resistance across the rated voltage (`reverse_current`). Stored charge from the recovery time; it ends abruptly, and the loop through switch and capacitor has no
    inductance, so current peaks when a channel is fired into a conducting clamp are upper bounds. Ignores the rise of
    the forward voltage at turn-on.

    `surge` are single pulses (I_FSM against the base of a half sine): every pulse of the clamp is held against the
    rating at its own length. A surge rating covers one pulse after a rest; what repeats is judged by
    `repetitive_current` besides.
    """

    role: ClassVar[str] = "component"
    kind: Literal["diode"] = "diode"
    forward: Annotated[tuple[ForwardPoint, ...], Field(min_length=1)]
    reverse_voltage: Annotated[Quantity, VOLTAGE] | None = None
    average_current: Annotated[Quantity, CURRENT] | None = None
    repetitive_current: Annotated[Quantity, CURRENT] | None = None
    surge: tuple[SurgePoint, ...] = ()
    thermal_resistance: Annotated[Quantity, THERMAL_RESISTANCE] | None = None
    junction_rating: Annotated[Quantity, TEMPERATURE] | None = None
    capacitance: Annotated[Quantity, CAPACITANCE] = assume(
        "50 pF", CAPACITANCE, "rectifier of a few amperes, from memory"
    )
    recovery: Annotated[Quantity, TIME] = assume("100 ns", TIME, "fast rectifier, from memory")
    forward_drift: Annotated[Quantity, VOLTAGE_DRIFT] | None = Field(
        None, description="of the forward voltage with temperature, at the highest current given"
    )
    leakage: tuple[LeakagePoint, ...] = Field(
        (), description="reverse current at the rated voltage, at one or two temperatures"
    )
    model: vendors_model(("anode", "cathode"), "d") = Field(None, description=A_MODEL)  # type: ignore[valid-type]

    @model_validator(mode="after")
    def _coherent(self) -> Diode:
        self.parameters()
        surge_points(self.surge)
        if self.leakage:
            if self.reverse_voltage is None:
                raise QuantityError("leakage is given at the reverse_voltage, which is missing")
            reverse_current(self._leakages(), T_MODEL)
        return self

    def parameters(self, t: float = T_MODEL) -> tuple[float, float, float]:
        """Saturation current [A], emission coefficient [1] and series resistance [ohm] of its forward points.

        Parameters
        ----------
        t : float
            Junction temperature. [K]

        Raises
        ------
        QuantityError
            If the points do not rise, or cannot be those of one junction.
        """
        return junction_parameters(self.forward, self.drift, EMISSION, t)

    def implied(self) -> dict[str, Quantity]:
        """What is assumed for want of a number."""
        shown = any(p.kelvin != T_MODEL for p in self.forward) or self.model is not None
        return {} if shown else {"forward drift": self.drift}

    @property
    def drift(self) -> Quantity:
        """Of the forward voltage; assumed where it was not given. [V/K]"""
        if self.forward_drift is not None:
            return self.forward_drift
        volts = at_25_degc(self.forward)[-1][0]
        return assume(
            f"{-min(_DRIFT, _DRIFT_SHARE * volts) * 1e3:.3g} mV/K",
            VOLTAGE_DRIFT,
            "-2 mV/K of a silicon junction, common practice, and at most 0.3 %/K of the voltage, as Schottky diodes have it, from memory",
        )

    def _leakages(self) -> list[tuple[float, float]]:
        return sorted((p.kelvin, p.current.typ) for p in self.leakage)

    def proofs(self) -> tuple[Proof, ...]:
        """Its forward voltage at every current and temperature that was given for it."""
        return forward_proofs(self, self.forward)

    def stamp(
        self, name: str, label: str, anode: str, cathode: str, through: Signal, corner: Corner = NOMINAL
    ) -> Stamp:
        """The diode between two nodes; `through` is the current from anode to cathode."""
        i_s, n, r_s = self.parameters(corner.junction)
        # Charge control: a diode that conducts I_F and is driven by I_R stays on for TT ln(1 + I_F / I_R).
        transit_time = self.recovery.typ / math.log(1 + _RECOVERY_CURRENTS)
        model = Model(
            f"{name}_m",
            "D",
            {
                "IS": i_s,
                "N": n,
                "RS": r_s,
                "CJO": self.capacitance.typ,
                "TT": transit_time,
                "TNOM": in_celsius(corner.junction),
            },
        )
        elements: list[Element] = [Junction(name, anode, cathode, model)]
        beside = Stamp()
        if self.model is not None:
            beside = self._beside(name, label, corner.junction)
            elements = [self.model.part(name, {"anode": anode, "cathode": cathode}, corner.junction), *beside.elements]
        elif self.leakage and self.reverse_voltage is not None:
            reverse = reverse_current(self._leakages(), corner.junction)
            elements.append(Resistor(f"{name}_leak", cathode, anode, self.reverse_voltage.typ / reverse))
        name_of = self.title or label
        v, i, v_r = f"v_{label}", f"i_{label}", f"vr_{label}"
        peak_limit = Limit.of(self.repetitive_current, "repetitive peak current", "A", "current")
        rules: tuple[Rule, ...] = (
            PeakRule(
                "overvoltage",
                v_r,
                Limit.of(self.reverse_voltage, "repetitive reverse voltage", "V", "voltage"),
                "destroy",
                f"reverse voltage of the {label}",
                "choose a higher reverse voltage",
                part=name_of,
            ),
            PeakRule(
                "overcurrent",
                i,
                peak_limit,
                "destroy",
                f"peak current of the {label}",
                "choose a larger or faster diode",
                part=name_of,
            ),
            MeanRule(
                "overcurrent",
                (i,),
                Limit.of(self.average_current, "average current", "A", "current"),
                "destroy",
                f"average current of the {label}",
                "choose a larger diode, or fire less often",
                part=name_of,
            ),
            junction_heat(
                name_of,
                label,
                ((v, i),),
                self.thermal_resistance,
                self.junction_rating,
                corner.ambient,
                "choose a larger diode, more copper around it, or fire less often",
            ),
        )
        if self.surge:
            rules += (self._surge_rule(name_of, label, i),)
        v_max = self.reverse_voltage.typ if self.reverse_voltage else 100.0
        # The junction gives its charge back at up to the reverse voltage, the stored carriers theirs near the drop.
        forward = self.forward[-1]
        holds = 0.5 * self.capacitance.typ * v_max**2 + transit_time * forward.current.typ * forward.voltage.typ
        return Stamp(
            elements=tuple(elements),
            probes=(
                Probe(v, voltage(anode, cathode), "V"),
                Probe(v_r, scaled(-1, voltage(anode, cathode)), "V"),
                Probe(i, through, "A"),
                *beside.probes,
            ),
            ports=(Port(label, ((v, i),), holds=holds),),
            rules=(*rules, *beside.rules),
            assumptions=self._assumed(name_of),
        )

    def _beside(self, name: str, label: str, t: float) -> Stamp:
        """What shows whether a vendor's model stands the rated voltage. [K]"""
        leaks = reverse_current(self._leakages(), t) if self.leakage else 0.0
        return blocking(self.model, name, label, self.reverse_voltage, leaks, self.title or label, t)

    def _assumed(self, part: str) -> tuple[Assumption, ...]:
        if self.model is not None:
            return (*self.model.told(part), stored(part, "capacitance and recovery time"))
        return listed(
            part,
            capacitance=self.capacitance,
            recovery_time=self.recovery,
            **drift_listed(self.forward, self.drift),
        )

    def _surge_rule(self, part: str, label: str, i: str) -> PulseRule:
        points = surge_points(self.surge)
        return PulseRule(
            "surge",
            (i,),
            Limit.of(self.surge[0].current, "surge current", "A", "current", points[0][1]),
            points,
            self.repetitive_current.typ if self.repetitive_current is not None else 0.0,
            _BASE,
            "destroy",
            f"surge of the {label}",
            "choose a larger diode",
            part=part,
        )


def most_current(diode: Diode) -> float:
    """What a diode stands again and again, to choose among diodes; 0 where it is not given. [A]"""
    return diode.repetitive_current.typ if diode.repetitive_current is not None else 0.0


def surge_points(points: Sequence[SurgePoint]) -> tuple[tuple[float, float], ...]:
    """Lengths [s] and currents [A] of surge ratings, the lengths rising.

    Raises
    ------
    QuantityError
        If a longer pulse may be higher, or two points have the same length.
    """
    found = sorted((p.lasting.typ, p.current.min) for p in points)
    for (t1, i1), (t2, i2) in itertools.pairwise(found):
        if t1 == t2 or i2 > i1:
            raise QuantityError("surge points must fall in current as they rise in length, one for each length")
    return tuple(found)


def at_25_degc(points: Sequence[ForwardPoint]) -> list[tuple[float, float]]:
    """Voltage [V] and current [A] of the points that were given at 25 degC.

    Raises
    ------
    QuantityError
        If there is none.
    """
    found = [(p.voltage.typ, p.current.typ) for p in points if p.kelvin == T_MODEL]
    if not found:
        raise QuantityError('forward needs a point at 25 degC (one without "at")')
    return found


def drift_listed(points: Sequence[ForwardPoint], drift: Quantity) -> dict[str, Quantity]:
    """The drift of the forward voltage, to be listed as an assumption where no point at another temperature shows it."""
    shown = any(p.kelvin != T_MODEL for p in points) and drift.assumed()
    return {} if shown else {"drift_of_the_forward_voltage": drift}


def junction_parameters(
    points: Sequence[ForwardPoint], drift: Quantity, emission: float, t: float
) -> tuple[float, float, float]:
    """Saturation current, emission coefficient and series resistance at a junction temperature.

    Parameters
    ----------
    points : sequence of ForwardPoint
        Those at 25 degC shape the junction (`forward_parameters`); those at another temperature show its drift.
    drift : Quantity
        Of the forward voltage at the highest current, where no point shows it, or where it was given. [V/K]
    emission : float
        Where the points leave it open. [1]
    t : float
        Junction temperature. [K]

    Returns
    -------
    tuple of float
        I_S [A], N [1], R_S [ohm].

    Raises
    ------
    QuantityError
        If the points do not rise, or cannot be those of one junction.
    """
    cold = at_25_degc(points)
    i_s, n, r_s = forward_parameters(cold, emission)
    reference, slope = cold[-1][1], drift.typ
    hot = [p for p in points if p.kelvin != T_MODEL]
    if hot and not drift.assumed():
        raise QuantityError("give forward points at another temperature or forward_drift, not both")
    if hot:
        point = max(hot, key=lambda p: abs(p.kelvin - T_MODEL))
        reference = point.current.typ
        volts = n * THERMAL_VOLTAGE * math.log(reference / i_s) + r_s * reference
        if abs(point.kelvin - T_MODEL) < _FAR:
            raise QuantityError(
                f"a forward point at {celsius(point.kelvin)} is too near to 25 degC to show how the voltage moves"
            )
        slope = (point.voltage.typ - volts) / (point.kelvin - T_MODEL)
        if abs(slope) > _STEEPEST:
            raise QuantityError(
                f"forward points move by {slope * 1e3:.3g} mV/K, more than a junction does; check them and their temperatures"
            )
    left = n * THERMAL_VOLTAGE * math.log(reference / i_s) + slope * (HOTTEST - T_MODEL)
    if left <= 0:
        raise QuantityError(
            f"a drift of {in_units(slope, 'V/K')} leaves nothing of the junction's voltage at {celsius(HOTTEST)}; give forward_drift "
            "as the datasheet prints it, or a forward point at another temperature"
        )
    i_s, n = junction_at(i_s, n, reference, slope, t)
    return i_s, n, r_s


def forward_proofs(part: Diode | Led, points: Sequence[ForwardPoint]) -> tuple[Proof, ...]:
    """The forward voltage at every current given, with a current of a source through the part."""
    anode = "a"
    return tuple(
        Proof(
            f"forward voltage at {in_units(p.current.typ, 'A')}"
            + (f", {celsius(p.kelvin)}" if p.at is not None else ""),
            "V",
            p.voltage,
            (
                CurrentDrive("test", anode, GROUND, ((0.0, 0.0), (RAMP, p.current.typ), (2 * SETTLE, p.current.typ))),
                *part.stamp("x", "diode", anode, GROUND, (), Corner("test", junction=p.kelvin)).elements,
            ),
            SETTLE,
            AtEnd(voltage(anode)),
            why="one junction and one resistance pass through the first and the last point; those between may lie beside",
            temperature=p.kelvin,
        )
        for p in points
    )
