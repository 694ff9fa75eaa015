"""A board under other conditions than those of its file: another ambient, another supply voltage."""

from __future__ import annotations

from dataclasses import dataclass, replace

from boardsim.board.reader import Board
from boardsim.board.schema import refuse_extremes
from boardsim.errors import QuantityError
from boardsim.parts.base import Surroundings, listed
from boardsim.quantities import ZERO_CELSIUS, Quantity


@dataclass(frozen=True)
class Conditions:
    """What a run assumes of the surroundings in place of what the board file says.

    Attributes
    ----------
    ambient : Quantity or None
        Air around the board. [K]
    supply : Quantity or None
        No-load voltage of the supply. [V]
    """

    ambient: Quantity | None = None
    supply: Quantity | None = None

    def __str__(self) -> str:
        said = []
        if self.ambient is not None:
            low, high = (t - ZERO_CELSIUS for t in (self.ambient.min, self.ambient.max))
            said.append(f"ambient {low:.4g} degC" if low == high else f"ambient {low:.4g} to {high:.4g} degC")
        if self.supply is not None:
            said.append(f"supply {self.supply}")
        return ", ".join(said)


def under(board: Board, conditions: Conditions) -> Board:
    """The board under these conditions.

    Raises
    ------
    QuantityError
        If the supply would not be above the brown-out level, or no semiconductor's model holds at the ambient.
    """
    if conditions.ambient is not None:
        q = conditions.ambient
        rise = board.junction_rise
        refuse_extremes(q, rise)
        known = tuple(a for a in board.assumptions if (a.part, a.quantity) != ("board", "ambient"))
        listed_already = board.around is not None
        known += () if listed_already else listed("board", junction_rise=rise)
        board = replace(board, around=Surroundings(q.min, q.max, rise.typ), assumptions=known)
    if conditions.supply is not None:
        q, brown_out = conditions.supply, board.limits.brown_out
        if brown_out is not None and q.min <= brown_out.voltage.max:
            raise QuantityError(
                f"a supply of {q} is not above the board's brown-out level of {brown_out.voltage}: it could never work"
            )
        board = replace(board, supply=board.supply.model_copy(update={"voltage": q}))
    return board
