"""No clamp: the coil's current goes on into the switch's avalanche."""

from __future__ import annotations

from typing import ClassVar, Literal

from boardsim.parts.base import Corner, Part, Stamp


class NoClamp(Part):
    """Nothing across coil or switch; an unclamped coil drives its switch into breakdown at hundreds of volts."""

    role: ClassVar[str] = "clamp"
    kind: Literal["none"] = "none"

    def stamp(self, name: str, a: str, b: str, corner: Corner, control: str = "") -> Stamp:
        """Adds nothing."""
        return Stamp()
