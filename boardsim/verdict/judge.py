"""Readings against limits: one finding per rule, with its margin, verdict and one plain sentence."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from boardsim.board.ranges import write_range
from boardsim.board.reader import Board
from boardsim.circuit.deck import Deck, PlacedRule
from boardsim.firing.schedule import Firing
from boardsim.parts.base import (
    BreakdownRule,
    CeilingRule,
    Consequence,
    Derating,
    DipRule,
    Limit,
    MeanRule,
    PeakRule,
    PullInRule,
    ReleaseRule,
)
from boardsim.quantities import in_units
from boardsim.verdict.findings import Finding, Verdict
from boardsim.verdict.readings import AT_CEILING, Readings
from boardsim.verdict.watch import Avalanche, Dip


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


def judge(readings: Readings, deck: Deck, firing: Firing, bench: Bench) -> list[Finding]:
    """Apply the deck's rules to its readings, in one corner.

    Returns
    -------
    list of Finding
        One or more per rule; none for a rule that nothing could break (a pull-in rule of a channel that is
        never fired, a release rule of one that is fired once).
    """
    found: list[Finding] = []
    for placed in deck.rules:
        assumed = _assumed(placed, deck)
        for finding in _apply(placed, readings, firing, bench):
            found.append(replace(finding, corner=bench.corner, nominal_only=bench.nominal_only, assumed=assumed))
    return found


def _assumed(placed: PlacedRule, deck: Deck) -> tuple[str, ...]:
    """The assumptions that a reading hangs on: the supply's and the rail's for the rail and for pull-in, the
    coils' own for what happens in a channel.
    """
    rail = placed.channel is None or isinstance(placed.rule, PullInRule)
    own = placed.channel is not None
    return tuple(
        f"{a.part}: {a.quantity} {a.value}"
        for a in deck.assumptions
        if (a.part.startswith(("coil", "switch")) and own) or (not a.part.startswith(("coil", "switch")) and rail)
    )


def _apply(placed: PlacedRule, readings: Readings, firing: Firing, bench: Bench) -> Iterator[Finding]:
    match placed.rule:
        case PeakRule() as rule:
            yield _peak(rule, placed, readings, bench)
        case MeanRule() as rule:
            value = readings.means[placed.channel, rule.quantities]
            yield _upper(
                rule.what,
                rule.check,
                rule.limit,
                rule.consequence,
                placed,
                bench,
                value,
                None,
                rule.advice,
                part=rule.part,
            )
        case BreakdownRule() as rule:
            yield from _breakdown(rule, placed, readings, bench)
        case PullInRule() as rule:
            yield from _pull_in(rule, placed, readings, bench)
        case ReleaseRule() as rule:
            yield from _release(rule, placed, readings, bench)
        case DipRule() as rule:
            yield _dip(rule, placed, readings, firing, bench)
        case CeilingRule() as rule:
            yield _ceiling(rule, placed, readings, firing, bench)


def _when(at: float | None) -> str:
    return "" if at is None else f" at {in_units(at, 's', 4)}"


def _upper(
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
        sentence = f"{placed.label}: {what} is {reading}{_when(at)}{detail}; no {limit.name} of {part} was given to hold it against"
    else:
        rated = f"{limit.name} of {part}, {in_units(bound, limit.unit)}"
        if share != 1.0:
            rated += f" ({share:.0%} of {in_units(limit.value or 0.0, limit.unit)}: {bench.board.derating.reason})"
        sentence = f"{placed.label}: {what} is {reading}{_when(at)}{detail}; the {rated}, allows "
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


def _peak(rule: PeakRule, placed: PlacedRule, readings: Readings, bench: Bench) -> Finding:
    key = (placed.channel, rule.quantity)
    value, at = readings.high[key]
    if rule.magnitude and -readings.low[key][0] > value:
        value, at = -readings.low[key][0], readings.low[key][1]
    return _upper(
        rule.what,
        rule.check,
        rule.limit,
        rule.consequence,
        placed,
        bench,
        value,
        at,
        rule.advice,
        part=rule.part,
    )


# --------------------------------------------------------------------------------------------- avalanche

_CLAMP = "add a clamp, or choose a switch rated for this avalanche"


def _breakdown(rule: BreakdownRule, placed: PlacedRule, readings: Readings, bench: Bench) -> Iterator[Finding]:
    """Below breakdown by voltage, in avalanche by current, energy and repetition."""
    assert placed.channel is not None  # the rule of a channel's switch
    value, at = readings.high[placed.channel, rule.voltage]
    events = readings.avalanches[placed.channel]
    if not events:
        yield _upper(
            "drain-source voltage",
            rule.check,
            rule.rating,
            "destroy",
            placed,
            bench,
            value,
            at,
            "clamp the coil at a lower voltage",
        )
        return
    hardest = max(events, key=lambda e: e.energy)
    times = f", {len(events)} times" if len(events) > 1 else ""
    detail = f" in avalanche at {in_units(hardest.voltage, 'V')}{times}"
    if all(limit.value is None for limit in (rule.avalanche_current, rule.single, rule.repetitive)):
        yield Finding(
            rule.check,
            "avalanche energy",
            placed.part,
            placed.channel,
            placed.label,
            hardest.energy,
            0.0,
            "J",
            -1.0,
            hardest.start,
            "destroy",
            "fail",
            f"{placed.label}: the switch takes {in_units(hardest.energy, 'J')}{_when(hardest.start)}{detail}; {placed.part} has no "
            f"avalanche rating, so breakdown destroys it; try: {_CLAMP}",
            source="no avalanche rating given",
        )
        return
    current = max(events, key=lambda e: e.current)
    yield _upper(
        "avalanche current",
        rule.check,
        rule.avalanche_current,
        "destroy",
        placed,
        bench,
        current.current,
        current.start,
        _CLAMP,
        detail,
    )
    yield from _avalanche_energy(rule, placed, bench, events, hardest, detail)


def _avalanche_energy(
    rule: BreakdownRule,
    placed: PlacedRule,
    bench: Bench,
    events: tuple[Avalanche, ...],
    hardest: Avalanche,
    detail: str,
) -> Iterator[Finding]:
    """A single-pulse rating covers one pulse; repeated avalanche needs a repetitive rating."""
    single = _upper(
        "avalanche energy",
        rule.check,
        rule.single,
        "destroy",
        placed,
        bench,
        hardest.energy,
        hardest.start,
        _CLAMP,
        detail,
    )
    if len(events) == 1:
        yield single
        return
    if single.verdict == "fail":
        yield single
        return
    if rule.repetitive.value is None:
        yield replace(
            single,
            limit=None,
            margin=None,
            verdict="limit-missing",
            source="",
            sentence=f"{placed.label}: the switch takes up to {in_units(hardest.energy, 'J')}{detail}; the single-pulse rating of "
            f"{placed.part} covers one pulse only, and no repetitive avalanche energy was given",
        )
        return
    yield _upper(
        "avalanche energy",
        rule.check,
        rule.repetitive,
        "destroy",
        placed,
        bench,
        hardest.energy,
        hardest.start,
        _CLAMP,
        detail,
    )


# ------------------------------------------------------------------------------------------------- coils


def _pull_in(rule: PullInRule, placed: PlacedRule, readings: Readings, bench: Bench) -> Iterator[Finding]:
    assert placed.channel is not None
    times, values = readings.pull_in[placed.channel]
    if not len(values):
        return
    k = int(np.argmin(values))
    value, at, bound = float(values[k]), float(times[k]), rule.limit.value
    margin = None if bound is None else (value - bound) / bound
    sentence = (
        f"{placed.label}: at the end of its pulse at {in_units(at, 's', 4)} the coil current is {in_units(value, 'A')}"
    )
    if bound is None:
        sentence += f"; no pull-in current of {placed.part} was given to hold it against"
    else:
        sentence += f"; {placed.part} pulls in at {in_units(bound, 'A')}"
        if margin is not None and margin < 0:
            sentence += "; try: a longer pulse, fewer channels at once, or a stiffer supply"
    yield Finding(
        rule.check,
        "coil current at the end of a pulse",
        placed.part,
        placed.channel,
        placed.label,
        value,
        bound,
        "A",
        margin,
        at,
        "misbehave",
        bench.verdict(margin),
        sentence,
        source=rule.limit.source,
    )


def _release(rule: ReleaseRule, placed: PlacedRule, readings: Readings, bench: Bench) -> Iterator[Finding]:
    assert placed.channel is not None
    times, values = readings.release[placed.channel]
    if not len(values):
        return
    k = int(np.argmax(values))
    value, at, bound = max(float(values[k]), 0.0), float(times[k]), rule.limit.value
    margin = None if bound is None else (bound - value) / bound
    sentence = (
        f"{placed.label}: fired again at {in_units(at, 's', 4)} while its coil still carries {in_units(value, 'A')}"
    )
    if bound is None:
        sentence += f"; no release current of {placed.part} was given to hold it against"
    else:
        sentence += f"; {placed.part} lets go below {in_units(bound, 'A')}"
        if margin is not None and margin < 0:
            sentence += "; try: a longer pause, or a clamp of higher voltage"
    yield Finding(
        rule.check,
        "coil current when fired again",
        placed.part,
        placed.channel,
        placed.label,
        value,
        bound,
        "A",
        margin,
        at,
        "misbehave",
        bench.verdict(margin),
        sentence,
        source=rule.limit.source,
    )


# -------------------------------------------------------------------------------------------------- rail


def _who(board: Board, channels: tuple[int, ...]) -> str:
    """The channels by the board's own names, such as "lane 0-23"."""
    if not channels:
        return "no channel"
    labels = [board.channel(c).label for c in channels]
    stems = {label.rstrip("0123456789") for label in labels}
    if len(labels) == 1:
        return labels[0]
    if len(stems) == 1 and (stem := stems.pop()).strip():
        numbers = [int(label[len(stem) :]) for label in labels if label[len(stem) :]]
        if len(numbers) == len(labels):
            return f"{stem.strip()}s {write_range(numbers)}"
    return f"channels {write_range(list(channels))}"


