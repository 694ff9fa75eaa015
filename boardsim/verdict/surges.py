"""Single pulses against what a part stands once: peaks by how long they last, and energies."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

from boardsim.circuit.deck import PlacedRule
from boardsim.parts.rules import EnergyRule, PulseRule
from boardsim.quantities import in_units
from boardsim.verdict.bench import Bench, upper
from boardsim.verdict.findings import Finding
from boardsim.verdict.pulses import OnePulse

_NO_PULSE = OnePulse(0.0, 0.0, 0.0, 0.0, 0.0)


def rated_for(points: Sequence[tuple[float, float]], length: float, lasting: float = 0.0) -> tuple[float, str]:
    """What a part stands for a pulse of a length, and how that follows from the points of its datasheet.

    Parameters
    ----------
    points : sequence of (length, rating)
        At least one, the lengths rising. [s], [unit of the rating]
    length : float
        Of the pulse. [s]
    lasting : float
        What the part stands however long a pulse is. [unit of the rating]

    Returns
    -------
    rating : float
        [unit of the rating]
    how : str
        Such as "between its ratings for 1.00 ms and 2.00 ms".

    Notes
    -----
    Between two points ln(rating) runs straight over ln(length). A pulse shorter than the first point is held against
    that point: the rating only falls with length. Beyond the last it falls with 1 / sqrt(length), since heat spreads
    into the bulk of a chip with the square root of time (one-dimensional diffusion; for junctions from memory).

    Examples
    --------
    >>> points = [(1e-3, 40.0), (4e-3, 20.0)]
    >>> rating, how = rated_for(points, 2e-3)
    >>> round(rating, 2), how
    (28.28, 'between its ratings for 1.00 ms and 4.00 ms')
    >>> round(rated_for(points, 16e-3)[0], 2)
    10.0
    """
    first, last = points[0], points[-1]
    if length <= first[0]:
        return max(first[1], lasting), f"its rating for {in_units(first[0], 's')}"
    if length > last[0]:
        rating = last[1] * math.sqrt(last[0] / length)
        if rating < lasting:
            return lasting, "what it stands however long"
        return rating, f"beyond its rating for {in_units(last[0], 's')}, with the square root of the length"
    k = next(k for k, (at, _) in enumerate(points) if length <= at)
    (t1, r1), (t2, r2) = points[k - 1], points[k]
    if length == t2:
        return max(r2, lasting), f"its rating for {in_units(t2, 's')}"
    rating = math.exp(math.log(r1) + math.log(r2 / r1) * math.log(length / t1) / math.log(t2 / t1))
    return max(rating, lasting), f"between its ratings for {in_units(t1, 's')} and {in_units(t2, 's')}"


def judge_pulses(rule: PulseRule | EnergyRule, placed: PlacedRule, pulses: Sequence[OnePulse], bench: Bench) -> Finding:
    """The pulse that comes closest to what the part stands, or is the farthest beyond it."""
    if isinstance(rule, EnergyRule):
        hardest = max(pulses, key=lambda p: p.total, default=_NO_PULSE)
        at = hardest.at if pulses else None
        return upper(
            rule.what, rule.limit, rule.consequence, placed, bench, hardest.total, at, rule.advice, part=rule.part
        )
    if not rule.points:
        worst = max(pulses, key=lambda p: p.peak, default=_NO_PULSE)
        limit, detail = rule.limit, ""
    else:
        worst = max(
            pulses, key=lambda p: p.peak / rated_for(rule.points, p.lasting, rule.lasting)[0], default=_NO_PULSE
        )
        rating, how = rated_for(rule.points, worst.lasting, rule.lasting)
        limit = replace(rule.limit, value=rating, name=f"{rule.limit.name} ({how})")
        detail = f" in a pulse of {in_units(worst.lasting, 's')}"
    at = worst.at if pulses else None
    detail = detail if pulses else ""
    return upper(rule.what, limit, rule.consequence, placed, bench, worst.peak, at, rule.advice, detail, part=rule.part)
