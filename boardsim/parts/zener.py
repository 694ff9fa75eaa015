"""A Zener diode, from its voltage at the test current, its impedance and its ratings."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from pydantic import Field, model_validator

from boardsim.errors import QuantityError
from boardsim.parts.base import NOMINAL, T_MODEL, Corner, Part, Stamp, listed
from boardsim.parts.diode import RAMP, SETTLE, THERMAL_VOLTAGE
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
from boardsim.parts.rules import EnergyRule, Limit, MeanRule, PeakRule, Rule
from boardsim.parts.temperature import in_celsius, refuse_drift, reverse_current
from boardsim.parts.vendor.beside import in_its_band, stored
from boardsim.parts.vendor.model import A_MODEL, typical, vendors_model
from boardsim.quantities import (
    CAPACITANCE,
    CURRENT,
    ENERGY,
    POWER,
    RESISTANCE,
    TEMPERATURE,
    THERMAL_RESISTANCE,
    VOLTAGE,
    VOLTAGE_DRIFT,
    Quantity,
    assume,
    in_units,
)


class Zener(Part):
    """A Zener (or avalanche) diode used in breakdown.

    Notes
    -----
    V = V_Z + (Z - V_T / I_Z) (I - I_Z) + V_T ln(I / I_Z) with V_T = 26 mV: ngspice's junction breakdown in series
    with what remains of Z, so that the dynamic impedance at the test current is the datasheet's. Far beyond it a
    straight line of Z would lie higher. A leakage resistance across it lets the node between two clamp diodes find
    its level as it does on a board.

    V_Z = V_Z(25 degC) + drift (t - 25 degC) at the junction temperature of the run; the leakage doubles every 10 K.
    """

    role: ClassVar[str] = "component"
    kind: Literal["zener"] = "zener"
    voltage: Annotated[Quantity, VOLTAGE]
    test_current: Annotated[Quantity, CURRENT]
    impedance: Annotated[Quantity, RESISTANCE]
    power: Annotated[Quantity, POWER] | None = None
    surge_current: Annotated[Quantity, CURRENT] | None = None
    pulse_energy: Annotated[Quantity, ENERGY] | None = None
    thermal_resistance: Annotated[Quantity, THERMAL_RESISTANCE] | None = None
    junction_rating: Annotated[Quantity, TEMPERATURE] | None = None
    leakage: Annotated[Quantity, CURRENT] = assume(
        "1 uA", CURRENT, "at three quarters of the Zener voltage, from memory"
    )
    capacitance: Annotated[Quantity, CAPACITANCE] = assume("500 pF", CAPACITANCE, "Zener of some watts, from memory")
    drift: Annotated[Quantity, VOLTAGE_DRIFT] | None = Field(None, description="of its voltage with temperature")
    model: vendors_model(("anode", "cathode"), "d") = Field(None, description=A_MODEL)  # type: ignore[valid-type]

    @model_validator(mode="after")
    def _coherent(self) -> Zener:
        drop = self.impedance.typ * self.test_current.typ
        if drop >= self.voltage.min:
            raise QuantityError(
                f"impedance times test_current is {in_units(drop, 'V')}, which leaves nothing of the voltage of "
                f"{in_units(self.voltage.min, 'V')}"
            )
        refuse_drift("drift", self.voltage_drift.typ, self.voltage.typ)
        return self

    @property
    def voltage_drift(self) -> Quantity:
        """Of the Zener voltage; assumed where it was not given. [V/K]

        References
        ----------
        Yongerjia, BZX84C series: 0.03 to 0.11 %/K at 12 V, 0.04 to 0.12 %/K at 24 V, -0.02 to 0.02 %/K at 5.1 V; the line
        through 5 V runs through the middle of these bands.
        """
        return self.drift or assume(
            f"{self.voltage.typ - 5.0:.4g} mV/K",
            VOLTAGE_DRIFT,
            "1 mV/K for each volt above 5 V, the middle of the bands that Zeners' datasheets print",
        )

    def implied(self) -> dict[str, Quantity]:
        """What is assumed for want of a number."""
        return {"drift": self.voltage_drift}

    @property
    def clamping(self) -> Quantity:
        """What its corners vary: the voltage that it holds at the test current; a vendor's model has its own. [V]"""
        return typical(self.voltage, self.model)

    @property
    def lowest(self) -> float:
        """The least voltage that it may hold at the test current. [V]"""
        return self.voltage.min

    def proofs(self) -> tuple[Proof, ...]:
        """Its voltage at the test current."""
        held = "a"
        return (
            Proof(
                f"Zener voltage at {in_units(self.test_current.typ, 'A')}",
                "V",
                self.voltage,
                (
                    CurrentDrive("test", held, GROUND, steady_current(self.test_current.typ)),
                    *self.stamp("x", "Zener", held, GROUND, (), NOMINAL).elements,
                ),
                SETTLE,
                AtEnd(voltage(held)),
                why="the model passes through this point; the impedance sets its slope",
            ),
        )

    def stamp(self, name: str, label: str, positive: str, negative: str, through: Signal, corner: Corner) -> Stamp:
        """The Zener with `positive` at its cathode; `through` is the current from positive to negative."""
        i_z = self.test_current.typ
        v_z = corner.take(self.voltage, "clamp_voltage") + corner.drifted(self.voltage_drift.typ)
        leak = reverse_current([(T_MODEL, self.leakage.typ)], corner.junction)
        r = max(self.impedance.typ - THERMAL_VOLTAGE / i_z, 1e-3)
        model = Model(
            f"{name}_m",
            "D",
            {
                "IS": 1e-12,
                "N": 1.1,
                "RS": r,
                "BV": v_z - r * i_z,
                "IBV": i_z,
                "CJO": self.capacitance.typ,
                "TNOM": in_celsius(corner.junction),
            },
        )
        name_of = self.title or label
        v, i = f"v_{label}", f"i_{label}"
        elements: tuple[Element, ...] = (
            Junction(name, negative, positive, model),
            Resistor(f"{name}_leak", positive, negative, 0.75 * self.voltage.typ / leak),
        )
        holds = 0.5 * self.capacitance.typ * v_z**2
        beside = Stamp()
        assumed = listed(
            name_of, leakage=self.leakage, capacitance=self.capacitance, drift_of_the_voltage=self.voltage_drift
        )
        if self.model is not None:
            drifted = corner.drifted(self.voltage_drift.typ)
            beside = in_its_band(self.model, name, label, self.voltage, i_z, drifted, name_of, corner.junction)
            device = self.model.part(name, {"anode": negative, "cathode": positive}, corner.junction)
            elements = (device, *beside.elements)
            moves = listed(name_of, drift_of_the_voltage=self.voltage_drift)
            assumed = (*self.model.told(name_of), stored(name_of, "capacitance"), *moves)
        return Stamp(
            elements=elements,
            probes=(Probe(v, voltage(positive, negative), "V"), Probe(i, through, "A"), *beside.probes),
            ports=(Port(label, ((v, i),), holds=holds),),
            rules=(*self._rules(name_of, label, v, i, corner), *beside.rules),
            assumptions=assumed,
        )

    def _rules(self, name_of: str, label: str, v: str, i: str, corner: Corner) -> tuple[Rule, ...]:
        rules: tuple[Rule, ...] = (
            PeakRule(
                "overcurrent",
                i,
                Limit.of(self.surge_current, "peak current", "A", "current"),
                "destroy",
                f"peak current of the {label}",
                "choose a larger Zener or a transient suppressor",
                part=name_of,
            ),
            MeanRule(
                "overpower",
                (v, i),
                Limit.of(self.power, "power", "W", "power"),
                "destroy",
                f"average power of the {label}",
                "choose a larger Zener, or fire less often",
                part=name_of,
            ),
            junction_heat(
                name_of,
                label,
                ((v, i),),
                self.thermal_resistance,
                self.junction_rating,
                corner.ambient,
                "choose a larger Zener, more copper around it, or fire less often",
            ),
        )
        if self.pulse_energy is not None:
            rules += (
                EnergyRule(
                    "surge",
                    (v, i),
                    Limit.of(self.pulse_energy, "pulse energy", "J", "energy"),
                    "destroy",
                    f"energy of a pulse in the {label}",
                    "choose a larger Zener or a transient suppressor",
                    part=name_of,
                ),
            )
        return rules


def steady_current(amperes: float) -> tuple[tuple[float, float], ...]:
    """The points of a current that rises from nothing and stays, for a test circuit. [s], [A]"""
    return ((0.0, 0.0), (RAMP, amperes), (2 * SETTLE, amperes))
