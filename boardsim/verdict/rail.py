"""The coil rail's dips and the supply's ceiling, and who was on at the time."""

from __future__ import annotations

from boardsim.board.ranges import write_labels
from boardsim.board.reader import Board
from boardsim.circuit.deck import PlacedRule
from boardsim.firing.schedule import Firing
from boardsim.parts.rules import CeilingRule, DipRule
from boardsim.quantities import apart, in_units
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding
from boardsim.verdict.readings import Readings

_JUST_BEFORE = 2e-6  # [s], longer than a switch takes


def together(board: Board, firing: Firing, at: float) -> str:
    """Who was on just before a time: at the very edge the outputs have already changed."""
    on = firing.channels_on(at - _JUST_BEFORE) or firing.channels_on(at) or firing.channels_on(at - 50 * _JUST_BEFORE)
    number = len(on)
    if not number:
        return "no channel was on"
    who = write_labels([board.channel(c).label for c in on])
    return f"{who} ({number} {'channel' if number == 1 else 'channels'}) {'was' if number == 1 else 'were'} on"


def judge_dip(rule: DipRule, placed: PlacedRule, readings: Readings, firing: Firing, bench: Bench) -> Finding:
    """Depth with duration: below the level is allowed for less than the given time.

    A dip that lasts too long fails, by how far it goes below the level. One that would last too long if the level were
    a guard band higher is tight. What is shorter counts for nothing, however deep.
    """
    lowest, at = readings.low[placed.channel, rule.quantity]
    level = rule.limit.value
    if level is None:
        said = _dip_sentence(rule, firing, bench, in_units(lowest, "V"), at)
        said += "; no brown-out level was given to hold it against ([limits] brown_out)"
        return bench.finding(placed, rule.limit, "coil rail voltage", lowest, None, at, said, worse="low")
    longest, guarded = (
        max((d for d in dips if d.lasting >= rule.lasting), key=lambda d: d.lasting, default=None)
        for dips in (readings.dips, readings.guarded)
    )
    spare = (lowest - level) / level
    if longest is not None:
        lowest, at, margin = longest.lowest, longest.at, (longest.lowest - level) / level
    elif guarded is not None:
        margin = min(max(spare, 0.0), bench.guard)
    else:
        margin = max(spare, bench.guard)
    fell, below = apart(lowest, level, "V")
    said = _dip_sentence(rule, firing, bench, fell, at)
    shown = max(readings.dips, key=lambda d: d.lasting, default=None) if longest is None else longest
    if shown is None:
        said += f"; the brown-out level is {below}"
    else:
        said += f" and stayed below {below} for {in_units(shown.lasting, 's')}"
        said += f"; brown-out counts after {in_units(rule.lasting, 's')}"
    said += f"; the supply's own terminals fell to {in_units(readings.low[None, 'v_supply'][0], 'V')}"
    said += _fewer(bench.board) if longest is not None else ""
    lasting = shown.lasting if shown else None
    return bench.finding(
        placed, rule.limit, "coil rail voltage", lowest, margin, at, said, lasting=lasting, worse="low"
    )


def _dip_sentence(rule: DipRule, firing: Firing, bench: Bench, lowest: str, at: float) -> str:
    return f"{together(bench.board, firing, at)} at {in_units(at, 's', 4)}: the {rule.what} fell to {lowest}"


def _fewer(board: Board) -> str:
    """A closed-form guess at how many channels the supply feeds for ever at the brown-out level: only a hint."""
    level = board.limits.brown_out
    if level is None:
        return ""
    if (
        board.charging is not None
    ):  # pulses live on the reservoir, and what the supply feeds for ever says nothing of them
        return "; try: a larger reservoir, a longer pause in which it recharges, or fewer at once"
    r_coil = min(c.coil.resistance.min for c in board.channels)
    r = board.supply.resistance.typ + board.cable.loop(293.15).typ
    counts = [(board.supply.voltage.min - level.voltage.max) / r / (level.voltage.max / r_coil)]
    if board.supply.current_ceiling is not None:
        counts.append(board.supply.current_ceiling.min / (board.supply.voltage.max / r_coil))
    if board.limits.most_on is not None:
        counts.append(board.limits.most_on)
    feeds = int(min(counts))
    if feeds < 2:
        return "; try: one channel at a time, or a stronger supply" if feeds == 1 else "; try: a stronger supply"
    return f"; try: at most {feeds} channels together, or a stronger supply"


def judge_ceiling(rule: CeilingRule, placed: PlacedRule, readings: Readings, firing: Firing, bench: Bench) -> Finding:
    """The highest current out of the supply, and for how long it was at its ceiling."""
    value, at = readings.high[placed.channel, rule.quantity]
    total, since = readings.ceiling
    bound = rule.limit.value
    if bound is None:
        said = f"{rule.what} reaches {in_units(value, 'A')} at {in_units(at, 's', 4)}; no current ceiling of the supply was given to hold it against"
        return bench.finding(placed, rule.limit, "supply current", value, None, at, _sentence(said))
    if since is None:
        said = f"{rule.what} reaches {in_units(value, 'A')} at {in_units(at, 's', 4)}; its ceiling is {in_units(bound, 'A')}"
        return bench.finding(placed, rule.limit, "supply current", value, (bound - value) / bound, at, _sentence(said))
    said = (
        f"the supply came within 1 % of its ceiling of {in_units(bound, 'A')} for {in_units(total, 's')}, first at {in_units(since, 's', 4)} "
        f"({together(bench.board, firing, since)}): a supply that trips or hiccups instead of limiting would drop the rail"
        "; try: fewer channels at once, or a larger supply"
    )
    # The modelled supply never exceeds its ceiling: being at it is what breaks the limit.
    return bench.finding(placed, rule.limit, "supply current", bound, -1e-3, since, _sentence(said), lasting=total)


def _sentence(text: str) -> str:
    return text[0].upper() + text[1:]
