"""The logic rail: what all kinds of it share, and the one that is fixed at its voltage."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from boardsim.parts.base import Corner, Part
from boardsim.quantities import VOLTAGE, Quantity


class LogicRail(Part):
    """A logic rail of any kind; `derived` says whether it hangs on the coil rail and so follows it down."""

    derived: ClassVar[bool] = False
    voltage: Annotated[Quantity, VOLTAGE]

    def level(self, corner: Corner) -> float:
        """The rail's voltage in a corner, while nothing pulls it down. [V]"""
        return corner.take(self.voltage, "logic")


class Logic(LogicRail):
    """A separate, stiff logic supply; it does not follow the coil rail."""

    role: ClassVar[str] = "logic"
    kind: Literal["logic"] = "logic"
