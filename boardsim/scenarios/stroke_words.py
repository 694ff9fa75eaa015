"""What a sweep over pulse widths comes to, in words: the answer as a finding, and what was fired."""

from __future__ import annotations

from collections.abc import Sequence

from boardsim.quantities import in_units
from boardsim.verdict.findings import Finding, Verdict, verdict_of
from boardsim.verdict.strokes_study import StrokePoint, StrokeRow


def firing_sentence(label: str, widths: Sequence[float], pause: float, frame: float) -> str:
    """What was fired."""
    return (
        f"{label} is fired {len(widths)} times in all, with pulses of {in_units(widths[0], 's')} to {in_units(widths[-1], 's')} and pauses of "
        f"{in_units(pause, 's')}; all other channels stay off; a register frame takes {in_units(frame, 's')}"
    )


def answer_of(row: StrokeRow, guard: float) -> Finding:
    """The shortest pulse that works in every corner, or whether the one that was asked for does.

    Parameters
    ----------
    row : StrokeRow
    guard : float
        Guard band. [1]

    Notes
    -----
    Margin is how far a width lies from where it stops working, as a share of itself: of the shortest that works up to the longest,
    of one that was asked for to the nearer end. The longest pulse that was tried is no such end.
    """
    if row.asked is not None:
        return _of_asked(row, row.asked, guard)
    stretch = row.stretch
    if stretch is None:
        verdicts = {row.verdict(w) for w in row.widths}
        verdict: Verdict = "unproven" if verdicts == {"unproven"} else "fail"
        return _finding(row, "pulses that work", 0.0, 1.0, "1", -1.0, verdict, _none(row), "low")
    first, last = stretch
    margin = (last - first) / last
    said = f"{row.label}: {_shortest(row, first)}{_upper(row, last)}{_settled(row, last)}"
    return _finding(row, "shortest pulse that works", first, last, "s", margin, verdict_of(margin, guard), said, "high")


def _of_asked(row: StrokeRow, asked: float, guard: float) -> Finding:
    stretch = row.stretch
    first, last = stretch if stretch is not None else (asked, asked)
    if not row.works(asked):
        verdict, margin = row.verdict(asked), -1.0
        corner, p = _worst(row, asked)
        said = f"{row.label}: a pulse of {in_units(asked, 's')} does not work: {_why(p, row)} ({corner})"
        said += f"; {_shortest(row, first)}" if stretch is not None else f"; {_none(row, asked)}"
    else:
        ends = [(asked - first) / asked]
        if last < row.widths[-1]:
            ends.append((last - asked) / asked)
        margin = min(ends)
        verdict = min((verdict_of(margin, guard), row.verdict(asked)), key=("fail", "unproven", "tight", "pass").index)
        said = f"{row.label}: a pulse of {in_units(asked, 's')} works in every corner; {_shortest(row, first)}{_upper(row, last)}"
        said += _settled(row, last)
    limit = first if asked - first <= last - asked or last >= row.widths[-1] else last
    return _finding(
        row, "pulse that is asked for", asked, limit, "s", margin, verdict, said, "low" if limit == first else "high"
    )


def _shortest(row: StrokeRow, first: float) -> str:
    """What the shortest pulse that works does, and why the next one that was tried does not."""
    points = list(row.at(first).values())
    said = f"the shortest pulse that works in every corner is {in_units(first, 's')}"
    latest = max((p.arrives for p in points if p.arrives is not None), default=None)
    blows = [p.energy for p in points if p.energy is not None]
    if latest is not None:
        said += f": {row.coil} arrives within {in_units(latest, 's')} of its command"
        softest, hardest = in_units(min(blows), "J"), in_units(max(blows), "J")
        said += f", with {softest}" + (f" to {hardest}" if hardest != softest else "")
    shorter = [w for w in row.widths if w < first]
    if shorter:
        corner, p = _worst(row, shorter[-1])
        said += f"; with {in_units(p.width, 's')}, {_why(p, row)} ({corner})"
    return said


def _upper(row: StrokeRow, last: float) -> str:
    """Why longer pulses do not work, if so."""
    longer = [w for w in row.widths if w > last]
    if not longer:
        return ""
    corner, p = _worst(row, longer[0])
    return f"; the longest is {in_units(last, 's')}: with {in_units(p.width, 's')}, {_why(p, row)} ({corner})"


def _settled(row: StrokeRow, last: float) -> str:
    """From which width on nothing changes any more; nothing to say where longer pulses do not work anyway."""
    settled = row.settled
    if settled is None or last < row.widths[-1]:
        return ""
    return f"; from {in_units(settled, 's')} on a longer pulse makes no harder blow: in every corner it comes before the end of the pulse"


def _none(row: StrokeRow, width: float | None = None) -> str:
    """That no pulse works, and what stands in the way of the one that does most."""
    nearest = max(row.widths, key=lambda w: (sum(p.works for p in row.at(w).values()), w)) if width is None else width
    corner, p = _worst(row, nearest)
    said = f"no pulse up to {in_units(row.widths[-1], 's')} works in every corner"
    if width is not None:
        return said
    return f"{row.label}: {said}; with {in_units(nearest, 's')}, {_why(p, row)} ({corner})"


def _worst(row: StrokeRow, width: float) -> tuple[str, StrokePoint]:
    """The corner that stands in a width's way, and what happens there; the latest of several that fail."""
    order = {"fail": 0, "unproven": 1, "tight": 2, "pass": 3}
    found = row.at(width).items()
    return min(found, key=lambda one: (order[one[1].verdict], one[1].farthest, -(one[1].arrives or 0.0)))


def _why(p: StrokePoint, row: StrokeRow) -> str:
    """The sentence that decides, without the channel's name, which stands before it."""
    return p.why.removeprefix(f"{row.label}: ") or "the verdict is " + p.verdict


def _finding(
    row: StrokeRow,
    what: str,
    value: float,
    limit: float,
    unit: str,
    margin: float,
    verdict: Verdict,
    sentence: str,
    worse: str,
) -> Finding:
    return Finding(
        "stroke-width",
        what,
        row.coil,
        row.channel,
        row.label,
        value,
        limit,
        unit,
        margin,
        None,
        "misbehave",
        verdict,
        sentence,
        source="the pulses that were tried",
        worse="low" if worse == "low" else "high",
    )
