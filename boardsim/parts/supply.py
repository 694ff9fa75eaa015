"""The coil supply: a voltage behind a resistance, with a current ceiling, that cannot take current back."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from boardsim.parts.base import Corner, Part, Stamp, listed
from boardsim.parts.elements import GROUND, Ammeter, Probe, Resistor, VoltageLaw, current, voltage
from boardsim.parts.rules import CeilingRule, Limit
from boardsim.quantities import CURRENT, POSITIVE_RESISTANCE, RESISTANCE, VOLTAGE, Quantity, assume

# The two bends of the characteristic are rounded, so that its slope is continuous: widths and slopes beyond them, chosen
# so that neither is seen in a result.
_ONE_WAY_WIDTH = 1e-6  # [A]
_BACKWARD = 10e3  # [ohm] against current into the supply
_CEILING_WIDTH = 1e-5  # share of the ceiling
_BEYOND_CEILING = 1e-3  # share of the ceiling by which a short circuit exceeds it


class Supply(Part):
    """A mains or DC/DC supply.

    Notes
    -----
    i = (V - v) / R between 0 and the ceiling: constant current at overload, nothing taken back above V. A ceiling with
    a tolerance counts at its lower end, in the model and as a limit. Ignores
    the control loop's response, soft start, hiccup and fold-back. An internal load keeps the idle rail defined.

    The law is written as a voltage that depends on the current, v = V - R i - R_c r(i - ceiling) + R_b r(-i) with
    r(x) = (x + sqrt(x^2 + 4 w^2)) / 2: flat in the middle, steep at both ends. Its inverse, a current that depends on the
    voltage, is steep in the middle and flat at both ends; there Newton's method steps from one flat end to the other
    for ever, and ngspice 39, which begins a shorter step where the failed one left off, never came back.
    R_c: a short circuit draws 0.1 % more than the ceiling; R_b = 10 kohm.
    """

    role: ClassVar[str] = "supply"
    kind: Literal["supply"] = "supply"
    voltage: Annotated[Quantity, VOLTAGE]
    resistance: Annotated[Quantity, RESISTANCE] = assume(
        "20 mohm", RESISTANCE, "load regulation of an enclosed switching supply, from memory"
    )
    current_ceiling: Annotated[Quantity, CURRENT] | None = None
    internal_load: Annotated[Quantity, POSITIVE_RESISTANCE] = assume(
        "10 kohm", POSITIVE_RESISTANCE, "feedback divider and indicator of a supply, from memory"
    )

    def stamp(self, plus: str, corner: Corner, setting: str = "") -> Stamp:
        """The supply between node `plus` and ground; its voltage is that of node `setting`, where one is named."""
        v_set = corner.take(self.voltage, "supply")
        r = max(self.resistance.typ, 1e-4)
        emf, inside = "supply_emf", "supply_in"
        meter, through = Ammeter("supply", inside, plus), Ammeter("supply_law", emf, inside)
        i = "I(Vsupply_law)"
        asked = f"V({setting})" if setting else repr(v_set)
        law = f"{asked}-{r!r}*{i}+{_BACKWARD!r}*{_rounded(f'(-{i})', _ONE_WAY_WIDTH)}"
        if self.current_ceiling is not None:
            top = self.current_ceiling.min
            law += f"-{v_set / (_BEYOND_CEILING * top)!r}*{_rounded(f'({i}-{top!r})', _CEILING_WIDTH * top)}"
        return Stamp(
            elements=(
                VoltageLaw("supply", emf, GROUND, law),
                through,
                Resistor("supply_load", inside, GROUND, self.internal_load.typ),
                meter,
            ),
            probes=(Probe("v_supply", voltage(plus), "V"), Probe("i_supply", current(meter), "A")),
            rules=(
                CeilingRule(
                    "supply-ceiling",
                    "i_supply",
                    Limit.of(
                        self.current_ceiling,
                        "current ceiling",
                        "A",
                        None,
                        self.current_ceiling.min if self.current_ceiling else None,
                    ),
                    "the supply's current",
                ),
            ),
            assumptions=listed("supply", resistance=self.resistance, internal_load=self.internal_load),
            # This node alone, which has a path to ground. ngspice 39 ties hinted nodes to their hint while it chooses its
            # pivots, and keeps these: with hints for the output or the rail, runs on stiff supplies began volts off.
            hints={} if setting else {inside: v_set},
        )


def _rounded(x: str, width: float) -> str:
    """Nothing below 0 and x above it, rounded over a width. [unit of x]"""
    return f"(0.5*({x}+sqrt({x}*{x}+{4 * width**2!r})))"
