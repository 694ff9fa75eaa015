"""What does ngspice get to see? The deck of one corner, as text."""

from __future__ import annotations

from boardsim.board.corners import corners, slow_rail
from boardsim.board.reader import Board
from boardsim.circuit.assemble import Detail, assemble, windows
from boardsim.firing.pattern import Pattern
from boardsim.firing.schedule import fire
from boardsim.scenarios.audited import FINE, LADDER, fitted


def write_deck(
    board: Board, pattern: Pattern, number: int, detail: Detail = "edges"
) -> tuple[tuple[str, ...], str | None]:
    """The names of the board's corners, and the deck of corner `number` (from 1); None if there is no such corner.

    Raises
    ------
    InputError
        If the pattern is too long for clocked registers.

    Notes
    -----
    With the settings that findings are usually read with.
    """
    wanted = list(corners(board, min(p.width for p in pattern.pulses), any(p.hold is not None for p in pattern.pulses)))
    longest = slow_rail(board)
    wanted += [longest] if longest else []
    names = tuple(c.name for c in wanted)
    if not 1 <= number <= len(wanted):
        return names, None
    firing = fire(board, pattern)
    (window,) = windows(board, firing)
    deck = assemble(board, firing, wanted[number - 1], window, detail)
    return names, deck.text(fitted(LADDER, board)[FINE])
