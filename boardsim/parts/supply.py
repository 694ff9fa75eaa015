"""The coil supply: a voltage behind a resistance, with a current ceiling, that cannot take current back."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from boardsim.parts.base import Corner, Part, Stamp, listed
from boardsim.parts.elements import GROUND, Ammeter, CurrentLaw, Probe, Resistor, current, voltage
from boardsim.parts.rules import CeilingRule, Limit
from boardsim.quantities import CURRENT, POSITIVE_RESISTANCE, RESISTANCE, VOLTAGE, Quantity, assume

# Widths over which the two bends of the characteristic are rounded, so that Newton's method has a slope everywhere.
_ONE_WAY_WIDTH = 10e-3  # [A]
_CEILING_WIDTH = 5e-3  # share of the ceiling; a real supply's bend is no sharper


class Supply(Part):
    """A mains or DC/DC supply.

    Notes
    -----
    i = (V - v) / R between 0 and the ceiling: constant current at overload, nothing taken back above V. A ceiling with
    a tolerance counts at its lower end, in the model and as a limit. Ignores
    the control loop's response, soft start, hiccup and fold-back. An internal load keeps the idle rail defined.
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
        inside = "supply_in"
        asked = f"(({f'V({setting})' if setting else repr(v_set)}-V({inside}))/{r!r})"
        one_way = f"(0.5*({asked}+sqrt({asked}*{asked}+{4 * _ONE_WAY_WIDTH**2!r})))"
        law = one_way
        if self.current_ceiling is not None:
            top = self.current_ceiling.min
            gap = f"({one_way}-{top!r})"
            law = f"0.5*({one_way}+{top!r}-sqrt({gap}*{gap}+{4 * (_CEILING_WIDTH * top) ** 2!r}))"
        meter = Ammeter("supply", inside, plus)
        return Stamp(
            elements=(
                CurrentLaw("supply", inside, GROUND, law),
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
