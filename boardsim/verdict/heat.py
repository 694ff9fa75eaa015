"""Junction temperatures: each against its limit, and the warmest against what the run took its figures at."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import replace

from boardsim.board.corners import hot_junction
from boardsim.board.matrix import LINES_FROM
from boardsim.circuit.deck import PlacedRule
from boardsim.firing.schedule import Firing
from boardsim.parts.base import Corner
from boardsim.parts.heat import settled_temperature
from boardsim.parts.rules import HeatRule
from boardsim.quantities import celsius, in_units
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding
from boardsim.verdict.readings import Readings

_NOISE = 1e-12  # [W]: decks resolve 1 uA (abstol) and 1 uV (vntol, ngspice's own), what is below their product has no sign even
_HOTTEST = 1000.0  # [K] that a report says of a junction that runs away: none lives to see it


def judge_heat(
    rule: HeatRule, placed: PlacedRule, readings: Readings, firing: Firing, corner: Corner, bench: Bench
) -> Finding:
    """T_j = T_ambient + R_th P at the pattern's average power; the margin counts from the ambient up.

    Temperatures have no natural zero: what may be used up is the way from the ambient to the limit.
    """
    part = rule.part or placed.part
    members = rule.channels or (placed.channel,)
    power = sum(readings.means[c, pair] for c in members for pair in rule.powers)
    power = power if abs(power) >= _NOISE else 0.0
    among = f" of its {_members(rule)}" if rule.channels else ""
    said = f"{placed.label}: {rule.what} takes {in_units(power, 'W')}{among} on average {firing.averaged_over}"
    r_th, limit = rule.resistance.value, rule.limit.value
    air = f"air of {celsius(rule.ambient)}"
    if r_th is None or limit is None:
        missing = replace(rule.resistance if r_th is None else rule.limit, unit="W")  # of what is known: the power
        said += f"; no {missing.name} of {part} was given to tell how hot it gets in {air}"
        return bench.finding(placed, missing, rule.what, power, None, None, said, rule.consequence, part=part)
    grows = power
    if rule.growing is not None:
        grows = min(power, rule.factor * sum(readings.means[c, rule.growing] for c in members))
    hot = settled_temperature(rule.ambient, r_th, grows, rule.growth, corner.junction, power - grows)
    reached = celsius(hot) if math.isfinite(hot) else "ever hotter, since its power grows with its temperature,"
    hot = min(hot, _HOTTEST)
    margin = (limit - hot) / (limit - rule.ambient) if limit > rule.ambient else -1.0
    said += f": {reached} in {air} with {in_units(r_th, 'K/W')}; the {rule.limit.name} of {part} is {celsius(limit)}"
    said += f"; try: {rule.advice}" if margin < 0 else ""
    return bench.finding(placed, rule.limit, rule.what, hot, margin, None, said, rule.consequence, part=part)


def _members(rule: HeatRule) -> str:
    """Who shares a package: channels, or lines of a matrix, and how many."""
    who = "line" if any(place >= LINES_FROM for place in rule.channels) else "channel"
    return f"one {who}" if len(rule.channels) == 1 else f"{len(rule.channels)} {who}s"


def judge_warmth(found: Sequence[Finding], bench: Bench) -> Iterator[Finding]:
    """Whether the warmest junction is no warmer than what the hot corners took semiconductors' figures at.

    A junction above that has a higher breakdown and on-resistance and a lower forward voltage than the run knew. With a
    rise that was assumed the rest of the way is a missing number, with one that was given the run is no proof. Not asked of a
    volley, which is fired once: its average power is nobody's.
    """
    around = bench.board.around
    # One that is above its own limit has failed already; what its figures would be there is no matter any more.
    hot = [f for f in found if f.check == "overheating" and f.unit == "K" and f.margin is not None and f.margin >= 0]
    if around is None or not hot or bench.repeated:
        return
    warmest = max(hot, key=lambda f: f.value)
    taken, rise = hot_junction(bench.board), bench.board.junction_rise
    said = (
        f"board: the {warmest.quantity} of {warmest.label} is the warmest, at {celsius(warmest.value)} if the "
        f"pattern goes on; figures of semiconductors were taken up to {celsius(taken)} (junction_rise of {in_units(rise.typ, 'K')}"
        f"{', assumed' if rise.assumed() else ''})"
    )
    margin = (taken - warmest.value) / max(taken - around.ambient_high, 1.0)
    above = margin < 0
    if above:
        needed = math.ceil(warmest.value - around.ambient_high)
        said += f'; set junction_rise = "{needed} K" in the board file and run again'
    yield Finding(
        "warming",
        "warmest junction",
        warmest.part,
        None,
        "board",
        warmest.value,
        None if above and rise.assumed() else taken,
        "K",
        None if above and rise.assumed() else margin,
        None,
        "misbehave",
        ("limit-missing" if rise.assumed() else "unproven") if above else "pass",
        said,
        corner=bench.corner,
        source=str(rise.origin),
        assumed=warmest.assumed,
        nominal_only=warmest.nominal_only,
    )
