"""What does ngspice get to see? The deck of one corner, as text."""

from __future__ import annotations

from boardsim.board.corners import corners
from boardsim.board.reader import Board
from boardsim.circuit.assemble import assemble, windows
from boardsim.firing.pattern import Pattern
from boardsim.firing.schedule import fire
from boardsim.scenarios.audited import LADDER


def write_deck(board: Board, pattern: Pattern, number: int) -> tuple[tuple[str, ...], str | None]:
    """The names of the board's corners, and the deck of corner `number` (from 1); None if there is no such corner.

    Notes
    -----
    With the settings of the fine run of each pair, which is the one that findings are read from.
    """
    wanted = corners(board)
    names = tuple(c.name for c in wanted)
    if not 1 <= number <= len(wanted):
        return names, None
    firing = fire(board, pattern)
    deck = assemble(board, firing, wanted[number - 1], windows(board, firing)[0])
    return names, deck.text(LADDER[1])
