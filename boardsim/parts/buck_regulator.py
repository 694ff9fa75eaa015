"""The logic rail from the coil rail through a step-down switching regulator, averaged over its switching period."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from pydantic import Field

from boardsim.parts.base import Assumption, Corner, listed
from boardsim.parts.elements import GROUND, CurrentLaw, Element, VoltageLaw
from boardsim.parts.regulator import BEND, EMF, INSIDE, Regulator, rounded
from boardsim.parts.rules import LeastRule, Limit, Rule
from boardsim.quantities import SHARE, VOLTAGE, Quantity, assume

_LEAST_INPUT = 1.0  # [V], below which the input current no longer rises as the input falls: no converter runs there
_FADES = 1e-6  # [W], over which no power passes into some


class BuckRegulator(Regulator):
    """A switching regulator as its averages.

    Notes
    -----
    f(v_in) = D v_in - V_drop: at its largest duty D it can only pass the input on, less the drops of switch and winding. The input
    draws what the output delivers and the losses, i_in = v i / (eta v_in) + I_q: the same power from a lower voltage takes
    more current, which pulls a sagging rail down further. (State-space averaging: Middlebrook and Cuk, IEEE Power
    Electronics Specialists Conference 1976, 18; from memory.) The output voltage never exceeds D v_in there, so that the
    input current never exceeds D / eta times the output's. Below 1 V of input it stays as it is at 1 V.
    Ignores ripple, the inductor's stored energy and the lockout at low input, against which the lowest input is judged.
    """

    role: ClassVar[str] = "logic"
    kind: Literal["buck-regulator"] = "buck-regulator"
    efficiency: Annotated[Quantity, SHARE] = assume("85 %", SHARE, "of a small step-down regulator, from memory")
    max_duty: Annotated[Quantity, SHARE] = assume(
        "90 %", SHARE, "largest share of a period in which its switch is on, from memory"
    )
    drop: Annotated[Quantity, VOLTAGE] = assume("0.3 V", VOLTAGE, "of switch and winding at its load, from memory")
    lowest_input: Annotated[Quantity, VOLTAGE] | None = Field(None, description="input below which it stops")

    def needed_input(self, volts: float) -> float:
        """At its largest duty. [V] -> [V]"""
        return (volts + self.drop.max) / self.max_duty.min

    def law(self, corner: Corner, rail: str) -> tuple[Element, ...]:
        """The output as a voltage, and the power that it takes from the input as a current."""
        v_set, duty, drop = self.level(corner), self.max_duty.min, self.drop.max
        short = rounded(f"({v_set + drop!r}-{duty!r}*V({INSIDE}))", BEND)
        power = rounded(f"(V({EMF})*I(Vlogic_law))", _FADES)
        volts = f"({_LEAST_INPUT!r}+{rounded(f'(V({INSIDE})-{_LEAST_INPUT!r})', BEND)})"
        return (
            VoltageLaw("logic_set", EMF, GROUND, f"{v_set!r}-{short}-({self.beyond(v_set)})"),
            CurrentLaw("logic_draw", GROUND, INSIDE, f"{power}/({self.efficiency.min!r}*{volts})"),
        )

    def _rules(self, corner: Corner, terminals: tuple[tuple[str, str], ...]) -> tuple[Rule, ...]:
        lowest = self.lowest_input
        limit = Limit.of(lowest, "lowest input", "V", None, lowest.max if lowest else None)
        what = "input against where the regulator stops"
        return (
            *super()._rules(corner, terminals),
            LeastRule("regulator", "v_rail", limit, what, "a regulator that runs from less, or fewer channels at once"),
        )

    def _assumed(self) -> tuple[Assumption, ...]:
        found = listed("regulator", efficiency=self.efficiency, largest_duty=self.max_duty, drop=self.drop)
        return (*super()._assumed(), *found)
