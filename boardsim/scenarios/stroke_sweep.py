"""One channel fired again and again with ever wider pulses, each from rest: the runs behind `stroke`."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, field, replace
from itertools import pairwise
from pathlib import Path

from boardsim.board.corners import corners, nominal_only
from boardsim.board.reader import Board, Channel
from boardsim.circuit.assemble import assemble
from boardsim.circuit.deck import Deck, Window
from boardsim.firing.pattern import Pattern, Pulse, snapped
from boardsim.firing.registers import frame_time
from boardsim.firing.schedule import Firing, fire
from boardsim.parts.base import Corner
from boardsim.parts.rules import MotionRule, PullInRule
from boardsim.scenarios.all_corners import run_corners
from boardsim.scenarios.audited import CornerResult
from boardsim.scenarios.crew import Crew
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding
from boardsim.verdict.strokes_study import StrokePoint, StrokeRow, StrokeWatch, judge_pulse, motion_rules, point_of

_NAME = "stroke"
_START = 1e-3  # [s], when the first pulse is commanded
_SETTLED = 7.0  # L/R times: 0.1 % of the way is left
_LONG = 3.0  # return times that a mass may take to arrive: a coil that pulls it no harder than its spring does takes one half
_PAUSE = 1.0  # return times, each twice a free flight, for what moves to come back and to bounce out; more where that is not enough
_LONGER = 2.0  # times the pause, where that was not enough
_TRIES = 3
_GRID = 10  # widths between the two ends
_LOW, _HIGH = 0.35, 1.25  # shares of the fastest and of the slowest travel time, from and to which widths are tried
_FAR = (
    2.0  # times the longest of these: a width that is asked for and longer would press the rest of the picture together
)
_BETWEEN = (4, 3)  # widths that are tried where something begins or ends, in two rounds: a hundredth of the travel time


@dataclass
class Sweep:
    """One channel, alone on its board, and what its pulses did so far."""

    board: Board
    channel: Channel
    keep: Path
    crew: Crew
    pause: float = 0.0
    shown: float = 0.0
    results: list[CornerResult] = field(default_factory=list)
    points: dict[str, dict[float, StrokePoint]] = field(default_factory=dict)
    at_width: dict[tuple[str, float], list[Finding]] = field(default_factory=dict)
    duration: float = 0.0
    rounds: int = 0

    def __post_init__(self) -> None:
        coil = self.channel.coil
        self.corners = corners(self.board, 0.0)  # pulses end before the current has settled
        self.rules = motion_rules(self.channel)
        longer = 2.0 if self.channel.clamp.swings_with() else 1.0  # what swings dies out half as fast
        self.tau = coil.inductances[1] / min(coil.ohms(c, self.board.around) for c in self.corners)
        self.pause = longer * _SETTLED * self.tau + _PAUSE * coil.return_time
        self.tick = self.board.controller.tick.typ if self.board.controller is not None else 0.0

    @property
    def longest(self) -> float:
        """A pulse in which all that can settle has. [s]"""
        return self._even(_SETTLED * self.tau + _LONG * self.channel.coil.return_time)

    @property
    def widths(self) -> list[float]:
        """Tried so far. [s]"""
        return sorted({w for points in self.points.values() for w in points})

    def works(self, width: float) -> bool:
        """Whether a width does all that it should in every corner."""
        return all(points[width].works for points in self.points.values())

    def flights(self) -> list[float]:
        """How long it travels in the longest pulse, in every corner in which it arrives. [s]"""
        longest = self.widths[-1]
        found = (points[longest].flies for points in self.points.values())
        return sorted(f for f in found if f is not None)

    def _even(self, width: float) -> float:
        """A width that timer and chain can make, with no more digits than it takes. [s]"""
        step = max(self.tick, 10.0 ** (math.floor(math.log10(width)) - 2))
        return snapped(max(round(width / step) * step, least_width(self.board), step))

    def try_widths(self, wanted: Iterable[float], exact: float | None = None) -> None:
        """Run those not yet tried, in all corners; again with longer pauses where a pulse did not begin at rest."""
        new = {self._even(w) for w in wanted} - {*self.widths}
        new |= {exact} - {*self.widths} if exact is not None else set()
        for k in range(_TRIES):
            if not new or self._run(sorted(new), last=k == _TRIES - 1):
                return
            self.pause *= _LONGER

    def _run(self, widths: Sequence[float], last: bool) -> bool:
        """One run with these widths one after the other; whether every pulse began at rest. One that did not counts only if it is the last."""
        pulses, at = [], _START
        for width in widths:
            pulses.append(Pulse(self.channel.number, snapped(at), width))
            at += width + self.pause
        firing = fire(self.board, Pattern(self.board.path, _NAME, snapped(at), tuple(pulses)))
        watch = StrokeWatch(self.board, firing)
        self.rounds += 1
        keep = self.keep / f"{_NAME}{self.rounds}"
        results = run_corners(
            self.board, firing, self.corners, keep, self.crew, measure=watch, pictured=False, assembled=_unjudged
        )
        calm = all(all(still) for _, still in watch.found.values())
        if calm or last:
            self.results += results
            self.duration += firing.duration
            for r in results:
                self._keep(r, watch, widths)
        return calm

    def _keep(self, r: CornerResult, watch: StrokeWatch, widths: Sequence[float]) -> None:
        name = r.corner.name
        pulses, calm = watch.found.get(name, ((), ()))
        bench = Bench(self.board, name, nominal_only(self.board))
        points = self.points.setdefault(name, {})
        if len(pulses) != len(widths):
            why = str(r.failure) if r.failure is not None else "the register did not make every pulse"
            for width in widths:
                points[width] = StrokePoint(width, None, None, None, None, 0.0, None, "unproven", f"{name}: {why}")
            return
        for width, pulse, still in zip(widths, pulses, calm, strict=True):
            findings = judge_pulse(self.rules, pulse, bench)
            unproven = "" if r.audit.proven else f"the audit failed ({name})"
            unproven = unproven if still else f"its pulse began before it was at rest ({name})"
            points[width] = replace(point_of(self.rules, pulse, findings, unproven), width=width)
            self.at_width[name, width] = findings

    def row(self, asked: float | None) -> StrokeRow:
        """What the study says of the channel."""
        by_check = {p.rule.check: p.rule for p in self.rules if isinstance(p.rule, MotionRule)}
        shown = max((w for w in self.widths if w <= self.shown), default=self.widths[-1])
        return StrokeRow(
            self.channel.number,
            self.channel.label,
            self.channel.coil_name,
            by_check["stroke"].travel,
            {corner: tuple(points[w] for w in sorted(points)) for corner, points in self.points.items()},
            shown,
            by_check["stroke"].limit.value,
            by_check["impact"].least,
            by_check["impact"].limit.value,
            asked,
        )


def _unjudged(board: Board, firing: Firing, corner: Corner, window: Window) -> Deck:
    """A deck without the rules on motion and pull-in: pulses that are too short are part of the question."""
    deck = assemble(board, firing, corner, window)
    return replace(deck, rules=tuple(p for p in deck.rules if not isinstance(p.rule, MotionRule | PullInRule)))


def swept(sweep: Sweep, width: float | None) -> Iterator[float]:
    """Run the rounds; the share done after each."""
    sweep.try_widths([sweep.longest])
    yield 0.1
    flights = sweep.flights()
    if flights:
        low, high = _LOW * flights[0], _HIGH * flights[-1]
        sweep.shown = max(high, width if width is not None and width < _FAR * high else 0.0) * (1 + 1e-2)
        sweep.try_widths([low + (high - low) * k / (_GRID - 1) for k in range(_GRID)], width)
    else:  # nothing that lasts less can arrive where the longest does not
        sweep.try_widths([], width)
    yield 0.6
    for k, between in enumerate(_BETWEEN):
        edges = [(a, b) for a, b in pairwise(sweep.widths[:-1]) if sweep.works(a) != sweep.works(b)]
        fine = [a + (b - a) * i / (between + 1) for a, b in edges for i in range(1, between + 1)]
        sweep.try_widths([*fine, *(flights if k == 0 else ())])
        yield 0.85 + 0.15 * k


def least_width(board: Board) -> float:
    """The shortest pulse that the chain can make: its end cannot be sent before the frame of its start is. [s]"""
    gap = board.controller.frame_gap.typ if board.controller is not None else 0.0
    tick = board.controller.tick.typ if board.controller is not None else 0.0
    return max(frame_time(board.chain) + gap, tick)
