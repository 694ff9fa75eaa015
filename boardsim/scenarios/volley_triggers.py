"""Which run of a volley a finding is from."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

from boardsim.circuit.deck import Settings
from boardsim.parts.base import Corner
from boardsim.scenarios.volley_choices import Choice, Results
from boardsim.verdict.findings import Finding


@dataclass(frozen=True)
class Trigger:
    """The run that a finding is from: enough to write its deck, or to run it, again."""

    channels: Choice
    corner: Corner
    settings: Settings


def trigger_of(f: Finding, results: Results, switching: Mapping[Choice, Sequence[Finding]]) -> Trigger | None:
    """The run that a finding is from; None if none came to an end.

    What needs no waveform, and so is in `switching`, is so in every run of its choice: then it is the first of them.
    """
    for choice, r in results:
        if r.trial is not None and f.corner in ("", r.corner.name):
            mine = r.trial.findings if f.corner else switching[choice]
            if any(g.key == f.key and g.value == f.value for g in mine):
                return Trigger(choice, r.corner, r.trial.settings)
    return None


def decisive(findings: Iterable[Finding], results: Results) -> Trigger | None:
    """The run of the worst finding that a waveform was read for; the first that came to an end, if there is none."""
    found = (trigger_of(f, results, {}) for f in findings if f.corner)
    ran = (Trigger(choice, r.corner, r.trial.settings) for choice, r in results if r.trial is not None)
    return next((t for t in found if t is not None), next(ran, None))
