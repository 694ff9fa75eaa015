"""What all findings about the chain share: the part they are about, the corner of the logic rail, margins."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from typing import Literal

from boardsim.board.reader import Board
from boardsim.parts.register import Register
from boardsim.quantities import Quantity, celsius, in_units
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


def where_limits_hold(board: Board, findings: Iterable[Finding]) -> list[Finding]:
    """Findings on the register's printed limits, of which none passes in air for which they were not printed.

    Notes
    -----
    Data sheets print levels, times and ratings of logic in columns, each for a range of ambient temperature; CMOS gets slower
    and leaks more as it gets warmer, and nothing is promised beyond. What breaks a limit that is printed for less stays broken.
    """
    register: Register = board.chain.register_
    low, high = register.holds_in
    around = board.around
    if around is None or (low <= around.ambient_low and around.ambient_high <= high):
        return list(findings)
    air = f"{celsius(around.ambient_low)} to {celsius(around.ambient_high)}"
    if around.ambient_low == around.ambient_high:
        air = celsius(around.ambient_high)
    why = f"figures of {register_name(board)} hold from {celsius(low)} to {celsius(high)}, the air is {air}"
    return [
        replace(f, limit=None, margin=None, verdict="limit-missing", sentence=f"{f.sentence}; but {why}")
        if f.verdict in ("pass", "tight")
        else f
        for f in findings
    ]
