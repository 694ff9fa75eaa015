"""Whether coils pull in by the end of their pulse, and have let go when they are fired again."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from boardsim.circuit.deck import PlacedRule
from boardsim.parts.rules import IdleRule, Limit, PullInRule, ReleaseRule, SneakRule
from boardsim.quantities import in_units
from boardsim.verdict.bench import Bench, when
from boardsim.verdict.findings import Finding, Floats


def judge_pull_in(
    rule: PullInRule, placed: PlacedRule, samples: tuple[Floats, Floats], ends: Floats, bench: Bench
) -> Iterator[Finding]:
    """Of all pulses the one whose coil current at its end is lowest; nothing where the channel is never fired.

    A pulse that is held is asked at the end of its peak: `ends` are those of whole pulses. (n,) [s]
    """
    times, values = samples
    if not len(values):
        return
    k = int(np.argmin(values))
    value, at, bound = float(values[k]), float(times[k]), rule.limit.value
    margin = None if bound is None else (value - bound) / bound
    its = "pulse" if at in ends else "peak"
    said = f"{placed.label}: at the end of its {its} at {in_units(at, 's', 4)} the coil current is {in_units(value, 'A')}; "
    said += _held(
        placed, bound, margin, "pulls in at", "pull-in", f"a longer {its}, fewer channels at once, or a stiffer supply"
    )
    yield bench.finding(placed, rule.limit, "coil current at the end of a pulse", value, margin, at, said, worse="low")


def judge_release(
    rule: ReleaseRule, placed: PlacedRule, samples: tuple[Floats, Floats], bench: Bench
) -> Iterator[Finding]:
    """Of all repeats the one that finds most current left; nothing where the channel is fired once."""
    times, values = samples
    if not len(values):
        return
    left = np.abs(values) if rule.besides else np.maximum(values, 0.0)
    k = int(np.argmax(left))
    value, at, bound = float(left[k]), float(times[k]), rule.limit.value
    margin = None if bound is None else (bound - value) / bound
    other_way = " the other way" if rule.besides and values[k] < 0 else ""
    said = f"{placed.label}: fired again at {in_units(at, 's', 4)} while its coil still carries {in_units(value, 'A')}{other_way}; "
    remedy = "a longer pause" if rule.besides else "a longer pause, or a clamp of higher voltage"
    said += _held(placed, bound, margin, "lets go below", "release", remedy)
    yield bench.finding(placed, rule.limit, "coil current when fired again", value, margin, at, said)


def judge_idle(rule: IdleRule, placed: PlacedRule, samples: tuple[Floats, Floats], bench: Bench) -> Iterator[Finding]:
    """What the coil carries while its channel is off, at rest before everything and when all has settled after it.

    Notes
    -----
    A clamp that conducts at the rail, a switch that leaks or does not turn off: the current flows whatever the firmware
    does, and no pulse shows it. At other moments a coil that is off carries what its last pulse left.
    """
    times, values = samples
    if not len(values):
        return
    k = int(np.argmax(np.abs(values)))
    value, at = float(abs(values[k])), float(times[k])
    limit, stands = harmless_limit(rule, placed, bench)
    bound = limit.value or 0.0
    margin = (bound - value) / bound
    said = (
        f"{placed.label}: with its channel off{when(at)} the coil carries {in_units(value, 'A')}; {stands} "
        f"{in_units(bound, 'A')}"
    )
    if margin < 0:
        said += "; try: a clamp that blocks the highest rail, or a switch that is off at its gate's or base's level"
    yield bench.finding(placed, limit, "coil current while off", value, margin, at, said)


def harmless_limit(rule: IdleRule | SneakRule, placed: PlacedRule, bench: Bench) -> tuple[Limit, str]:
    """What a coil that is off may carry, and the words for it: its release current, or a share of its settled current."""
    limit, board = rule.limit, bench.board
    if limit.value is not None:
        does = "lets go" if limit.name == "release current" else "is sure to stay where it is"
        return limit, f"{placed.part} {does} below"
    coil = board.channel(placed.channel or 0).coil
    fed = board.supply.resistance.max + (board.charging.resistance.max if board.charging is not None else 0.0)
    settled = board.supply.voltage.min / (coil.resistance.max + fed)
    why = f"{rule.share:.0%} of the settled current, since no {coil.harmless_name} was given: from memory"
    limit = replace(limit, value=rule.share * settled, source=f"assumed: {why}", name="harmless current")
    return limit, f"a tenth of the settled current of {placed.part}, for want of a {coil.harmless_name}, is"


def _held(placed: PlacedRule, bound: float | None, margin: float | None, does: str, name: str, remedy: str) -> str:
    """The half of the sentence that names the limit, and what to try where it is broken."""
    if bound is None or margin is None:
        return f"no {name} current of {placed.part} was given to hold it against"
    return f"{placed.part} {does} {in_units(bound, 'A')}" + (f"; try: {remedy}" if margin < 0 else "")
