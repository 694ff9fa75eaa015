"""What all findings about the chain share: the part they are about, the corner of the logic rail, margins."""

from __future__ import annotations

from typing import Literal

from boardsim.board.reader import Board
from boardsim.quantities import Quantity, in_units
from boardsim.verdict.findings import Finding, Verdict, verdict_of


def register_name(board: Board) -> str:
    """The chain's register, for reports."""
    return board.chain.register_.title or "register"


def share_left(value: float, limit: float) -> float:
    """(limit - value) / limit: what is left of something that must be enough; nothing at all leaves -1."""
    if limit <= 0:
        return -1.0 if value > limit else 0.0
    return (limit - value) / limit


def chain_finding(
    board: Board,
    check: str,
    quantity: str,
    value: float,
    limit: float | None,
    unit: str,
    sentence: str,
    *,
    margin: float | None = None,
    volts: float | None = None,
    source: str = "",
    consequence: Literal["destroy", "misbehave"] = "misbehave",
    worse: Literal["high", "low"] = "high",
    assumed: tuple[str, ...] = (),
    advice: str = "",
) -> Finding:
    """One finding about the chain, whose verdict follows from its margin.

    Parameters
    ----------
    value, limit : float
        Reading and limit; limit None where it was not given. [unit]
    sentence : str
        Where, what was found, what is allowed.
    margin : float or None
        What is left, as a share; None without a limit. [1]
    volts : float or None
        The logic rail at which it is worst, if that matters. [V]
    advice : str
        What to try, said where the limit is broken.
    """
    verdict: Verdict = verdict_of(margin, board.limits.guard_band.typ)
    if verdict == "fail" and advice:
        sentence = f"{sentence}; try: {advice}"
    varies = volts is not None and board.logic.voltage.toleranced
    return Finding(
        check,
        quantity,
        register_name(board),
        None,
        "chain",
        value,
        limit,
        unit,
        margin,
        None,
        consequence,
        verdict,
        sentence,
        corner=f"logic rail at {in_units(volts, 'V')}" if varies and volts is not None else "",
        source=source,
        nominal_only=("logic rail",) if volts is not None and not varies else (),
        worse=worse,
        assumed=assumed,
    )


def assumed_among(**quantities: Quantity) -> tuple[str, ...]:
    """The assumed numbers among these, by name."""
    return tuple(name.replace("_", " ") for name, q in quantities.items() if q.assumed())
