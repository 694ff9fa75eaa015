"""Whether a boost's reservoir has recovered when the next peak begins."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np

from boardsim.board.ranges import write_labels
from boardsim.circuit.deck import PlacedRule
from boardsim.firing.schedule import Firing
from boardsim.parts.rules import ReserveRule
from boardsim.quantities import in_units
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding, Floats


def peaks_begin(firing: Firing, channels: Sequence[int]) -> Floats:
    """When peaks of held pulses of some channels begin, each time once. (n,) [s]"""
    rows = [firing.held.peaks[c][:, 0] for c in channels if c in firing.held.peaks]
    return np.unique(np.concatenate(rows)) if rows else np.empty(0)


def judge_reserve(
    rule: ReserveRule, placed: PlacedRule, samples: tuple[Floats, Floats] | None, firing: Firing, bench: Bench
) -> Iterator[Finding]:
    """Of all peaks of the bank the one that begins with the lowest voltage in the reservoir; nothing where there is none.

    Notes
    -----
    Between two peaks the reservoir recovers as an RC does, v = V - (V - v_0) e^(-t / R C): a burst finds it lower from one
    peak to the next, until what a peak takes is what a pause brings back.
    """
    if samples is None or not len(samples[0]):
        return
    times, values = samples
    k = int(np.argmin(values))
    value, at, bound = float(values[k]), float(times[k]), rule.limit.value
    mine = [c for c in rule.channels if at in firing.held.peaks.get(c, np.empty((0, 2)))[:, 0]]
    who = write_labels([bench.board.channel(c).label for c in mine])
    margin = None if bound is None else (value - bound) / bound
    said = (
        f"{placed.label}: the peak of {who} at {in_units(at, 's', 4)} finds {in_units(value, 'V')} in the reservoir; "
    )
    if bound is None:
        said += "how much it needs was not given ([boost] least)"
    else:
        said += f"{in_units(bound, 'V')} are needed"
    if margin is not None and margin < 0:
        said += (
            "; try: longer pauses between peaks, a smaller charging resistor, or, for a short burst, a larger reservoir"
        )
    yield bench.finding(placed, rule.limit, "reservoir when a peak begins", value, margin, at, said, worse="low")
