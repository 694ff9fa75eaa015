"""What happens when a channel is turned off? On until its current has settled, then off until the current is gone."""

from __future__ import annotations

import math
import time
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from boardsim.board.corners import corners
from boardsim.board.ranges import write_labels, write_range
from boardsim.board.reader import Board, Channel
from boardsim.errors import InputError
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.firing.registers import frame_time
from boardsim.firing.schedule import fire
from boardsim.quantities import in_units
from boardsim.scenarios.all_corners import worst
from boardsim.scenarios.clamps import clamps_of, other_clamps
from boardsim.scenarios.crew import Crew
from boardsim.scenarios.fire import fire_pattern
from boardsim.verdict.findings import Finding, Result, Timing, overall
from boardsim.verdict.release import ReleaseWatch, TurnOff
from boardsim.verdict.studies import Release, ReleaseRow

NAME = "release"
_BRIDGES = "the coil of a full bridge has no switch that is turned off for it: its current runs on through both low transistors"
_SETTLED = 7.0  # L/R times: 0.1 % of the way is left
_FRAMES = 2.0  # how far the register frames stay below the share of a pulse by which they may move it


@dataclass(frozen=True)
class _Done:
    """One channel with one clamp, run in all corners."""

    row: ReleaseRow
    result: Result
    remarks: tuple[str, ...]


def release_channel(
    board: Board,
    keep: Path,
    strict: bool = False,
    crew: Crew | None = None,
    progress: Callable[[float], None] | None = None,
    channel: int | None = None,
    every_clamp: bool = False,
) -> Result:
    """Turn a channel off and look where its energy goes, in every corner.

    Parameters
    ----------
    board : Board
    keep : Path
        Where deck and log of a failed run are kept.
    strict : bool
        Whether a missing limit counts as broken.
    crew : Crew
        Who runs the corners; one of its own if absent.
    progress : callable
        Told the share of the work done, from any thread.
    channel : int
        Which; if absent the first channel of every distinct build of coil, switch and clamp.
    every_clamp : bool
        Whether every kind of clamp is put in the place of the channel's own, one after the other; of `channel`, or of
        the board's first.

    Returns
    -------
    Result
        `study` is a `Release`. Verdict, findings, audit and pictures are those of the board's own clamps; what else
        was tried has a verdict in its row only.

    Raises
    ------
    EngineMissing, EngineStopped
        If there is no engine, or the run was interrupted.
    InputError
        If the board has no such channel, a full bridge feeds its coil, another clamp is to be tried in a matrix, or the waveforms would
        not fit on the disk.

    Notes
    -----
    The channel is alone on its board: the others neither draw from its rail nor load it, so that its current, its peak
    and its energies are the highest that it can reach. It is on for at least seven times the longest L/R of all
    corners (0.1 % short of its settled current), and off for as long as an exponential of that L/R takes to well below
    its release current, or twice as long where a capacitor makes it swing: no clamp makes it slower.
    """
    if crew is None:
        with Crew() as own:
            return release_channel(board, keep, strict, own, progress, channel, every_clamp)
    chosen = chosen_channels(board, channel, every_clamp)
    tried: list[Channel] = []
    left_out: tuple[str, ...] = ()
    if every_clamp and chosen[0].crossing is not None:
        raise InputError(
            f"{chosen[0].label} lies in a matrix, whose lines have clamps for all coils along them; leave --every-clamp out, and change "
            "clamp or row_clamp in the board file"
        )
    if every_clamp:
        one = _alone(board, chosen[0])
        clamps, left_out = other_clamps(one, chosen[0], _highest_current(one))
        tried = [replace(chosen[0], clamp=clamp) for clamp in clamps]
    done: list[_Done] = []
    began = time.perf_counter()
    spent_own = 0.0
    for k, built in enumerate([*chosen, *tried]):
        report = None if progress is None else _part_of(progress, k, len(chosen) + len(tried))
        folder = keep if not done and len(chosen) == 1 else keep / f"{NAME}{k + 1}"
        done.append(_turn_off(board, built, k < len(chosen), folder, strict, crew, report))
        if k + 1 == len(chosen):
            spent_own = time.perf_counter() - began
    result = _together(done[: len(chosen)], strict)
    if tried:
        more = Timing("elapsed over all other clamps", time.perf_counter() - began - spent_own)
        result = replace(result, timings=(*result.timings, more))
    remarks = dict.fromkeys(remark for d in done for remark in d.remarks)
    if any(c.opposite is not None for c in board.channels):
        remarks[f"not asked of full bridges: {_BRIDGES}"] = None
    notes = (*result.notes, *_about(done), *remarks, *left_out)
    return replace(result, notes=notes, study=Release(tuple(d.row for d in done)))


def _part_of(progress: Callable[[float], None], k: int, n: int) -> Callable[[float], None]:
    return lambda share: progress((k + share) / n)


