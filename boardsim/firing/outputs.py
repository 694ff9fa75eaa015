"""What switches get of the register outputs: as they are, or behind an enable line; and which stretches make one pulse."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from boardsim.board.enable import on_lines
from boardsim.board.reader import Board
from boardsim.firing.enable import Edges, LineChop, gated, line_chop
from boardsim.firing.held import Asked, Commanded, Held, as_commanded, held_pulses
from boardsim.firing.hold import FrameChop, Hold, Span
from boardsim.firing.lines import Levels, channel_times

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Outputs:
    """What switches get.

    Attributes
    ----------
    levels : mapping of output to tuple of (time, level)
        [s]
    on : mapping of channel to (n, 2) array
        Pulses, each as one stretch. [s]
    held : Held
    """

    levels: Mapping[int, Edges]
    on: Mapping[int, Floats]
    held: Held


def outputs_of(
    board: Board,
    levels: Levels,
    active: Mapping[int, bool],
    together: Mapping[int, Sequence[Commanded]],
    latched: Mapping[tuple[int, float], float],
    chops: Mapping[Hold, FrameChop],
    end: float,
) -> Outputs:
    """Outputs of the registers as switches get them.

    Parameters
    ----------
    levels : mapping of output to sequence of (time, level)
        Of the registers. [s]
    active : mapping of output to bool
        The level at which each turns its switch on.
    together : mapping of channel to sequence of Commanded
    latched : mapping of (channel, time) to time
        When each commanded edge reaches its output. [s]
    chops : mapping of Hold to FrameChop
        Of pulses that register frames chop.
    end : float
        [s]
    """
    own = {output: tuple(of) for output, of in levels.items()}
    on = channel_times(board, own, active, end)
    lines = [found for line in board.enable_lines if (found := line_chop(line, together, latched)) is not None]
    given, let_go = _behind(board, own, active, lines, end)
    asked = _asked(board, together, latched, chops)
    asked |= {c: asked.get(c, []) for chopped in lines for c in chopped.line.channels}
    switched = channel_times(board, given, active, end) if asked else on
    lined = on_lines(board)
    framed = {c: [(p.start, p.stop) for p in mine] for c, mine in asked.items() if c not in lined}
    whole = {**on, **{c: as_commanded(on[c], spans) for c, spans in framed.items()}}
    whole |= {c: _shown(on[c], switched[c]) for chopped in lines for c in chopped.line.channels}
    used = tuple(dict.fromkeys(chops.values()))
    return Outputs(given, whole, held_pulses(board, switched, whole, asked, used, tuple(lines), let_go))


def _shown(on: Floats, switched: Floats) -> Floats:
    """On-times of a register output of which its switch gets anything: one that nobody commanded may fall into a line's off-time."""
    first = np.searchsorted(switched[:, 0], on[:, 0])
    starts = np.append(switched[:, 0], np.inf)[first]
    shown: Floats = on[starts < on[:, 1]]
    return shown


def _behind(
    board: Board, own: Mapping[int, Edges], active: Mapping[int, bool], lines: Sequence[LineChop], end: float
) -> tuple[dict[int, Edges], dict[int, tuple[Edges, tuple[Span, ...]]]]:
    """Outputs behind their enable lines, and those that let go instead of driving their switches off."""
    given = dict(own)
    let_go: dict[int, tuple[Edges, tuple[Span, ...]]] = {}
    for chopped in lines:
        for number in chopped.line.channels:
            output = board.channel(number).output
            given[output] = gated(own[output], active[output], chopped.off, end)
            if chopped.line.through == "output-enable" and not board.chain.register_.open_drain:
                let_go[output] = own[output], chopped.off
    return given, let_go


def _asked(
    board: Board,
    together: Mapping[int, Sequence[Commanded]],
    latched: Mapping[tuple[int, float], float],
    chops: Mapping[Hold, FrameChop],
) -> dict[int, list[Asked]]:
    """The held pulses of each channel that has any, at its output."""
    lined = on_lines(board)
    found: dict[int, list[Asked]] = {}
    for c, mine in together.items():
        for p in mine:
            if p.hold is None:
                continue
            period, line = (p.hold.period, lined[c].name) if c in lined else (chops[p.hold].period, "")
            found.setdefault(c, []).append(Asked(latched[c, p.start], latched[c, p.stop], p.hold, period, line))
    return found
