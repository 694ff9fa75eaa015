"""Latching coils: whether every pulse leaves its coil in the state that it commands, and whether anything else flips it."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import replace

from boardsim.circuit.deck import PlacedRule
from boardsim.parts.rules import LatchRule
from boardsim.quantities import in_units
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding
from boardsim.verdict.throws import Thrown, Throws

_DRAINED = 0.98  # share of the idle rail below which a pulse counts as begun before the reservoir was full: words only
_RISING = 0.98  # share of a pulse's highest current above which it was still growing at the end: words only


def judge_latch(rule: LatchRule, placed: PlacedRule, throws: Throws, bench: Bench) -> Iterator[Finding]:
    """Of all pulses of a channel the one that is farthest from flipping its coil, or comes nearest to failing; or what flips it besides.

    Notes
    -----
    A pulse flips the coil where |i| >= I_f lasts for t_f without a break before the next pulse begins; after its end counts too, as
    long as the current lasts. What is held against I_f is the highest current that lasts for t_f: one reading for a current that is too
    low and for a pulse that is too short. A pulse that finds the coil where it sends it has nothing to do, where the state is known.
    """
    if rule.check == "stray-flip":
        yield _strays(rule, placed, throws, bench)
        return
    pulses = throws.all()
    if not pulses:
        return
    if working := [p for p in pulses if not p.already]:
        if rule.at.value is None or rule.after.value is None:
            yield from _unknown(rule, placed, working, bench)
        else:
            yield _flipped(rule, placed, working, throws, bench)
    yield from _kept(rule, placed, pulses, bench)


def _flipped(rule: LatchRule, placed: PlacedRule, pulses: Sequence[Thrown], throws: Throws, bench: Bench) -> Finding:
    p = min(pulses, key=lambda one: one.lasting)
    level, after = in_units(throws.level, "A"), in_units(throws.after, "s")
    margin = (p.lasting - throws.level) / throws.level
    said = f"{placed.label}: in its pulse at {_pulse(p)} the coil current reaches {in_units(p.peak, 'A')}, and {in_units(p.lasting, 'A')} "
    said += f"for {after}; {placed.part} flips after {after} at {level}"
    if margin < 0:
        short = sum(one.lasting < throws.level for one in pulses)
        said += f", and may stay where it was{_drained(p, throws)}"
        said += f"; so it is with {short} of its {len(pulses)} pulses" if short > 1 else ""
        said += f"; try: {_remedy(p, throws)}"
    return bench.finding(
        placed, rule.at, "current that lasts for as long as a flip takes", p.lasting, margin, p.since, said, worse="low"
    )


def _remedy(p: Thrown, throws: Throws) -> str:
    """What usually makes a pulse flip its coil."""
    full = not _drained(p, throws)
    growing = p.peak_at >= p.off - (1 - _RISING) * (p.off - p.on)
    recharge = "a longer pause before it, in which the reservoir recharges, fewer in a row, or a larger reservoir"
    if growing and full:
        return "a longer pulse, or a higher voltage"
    if growing:
        return f"{recharge}, or a longer pulse"
    return (
        "a larger reservoir, a higher voltage, or fewer together: the current falls before the pulse ends"
        if full
        else recharge
    )


def _unknown(rule: LatchRule, placed: PlacedRule, pulses: Sequence[Thrown], bench: Bench) -> Iterator[Finding]:
    """Where current or time were not given: what can be said of the other, and what is missing."""
    p, bound = min(pulses, key=lambda one: one.peak), rule.at.value
    margin = None if bound is None else (p.peak - bound) / bound
    said = f"{placed.label}: in its pulse at {_pulse(p)} the coil current reaches {in_units(p.peak, 'A')}; "
    said += (
        f"no current that flips {placed.part} was given to hold it against"
        if bound is None
        else f"{placed.part} flips at {in_units(bound, 'A')}"
    )
    said += "; try: a longer pulse, or a higher voltage" if margin is not None and margin < 0 else ""
    yield bench.finding(
        placed, rule.at, "highest current of a pulse that has to flip", p.peak, margin, p.peak_at, said, worse="low"
    )
    if rule.after.value is None:
        p = min(pulses, key=lambda one: one.off - one.on)
        said = f"{placed.label}: its shortest pulse, at {_pulse(p)}; how long {placed.part} takes to flip was not given to hold it against"
        yield bench.finding(
            placed, rule.after, "shortest pulse that has to flip", p.off - p.on, None, p.on, said, worse="low"
        )


def _kept(rule: LatchRule, placed: PlacedRule, pulses: Sequence[Thrown], bench: Bench) -> Iterator[Finding]:
    """Pulses whose coil flips back before the next one; and how many there are that had nothing to do, where no other finding says it."""
    count, lost = len(pulses), [p for p in pulses if p.lost is not None]
    said = f"{placed.label}: "
    if lost:
        p = lost[0]
        at = p.lost or 0.0
        said += (
            f"its pulse at {_pulse(p)} puts {placed.part} where it should be, and a current the other way flips it back at "
            f"{in_units(at, 's', 4)}; try: find where that current comes from in the close-up"
        )
    elif all(p.already for p in pulses):
        at = pulses[0].on
        said += f"{count} {'pulse finds' if count == 1 else 'pulses find'} {placed.part} where {'it sends' if count == 1 else 'they send'} it, and it stays there"
    else:
        return
    limit = replace(rule.at, value=float(count), unit="1", name="pulses", source="the pattern")
    found = bench.finding(
        placed,
        limit,
        "pulses that leave it as commanded",
        float(count - len(lost)),
        -len(lost) / count,
        at,
        said,
        worse="low",
    )
    yield replace(found, verdict="fail" if lost else "pass", shape="count", channels=(placed.channel or 0,))


def _strays(rule: LatchRule, placed: PlacedRule, throws: Throws, bench: Bench) -> Finding:
    limit, what = rule.holds, "current against its state while nobody drives it"
    bound = limit.value
    said = f"{placed.label}: while nobody drives it, its coil carries up to {in_units(throws.wrong, 'A')} against its state"
    said += f" at {in_units(throws.wrong_at, 's', 4)}; " if throws.wrong else "; "
    remedy = "; try: a diode in the way of that current, or find who else is on at that time in the close-up"
    if throws.strays and rule.at.value is not None:
        at = throws.strays[0]
        said += f"{in_units(rule.at.value, 'A')} for {in_units(throws.after, 's')} flip {placed.part}, which happens at {in_units(at, 's', 4)}"
        held = rule.at if bound is None else limit
        margin = min((held.value or 0.0) - throws.wrong, -1e-3 * throws.wrong) / (held.value or 1.0)
        return bench.finding(placed, held, what, throws.wrong, margin, throws.wrong_at, said + remedy)
    margin_ = None if bound is None else (bound - throws.wrong) / bound
    if bound is None or margin_ is None:
        said += f"no current that never flips {placed.part} was given to hold it against"
    else:
        said += f"{placed.part} is sure to stay where it is below {in_units(bound, 'A')}" + (
            remedy if margin_ < 0 else ""
        )
    return bench.finding(placed, limit, what, throws.wrong, margin_, throws.wrong_at, said)


def _pulse(p: Thrown) -> str:
    return f"{in_units(p.on, 's', 4)} ({in_units(p.off - p.on, 's')} long)"


def _drained(p: Thrown, throws: Throws) -> str:
    """That the reservoir was not full, for people; nothing where it was."""
    if p.rail >= _DRAINED * throws.full:
        return ""
    return f"; the coil rail stood at {in_units(p.rail, 'V')} when the pulse began, of {in_units(throws.full, 'V')} before the first"
