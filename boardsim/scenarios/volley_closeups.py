"""Close-ups of a volley: the runs that its broken and tight findings are from are made once more, and cut."""

from __future__ import annotations

from collections.abc import Sequence

from boardsim.circuit.assemble import assemble, windows
from boardsim.engine.run import Engine
from boardsim.errors import DeckRejected, EngineCrash, EngineTimeout, NoConvergence
from boardsim.scenarios.volley_runs import Runs, Tried
from boardsim.scenarios.volley_triggers import Trigger
from boardsim.verdict.closeups import Closeup, take_closeups, wants_closeup
from boardsim.verdict.findings import Finding


def closeups_of(runs: Runs, answer: Finding, shown: Tried) -> tuple[Closeup, ...]:
    """One for each finding that is broken or tight, in the order of the findings.

    Parameters
    ----------
    runs : Runs
    answer : Finding
        A count that no single waveform holds: its close-up is one without any.
    shown : Tried
        Whose findings are reported.

    Raises
    ------
    EngineMissing, EngineStopped
        If there is no engine, or the run was interrupted.

    Notes
    -----
    While numbers are tried nobody knows which of them will be reported, and to cut every run would read its waveforms
    twice. The same deck with the same settings gives the same waveforms, so that the audit of the run that was judged
    holds for them; nothing is read anew, and no second run beside it is needed. A run that now comes to nothing leaves
    its close-ups without waveforms.
    """
    found = {c.finding: c for c in take_closeups(None, None, runs.hardware, runs.firing(answer.channels), [answer], "")}
    grouped: dict[tuple[tuple[int, ...], str], tuple[Trigger, list[Finding]]] = {}
    for f in filter(wants_closeup, shown.findings):
        trigger = shown.pictured.get(f.key)
        if trigger is None:
            together = shown.step.channels
            mine = (f.channel,) if f.channel is not None and f.channel not in together else together
            plain = take_closeups(None, None, runs.hardware, runs.firing(mine), [f], "")
            found.update({c.finding: c for c in plain})
        else:
            grouped.setdefault((trigger.channels, trigger.corner.name), (trigger, []))[1].append(f)
    handed = [
        runs.crew.pool.submit(_cut, runs, trigger, findings, f"closeups{i}")
        for i, (trigger, findings) in enumerate(grouped.values(), 1)
    ]
    for future in handed:
        found.update({c.finding: c for c in future.result()})
    return tuple(found[f.key] for f in (answer, *shown.findings) if f.key in found)


def _cut(runs: Runs, trigger: Trigger, findings: Sequence[Finding], folder: str) -> tuple[Closeup, ...]:
    board, firing = runs.reduced(trigger.channels), runs.firing(trigger.channels)
    (window,) = windows(board, firing)
    deck = assemble(board, firing, trigger.corner, window)
    with Engine(runs.keep / folder, runs.crew.time_limit, runs.crew.cancel) as engine:
        try:
            with engine.run(deck, trigger.settings) as waves:
                return take_closeups(waves, deck, board, firing, findings, trigger.corner.name)
        except (NoConvergence, EngineTimeout, EngineCrash, DeckRejected):
            engine.discard_kept()
            return take_closeups(None, None, board, firing, findings, "")