def chosen_channels(board: Board, number: int | None, only_one: bool) -> list[Channel]:
    """The channel of a number; without one the first channel of every distinct build, or of the first only.

    Raises
    ------
    InputError
        If the board has no such channel, or a full bridge feeds its coil.
    """
    known = [c.number for c in board.channels]
    if number is not None and number not in known:
        raise InputError(f"channel {number} is not on the board {board.path.name}; it has {write_range(known)}")
    asked = [c for c in board.channels if number is None or c.number == number]
    able = [c for c in asked if c.opposite is None]
    if not able:
        raise InputError(
            f"{write_labels([c.label for c in asked])}: {_BRIDGES}; fire a pattern with a pulse each way, and see what is left "
            "when the coil is fired again"
        )
    if number is not None:
        return able
    builds: dict[tuple[object, ...], Channel] = {}
    for c in able:
        builds.setdefault(c.build, c)
    first = list(builds.values())
    return first[:1] if only_one else first


def _alone(board: Board, channel: Channel) -> Board:
    """The board with this channel only; which may be on together does not matter to one."""
    return replace(board, channels=(channel,), exclusive=())


def _highest_current(board: Board) -> float:
    """Of the only coil, once it has settled. [A]"""
    (channel,) = board.channels
    return max(
        corner.take(board.supply.voltage, "supply") / channel.coil.ohms(corner, board.around)
        for corner in corners(board)
    )


def release_pattern(board: Board) -> Pattern:
    """Two equal pulses on the only channel of a board, each from rest to a settled current and back.

    Notes
    -----
    Two, since a coil is there to be fired again: what a switch or a clamp stands once only must not pass.
    A slow register chain stretches the pulse, so that the time of a frame stays well within the share of a pulse
    by which it may be late: whether shorter pulses are moved too far is the question of other patterns.
    What the coil moves has time to come back besides.
    """
    (channel,) = board.channels
    coil = channel.coil
    tau = max(coil.inductances[1] / coil.ohms(corner, board.around) for corner in corners(board))
    frame = frame_time(board.chain)
    width = max(_SETTLED * tau, _FRAMES * frame / board.limits.pulse_error.typ)
    held = math.log(_highest_current(board) / coil.release.min) + 2.0 if coil.release is not None else 0.0
    # What swings dies out with 2 L / R, half as fast as what only decays.
    longer = 2.0 if channel.clamp.swings_with() else 1.0
    period = width + 2 * frame + longer * tau * max(_SETTLED, held) + coil.return_time
    pulses = tuple(Pulse(channel.number, start, width) for start in (0.0, period))
    return Pattern(board.path, NAME, 2 * period, pulses)


def _turn_off(
    board: Board,
    channel: Channel,
    own: bool,
    keep: Path,
    strict: bool,
    crew: Crew,
    progress: Callable[[float], None] | None,
) -> _Done:
    """Run one channel with one clamp in all corners, and judge it."""
    one = _alone(board, channel)
    pattern = release_pattern(one)
    firing = fire(one, pattern)
    watch = ReleaseWatch(one, firing)
    result = fire_pattern(one, pattern, keep, strict, crew, progress, watch, pictured=own, firmware=False)
    # How many channels are on at once cannot be broken by one, whether or not a limit was given.
    # Nor are two pulses a pattern that goes on, at whose average power junctions would settle.
    findings = tuple(f for f in result.findings if f.shape != "count" and f.check != "warming")
    if not watch.found:
        findings = (*findings, _nothing(channel, result))
    proven = result.proven and bool(watch.found)
    result = replace(result, findings=findings, verdict=overall(findings, proven, strict))
    row = _row(channel, own, watch, result, proven)
    said = f"{channel.label} is on for {in_units(pattern.pulses[0].width, 's')}, twice; all other channels stay off"
    result = replace(result, firing=(said, *result.firing))
    return _Done(row, result, tuple(_remarks(row, watch)))


def _nothing(channel: Channel, result: Result) -> Finding:
    """What stands for the readings that there are not: whatever else is accepted, nothing was measured."""
    text = f"{channel.label} was not turned off, so that nothing of its release was measured"
    return Finding(
        NAME,
        "turn-off",
        "register chain",
        channel.number,
        channel.label,
        0.0,
        None,
        "1",
        None,
        None,
        "misbehave",
        "unproven",
        "; ".join([text, *result.notes]),
    )


