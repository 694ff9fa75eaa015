"""The logic rail, fixed at its voltage."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from boardsim.parts.base import Corner, Part
from boardsim.quantities import VOLTAGE, Quantity


class Logic(Part):
    """A separate, stiff logic supply; it does not follow the coil rail."""

    role: ClassVar[str] = "logic"
    kind: Literal["logic"] = "logic"
    voltage: Annotated[Quantity, VOLTAGE]

    def level(self, corner: Corner) -> float:
        """The rail's voltage in a corner. [V]"""
        return corner.take(self.voltage, "logic")