def _together(board: Board, firing: Firing, at: float) -> str:
    """Who was on just before a time: at the very edge the outputs have already changed."""
    on = firing.channels_on(at) or firing.channels_on(at - 2e-6) or firing.channels_on(at - 1e-4)
    number = len(on)
    if not number:
        return "no channel was on"
    return (
        f"{_who(board, on)} ({number} {'channel' if number == 1 else 'channels'}) {'was' if number == 1 else 'were'} on"
    )


def _dip(rule: DipRule, placed: PlacedRule, readings: Readings, firing: Firing, bench: Bench) -> Finding:
    """Depth with duration: below the level is allowed for less than the given time."""
    lowest, at = readings.low[placed.channel, rule.quantity]
    who = _together(bench.board, firing, at)
    level = rule.limit.value
    at_supply = in_units(readings.low[None, "v_supply"][0], "V")
    sentence = f"{who} at {in_units(at, 's', 4)}: the {rule.what} fell to {in_units(lowest, 'V')}"
    sentence += f" ({at_supply} at the supply's own terminals)"
    if level is None:
        return Finding(
            rule.check,
            "coil rail voltage",
            placed.part,
            None,
            placed.label,
            lowest,
            None,
            "V",
            None,
            at,
            "misbehave",
            "limit-missing",
            f"{sentence}; no brown-out level was given to hold it against ([limits] brown_out)",
        )
    margin = (lowest - level) / level
    longest: Dip | None = max(readings.dips, key=lambda d: d.lasting, default=None)
    if longest is None:
        sentence += f"; the brown-out level is {in_units(level, 'V')}"
        return Finding(
            rule.check,
            "coil rail voltage",
            placed.part,
            None,
            placed.label,
            lowest,
            level,
            "V",
            margin,
            at,
            "misbehave",
            bench.verdict(margin),
            sentence,
            source=rule.limit.source,
        )
    sentence += f" and stayed below {in_units(level, 'V')} for {in_units(longest.lasting, 's')}; brown-out counts after {in_units(rule.lasting, 's')}"
    spare = (rule.lasting - longest.lasting) / rule.lasting if rule.lasting else -1.0
    if spare < 0:
        sentence += _fewer(bench.board)
    else:
        margin = spare
    # Broken, the margin tells the depth; allowed for its shortness, the margin tells how short.
    return Finding(
        rule.check,
        "coil rail voltage",
        placed.part,
        None,
        placed.label,
        lowest,
        level,
        "V",
        margin,
        at,
        "misbehave",
        bench.verdict(margin),
        sentence,
        source=rule.limit.source,
        lasting=longest.lasting,
    )


