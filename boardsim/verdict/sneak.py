"""Currents of coils that are off, found ways through other coils: how far each grows while its channel is off."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from boardsim.board.ranges import write_labels
from boardsim.circuit.deck import PlacedRule
from boardsim.firing.schedule import Firing
from boardsim.parts.rules import SneakRule
from boardsim.quantities import in_units
from boardsim.verdict.bench import Bench
from boardsim.verdict.coils import harmless_limit
from boardsim.verdict.findings import Finding, Floats


@dataclass
class Growth:
    """How far the magnitude of a current grows above its least value since its channel was turned off.

    What a coil still carries from its own pulse only falls, and counts for nothing; whatever it carries more than it had
    come down to was driven through it while it was off.

    Attributes
    ----------
    on : (n, 2) array
        When the channel is on; what the current does then starts anew. [s]
    most, at : float
        Largest growth [A], and when [s].
    """

    on: Floats
    most: float = 0.0
    at: float = 0.0
    _least: float = np.inf

    def feed(self, t: Floats, y: Floats) -> None:
        """Times and currents, both (m,)."""
        size = np.abs(y)
        # Before the first turn-on 0 edges have passed, while it is on an odd number of them.
        passed = np.searchsorted(self.on.ravel(), t, side="right")
        for count in np.unique(passed):
            if count % 2:
                self._least = np.inf
                continue
            here = np.flatnonzero(passed == count)
            least = np.minimum.accumulate(np.minimum(size[here], self._least))
            grown = size[here] - least
            k = int(grown.argmax())
            if grown[k] > self.most:
                self.most, self.at = float(grown[k]), float(t[here[k]])
            self._least = float(least[-1])


def judge_sneak(rule: SneakRule, placed: PlacedRule, found: Growth, firing: Firing, bench: Bench) -> Finding:
    """What others drive through a coil that is off, against what it may carry."""
    limit, stands = harmless_limit(rule, placed, bench)
    bound = limit.value or 0.0
    margin = (bound - found.most) / bound
    who = [bench.board.channel(n).label for n in _company(firing, found.at)]
    with_them = f" with {write_labels(who)} on" if who else ""
    said = (
        f"{placed.label}: with its channel off the current of its coil grows by {in_units(found.most, 'A')}, until "
        f"{in_units(found.at, 's', 4)}{with_them}; {stands} {in_units(bound, 'A')}"
    )
    if margin < 0:
        said += "; try: a diode in series with every coil of the matrix, which closes the ways through others"
    return bench.finding(placed, limit, "sneak current", found.most, margin, found.at, said)


def _company(firing: Firing, at: float) -> tuple[int, ...]:
    """Who is on at a time; where nobody is, who was last: a current is at its highest when they are turned off. [s]"""
    if on := firing.channels_on(at):
        return on
    ended = {c: float(spans[spans[:, 1] <= at, 1].max(initial=-np.inf)) for c, spans in firing.on.items()}
    last = max(ended.values(), default=-np.inf)
    return tuple(c for c, end in ended.items() if end == last and np.isfinite(end))
