"""What readings are held against, and the commonest judgement: a reading that must stay below a limit."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from boardsim.board.reader import Board
from boardsim.circuit.deck import PlacedRule
from boardsim.parts.rules import Consequence, Derating, Limit
from boardsim.quantities import apart, in_units
from boardsim.verdict.findings import Finding, Verdict, verdict_of


@dataclass(frozen=True)
class Bench:
    """What limits are held against: deratings and guard band of the board, and the corner's name.

    `repeated` says that what a run does once is done again and again: ratings for a single event then do not count.
    """

    board: Board
    corner: str
    nominal_only: tuple[str, ...]
    repeated: bool = False

    def derating(self, kind: Derating | None) -> float:
        """Share of a rating that may be used. [1]"""
        given = getattr(self.board.derating, kind) if kind else None
        return given.typ if given is not None else 1.0

    @property
    def guard(self) -> float:
        """Guard band. [1]"""
        return self.board.limits.guard_band.typ

    def verdict(self, margin: float | None) -> Verdict:
        """The verdict of a margin; None stands for a limit that was not given."""
        return verdict_of(margin, self.guard)

    def finding(
        self,
        placed: PlacedRule,
        limit: Limit,
        what: str,
        value: float,
        margin: float | None,
        at: float | None,
        sentence: str,
        consequence: Consequence = "misbehave",
        *,
        part: str = "",
        lasting: float | None = None,
        worse: Literal["high", "low"] = "high",
    ) -> Finding:
        """A finding on a placed rule; the margin decides its verdict.

        Parameters
        ----------
        placed : PlacedRule
        limit : Limit
            Before derating.
        what : str
            What was read.
        value : float
            The reading. [unit of the limit]
        margin : float or None
            Share of the limit that is left. [1]
        at, lasting : float or None
            When, and for how long. [s]
        sentence : str
        consequence : {"destroy", "misbehave"}
        part : str
            If it is not the placed rule's own.
        worse : {"high", "low"}
            Which way the reading gets worse.
        """
        bound = None if limit.value is None else limit.value * self.derating(limit.derating)
        return Finding(
            placed.rule.check,
            what,
            part or placed.part,
            placed.channel,
            placed.label,
            value,
            bound,
            limit.unit,
            margin,
            at,
            consequence,
            self.verdict(margin),
            sentence,
            source=limit.source,
            lasting=lasting,
            worse=worse,
        )


def when(at: float | None) -> str:
    """ " at 12.34 ms", or nothing. [s]"""
    return "" if at is None else f" at {in_units(at, 's', 4)}"


def upper(
    what: str,
    limit: Limit,
    consequence: Consequence,
    placed: PlacedRule,
    bench: Bench,
    value: float,
    at: float | None,
    advice: str,
    detail: str = "",
    part: str = "",
) -> Finding:
    """A reading that must stay below a limit."""
    part = part or placed.part
    share = bench.derating(limit.derating)
    bound = None if limit.value is None else limit.value * share
    margin = None if bound is None else (bound - value) / bound
    if bound is None:
        reading = in_units(value, limit.unit)
        sentence = f"{placed.label}: {what} is {reading}{when(at)}{detail}; no {limit.name} of {part} was given to hold it against"
    else:
        reading, allowed = apart(value, bound, limit.unit)
        rated = f"{limit.name} of {part}, {allowed}"
        if share != 1.0:
            rated += f" ({share:.0%} of {in_units(limit.value or 0.0, limit.unit)}: {bench.board.derating.reason})"
        sentence = f"{placed.label}: {what} is {reading}{when(at)}{detail}; the {rated}, allows "
        sentence += "less" if margin is not None and margin < 0 else f"{margin:.0%} more"
    if margin is not None and margin < 0:
        sentence += f"; try: {advice}"
    return bench.finding(placed, limit, what, value, margin, at, sentence, consequence, part=part)
