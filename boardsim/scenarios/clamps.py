"""Other clamps for a channel: every kind, of the library and of the user's folders, as far as its parts can carry the coil's current."""

from __future__ import annotations

import itertools
from collections.abc import Sequence

import numpy as np

from boardsim.board.reader import Board, Channel
from boardsim.board.shelves import read_shelves
from boardsim.parts.base import NOMINAL, Part
from boardsim.parts.kinds import kinds
from boardsim.parts.rules import PeakRule
from boardsim.quantities import Quantity, in_units
from boardsim.verdict.bench import Bench

MOST_OF_A_KIND = 4  # side by side; a picture of about ten clamps can still be read


def other_clamps(board: Board, channel: Channel, current: float) -> tuple[list[Part], tuple[str, ...]]:
    """Clamps of every kind to be set beside a channel's own, and sentences about those that are left out.

    Parameters
    ----------
    board : Board
        For its deratings.
    channel : Channel
    current : float
        Highest current of its coil. [A]

    Notes
    -----
    Of every kind the combinations of the library's parts and of those in the user's folders (`Part.candidates`), less those with a part that is rated for less
    than the coil's current, or that conducts at the highest rail: their rows would only repeat that. A kind of which no combination carries the current
    stays whole, since each kind is to be seen. Of more than `MOST_OF_A_KIND` those are taken that lie evenly in
    the library's order, with the first and the last.
    """
    bench = Bench(board, "", ())
    shelves = read_shelves(board.libraries, board.path)

    def on_the_shelves(wanted: type[Part]) -> list[Part]:
        kind = wanted.model_fields["kind"].default
        found = (entry.part(name) for name, entry in shelves.items() if entry.kind == kind)
        return [part for part in found if part is not None]

    rail = board.supply.voltage.typ
    shown: list[list[Part]] = []
    remarks: list[str] = []
    for kind, cls in kinds("clamp").items():
        like = {"at": "coil"} if channel.clamp.at_the_coil() and "at" in cls.model_fields else {}
        offered = list(cls.candidates(on_the_shelves, channel.coil, rail))
        offered = [c.model_copy(update=like) if c.across == "coil" else c for c in offered]
        offered = list(dict.fromkeys(c.matched(channel.switch) for c in offered))
        unfit = dict.fromkeys(said for c in offered if (said := c.beside(channel.switch)))
        remarks += [f"not tried, {kind}: {said}" for said in unfit]
        offered = [c for c in offered if c != channel.clamp and not c.beside(channel.switch)]
        blocking = [c for c in offered if c.blocks(board.supply.voltage.max)]
        if blocking and len(blocking) < len(offered):
            through = "; ".join(clamp_in_words(c) for c in offered if c not in blocking)
            remarks.append(f"not tried, conducts at the rail of {in_units(board.supply.voltage.max, 'V')}: {through}")
            offered = blocking
        strong = [c for c in offered if _carries(c, current, bench)]
        weak = [clamp_in_words(c) for c in offered if c not in strong] if strong else []
        if weak:
            remarks.append(f"not tried, rated for less than the coil's {in_units(current, 'A')}: {'; '.join(weak)}")
        fit = strong or offered
        if len(fit) > MOST_OF_A_KIND:
            remarks.append(
                f"{MOST_OF_A_KIND} of {len(fit)} clamps of the kind {kind} are shown; for another one put it into the board file"
            )
        shown.append(_spread(fit))
    # The first of every kind before the second of any: a picture that has no room for all of them still has every kind.
    rounds = itertools.zip_longest(*shown)
    return [clamp for one in rounds for clamp in one if clamp is not None], tuple(remarks)


def _carries(clamp: Part, current: float, bench: Bench) -> bool:
    """Whether no part of a clamp is rated for less than what it meets of a coil's current. [A]"""
    stamps = [clamp.stamp("c", "drain", "rail", NOMINAL), clamp.common("c", "pin", "rail", NOMINAL)]  # type: ignore[attr-defined]
    rules = [rule for stamp in stamps if stamp is not None for rule in stamp.rules]
    limits = [r.limit for r in rules if isinstance(r, PeakRule) and r.limit.unit == "A"]
    met = clamp.takes_over(current)
    return all(limit.value is None or limit.value * bench.derating(limit.derating) >= met for limit in limits)


def _spread(clamps: Sequence[Part]) -> list[Part]:
    places = np.linspace(0, len(clamps) - 1, min(len(clamps), MOST_OF_A_KIND)).round().astype(int)
    return [clamps[k] for k in places]


def clamp_in_words(clamp: Part) -> str:
    """A clamp's kind with its parts and its numbers, such as "diode-zener: fast-2a, 24v-5w"."""
    found = ["at the coil"] if clamp.at_the_coil() else []
    found += [f"across the {clamp.across}"] if "place" in type(clamp).model_fields else []
    found += [value.title or value.kind for _, value in clamp if isinstance(value, Part)]
    found += [in_units(value.typ, value.unit) for _, value in clamp if isinstance(value, Quantity)]
    return clamp.kind + (f": {', '.join(found)}" if found else "")


def clamps_of(channel: Channel) -> str:
    """The clamps that take a channel's current: its own, or in a matrix those of row and column."""
    words = [clamp_in_words(d.clamp) for d in channel.drivers]
    return words[0] if channel.crossing is None else f"row {words[0]} and column {words[1]}"
