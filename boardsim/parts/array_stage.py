"""What an output of any package of bipolar switches says of itself, whichever end of the coil it ties."""

from __future__ import annotations

from typing import Any, ClassVar, Literal

from boardsim.parts.base import Part
from boardsim.quantities import Quantity


class ArrayStage(Part):
    """One output of a package; kinds name their `part`, which has outputs, an output voltage and points of input current."""

    part: Any
    junctions: ClassVar[float]
    """Lowest voltage of the junctions behind the input's resistance, while they conduct. [V]"""
    active: ClassVar[Literal["high", "low"]] = "high"
    """Output level that turns the coil on."""

    def tolerances(self) -> dict[str, Quantity]:
        """What the corners vary in this stage: where its output breaks down."""
        return {"breakdown": self.part.output_voltage}

    def held_off(self) -> bool:
        """Always: the package has resistors of its own, and nothing drives an output without an input current."""
        return True

    def per_package(self) -> int:
        """Outputs of the package. [1]"""
        return int(self.part.outputs)

    def steady_input(self, volts: float, resistance: float) -> float:
        """Into the input, at most as printed: a resistance before its junctions. [V], [ohm] -> [A]"""
        printed = [(p.voltage.typ - self.junctions, (p.highest or p.typical).max) for p in self.part.input_current]
        least: float = min(over / amperes for over, amperes in printed if over > 0)
        return max(volts - self.junctions, 0.0) / (resistance + least)
