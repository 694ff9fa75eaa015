"""A rectifier diode, from its forward voltage at one or more currents."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Annotated, ClassVar, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import Part, Stamp, listed
from boardsim.parts.elements import Junction, Model, Port, Probe, Signal, scaled, voltage
from boardsim.parts.record import Record
from boardsim.parts.rules import Limit, MeanRule, PeakRule, Rule
from boardsim.quantities import CAPACITANCE, CURRENT, TIME, VOLTAGE, Quantity, assume

THERMAL_VOLTAGE = 8.617333e-5 * 298.15  # [V] k T / q at 25 degC, CODATA
_MOST_FOLDS = 250  # e-folds of current: about 11 V across the junction alone, more than stacked rectifiers have
_RECOVERY_CURRENTS = 0.5  # forward over reverse current at which recovery times are given (0.5 A, 1 A), common practice
EMISSION = 1.75  # silicon rectifier in its working range, from memory


class ForwardPoint(Record):
    """One typical point of the forward characteristic."""

    voltage: Annotated[Quantity, VOLTAGE]
    current: Annotated[Quantity, CURRENT]


def forward_parameters(points: Sequence[tuple[float, float]]) -> tuple[float, float, float]:
    """Saturation current, emission coefficient and series resistance of a diode from forward points.

    Parameters
    ----------
    points : sequence of (voltage, current)
        Typical forward points, currents rising. [V], [A]

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
    V = N V_T ln(I / I_S) + R_S I at 25 degC. One point: N is taken as 1.75 and R_S as 0. Two points: N as 1.75,
    R_S from the difference; where that would be negative, R_S = 0 and N from the difference. More points: the
    first and the last are used that way.

    Examples
    --------
    >>> i_s, n, r_s = forward_parameters([(0.7, 0.01), (0.95, 1.0)])
    >>> round(n * THERMAL_VOLTAGE * math.log(1.0 / i_s) + r_s * 1.0, 6)
    0.95
    """
    v1, i1 = points[0]
    v2, i2 = points[-1]
    n, r_s = EMISSION, 0.0
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
    i_s = i2 / math.exp(folds)
    return i_s, n, r_s


class Diode(Part):
    """A diode with its ratings.

    Notes
    -----
    ngspice's junction diode at 25 degC without breakdown: a reverse voltage above the rating is reported, not
    clipped. Stored charge from the recovery time; it ends abruptly, and the loop through switch and capacitor has no
    inductance, so current peaks when a channel is fired into a conducting clamp are upper bounds. Ignores the rise of
    the forward voltage at turn-on.
    """

    role: ClassVar[str] = "component"
    kind: Literal["diode"] = "diode"
    forward: Annotated[tuple[ForwardPoint, ...], Field(min_length=1)]
    reverse_voltage: Annotated[Quantity, VOLTAGE] | None = None
    average_current: Annotated[Quantity, CURRENT] | None = None
    repetitive_current: Annotated[Quantity, CURRENT] | None = None
    capacitance: Annotated[Quantity, CAPACITANCE] = assume(
        "50 pF", CAPACITANCE, "rectifier of a few amperes, from memory"
    )
    recovery: Annotated[Quantity, TIME] = assume("100 ns", TIME, "fast rectifier, from memory")

    @model_validator(mode="after")
    def _coherent(self) -> Diode:
        self.parameters()
        return self

    def parameters(self) -> tuple[float, float, float]:
        """Saturation current [A], emission coefficient [1] and series resistance [ohm] of its forward points.

        Raises
        ------
        QuantityError
            If the points do not rise, or cannot be those of one junction.
        """
        return forward_parameters([(p.voltage.typ, p.current.typ) for p in self.forward])

    def stamp(self, name: str, label: str, anode: str, cathode: str, through: Signal) -> Stamp:
        """The diode between two nodes; `through` is the current from anode to cathode."""
        i_s, n, r_s = self.parameters()
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
                "TNOM": 25.0,
            },
        )
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
        )
        v_max = self.reverse_voltage.typ if self.reverse_voltage else 100.0
        # The junction gives its charge back at up to the reverse voltage, the stored carriers theirs near the drop.
        forward = self.forward[-1]
        holds = 0.5 * self.capacitance.typ * v_max**2 + transit_time * forward.current.typ * forward.voltage.typ
        return Stamp(
            elements=(Junction(name, anode, cathode, model),),
            probes=(
                Probe(v, voltage(anode, cathode), "V"),
                Probe(v_r, scaled(-1, voltage(anode, cathode)), "V"),
                Probe(i, through, "A"),
            ),
            ports=(Port(label, ((v, i),), holds=holds),),
            rules=rules,
            assumptions=listed(name_of, capacitance=self.capacitance, recovery_time=self.recovery),
        )
