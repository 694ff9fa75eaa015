"""A logic rail that a regulator makes from the coil rail: what linear and switching ones share."""

from __future__ import annotations

from abc import abstractmethod
from typing import Annotated, ClassVar, Literal

from pydantic import Field

from boardsim.parts.base import Assumption, Corner, Stamp, listed
from boardsim.parts.diode import forward_parameters
from boardsim.parts.elements import (
    GROUND,
    Ammeter,
    Capacitor,
    CurrentLaw,
    Element,
    Junction,
    Model,
    Port,
    Probe,
    Resistor,
    current,
    plus,
    scaled,
    voltage,
)
from boardsim.parts.heat import junction_heat
from boardsim.parts.logic import LogicRail
from boardsim.parts.rules import LeastRule, Limit, PeakRule, Rule
from boardsim.parts.temperature import in_celsius
from boardsim.quantities import (
    CAPACITANCE,
    CURRENT,
    RESISTANCE,
    TEMPERATURE,
    THERMAL_RESISTANCE,
    VOLTAGE,
    Quantity,
    assume,
)

ONE_WAY_WIDTH = 1e-6  # [A], over which a regulator stops to let current back
BACKWARD = 10e3  # [ohm] against current into its output: a feedback divider
_CEILING_WIDTH = 1e-5  # share of the ceiling
_BEYOND_CEILING = 1e-3  # share of the ceiling by which a short circuit exceeds it
BEND = 1e-3  # [V], over which regulation passes into dropout; 1 mV below either law where they meet
_LEAST_ESR = 1e-4  # [ohm], where 0 ohm was given
_LOAD_FADES = 0.1  # [V], over which a load's constant current fades with the last of its supply
_BACK_POINTS = ((0.7, 0.1), (0.9, 1.0))  # [V], [A], of the diode from output to input
EMF, INSIDE, OUTSIDE = "logic_emf", "logic_in", "logic_out"


