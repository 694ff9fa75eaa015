"""The logic rail from the coil rail through a linear regulator."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from pydantic import Field

from boardsim.parts.base import Corner
from boardsim.parts.elements import Element, VoltageLaw
from boardsim.parts.regulator import BEND, EMF, INSIDE, Regulator, rounded
from boardsim.quantities import VOLTAGE, Quantity


class LinearRegulator(Regulator):
    """A pass transistor in series.

    Notes
    -----
    f(v_in) = v_in - V_drop: in dropout the output follows the input, V_drop below it, at the load (definition of the dropout
    voltage in data sheets of linear regulators). The pass element lies in series, so that the input carries the output's
    current and the regulator's own: P = (v_in - v) i + v_in I_q turns to heat. V_drop is one number, the largest at the
    load; at lighter loads a real one drops less. Holds below the ceiling.
    """

    role: ClassVar[str] = "logic"
    kind: Literal["linear-regulator"] = "linear-regulator"
    dropout: Annotated[Quantity, VOLTAGE] = Field(description="least voltage between input and output, at the load")

    def needed_input(self, volts: float) -> float:
        """The set voltage and the dropout. [V] -> [V]"""
        return volts + self.dropout.max

    def law(self, corner: Corner, rail: str) -> tuple[Element, ...]:
        """The pass element as one voltage in series: what regulation leaves to it, or the dropout, whichever is more."""
        v_set, drop = self.level(corner), self.dropout.max
        over = rounded(f"(V({INSIDE})-{v_set + drop!r})", BEND)
        return (VoltageLaw("logic_pass", INSIDE, EMF, f"{drop!r}+{over}+{self.beyond(v_set)}"),)
