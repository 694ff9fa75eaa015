"""Which channels are the worst choice of so many in a corner: those that draw most, and one of every other build among them."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from boardsim.board.bridges import forwards
from boardsim.board.reader import Board
from boardsim.scenarios.audited import CornerResult
from boardsim.verdict.findings import Envelope

Choice = tuple[int, ...]
"""Channels that are on together."""
Results = list[tuple[Choice, CornerResult]]


def alike(board: Board) -> tuple[Choice, ...]:
    """The channels of each build: those with the same coil, switch and clamp; of a full bridge the one that drives it forwards.

    Two channels of one build differ in nothing that a circuit knows of, so that one can stand for the other.
    """
    builds: list[tuple[object, list[int]]] = []
    for channel in forwards(board):
        build = (channel.build, channel.package)
        mine = next((numbers for other, numbers in builds if other == build), None)
        if mine is None:
            builds.append((build, [channel.number]))
        else:
            mine.append(channel.number)
    return tuple(tuple(sorted(numbers)) for _, numbers in builds)


def worst_choices(n: int, builds: Sequence[Choice], weights: Sequence[Sequence[float]]) -> tuple[Choice, ...]:
    """The choices of n channels of which one is the worst in a corner, for any question about any channel.

    Parameters
    ----------
    n : int
    builds : sequence of tuple of int
        Channels of each build.
    weights : sequence of sequence of float
        How heavy one channel of each build is in that corner; one number for each way to weigh.

    Returns
    -------
    tuple of tuple of int
        The first are the n heaviest by the first weight, ties by number.

    Notes
    -----
    A channel meets the others by what they draw from the rail and return to it, so the n - 1 heaviest others are its
    worst company. (What is worse on a stiff rail, such as the voltage at turn-off, is worst alone: n = 1.) If it is
    among the n heaviest, their run answers for it; if not, it takes the place of the lightest of them, and one channel
    of its build answers for all. "Heaviest" is by the coil current at the end of the pulse, by charge, or by the
    energy of the coil: where these rank builds differently each ranking is tried.

    Which build is heavier may change from corner to corner: a winding of wide tolerance is the heavier one cold and the
    lighter one hot. Nothing that is found in a corner depends on what another corner does. So each corner has choices of
    its own, ranked by what channels draw there, and these have to be run in that corner only.
    """
    build_of = {c: k for k, build in enumerate(builds) for c in build}
    found: dict[tuple[int, ...], Choice] = {}
    for way in range(len(weights[0])):
        order = sorted(build_of, key=lambda c: (-weights[build_of[c]][way], c))
        choices = [order[:n]]
        absent = set(range(len(builds))) - {build_of[c] for c in order[:n]}
        choices += [[*order[: n - 1], builds[k][0]] for k in sorted(absent)]
        for choice in choices:
            found.setdefault(tuple(sorted(build_of[c] for c in choice)), tuple(sorted(choice)))
    return tuple(found.values())


def weights_of(channel: int, results: Results) -> list[float]:
    """How heavy a channel is by its run alone, in the corner of these results.

    Coil current at the end of the pulse [A], charge through the coil and out of the supply [C], highest energy of the
    coil [J]; beyond all measure where no run came to an end, so that it is tried first.
    """
    readings = next((r.trial.readings for choice, r in results if choice == (channel,) and r.trial is not None), None)
    if readings is None:
        return [math.inf] * 4
    energy = max((p.deciding for p in readings.ports if p.channel == channel), default=0.0)
    current = float(np.max(readings.pull_in[channel][1] if channel in readings.pull_in else (), initial=0.0))
    return [current, *(_charge(readings.envelopes[wave]) for wave in ("total", "supply")), energy]


def _charge(wave: Envelope) -> float:
    """Integral of a current over the whole run; a ranking needs no more than its slices. [C]"""
    return float(np.sum(np.diff(wave.edges) * (wave.low + wave.high) / 2))
