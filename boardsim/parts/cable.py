"""The cable from supply to board: copper out and back."""

from __future__ import annotations

from typing import ClassVar, Literal

from boardsim.parts.base import Corner, Stamp, Surroundings, listed
from boardsim.parts.copper import loop_resistance
from boardsim.parts.elements import Inductor, Resistor
from boardsim.parts.pair import Pair
from boardsim.quantities import Quantity, computed


class Cable(Pair):
    """Two conductors of the same cross-section, side by side; resistance at the ambient of the corner."""

    role: ClassVar[str] = "cable"
    kind: Literal["cable"] = "cable"

    def stamp(self, near: str, far: str, corner: Corner, around: Surroundings | None) -> Stamp:
        """The cable from the supply's node `near` to the board's node `far`; the way back is folded into it."""
        return Stamp(
            elements=(
                Resistor("cable", near, "cable_mid", self.ohms(corner, around)),
                Inductor("cable", "cable_mid", far, self.inductance),
            ),
            assumptions=listed("cable", spacing=self.between_axes),
        )

    def loop(self, t: float) -> Quantity:
        """Resistance out and back at a conductor temperature. [ohm]"""
        return computed(loop_resistance(self.section, self.length.typ, t), "ohm", "cable cross-section and length")
