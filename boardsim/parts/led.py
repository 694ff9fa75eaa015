"""A light-emitting diode, from its forward voltage and its ratings."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from pydantic import Field, model_validator

from boardsim.parts.base import NOMINAL, T_MODEL, Corner, Part, Stamp, listed
from boardsim.parts.diode import ForwardPoint, drift_listed, forward_proofs, junction_parameters
from boardsim.parts.elements import Junction, Model, Port, Probe, Resistor, Signal, scaled, voltage
from boardsim.parts.heat import junction_heat
from boardsim.parts.proof import Proof
from boardsim.parts.rules import Limit, MeanRule, PeakRule, PulseRule
from boardsim.parts.temperature import in_celsius, reverse_current
from boardsim.quantities import (
    CAPACITANCE,
    CURRENT,
    POSITIVE_TIME,
    TEMPERATURE,
    THERMAL_RESISTANCE,
    VOLTAGE,
    VOLTAGE_DRIFT,
    Quantity,
    assume,
)

_EMISSION = 2.0  # recombination in the junction of wide-gap semiconductors, from memory


class Led(Part):
    """A light-emitting diode with its ratings; one that is not given is reported as missing.

    Notes
    -----
    V = N V_T ln(I / I_S) + R_S I through the forward points (`forward_parameters`, with N = 2 where the
    points leave it open), moved with the junction's temperature by `forward_drift` (`junction_at`). Against reverse voltage it has its leakage as a resistance and no breakdown: a voltage above
    the rating, 5 V for most LEDs, is reported and not clipped. Behind a series diode nearly all of the reverse voltage
    lies across that, since it leaks far less. The peak current is rated for short pulses: a coil's longer one is held
    against less (see `PulseRule`), down to the forward current, which it stands for ever. Holds for one chip; strings in one package are several LEDs in series.
    """

    role: ClassVar[str] = "component"
    kind: Literal["led"] = "led"
    forward: Annotated[tuple[ForwardPoint, ...], Field(min_length=1)]
    reverse_voltage: Annotated[Quantity, VOLTAGE] | None = None
    average_current: Annotated[Quantity, CURRENT] | None = None
    peak_current: Annotated[Quantity, CURRENT] | None = None
    peak_lasting: Annotated[Quantity, POSITIVE_TIME] = assume(
        "0.1 ms", POSITIVE_TIME, "LEDs' peak forward current is given for pulses of 0.1 ms, from memory"
    )
    leakage: Annotated[Quantity, CURRENT] = assume("1 uA", CURRENT, "at a reverse voltage of 5 V, from memory")
    capacitance: Annotated[Quantity, CAPACITANCE] = assume("50 pF", CAPACITANCE, "chip of a 5 mm LED, from memory")
    thermal_resistance: Annotated[Quantity, THERMAL_RESISTANCE] | None = None
    junction_rating: Annotated[Quantity, TEMPERATURE] | None = None
    forward_drift: Annotated[Quantity, VOLTAGE_DRIFT] = assume(
        "-3 mV/K", VOLTAGE_DRIFT, "forward voltage of an LED against temperature, -2 to -4 mV/K, from memory"
    )

    @model_validator(mode="after")
    def _coherent(self) -> Led:
        self.parameters()
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
        return junction_parameters(self.forward, self.forward_drift, _EMISSION, t)

    def proofs(self) -> tuple[Proof, ...]:
        """Its forward voltage at every current that was given for it."""
        return forward_proofs(self, self.forward)

    def stamp(
        self, name: str, label: str, anode: str, cathode: str, through: Signal, corner: Corner = NOMINAL
    ) -> Stamp:
        """The LED between two nodes; `through` is the current from anode to cathode."""
        i_s, n, r_s = self.parameters(corner.junction)
        c = self.capacitance.typ
        leak = reverse_current([(T_MODEL, self.leakage.typ)], corner.junction)
        tnom = in_celsius(corner.junction)
        model = Model(f"{name}_m", "D", {"IS": i_s, "N": n, "RS": r_s, "CJO": c, "TNOM": tnom})
        name_of = self.title or label
        v, i, v_r = f"v_{label}", f"i_{label}", f"vr_{label}"
        v_max = max(100.0, self.reverse_voltage.typ if self.reverse_voltage else 0.0)
        return Stamp(
            elements=(
                Junction(name, anode, cathode, model),
                Resistor(f"{name}_leak", cathode, anode, 5.0 / leak),
            ),
            probes=(
                Probe(v, voltage(anode, cathode), "V"),
                Probe(v_r, scaled(-1, voltage(anode, cathode)), "V"),
                Probe(i, through, "A"),
            ),
            ports=(Port(label, ((v, i),), holds=0.5 * c * v_max**2),),
            rules=(
                PeakRule(
                    "overvoltage",
                    v_r,
                    Limit.of(self.reverse_voltage, "reverse voltage", "V", "voltage"),
                    "destroy",
                    f"reverse voltage of the {label}",
                    "put a diode in series with it, which blocks while the coil is on",
                    part=name_of,
                ),
                self._surge_rule(name_of, label, i),
                PeakRule(
                    "overcurrent",
                    i,
                    Limit.of(self.peak_current, "peak forward current", "A", "current"),
                    "destroy",
                    f"peak current of the {label}",
                    "take the coil's current over with another clamp",
                    part=name_of,
                ),
                MeanRule(
                    "overcurrent",
                    (i,),
                    Limit.of(self.average_current, "forward current", "A", "current"),
                    "destroy",
                    f"average current of the {label}",
                    "take the coil's current over with another clamp, or fire less often",
                    part=name_of,
                ),
                junction_heat(
                    name_of,
                    label,
                    ((v, i),),
                    self.thermal_resistance,
                    self.junction_rating,
                    corner.ambient,
                    "take the coil's current over with another clamp, or fire less often",
                ),
            ),
            assumptions=listed(
                name_of,
                leakage=self.leakage,
                capacitance=self.capacitance,
                length_of_the_peak_current=self.peak_lasting,
                **drift_listed(self.forward, self.forward_drift),
            ),
        )

    def _surge_rule(self, part: str, label: str, i: str) -> PulseRule:
        peak = Limit.of(self.peak_current, "peak forward current", "A", "current")
        return PulseRule(
            "surge",
            (i,),
            peak,
            ((self.peak_lasting.typ, peak.value),) if peak.value is not None else (),
            self.average_current.typ if self.average_current is not None else 0.0,
            0.5,
            "destroy",
            f"surge of the {label}",
            "take the coil's current over with another clamp",
            part=part,
        )