def _row(channel: Channel, own: bool, watch: ReleaseWatch, result: Result, proven: bool) -> ReleaseRow:
    found = list(watch.found.values())
    coil = channel.coil

    def highest(values: list[float | None]) -> float | None:
        return None if None in values else max((v for v in values if v is not None), default=None)

    slowest = max(found, key=lambda f: _slowness(f, coil.release is not None), default=None)
    return ReleaseRow(
        clamps_of(channel),
        own,
        channel.number,
        channel.label,
        channel.coil_name,
        highest([f.peak for f in found]),
        watch.peak_limit(),
        highest([f.clamp_energy for f in found]),
        highest([f.switch_energy for f in found]),
        highest([f.pulls_in for f in found]),
        highest([f.let_go for f in found]),
        coil.pull_in.max if coil.pull_in is not None else None,
        coil.release.min if coil.release is not None else None,
        result.verdict if proven else "unproven",
        _why(result, proven),
        slowest.corner if slowest is not None else "",
        slowest.v_switch if slowest is not None else None,
        slowest.i_coil if slowest is not None else None,
    )


def _slowness(found: TurnOff, timed: bool) -> tuple[float, float]:
    """Sort key: the later it lets go the slower; without a release current the charge tells."""
    never = math.inf if timed else 0.0
    return (found.let_go if found.let_go is not None else never, found.charge)


def _why(result: Result, proven: bool) -> str:
    """The sentence that decides a verdict that is neither pass nor tight."""
    if not proven:
        broken = [str(e) for audit in result.audit if not audit.proven for e in audit.entries if not e.passed]
        wrong = [f.sentence for f in result.findings if f.check == "wrong-output"]
        return next(iter([*wrong, *result.notes, *broken]), "nothing was turned off")
    if result.verdict not in ("fail", "limit-missing"):
        return ""
    # Under --strict it may be a missing limit that fails. What is said of the channel tells more than what is of the board.
    deciding = [f for v in ("fail", "limit-missing") for f in result.findings if f.verdict == v]
    same = [f for f in deciding if f.verdict == deciding[0].verdict]
    return next((f.sentence for f in same if f.channel is not None), same[0].sentence)


def _remarks(row: ReleaseRow, watch: ReleaseWatch) -> Iterator[str]:
    """What decides against a clamp that is not the board's; why there is no time to let go, or no re-fire interval."""
    if row.why and not row.own:
        yield f"{row.clamp}: {row.verdict}: {row.why}"
    if row.release is None:
        yield f"no release current of {row.coil} was given: no time to let go and no re-fire interval"
    if row.pull_in is None:
        yield f"no pull-in current of {row.coil} was given: no re-fire interval"
    where = f"{row.label}, {row.clamp}"
    for f in watch.found.values():
        if row.pull_in is not None and f.pulls_in is None:
            yield f"{where}: the coil current stays below the pull-in current, {in_units(row.pull_in, 'A')} ({f.corner}): no re-fire interval"
        if row.release is not None and f.let_go is None:
            yield f"{where}: the coil current is still above the release current, {in_units(row.release, 'A')}, at the end ({f.corner})"


def _about(done: Sequence[_Done]) -> Iterator[str]:
    """What the numbers of the table mean."""
    if any(d.row.refire is not None for d in done):
        yield (
            "the re-fire interval is the longest time to pull in plus the longest time to let go of all corners; times "
            "are those of the coil current, and the travel of what the coil moves comes on top"
        )
    yield (
        "average currents and powers are judged over these two pulses; whether they stand faster firing a pattern of "
        "your own shows (boardsim fire)"
    )


def _together(done: Sequence[_Done], strict: bool) -> Result:
    """The results of several builds as one; of findings about the whole board the worst counts."""
    first = done[0].result
    if len(done) == 1:
        return first
    findings = worst([d.result.findings for d in done])
    owners = [next(d.result for d in done if _holds(d.result, f)) for f in findings]
    closeups = {(id(d.result), c.finding): c for d in done for c in d.result.closeups}
    shown = [closeups.get((id(owner), f.key)) for owner, f in zip(owners, findings, strict=True)]
    deciding = owners[0] if owners else first
    proven = all(d.row.verdict != "unproven" for d in done)
    return replace(
        first,
        duration=max(d.result.duration for d in done),
        verdict=overall(findings, proven, strict),
        findings=tuple(findings),
        assumptions=tuple(dict.fromkeys(a for d in done for a in d.result.assumptions)),
        audit=tuple(replace(a, corner=f"{a.corner}, {d.row.label}") for d in done for a in d.result.audit),
        firing=tuple(dict.fromkeys(line for d in done for line in d.result.firing)),
        traces=deciding.traces,
        deck=deciding.deck,
        timings=tuple(t for d in done for t in d.result.timings),
        notes=tuple(f"{d.row.label}: {note}" for d in done for note in d.result.notes),
        closeups=tuple(c for c in shown if c is not None),
    )


def _holds(result: Result, finding: Finding) -> bool:
    """Whether a finding is one of a result's own; putting results together may have added to its sentence."""
    return any((f.key, f.corner, f.value) == (finding.key, finding.corner, finding.value) for f in result.findings)
