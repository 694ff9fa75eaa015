"""Readings against limits: every rule of a deck applied, one finding or more per rule."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from boardsim.circuit.deck import Deck, PlacedRule
from boardsim.firing.schedule import Firing
from boardsim.parts.rules import (
    BreakdownRule,
    CeilingRule,
    DipRule,
    DriveRule,
    EnergyRule,
    FallRule,
    FloorRule,
    HeatRule,
    HoldRule,
    IdleRule,
    LatchRule,
    LeastRule,
    MeanRule,
    MotionRule,
    PeakRule,
    PullInRule,
    PulseRule,
    ReleaseRule,
    ReserveRule,
    Rule,
    ShootThroughRule,
    SneakRule,
    TogetherRule,
)
from boardsim.quantities import in_units
from boardsim.verdict.audit import SMALL
from boardsim.verdict.avalanche import judge_breakdown, judge_together
from boardsim.verdict.bench import Bench, upper
from boardsim.verdict.boost import judge_reserve
from boardsim.verdict.bridges import judge_leg
from boardsim.verdict.coils import judge_idle, judge_pull_in, judge_release
from boardsim.verdict.drive import judge_drive
from boardsim.verdict.findings import Finding, Shape
from boardsim.verdict.heat import judge_heat, judge_warmth
from boardsim.verdict.hold import judge_hold
from boardsim.verdict.latching import judge_latch
from boardsim.verdict.logic_rail import judge_fall, judge_least
from boardsim.verdict.motion import judge_motion
from boardsim.verdict.rail import judge_ceiling, judge_dip
from boardsim.verdict.readings import Readings, pulse_key
from boardsim.verdict.sneak import judge_sneak
from boardsim.verdict.surges import judge_pulses


def judge(readings: Readings, deck: Deck, firing: Firing, bench: Bench) -> list[Finding]:
    """Apply the deck's rules to its readings, in one corner.

    Returns
    -------
    list of Finding
        One or more per rule; none for a rule that nothing could break (a pull-in rule of a channel that is
        never fired, a release rule of one that is fired once).
    """
    found: list[Finding] = []
    # Without a limit an idle part's power, which is noise, is compared on the scale of the busiest part's.
    powers = [abs(mean) for (_, of), mean in readings.means.items() if len(of) == 2 and of[0] != of[1]]  # no squares
    hottest = max(powers, default=0.0)
    for placed in deck.rules:
        assumed = _assumed(placed, deck)
        nominal = tuple(name for name in bench.nominal_only if not _beside_the_point(name, placed))
        line = placed.channel if placed.channel in deck.lines else None
        carried = (placed.channel, "i_coil" if line is None else "i_d")
        scale = max(abs(of.get(carried, (0.0, 0.0))[0]) for of in (readings.high, readings.low))
        for finding in _apply(placed, readings, firing, deck, bench):
            size = scale if finding.unit == "A" else 0.0
            size = hottest if finding.unit == "W" and finding.limit is None else size
            if isinstance(placed.rule, ShootThroughRule):
                size = scale_of(placed.rule)
            found.append(
                replace(
                    finding,
                    channel=finding.channel if line is None else None,
                    place=line,
                    corner=bench.corner,
                    nominal_only=nominal,
                    assumed=assumed,
                    scale=size,
                    probes=_probes(placed.rule, finding),
                    shape=_shape(placed.rule, finding),
                )
            )
    return [*found, *judge_warmth(found, bench)]


def scale_of(rule: ShootThroughRule) -> float:
    """What a change of the time left is compared on by the audit, as a finding's scale: the dead time itself. [s]

    Notes
    -----
    The reading is the difference of two edges that come a dead time apart. Of a gate that only just touches its threshold the
    time above it is ill-conditioned, and no step resolves a hundredth of that; a hundredth of the dead time is a tenth of the
    guard band. Without a dead time a change counts as a share of the reading.
    """
    return rule.dead_time / SMALL


def _probes(rule: Rule, finding: Finding) -> tuple[str, ...]:
    """What a finding of a rule was read from."""
    match rule:
        case MeanRule() | PulseRule():
            return rule.quantities
        case ShootThroughRule():
            return ()
        case LatchRule():
            return (rule.quantity,) if finding.unit == "A" else ()
        case EnergyRule() | TogetherRule():
            return ()  # a close-up counts the energy of avalanches only
        case HeatRule():
            return rule.powers[0] if len(rule.powers) == 1 and not rule.channels and finding.unit == "W" else ()
        case BreakdownRule():
            return {"V": (rule.voltage,), "A": (rule.current,)}.get(finding.unit, (rule.voltage, rule.current))
        case _:
            return (rule.quantity,)


def _shape(rule: Rule, finding: Finding) -> Shape:
    if isinstance(rule, MeanRule):
        return "mean"
    if isinstance(rule, EnergyRule | TogetherRule | MotionRule):
        return "value"
    return "energy" if finding.unit == "J" else "value"


def _beside_the_point(name: str, placed: PlacedRule) -> bool:
    """Whether a number that was run at its nominal value only does not bear on a rule's reading."""
    rule = placed.rule
    match name:
        case "breakdown voltage":
            return not isinstance(rule, BreakdownRule | TogetherRule)
        case "on-resistance":
            return not isinstance(rule, HeatRule | PullInRule | LatchRule)
        case "threshold":
            return not isinstance(rule, IdleRule)
        case "gate driver's supply":
            return not isinstance(rule, ShootThroughRule | FloorRule | PeakRule | HeatRule)
        case "gate charge of the high transistor" | "gate charge of the low transistor" | "gate resistances":
            return not isinstance(rule, ShootThroughRule | HeatRule)
        case "bulk capacitance" | "bulk series resistance":
            return placed.channel is not None and not isinstance(rule, PullInRule | LatchRule)
        case _:
            return False


