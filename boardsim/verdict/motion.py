"""Findings on what a coil moves: whether it arrives in time, how hard it hits, whether it stays in and comes back."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace

from boardsim.circuit.deck import PlacedRule
from boardsim.parts.rules import Limit, MotionRule
from boardsim.quantities import apart, in_units
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding
from boardsim.verdict.strokes import BACK, IN, Travelled, energy


def judge_motion(rule: MotionRule, placed: PlacedRule, pulses: Sequence[Travelled], bench: Bench) -> Iterator[Finding]:
    """Of all pulses of a channel the one that comes nearest to what it may do, or is farthest beyond; nothing without pulses.

    Notes
    -----
    An arrival counts from the command, with what timer, chain and jitter take, where a latest arrival was given, and may then come after
    the pulse has ended; without one it has to come before that. Where a band was given the hardest of all blows counts for its upper
    end, and the softest first blow of any pulse for its lower.
    """
    if not pulses:
        return
    match rule.check:
        case "stroke":
            yield from _arrival(rule, placed, pulses, bench)
        case "held-in":
            yield from _held_in(rule, placed, pulses, bench)
        case "impact":
            yield from _impact(rule, placed, pulses, bench)
        case "second-impact":
            yield from _second(rule, placed, pulses, bench)
        case "return":
            yield from _return(rule, placed, pulses, bench)


def _arrival(rule: MotionRule, placed: PlacedRule, pulses: Sequence[Travelled], bench: Bench) -> Iterator[Finding]:
    moved = [p for p in pulses if p.began < IN * rule.travel]  # one that has not come back is told of by its return
    short = [p for p in moved if not p.hits]
    if short:
        yield _too_short(rule, placed, min(short, key=lambda one: one.farthest), bench)
        return
    if not moved:
        return
    due = rule.limit.value

    def left(p: Travelled) -> float:
        """Share of the time allowed that is left. With a latest arrival a mass may fly on after its pulse; without one it may not."""
        at = p.hits[0][0]
        return (p.off - at) / (p.off - p.on) if due is None else (due - (at - p.on) - p.until_on) / due

    p = min(moved, key=left)
    at, margin = p.hits[0][0], left(p)
    if due is None or p.commanded is None:
        took, said = at - p.on, f"{placed.label}: fired at {in_units(p.on, 's', 4)}, {placed.part} arrives after "
    else:
        took = at - p.on + p.until_on
        said = f"{placed.label}: commanded at {in_units(p.commanded, 's', 4)}, {placed.part} arrives after "
    named, allowed = ("end of its pulse", p.off - p.on) if due is None else ("latest arrival", due)
    took_said, allowed_said = apart(took, allowed, "s")
    said += took_said
    if due is not None and p.until_on > 0:
        said += f", of which up to {in_units(p.until_on, 's')} pass until its output is on"
    said += f"; the {named} is at {allowed_said}"
    if margin < 0:
        said += "; try: " + ("a longer pulse, or a higher voltage" if due is None else _sooner(p, due))
    limit = replace(rule.limit, value=allowed, name=named, source=rule.limit.source or "the pattern")
    yield bench.finding(placed, limit, "time to arrive", took, margin, at, said)


def _sooner(p: Travelled, due: float) -> str:
    """What to try where the arrival is late: the chain, where it would be in time without what that takes."""
    if p.hits[0][0] - p.on <= due < p.hits[0][0] - p.on + p.until_on:
        return "a faster clock or fewer registers in the chain, or an earlier command"
    return "an earlier command, a higher voltage, or a weaker spring"


def _too_short(rule: MotionRule, placed: PlacedRule, p: Travelled, bench: Bench) -> Finding:
    """It did not get to its stop at all."""
    share = p.farthest / rule.travel
    limit = replace(rule.limit, value=rule.travel, unit="m", name="travel")
    said = (
        f"{placed.label}: in its pulse at {in_units(p.on, 's', 4)} ({in_units(p.off - p.on, 's')} long) {placed.part} gets "
        f"{in_units(max(p.farthest, 0.0), 'm')} far, of {in_units(rule.travel, 'm')}; try: "
        + (rule.stays if share < BACK else "a longer pulse, a higher voltage, or a weaker spring")
    )
    return bench.finding(
        placed, limit, "way that a pulse moves it", p.farthest, min(share - 1, -1e-3), p.on, said, worse="low"
    )


def _held_in(rule: MotionRule, placed: PlacedRule, pulses: Sequence[Travelled], bench: Bench) -> Iterator[Finding]:
    bound = IN * rule.travel
    # One that was still in when its pulse began has to stay as one that arrived has.
    arrived = [p for p in pulses if p.began >= bound or (p.hits and p.hits[0][0] <= p.off)]
    if not arrived:
        return
    p = min(arrived, key=lambda one: one.ended)
    margin = (p.ended - bound) / bound
    limit = replace(
        rule.limit, value=bound, name="position that counts as in", source="9/10 of the travel, from memory"
    )
    was = ", and had arrived" if p.hits else ", and was in when it began"
    said = (
        f"{placed.label}: at the end of its pulse at {in_units(p.off, 's', 4)} {placed.part} is at {in_units(p.ended, 'm')} of "
        f"{in_units(rule.travel, 'm')}" + (f"{was}; try: more current to hold it" if margin < 0 else ": held in")
    )
    yield _counted(
        bench.finding(placed, limit, "position at the end of a pulse", p.ended, margin, p.off, said, worse="low")
    )


def _impact(rule: MotionRule, placed: PlacedRule, pulses: Sequence[Travelled], bench: Bench) -> Iterator[Finding]:
    if not any(p.hits for p in pulses):
        return
    # A later blow may be the harder one; what a pulse was fired for is its first.
    hardest = max((hit for p in pulses for hit in p.hits), key=lambda hit: hit[1])
    softest = min((p.hits[0] for p in pulses if p.hits), key=lambda hit: hit[1])
    most, least = rule.limit.value, rule.least
    (at, speed), value = hardest, energy(rule.mass, hardest[1])
    detail = (
        f"{placed.label}: {placed.part} hits its stop{_at(at)} at {in_units(speed, 'm/s')}, with {in_units(value, 'J')}"
    )
    if most is None or least is None:
        said = f"{detail}; no band of the energy of its blow was given to hold it against"
        yield bench.finding(placed, rule.limit, "energy of the hardest blow", value, None, at, said)
        return
    margin = (most - value) / most
    said = f"{detail}; up to {in_units(most, 'J')} may be" + (
        "; try: a shorter pulse, or a softer stop" if margin < 0 else ""
    )
    yield bench.finding(placed, rule.limit, "energy of the hardest blow", value, margin, at, said)
    at, value = softest[0], energy(rule.mass, softest[1])
    margin = (value - least) / least
    said = f"{placed.label}: the softest blow of {placed.part}, {in_units(value, 'J')}{_at(at)}, is held against at least {in_units(least, 'J')}"
    said += "; try: a longer pulse, or a higher voltage" if margin < 0 else ""
    limit = replace(rule.limit, value=least, name="least energy of the blow")
    found = bench.finding(placed, limit, "energy of the softest blow", value, margin, at, said, worse="low")
    yield replace(found, scale=most)  # one that barely arrives need not be as exact as those that are meant


def _second(rule: MotionRule, placed: PlacedRule, pulses: Sequence[Travelled], bench: Bench) -> Iterator[Finding]:
    several = [p for p in pulses if len(p.hits) > 1 and p.hits[0][1] > 0]
    if not several or rule.limit.value is None:
        return

    def share(p: Travelled) -> float:
        return max((speed / p.hits[0][1]) ** 2 for _, speed in p.hits[1:])

    p = max(several, key=share)
    at = max(p.hits[1:], key=lambda hit: hit[1])[0]
    margin = (rule.limit.value - share(p)) / rule.limit.value
    said = (
        f"{placed.label}: {placed.part} bounces off its stop and hits it again{_at(at)} with {share(p):.0%} of the first blow's energy; "
        f"{rule.limit.value:.0%} may be"
        + ("; try: a softer stop, or more current while it arrives" if margin < 0 else "")
    )
    yield bench.finding(placed, rule.limit, "second blow's share", share(p), margin, at, said)


def _return(rule: MotionRule, placed: PlacedRule, pulses: Sequence[Travelled], bench: Bench) -> Iterator[Finding]:
    gone = [p for p in pulses if p.farthest > BACK * rule.travel]
    out = [p for p in gone if p.back is None]
    if out:
        yield _still_out(rule, placed, min(out, key=lambda one: (one.last, -one.left)), bench)
        return
    timed = [(p.back - p.off, p) for p in gone if p.back is not None and not p.last]
    if not timed:
        return
    took, p = max(timed, key=lambda one: one[0] / (one[1].until - one[1].off))
    pause = p.until - p.off
    limit = Limit(pause, "s", None, "the pattern", "pause")
    said = (
        f"{placed.label}: {placed.part} is back at its rest {in_units(took, 's')} after its pulse that ended at {in_units(p.off, 's', 4)}; "
        f"the pause is {in_units(pause, 's')}"
    )
    yield bench.finding(placed, limit, "time to return", took, (pause - took) / pause, p.back, said)


def _still_out(rule: MotionRule, placed: PlacedRule, p: Travelled, bench: Bench) -> Finding:
    """It is not back when it is fired again; or when the run ends, which may have come too soon for one that is on its way."""
    bound = BACK * rule.travel
    then = "when the run ends" if p.last else f"when it is fired again at {in_units(p.until, 's', 4)}"
    limit = Limit(bound, "m", None, "2 % of the travel, from memory", "position that counts as back")
    said = f"{placed.label}: {placed.part} is still {in_units(p.left, 'm')} out {then}, {in_units(p.until - p.off, 's')} after its pulse; "
    on_its_way = p.last and p.left < IN * rule.travel
    said += (
        "try: a longer duration of the pattern, to see it arrive"
        if on_its_way
        else "try: a longer pause, a clamp of higher voltage, or a stronger spring"
    )
    margin = min((bound - p.left) / bound, -1e-3)
    found = bench.finding(placed, limit, "position when fired again", p.left, margin, p.until, said)
    return replace(found, verdict="unproven") if on_its_way else found


def _at(at: float) -> str:
    return f" at {in_units(at, 's', 4)}"


def _counted(finding: Finding) -> Finding:
    """A position is in or it is not: there is no guard band about it."""
    return replace(finding, verdict="pass") if finding.verdict == "tight" else finding
