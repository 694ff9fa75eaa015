"""No clamp on purpose: the switch's own avalanche is meant to take the coil's energy."""

from __future__ import annotations

from typing import TYPE_CHECKING, ClassVar, Literal

from boardsim.parts.base import Corner, Part, Shelf, Stamp

if TYPE_CHECKING:
    from boardsim.parts.coil import Coil


class AvalancheClamp(Part):
    """Nothing across coil or switch, and said so: a switch with avalanche ratings takes the energy at its breakdown.

    The circuit and its judgement are those of `none`; the word tells the next reader that it was not forgotten. A
    switch without avalanche ratings fails with either.
    """

    role: ClassVar[str] = "clamp"
    kind: Literal["avalanche"] = "avalanche"

    @classmethod
    def candidates(cls, shelf: Shelf, coil: Coil, rail: float) -> tuple[AvalancheClamp, ...]:
        """None: beside other clamps `none` shows the same circuit already."""
        return ()

    def stamp(self, name: str, a: str, b: str, corner: Corner, control: str = "") -> Stamp:
        """Adds nothing."""
        return Stamp()
