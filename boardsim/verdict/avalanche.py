"""The voltage across an open switch: below breakdown by voltage, in avalanche by current, energy and repetition."""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Iterator
from dataclasses import replace

from boardsim.circuit.deck import PlacedRule
from boardsim.parts.rules import BreakdownRule, TogetherRule
from boardsim.quantities import in_units
from boardsim.verdict.bench import Bench, upper, when
from boardsim.verdict.findings import Finding
from boardsim.verdict.readings import Readings
from boardsim.verdict.watch import Avalanche

_CLAMP = "a clamp (or one of lower voltage), or a switch rated for this avalanche"


def judge_breakdown(rule: BreakdownRule, placed: PlacedRule, readings: Readings, bench: Bench) -> Iterator[Finding]:
    """Below breakdown by voltage, in avalanche by current, energy and repetition."""
    assert placed.channel is not None  # the rule of a channel's switch
    value, at = readings.high[placed.channel, rule.voltage]
    events = readings.avalanches[placed.channel, rule.voltage]
    if not events:
        yield upper(
            f"{rule.what}{rule.of}",
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
            f"avalanche energy{rule.of}",
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
            f"{placed.label}: the switch takes {in_units(hardest.energy, 'J')}{when(hardest.start)}{detail}; {placed.part} has no "
            f"avalanche rating, so breakdown destroys it; try: {_CLAMP}",
            source="no avalanche rating given",
        )
        return
    current = max(events, key=lambda e: e.current)
    yield upper(
        f"avalanche current{rule.of}",
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
    single = upper(
        f"avalanche energy{rule.of}",
        rule.single,
        "destroy",
        placed,
        bench,
        hardest.energy,
        hardest.start,
        _CLAMP,
        detail,
    )
    if len(events) == 1 and not bench.repeated:
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
    yield upper(
        f"avalanche energy{rule.of}",
        rule.repetitive,
        "destroy",
        placed,
        bench,
        hardest.energy,
        hardest.start,
        _CLAMP,
        detail,
    )


def judge_together(rule: TogetherRule, placed: PlacedRule, readings: Readings, bench: Bench) -> Iterator[Finding]:
    """What the switches of one package take in avalanche within a time; nothing where two of them never do.

    Notes
    -----
    Stretches of avalanche that overlap count as one, with the sum of their energies. Those that begin within the rule's time of
    each other are added as if nothing of the first had left the chip: it leaves with the time constant of the chip's heat
    capacity against its package, so that the sum errs on the safe side within that time. What comes in later windows is heat, and
    judged by average power. Ratings for a single switch hold with the others idle. All of the energy in that one switch would
    heat it more than a share in each of several does, so a sum that it stands is allowed; above that only the package's own
    rating says anything.
    """
    groups = _shared(_stretches(rule, readings), rule.within)
    if not groups:
        return
    at, until, energy, members = max(groups, key=lambda group: group[2])
    what, detail = (
        "clamp energy of the package",
        f" in the clamps of {len(members)} outputs, within {in_units(until - at, 's')}",
    )
    if rule.limit.value is not None:
        yield upper(what, rule.limit, "destroy", placed, bench, energy, at, rule.advice, detail)
        return
    single = upper(what, rule.one, "destroy", placed, bench, energy, at, rule.advice, detail)
    if single.margin is not None and single.margin >= 0:
        yield single
        return
    stands = "" if single.limit is None else f", {in_units(single.limit, 'J')} in one of them with the others idle"
    yield replace(
        single,
        limit=None,
        margin=None,
        verdict="limit-missing",
        source="",
        sentence=f"{placed.label}: {what} is {in_units(energy, 'J')}{when(at)}{detail}; what {placed.part} stands in all of them "
        f"together was not given{stands}; try: {rule.advice}",
    )


_Group = tuple[float, float, float, frozenset[int]]  # from [s], to [s], energy [J], whose


def _stretches(rule: TogetherRule, readings: Readings) -> list[_Group]:
    """Stretches of avalanche in the order of their beginnings, those that overlap as one."""
    found = sorted(
        (event.start, event.start + event.lasting, event.energy, c)
        for c in rule.channels
        for event in readings.avalanches[c, rule.voltage]
    )
    groups: list[_Group] = []
    for start, stop, energy, channel in found:
        if groups and start <= groups[-1][1]:
            begun, until, so_far, members = groups[-1]
            groups[-1] = (begun, max(until, stop), so_far + energy, members | {channel})
        else:
            groups.append((start, stop, energy, frozenset({channel})))
    return groups


def _shared(groups: list[_Group], within: float) -> list[_Group]:
    """From each stretch on what begins within a time, added up, where several switches have a part in it."""
    begins = [g[0] for g in groups]
    sums: list[_Group] = []
    for first, at in enumerate(begins):
        window = groups[first : bisect_right(begins, at + within)]
        members = frozenset[int]().union(*(g[3] for g in window))
        sums.append((at, max(g[1] for g in window), sum(g[2] for g in window), members))
    return [one for one in sums if len(one[3]) > 1]