def _fewer(board: Board) -> str:
    """A closed-form guess at how many channels the supply feeds for ever at the brown-out level: only a hint."""
    level = board.limits.brown_out
    if level is None:
        return ""
    each = level.voltage.typ / min(c.coil.resistance.min for c in board.channels)
    r = board.supply.resistance.typ + board.cable.loop(293.15).typ
    feeds = (board.supply.voltage.min - level.voltage.typ) / r / each
    if board.supply.current_ceiling is not None:
        feeds = min(feeds, board.supply.current_ceiling.typ / each)
    return (
        f"; try: at most {max(int(feeds), 1)} channels together, or a stronger supply"
        if feeds > 0
        else "; try: a stronger supply"
    )


def _ceiling(rule: CeilingRule, placed: PlacedRule, readings: Readings, firing: Firing, bench: Bench) -> Finding:
    value, at = readings.high[placed.channel, rule.quantity]
    lasting, since = readings.ceiling
    bound = rule.limit.value
    when = at if since is None else since
    sentence = f"{rule.what} reaches {in_units(value, 'A')} at {in_units(when, 's', 4)}"
    margin: float | None = None
    if bound is None:
        sentence += "; no current ceiling of the supply was given to hold it against"
    elif since is not None:
        margin = min((bound * AT_CEILING - value) / bound, -1e-3)
        sentence = (
            f"the supply was at its ceiling of {in_units(bound, 'A')} for {in_units(lasting, 's')}, first at {in_units(when, 's', 4)} "
            f"({_together(bench.board, firing, when)}): a supply that trips or hiccups instead of limiting would drop the rail"
            "; try: fewer channels at once, or a larger supply"
        )
    else:
        margin = (bound - value) / bound
        sentence += f"; its ceiling is {in_units(bound, 'A')}"
    return Finding(
        rule.check,
        "supply current",
        placed.part,
        None,
        placed.label,
        value,
        bound,
        "A",
        margin,
        when,
        "misbehave",
        bench.verdict(margin),
        sentence[0].upper() + sentence[1:],
        source=rule.limit.source,
        lasting=lasting if since is not None else None,
    )
