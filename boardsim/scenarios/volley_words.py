"""What the runs of a volley come to, in words: the answer as a finding, and what it rests on."""

from __future__ import annotations

from collections.abc import Mapping

from boardsim.board.bridges import forwards
from boardsim.board.ranges import write_range
from boardsim.parts.rules import Consequence
from boardsim.quantities import in_units
from boardsim.scenarios.all_corners import failures_of
from boardsim.scenarios.volley_runs import START, Runs, Tried
from boardsim.verdict.findings import Finding, Verdict


def answer_of(runs: Runs, most: int, wanted: int | None, at_least: int | None) -> Finding:
    """The answer as a finding: how many channels pass at once, held against how many are wanted."""
    verdict: Verdict = "limit-missing"
    margin: float | None = None
    if wanted is not None:
        margin = (most - wanted) / wanted
        refuted = any(t.step.verdict == "fail" for n, t in runs.tried.items() if n <= wanted)
        verdict = "pass" if most >= wanted else "fail" if refuted else "unproven"
    elif most == 0:
        verdict, margin = runs.tried[1].step.verdict, -1.0  # nobody wants none
    stop = runs.tried.get(most + 1)
    consequence: Consequence = "misbehave"
    if stop is not None and any(f.verdict == "fail" and f.consequence == "destroy" for f in stop.findings):
        consequence = "destroy"
    source = "asked for" if at_least is not None else f"given: {runs.board.path.name}" if wanted is not None else ""
    return Finding(
        "volley",
        "channels at once that pass",
        "board",
        None,
        "board",
        float(most),
        None if wanted is None else float(wanted),
        "1",
        margin,
        None,
        consequence,
        verdict,
        _sentence(runs, most, wanted, at_least),
        source=source,
        worse="low",
        shape="count",
        channels=(stop or runs.tried[most]).step.channels,
    )


def _sentence(runs: Runs, most: int, wanted: int | None, at_least: int | None) -> str:
    count, width = len(forwards(runs.board)), in_units(runs.width, "s")
    if count == 1:
        said = "the only channel passes" if most else "the only channel does not pass"
    elif most == 0:
        said = f"not even one of the {count} channels passes"
    elif most == count:
        said = f"all {count} channels at once pass"
    else:
        said = f"any {most} of the {count} channels at once {'passes' if most == 1 else 'pass'}"
    if any(t.step.verdict == "limit-missing" for n, t in runs.tried.items() if n <= most):
        said += " as far as limits were given"
    said += f", with a pulse of {width}"
    stop = runs.tried.get(most + 1)
    if stop is not None:
        why = stop.step.broken
        why = "the " + why.removeprefix("The ") if why.startswith("The ") else why
        said += f": {why}" if most == 0 else f"; with {most + 1}: {why}"
    # A sentence of its own: the one before may end in what the worst finding says, and would seem to go on with it.
    if at_least is not None:
        said += f". {at_least} at once {'is' if at_least == 1 else 'are'} asked for"
    elif wanted is not None:
        said += f". The firmware may fire {wanted} at once"
    else:
        said += ". How many are wanted was not given (--at-least, or [limits] most_on)"
    return said


def firing_sentences(runs: Runs, settled: bool) -> tuple[str, ...]:
    """What is fired, and how long the registers take; `settled` where the width was not asked for."""
    width, firing = in_units(runs.width, "s"), runs.firing((forwards(runs.board)[0].number,))
    said = f"one pulse of {width} on so many channels at once, all commanded at {in_units(START, 's')}"
    if settled:
        said += (
            "; so long that coil currents and rail settle in every corner: six times L/R of the slowest coil and "
            "the time constant of the bulk capacitor (--width for another)"
        )
    frame = f"a register frame takes {in_units(firing.frame_time, 's')}; all channels change on one latch"
    return said, frame


def notes_on(
    runs: Runs, answer: Finding, shown: Tried, decides: Tried, rests_on: Mapping[int, Tried]
) -> tuple[str, ...]:
    """What the answer means and rests on.

    Parameters
    ----------
    runs : Runs
    answer : Finding
    shown : Tried
        Whose findings are shown.
    decides : Tried
        What the deck is written of.
    rests_on : mapping of number of channels to Tried
        Without those that are not proven and that nothing rests on.
    """
    count = len(forwards(runs.board))
    # Reports write out the sentences of what does not pass; the answer is to be read in any case.
    notes = [answer.sentence] if answer.verdict == "pass" else []
    notes += [
        "what counts here is what the hardware stands: how many channels the firmware may turn on and which exclude each "
        "other ([limits] most_on, most_current, exclusive) did not decide which number passes",
        f"the findings below the answer are those of {shown.step.on} at once ({shown.step.who})",
    ]
    if count < len(runs.board.channels):
        notes.append(
            "full bridges are fired forwards only: backwards they draw the same, and both ways at once nothing"
        )
    if len(runs.builds) > 1:
        notes.append(
            f"the board has {len(runs.builds)} builds of channel: tried in each corner were the channels that draw most there, "
            "and one of every other build among them, so that what passes for a number passes for any channels of that number"
        )
    else:
        notes.append("all channels are built alike: what passes for some of them passes for any as many")
    if len(runs.tried) < count:
        notes.append(
            f"of 1 to {count} at once these were run: {write_range([*runs.tried])}; between them a verdict is taken to "
            "change only where it was seen to"
        )
    if decides.trigger is not None:
        notes.append(f"board.cir is the deck of {decides.step.on} at once in the corner {decides.trigger.corner.name}")
    beyond = [n for n in runs.tried if n not in rests_on]
    if beyond:
        notes.append(
            f"with {write_range(beyond)} at once the audit did not hold in every corner; nothing here rests on that"
        )
    for n in sorted(rests_on):
        notes += [f"{n} at once: {said}" for said in failures_of(rests_on[n].results)]
    return tuple(notes)
