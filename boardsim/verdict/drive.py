"""Whether a switch is driven as hard as the current it carries needs."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from boardsim.circuit.deck import PlacedRule
from boardsim.parts.rules import DriveRule
from boardsim.quantities import apart, in_units
from boardsim.verdict.bench import Bench, when
from boardsim.verdict.findings import Finding, Floats

_NOTHING = 1e-9  # share of the highest current with a need below which a pulse carries nothing


def judge_drive(
    rule: DriveRule, placed: PlacedRule, samples: tuple[Floats, Floats, Floats], bench: Bench
) -> Iterator[Finding]:
    """Of all pulses the one whose drive at its end falls shortest of what the current then needs.

    Parameters
    ----------
    samples : tuple of (n,) array
        Times [s], drives [unit of the limit] and currents [A] at the ends of pulses.

    Notes
    -----
    A pulse that is too weakly driven for a current with a known need decides before one whose current is above every
    current with a need; that one is told as a limit that was not given. Nothing where no pulse carries a current.
    """
    known, needed = (np.array(column) for column in zip(*rule.needs, strict=True))
    times, drives, currents = samples
    carrying = currents > _NOTHING * known[-1]
    if not carrying.any():
        return
    times, drives, currents = times[carrying], drives[carrying], currents[carrying]
    needs = np.interp(currents, known, needed)
    margins = (drives - needs) / needs
    beyond = currents > known[-1]
    if beyond.any() and not (margins < 0).any():
        k = int(np.argmax(currents))
        said = (
            f"{placed.label}: {rule.what} is {in_units(float(drives[k]), rule.limit.unit)}{when(float(times[k]))}, at the end of a pulse, "
            f"with {in_units(float(currents[k]), 'A')}; no {rule.limit.name} of {placed.part} was given above {in_units(float(known[-1]), 'A')}"
        )
        missing = replace(rule.limit, value=None)
        yield bench.finding(
            placed,
            missing,
            rule.what,
            float(drives[k]),
            None,
            float(times[k]),
            said,
            rule.consequence,
            worse="low",
        )
        return
    k = int(np.argmin(margins))
    value, need, margin, at = (float(column[k]) for column in (drives, needs, margins, times))
    reading, allowed = apart(value, need, rule.limit.unit)
    said = (
        f"{placed.label}: {rule.what} is {reading}{when(at)}, at the end of a pulse; the {rule.limit.name} of {placed.part} "
        f"for its {in_units(float(currents[k]), 'A')} is {allowed}"
    )
    said += f"; try: {rule.advice}" if margin < 0 else ""
    limit = replace(rule.limit, value=need)
    yield bench.finding(placed, limit, rule.what, value, margin, at, said, rule.consequence, worse="low")
