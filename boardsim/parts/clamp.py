"""What clamps have in common: where they sit, and how their parts add up."""

from __future__ import annotations

from typing import Literal

from boardsim.parts.base import Part, Stamp
from boardsim.parts.elements import Element


class CoilClamp(Part):
    """A clamp between the ends of a coil: on the board, or at the coil's own ends where the coil has leads."""

    to: Literal["rail"] = "rail"
    at: Literal["board", "coil"] = "board"

    def at_the_coil(self) -> bool:
        """Whether it sits at the coil's own ends."""
        return self.at == "coil"


def in_series(first: tuple[Element, ...], *stamps: Stamp) -> Stamp:
    """The stamps of a clamp's parts as one, after elements of its own."""
    return Stamp(
        elements=(*first, *(e for s in stamps for e in s.elements)),
        probes=tuple(p for s in stamps for p in s.probes),
        ports=tuple(p for s in stamps for p in s.ports),
        rules=tuple(r for s in stamps for r in s.rules),
        assumptions=tuple(a for s in stamps for a in s.assumptions),
        totals=tuple(t for s in stamps for t in s.totals),
    )