class Regulator(LogicRail):
    """What feeds controller and registers from the coil rail.

    Notes
    -----
    The output is the lower of two voltages, the set one and what the input leaves, behind a resistance, with a current
    ceiling, into the output capacitor and the load:

        v_emf = min(V_set, f(v_in)) - R i - R_c r(i - ceiling) + R_b r(-i),   C dv_C/dt = (v - v_C) / ESR

    with r(x) nothing below 0 and x above it, rounded, as `Supply` has it and for the same reason: flat in the middle, steep at
    both ends. A short circuit draws 0.1 % more than the ceiling; R_b = 10 kohm. f is the kind's own.

    Where the input falls below the output, a diode leads from output to input (the body diode of the pass transistor, or the
    protective one that data sheets ask for) and empties the output capacitor into the coil rail; `reverse = "blocks"` says that
    there is none, or one in front of the regulator that keeps it from conducting.

    The load draws a constant current, the worse end for a dip: that of CMOS alone would fall with the rail. What registers give
    to the switches comes on top, from the circuit. Every number counts at its worse end, the output capacitor at its smallest.

    Holds for times that are long against the control loop's, some tens of microseconds (from memory): its overshoot, soft start,
    ripple, and lockout at low input are not in it.
    """

    derived: ClassVar[bool] = True
    capacitance: Annotated[Quantity, CAPACITANCE] = Field(description="of the output capacitor, all on this rail")
    load: Annotated[Quantity, CURRENT] = Field(
        description="what controller and registers draw, without the outputs' loads"
    )
    current_ceiling: Annotated[Quantity, CURRENT] | None = Field(None, description="what it delivers at most")
    esr: Annotated[Quantity, RESISTANCE] = assume("20 mohm", RESISTANCE, "of the output capacitor, from memory")
    resistance: Annotated[Quantity, RESISTANCE] = assume(
        "20 mohm", RESISTANCE, "load regulation with the trace, from memory"
    )
    quiescent: Annotated[Quantity, CURRENT] = assume("5 mA", CURRENT, "drawn by the regulator itself, from memory")
    reverse: Literal["conducts", "blocks"] = Field(
        "conducts", description="whether its output empties into an input that has fallen below it"
    )
    input_rating: Annotated[Quantity, VOLTAGE] | None = Field(None, description="highest input voltage")
    thermal_resistance: Annotated[Quantity, THERMAL_RESISTANCE] | None = Field(
        None, description="junction to ambient, as it is mounted"
    )
    junction_rating: Annotated[Quantity, TEMPERATURE] | None = None

    @abstractmethod
    def needed_input(self, volts: float) -> float:
        """The input from which on it holds its output at a voltage. [V] -> [V]"""

    @abstractmethod
    def law(self, corner: Corner, rail: str) -> tuple[Element, ...]:
        """The elements between node `rail` (through an ammeter), INSIDE and EMF; the current out of EMF is I(Vlogic_law)."""

    def beyond(self, v_set: float) -> str:
        """What the current takes from the output, as an expression that is subtracted: resistance, ceiling, one way. [V]"""
        i = "I(Vlogic_law)"
        text = f"{max(self.resistance.max, 1e-4)!r}*{i}-{BACKWARD!r}*{rounded(f'(-{i})', ONE_WAY_WIDTH)}"
        if self.current_ceiling is not None:
            top = self.current_ceiling.min
            text += f"+{v_set / (_BEYOND_CEILING * top)!r}*{rounded(f'({i}-{top!r})', _CEILING_WIDTH * top)}"
        return text

    def stamp(self, rail: str, logic: str, corner: Corner) -> Stamp:
        """The regulator from node `rail` to node `logic`, with its capacitor and its load."""
        c, esr = self.capacitance.min, max(self.esr.max, _LEAST_ESR)
        meter, out = Ammeter("logic_in", rail, INSIDE), Ammeter("logic_out", OUTSIDE, logic)
        elements: tuple[Element, ...] = (
            meter,
            *self.law(corner, rail),
            Ammeter("logic_law", EMF, OUTSIDE),
            _constant("logic_own", INSIDE, self.quiescent.max),
            out,
            Resistor("logic_esr", logic, "logic_cap", esr),
            Capacitor("logic", "logic_cap", GROUND, c),
            _constant("logic_load", logic, self.load.max),
        )
        if self.reverse == "conducts":
            elements += (_back(corner),)
        through = scaled(1 / esr, plus(voltage(logic), scaled(-1.0, voltage("logic_cap"))))
        terminals = (("v_rail", "i_logic_in"), ("v_logic", "i_logic_back"))
        return Stamp(
            elements=elements,
            probes=(
                Probe("v_logic", voltage(logic), "V"),
                Probe("i_logic_in", current(meter), "A"),
                Probe("i_logic_back", scaled(-1.0, current(out)), "A"),
                Probe("i_regulator", current(out), "A"),
                Probe("v_logic_cap", voltage("logic_cap"), "V"),
                Probe("i_logic_cap", through, "A"),
            ),
            ports=(
                Port("regulator", terminals),
                Port("output capacitor", (("v_logic", "i_logic_cap"),), store=("v_logic_cap", c), from_rest=True),
            ),
            rules=self._rules(corner, terminals),
            assumptions=self._assumed(),
            rest={logic: self.level(corner)},
        )

    def _rules(self, corner: Corner, terminals: tuple[tuple[str, str], ...]) -> tuple[Rule, ...]:
        needed = self.needed_input(self.level(corner))
        return (
            LeastRule(
                "regulator",
                "v_rail",
                Limit(needed, "V", None, str(self.voltage.origin), "input that it needs"),
                "regulator's input",
                "a lower dropout, a higher coil rail, or fewer channels at once",
                soft=True,
            ),
            PeakRule(
                "overvoltage",
                "v_rail",
                Limit.of(
                    self.input_rating,
                    "highest input voltage",
                    "V",
                    "voltage",
                    self.input_rating.min if self.input_rating else None,
                ),
                "destroy",
                "input voltage of the regulator",
                "a regulator with a higher rating, or clamps that return less to the rail",
            ),
            junction_heat(
                self.title or self.kind,
                "regulator",
                terminals,
                self.thermal_resistance,
                self.junction_rating,
                corner.ambient,
                "a switching regulator, a lower input, or more copper around it",
            ),
        )

    def _assumed(self) -> tuple[Assumption, ...]:
        found = listed(
            "regulator",
            series_resistance_of_its_capacitor=self.esr,
            resistance=self.resistance,
            quiescent_current=self.quiescent,
        )
        if "reverse" not in self.model_fields_set:
            found += (
                Assumption("regulator", "reverse", self.reverse, "not given: most have a diode from output to input"),
            )
        if self.reverse == "conducts":
            why = "diode from output to input, from memory"
            found += (Assumption("regulator", "reverse diode", "0.7 V at 0.1 A, 0.9 V at 1 A", why),)
        return found


def rounded(x: str, width: float) -> str:
    """Nothing below 0 and x above it, rounded over a width, as an expression. [unit of x]"""
    return f"(0.5*({x}+sqrt({x}*{x}+{4 * width**2!r})))"


def _constant(name: str, node: str, amperes: float) -> CurrentLaw:
    """A constant current from a node to ground that fades over the last tenth of a volt."""
    v = f"V({node})"
    return CurrentLaw(name, GROUND, node, f"{amperes!r}*{v}/sqrt({v}*{v}+{_LOAD_FADES**2!r})")


def _back(corner: Corner) -> Junction:
    i_s, n, r_s = forward_parameters(_BACK_POINTS)
    model = Model("logic_back_m", "D", {"IS": i_s, "N": n, "RS": r_s, "TNOM": in_celsius(corner.junction)})
    return Junction("logic_back", OUTSIDE, INSIDE, model)