def _assumed(placed: PlacedRule, deck: Deck) -> tuple[str, ...]:
    """The assumptions that a reading hangs on: the supply's and the rail's for the rail and for pull-in, the
    coils' own for what happens in a channel.
    """
    own = deck.assumed.get(placed.channel, ())
    return (*deck.assumed.get(None, ()), *own) if isinstance(placed.rule, PullInRule | LatchRule) else own


def _apply(placed: PlacedRule, readings: Readings, firing: Firing, deck: Deck, bench: Bench) -> Iterator[Finding]:
    match placed.rule:
        case PeakRule() as rule:
            yield _peak(rule, placed, readings, bench)
        case FloorRule() as rule:
            yield from _floor(rule, placed, readings, firing, bench)
        case DriveRule() as rule:
            yield from judge_drive(rule, placed, readings.drive[_channel(placed), rule.quantity, rule.current], bench)
        case MeanRule() as rule:
            value = readings.means[placed.channel, rule.quantities]
            over = f" {firing.averaged_over}"
            yield upper(
                rule.what, rule.limit, rule.consequence, placed, bench, value, None, rule.advice, over, part=rule.part
            )
        case HeatRule() as rule:
            yield judge_heat(rule, placed, readings, firing, deck.corner, bench)
        case PulseRule() | EnergyRule() as rule:
            key = pulse_key(placed.channel, rule)
            assert key is not None  # both have one
            yield judge_pulses(rule, placed, readings.pulses[key], bench)
        case BreakdownRule() as rule:
            yield from judge_breakdown(rule, placed, readings, bench)
        case TogetherRule() as rule:
            yield from judge_together(rule, placed, readings, bench)
        case PullInRule() as rule:
            ends = firing.spans(_channel(placed))[:, 1]
            yield from judge_pull_in(rule, placed, readings.pull_in[_channel(placed)], ends, bench)
        case ReleaseRule() as rule:
            yield from judge_release(rule, placed, readings.release[_channel(placed)], bench)
        case HoldRule() as rule:
            yield from judge_hold(rule, placed, readings.valleys[_channel(placed)], firing, bench)
        case ReserveRule() as rule:
            yield from judge_reserve(rule, placed, readings.reserve, firing, bench)
        case IdleRule() as rule:
            yield from judge_idle(rule, placed, readings.idle[_channel(placed)], bench)
        case MotionRule() as rule:
            yield from judge_motion(rule, placed, readings.motions[_channel(placed)], bench)
        case LatchRule() as rule:
            yield from judge_latch(rule, placed, readings.throws[_channel(placed)], bench)
        case SneakRule() as rule:
            yield judge_sneak(rule, placed, readings.sneaks[_channel(placed)], firing, bench)
        case DipRule() as rule:
            yield judge_dip(rule, placed, readings, firing, bench)
        case LeastRule() as rule:
            yield judge_least(rule, placed, readings, bench)
        case FallRule() as rule:
            yield judge_fall(rule, placed, readings, firing, bench)
        case ShootThroughRule() as rule:
            place = _channel(placed)
            fired = bool(len(firing.spans(place)))
            if (leg := judge_leg(rule, placed, readings.legs[place], bench, fired=fired)) is not None:
                yield leg
        case CeilingRule() as rule:
            yield judge_ceiling(rule, placed, readings, firing, bench)


def _peak(rule: PeakRule, placed: PlacedRule, readings: Readings, bench: Bench) -> Finding:
    key = (placed.channel, rule.quantity)
    value, at = readings.high[key]
    if rule.magnitude and -readings.low[key][0] > value:
        value, at = -readings.low[key][0], readings.low[key][1]
    return upper(
        rule.what,
        rule.limit,
        rule.consequence,
        placed,
        bench,
        value,
        at,
        rule.advice,
        part=rule.part,
    )


def _floor(rule: FloorRule, placed: PlacedRule, readings: Readings, firing: Firing, bench: Bench) -> Iterator[Finding]:
    if not len(firing.spans(_channel(placed))):
        return
    value, at = readings.high[placed.channel, rule.quantity]
    times, values = readings.at_ends.get((_channel(placed), rule.quantity), ((), ()))
    weakest = ""
    if len(values):  # the logic rail moves: of all pulses the weakest counts, where its current is highest
        k = int(np.argmin(values))
        value, at, weakest = (
            float(values[k]),
            float(times[k]),
            f" at the end of its pulse at {in_units(times[k], 's', 4)}",
        )
    bound = rule.limit.value
    margin = None if bound is None else (value - bound) / bound
    said = f"{placed.label}: {rule.what} reaches {in_units(value, rule.limit.unit)}{weakest}; the {rule.limit.name} of {placed.part} is "
    said += "not given" if bound is None else in_units(bound, rule.limit.unit)
    said += f"; try: {rule.advice}" if margin is not None and margin < 0 else ""
    yield bench.finding(placed, rule.limit, rule.what, value, margin, at, said, rule.consequence, worse="low")


def _channel(placed: PlacedRule) -> int:
    """The channel of a rule that only channels have, or the line."""
    assert placed.channel is not None
    return placed.channel
