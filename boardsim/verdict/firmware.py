"""Rules that the firmware has to keep, judged on what the outputs do: on-times, off-times, silence at the end."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from boardsim.board.ranges import write_labels
from boardsim.board.reader import Board, Channel
from boardsim.firing.registers import frame_time
from boardsim.firing.schedule import Firing
from boardsim.quantities import Quantity, apart, in_units
from boardsim.verdict.findings import Finding, Verdict, verdict_of

_EQUAL = 1e-9  # share of a limit within which a time is the limit itself; decimal times are no binary ones


def judge_firmware(board: Board, firing: Firing) -> list[Finding]:
    """Longest on-time and least off-time of every channel that is fired, and silence after the last register frame.

    Notes
    -----
    These are rules of the user's for the firmware and no ratings of parts. One that was not given is no finding; what
    `not_given` says of it stands in the report. How many amperes may flow at once is read from the waveforms, by
    a rule of the deck (`most_current`).
    """
    found: list[Finding] = []
    for channel in board.channels:
        found += _longest_on(board, channel, firing)
        found += _least_off(board, channel, firing)
    return [*found, *_all_off(board, firing)]


def not_given(board: Board) -> str:
    """Which of these rules were not given and so not judged, in one sentence; empty if all were."""
    coils = {c.coil_name: c.coil for c in board.channels}
    missing = [
        f"{key} of {name}"
        for name, coil in coils.items()
        for key in ("longest_on", "least_off")
        if not getattr(coil, key)
    ]
    missing += [key for key in ("most_current", "all_off") if not getattr(board.limits, key)]
    return (
        f"rules for the firmware that were not given, and so were not judged: {', '.join(missing)}" if missing else ""
    )


def _margin(value: float, limit: float, upper: bool) -> float:
    """Share of the limit that is left; a reading that is the limit but for rounding leaves nothing. [1]"""
    spare = (limit - value if upper else value - limit) / limit
    return 0.0 if abs(spare) < _EQUAL else spare


def _rule(
    board: Board,
    channel: Channel,
    check: str,
    quantity: str,
    limit: Quantity,
    bound: float,
    value: float,
    at: float,
    sentence: str,
    advice: str,
) -> Finding:
    upper = check == "on-time"
    margin = _margin(value, bound, upper)
    return Finding(
        check,
        quantity,
        channel.coil_name,
        channel.number,
        channel.label,
        value,
        bound,
        "s",
        margin,
        at,
        "misbehave",
        verdict_of(margin, board.limits.guard_band.typ),
        sentence + (f"; try: {advice}" if margin < 0 else ""),
        source=str(limit.origin),
        lasting=value,
        worse="high" if upper else "low",
    )


def _longest_on(board: Board, channel: Channel, firing: Firing) -> Iterator[Finding]:
    limit: Quantity | None = channel.coil.longest_on
    spans = firing.on[channel.number]
    if limit is None or not len(spans):
        return
    k = int(np.round(spans[:, 1] - spans[:, 0], 12).argmax())  # the first of those that are equal on paper
    value, at = float(spans[k, 1] - spans[k, 0]), float(spans[k, 0])
    still = "at least " if spans[k, 1] >= firing.duration else ""
    said, allowed = apart(value, limit.min, "s")
    text = (
        f"{channel.label}: on for {still}{said} from {in_units(at, 's', 4)} on; "
        f"longest_on of {channel.coil_name} is {allowed}"
    )
    advice = "a shorter pulse, or a limit in the firmware that does not hang on its main loop"
    yield _rule(board, channel, "on-time", "longest on-time", limit, limit.min, value, at, text, advice)


def _least_off(board: Board, channel: Channel, firing: Firing) -> Iterator[Finding]:
    limit: Quantity | None = channel.coil.least_off
    spans = firing.on[channel.number]
    if limit is None or len(spans) < 2:
        return
    pauses = np.round(spans[1:, 0] - spans[:-1, 1], 12)
    k = int(pauses.argmin())
    value, at = float(pauses[k]), float(spans[k, 1])
    said, allowed = apart(value, limit.max, "s")
    text = (
        f"{channel.label}: off for {said} from {in_units(at, 's', 4)} on, then fired again; "
        f"least_off of {channel.coil_name} is {allowed}"
    )
    yield _rule(board, channel, "off-time", "least off-time", limit, limit.max, value, at, text, "a longer pause")


def last_latch(board: Board, firing: Firing) -> float:
    """When the last register frame reached the outputs: its latch edge. [s]

    Notes
    -----
    Of a pattern it is a frame's time after the last one is started; that of a held pulse may change no output, where its chop
    had it off already.
    """
    if firing.recorded is not None:
        latched = firing.recorded.frames.latched
        return float(latched[-1]) if len(latched) else 0.0
    return firing.sent[-1][0] + frame_time(board.chain) if firing.sent else 0.0


def _all_off(board: Board, firing: Firing) -> Iterator[Finding]:
    rule = board.limits.all_off
    if rule is None:
        return
    sent = last_latch(board, firing)
    late = {c: float(s[-1, 1]) for c in board.all_off if len(s := firing.on[c]) and s[-1, 1] > sent}
    end = max(late.values(), default=sent)
    on = [c for c, off in late.items() if off >= firing.duration]
    value, bound = end - sent, rule.within.min
    margin: float | None
    margin = _margin(value, bound, upper=True) if bound else (0.0 if value <= 0 else -1.0)
    verdict: Verdict = verdict_of(margin, board.limits.guard_band.typ)
    who = write_labels([board.channel(c).label for c in (on or late)])
    after = f"the last register frame, latched at {in_units(sent, 's', 4)}"
    said, allowed = apart(value, bound, "s")
    if on:
        verb = "is" if len(on) == 1 else "are"
        text = f"board: {who} {verb} still on {said} after {after}, where the run ends; all have to be off within {allowed}"
        if margin >= 0:  # what comes later is not known
            verdict, text = "unproven", text + "; try: look longer"
        else:
            text += "; try: turn off what is on before falling silent, or let a time-out disable the outputs"
    elif late:
        text = f"board: the last to turn off after {after}, is off {said} later ({who}); all have to be off within {allowed}"
        text += "; try: turn off what is on before falling silent" if margin < 0 else ""
    else:
        text = f"board: all are off at {after}; they have to be within {allowed}"
    yield Finding(
        "all-off",
        "time to all off after the last frame",
        "[limits]",
        None,
        "board",
        value,
        bound,
        "s",
        margin,
        sent,
        "misbehave",
        verdict,
        text,
        source=str(rule.within.origin),
        lasting=value,
        channels=tuple(sorted(on or late)),
    )
