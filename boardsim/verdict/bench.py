"""What readings are held against, and the commonest judgement: a reading that must stay below a limit."""

from __future__ import annotations

from dataclasses import dataclass

from boardsim.board.reader import Board
from boardsim.circuit.deck import PlacedRule
from boardsim.parts.rules import Consequence, Derating, Limit
from boardsim.quantities import in_units
from boardsim.verdict.findings import Finding, Verdict


@dataclass(frozen=True)
class Bench:
    """What limits are held against: deratings and guard band of the board, and the corner's name."""

    board: Board
    corner: str
    nominal_only: tuple[str, ...]

    def derating(self, kind: Derating | None) -> float:
        """Share of a rating that may be used. [1]"""
        given = getattr(self.board.derating, kind) if kind else None
        return given.typ if given is not None else 1.0

    @property
    def guard(self) -> float:
        """Guard band. [1]"""
        return self.board.limits.guard_band.typ

    def verdict(self, margin: float | None) -> Verdict:
        """The verdict of a margin."""
        if margin is None:
            return "limit-missing"
        if margin < 0:
            return "fail"
        return "tight" if margin < self.guard else "pass"


def when(at: float | None) -> str:
    """ " at 12.34 ms", or nothing. [s]"""
    return "" if at is None else f" at {in_units(at, 's', 4)}"


def upper(
    what: str,
    check: str,
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
    verdict = bench.verdict(margin)
    reading = in_units(value, limit.unit)
    if bound is None:
        sentence = f"{placed.label}: {what} is {reading}{when(at)}{detail}; no {limit.name} of {part} was given to hold it against"
    else:
        rated = f"{limit.name} of {part}, {in_units(bound, limit.unit)}"
        if share != 1.0:
            rated += f" ({share:.0%} of {in_units(limit.value or 0.0, limit.unit)}: {bench.board.derating.reason})"
        sentence = f"{placed.label}: {what} is {reading}{when(at)}{detail}; the {rated}, allows "
        sentence += "less" if verdict == "fail" else f"{margin:.0%} more"
    if verdict == "fail":
        sentence += f"; try: {advice}"
    return Finding(
        check,
        what,
        part,
        placed.channel,
        placed.label,
        value,
        bound,
        limit.unit,
        margin,
        at,
        consequence,
        verdict,
        sentence,
        source=limit.source,
    )
