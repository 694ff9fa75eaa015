"""Whether coils pull in by the end of their pulse, and have let go when they are fired again."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from boardsim.circuit.deck import PlacedRule
from boardsim.parts.rules import PullInRule, ReleaseRule
from boardsim.quantities import in_units
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding
from boardsim.verdict.readings import Readings


def judge_pull_in(rule: PullInRule, placed: PlacedRule, readings: Readings, bench: Bench) -> Iterator[Finding]:
    """Of all pulses the one whose coil current at its end is lowest; nothing where the channel is never fired."""
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


def judge_release(rule: ReleaseRule, placed: PlacedRule, readings: Readings, bench: Bench) -> Iterator[Finding]:
    """Of all repeats the one that finds most current left; nothing where the channel is fired once."""
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
