"""A logic rail that hangs on the coil rail: how low it falls, for how long, and what that means for chain and controller."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from boardsim.board.reader import Board
from boardsim.circuit.deck import PlacedRule
from boardsim.firing.schedule import Firing
from boardsim.parts.logic import Logic
from boardsim.parts.rules import FallRule, LeastRule
from boardsim.quantities import apart, in_units
from boardsim.verdict.bench import Bench, when
from boardsim.verdict.chain import judge_chain
from boardsim.verdict.findings import Finding
from boardsim.verdict.logic_supply import judge_decoupling
from boardsim.verdict.rail import together
from boardsim.verdict.readings import Readings


def judge_least(rule: LeastRule, placed: PlacedRule, readings: Readings, bench: Bench) -> Finding:
    """The lowest value against a lower limit; what is soft is tight below it, since its consequences are judged themselves."""
    value, at = readings.low[placed.channel, rule.quantity]
    bound = rule.limit.value
    if bound is None:
        said = f"{placed.label}: {rule.what} falls to {in_units(value, rule.limit.unit)}{when(at)}; no {rule.limit.name} of {rule.part or placed.part} "
        said += "was given to hold it against"
        return bench.finding(placed, rule.limit, rule.what, value, None, at, said, part=rule.part, worse="low")
    margin = (value - bound) / bound
    reading, allowed = apart(value, bound, rule.limit.unit)
    said = f"{placed.label}: {rule.what} falls to {reading}{when(at)}; the {rule.limit.name} is {allowed}"
    if margin < 0 and rule.soft:
        lowest = in_units(readings.low[None, "v_logic"][0], "V")
        said += f"; below it the logic rail is no longer regulated, and falls to {lowest}, which is judged by itself"
        margin = 0.0
    said += f"; try: {rule.advice}" if margin < 0 else ""
    return bench.finding(placed, rule.limit, rule.what, value, margin, at, said, part=rule.part, worse="low")


def judge_fall(rule: FallRule, placed: PlacedRule, readings: Readings, firing: Firing, bench: Bench) -> Finding:
    """Depth with duration, as of the coil rail: a fall that lasts fails by how far it goes below the level.

    One that would last if the level were a guard band higher is tight. A shorter one is tight where it may or may not count,
    and counts for nothing else.
    """
    lowest, at = readings.low[placed.channel, rule.quantity]
    level, unit = rule.limit.value, rule.limit.unit
    if level is None:
        return _unknown(rule, placed, lowest, at, firing, bench)
    own, near = readings.falls[rule]
    lasting, close = (
        max((d for d in dips if d.lasting >= rule.lasting), key=lambda d: (-d.lowest, d.lasting), default=None)
        for dips in (own, near)
    )
    spare = (lowest - level) / level
    shown = max(own, key=lambda d: d.lasting, default=None) if lasting is None else lasting
    if lasting is not None:
        lowest, at, margin = lasting.lowest, lasting.at, (lasting.lowest - level) / level
    elif shown is not None and rule.doubtful:
        margin = 0.0
    elif close is not None:
        margin = min(max(spare, 0.0), bench.guard)
    else:
        margin = max(spare, bench.guard)
    fell, below = (_said(x, unit) for x in (lowest, level)) if unit == "1" else apart(lowest, level, unit)
    said = f"{together(bench.board, firing, at)} at {in_units(at, 's', 4)}: the {rule.what} fell to {fell}; "
    if shown is None:
        said += f"below {below} {rule.happens}"
    else:
        said += f"it was below {below} for {in_units(shown.lasting, 's')}: {rule.happens}"
        said += f" after {in_units(rule.lasting, 's')}" if rule.lasting else ""
    said += f"; try: {rule.advice}" if lasting is not None else ""
    return bench.finding(
        placed, rule.limit, rule.what, lowest, margin, at, said, lasting=shown.lasting if shown else None, worse="low"
    )


def _said(value: float, unit: str) -> str:
    return f"{value:.1%}" if unit == "1" else in_units(value, unit)


def _unknown(rule: FallRule, placed: PlacedRule, lowest: float, at: float, firing: Firing, bench: Bench) -> Finding:
    """A fall for which nothing was given, or one that stays where what was given still holds."""
    said = f"{together(bench.board, firing, at)} at {in_units(at, 's', 4)}: the {rule.what} fell to {in_units(lowest, rule.limit.unit)}; "
    if rule.floor is not None and lowest >= rule.floor and rule.floor < bench.board.logic.voltage.min:
        said += f"down to {in_units(rule.floor, 'V')}, the lowest rail at which levels are printed, the line stays where it is held"
        margin = max((lowest - rule.floor) / rule.floor, bench.guard)
        known = replace(rule.limit, value=rule.floor)
        return bench.finding(placed, known, rule.what, lowest, margin, at, said, worse="low")
    said += f"whether {rule.happens} is not known: {rule.unknown}" if rule.floor is not None else rule.unknown
    return bench.finding(placed, rule.limit, rule.what, lowest, None, at, said, worse="low")


def judge_sagged_chain(board: Board, firing: Firing, readings: Sequence[Readings]) -> list[Finding]:
    """The chain once more, at the lowest logic rail of some runs; nothing where that stays within its tolerance.

    Notes
    -----
    Times, levels and the charge of edges count at the lowest rail at which a register frame was sent, or at the lowest of all
    where it is not known when frames were sent; what registers and inputs bear counts at the lowest of all.
    """
    if not board.logic.derived or not readings:
        return []
    lowest = min(r.low[None, "v_logic"][0] for r in readings)
    known = [r.framed for r in readings if r.framed is not None]
    framed = min(known) if len(known) == len(readings) else lowest
    found: list[Finding] = []
    for volts, always in ((lowest, True), (framed, False)):
        if volts < board.logic.voltage.min:
            low = _sagged(board, volts)
            found += [f for f in judge_chain(low) if (f.check in ("logic-rail", "overvoltage")) == always]
            found += [] if always else judge_decoupling(low, firing)
    return found


def _sagged(board: Board, volts: float) -> Board:
    """The board with a logic rail of its own that goes as low as this. [V]"""
    rail = board.logic.voltage
    return replace(board, logic=Logic(voltage=replace(rail, min=volts)))
