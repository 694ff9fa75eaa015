"""A clamp that the switch has inside its own package."""

from __future__ import annotations

from typing import TYPE_CHECKING, ClassVar, Literal

from boardsim.parts.base import Corner, Part, Shelf, Stamp

if TYPE_CHECKING:
    from boardsim.parts.coil import Coil


class BuiltInClamp(Part):
    """Nothing beside the switch, whose package holds a clamp that nobody can leave out: it takes the coil's current.

    The circuit and the judgement of that clamp are the switch's own.
    """

    role: ClassVar[str] = "clamp"
    kind: Literal["built-in"] = "built-in"

    @classmethod
    def candidates(cls, shelf: Shelf, coil: Coil, rail: float) -> tuple[BuiltInClamp, ...]:
        """None: beside such a switch `none` shows the same circuit already."""
        return ()

    def beside(self, switch: Part) -> str:
        """Only a switch that has one will do."""
        if switch.clamped():
            return ""
        return f"{switch.kind} has no clamp in its package; choose a clamp that lies beside it"

    def stamp(self, name: str, a: str, b: str, corner: Corner, control: str = "") -> Stamp:
        """Adds nothing."""
        return Stamp()
