"""Findings that need no waveform: what the register frames made of the pulses, and who is on together."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping

import numpy as np

from boardsim.board.ranges import write_labels, write_range
from boardsim.board.reader import Board, Channel
from boardsim.firing.pattern import Pulse
from boardsim.firing.schedule import Firing, MovedPulse, WrongOutput
from boardsim.parts.controller import Controller
from boardsim.quantities import apart, in_units
from boardsim.verdict.bridges import judge_directions
from boardsim.verdict.chain import judge_chain
from boardsim.verdict.chain_findings import where_limits_hold
from boardsim.verdict.chain_loads import judge_loads
from boardsim.verdict.driver_levels import judge_driver_levels
from boardsim.verdict.findings import Finding, Floats, Verdict, verdict_of
from boardsim.verdict.hold import judge_chops
from boardsim.verdict.logic_supply import judge_supply

_LATE = "comes late by"


def judge_switching(board: Board, firing: Firing) -> list[Finding]:
    """Swallowed, joined and misdirected pulses; channels on at once; exclusive groups; and whether the chain can work."""
    found = [
        *_swallowed(board, firing),
        *_moved(board, firing),
        *judge_chops(board, firing),
        *_joined(board, firing),
        *_lost_pauses(board, firing),
        *_wrong(board, firing),
    ]
    everyone = tuple(c.number for c in board.channels)
    found.append(_at_once(board, firing, everyone, board.limits.most_on, "channels on at once", "board", ""))
    for members, most, reason in board.exclusive:
        label = f"channels {write_range(members)}"
        found.append(_at_once(board, firing, members, most, "exclusive channels on at once", label, reason))
    found += judge_directions(board, firing)
    found += judge_driver_levels(board)
    loads = where_limits_hold(board, judge_loads(board, firing))
    return [*found, *loads, *judge_chain(board), *judge_supply(board, firing)]


def _plain(quantity: str, check: str, channel: int, label: str, count: int, at: float, sentence: str) -> Finding:
    """Something that must not happen at all; how often it did is the reading."""
    return Finding(
        check,
        quantity,
        "register chain",
        channel,
        label,
        float(count),
        0.0,
        "1",
        -1.0,
        at,
        "misbehave",
        "fail",
        sentence,
        source="a pulse must be fired as commanded",
    )


def _per_channel(
    board: Board, pulses: Iterable[Pulse], check: str, quantity: str, say: Callable[[str, Pulse], str], remedy: str
) -> Iterator[Finding]:
    """One finding for each channel to which something happened, told by its first pulse."""
    mine: dict[int, list[Pulse]] = {}
    for pulse in pulses:
        mine.setdefault(pulse.channel, []).append(pulse)
    for channel, hit in mine.items():
        label = board.channel(channel).label
        times = f" ({len(hit)} times)" if len(hit) > 1 else ""
        sentence = f"{say(label, hit[0])}{times}; try: {remedy}"
        yield _plain(quantity, check, channel, label, len(hit), hit[0].start, sentence)


def _swallowed(board: Board, firing: Firing) -> Iterator[Finding]:
    late = firing.jitter
    tick = (board.controller or Controller()).tick.typ
    lost = {m.pulse: m for m in firing.moved if m.swallowed or m.timed.width <= late}

    def say(label: str, p: Pulse) -> str:
        its = f"{label}: its pulse of {in_units(p.width, 's')} at {in_units(p.start, 's', 4)}"
        if not lost[p].swallowed:
            return f"{its} can get lost: it is no longer than a frame may be late, {in_units(late, 's')} (jitter)"
        if lost[p].timed.width == 0:
            return f"{its} is lost: it rounds to nothing on a timer tick of {in_units(tick, 's')}"
        return f"{its} is lost: both edges fall on one latch, since a register frame takes {in_units(firing.frame_time, 's')}"

    return _per_channel(
        board, lost, "lost-pulse", "pulses lost", say, "a longer pulse, a faster clock or a finer timer tick"
    )


def _moved(board: Board, firing: Firing) -> list[Finding]:
    """The pulse that ticks, register frames and jitter distort most, as a share of its own width; and the latest of all.

    An output turns on and off at the times of `firing` or up to the jitter later, each edge by itself. What a switch takes by
    design, such as a gate driver's delay and dead time, comes on top.
    """
    seen = [m for m in firing.moved if not m.swallowed]
    if not seen:
        return []
    own = {c: _delays(board.channel(c)) for c in dict.fromkeys(m.pulse.channel for m in seen)}
    late, changed = {}, {}
    for m in seen:
        on, off = own[m.pulse.channel]
        late[m] = max(m.start - m.pulse.start + firing.jitter + on, m.pulse.start - m.start)
        wider = m.stop - m.start - m.pulse.width
        changed[m] = max(abs(wider), abs(wider + off - on)) + firing.jitter
    found = [
        _distorted(board, late, "lateness of a pulse", _LATE),
        _distorted(board, changed, "change of a pulse's width", "changes its width by"),
    ]
    limit = board.limits.lateness
    if limit is not None:
        m = max(late, key=lambda m: late[m])
        value, allowed = apart(late[m], limit.min, "s")
        label = board.channel(m.pulse.channel).label
        said = f"{label}: its pulse at {in_units(m.pulse.start, 's', 4)} comes {value} away from when it was asked for; {allowed} are allowed"
        margin = (limit.min - late[m]) / limit.min if limit.min else -1.0
        said += "; try: a faster clock, or pulses that do not follow on each other so closely" if margin < 0 else ""
        found.append(
            _timing(
                board, "latest pulse", label, late[m], limit.min, "s", margin, m.pulse.start, said, str(limit.origin)
            )
        )
    return found


def _delays(channel: Channel) -> tuple[float, float]:
    """What a channel's switches take to turn on and off by design, at most; of a matrix the slower of both. [s]"""
    each = [driver.switch.delays() for driver in channel.drivers]
    return max(on for on, _ in each), max(off for _, off in each)


def _timing(
    board: Board,
    what: str,
    label: str,
    value: float,
    limit: float | None,
    unit: str,
    margin: float | None,
    at: float,
    said: str,
    source: str,
) -> Finding:
    return Finding(
        "pulse-timing",
        what,
        "register chain",
        None,
        label,
        value,
        limit,
        unit,
        margin,
        at,
        "misbehave",
        verdict_of(margin, board.limits.guard_band.typ),
        said,
        source=source,
    )


def _distorted(board: Board, by: Mapping[MovedPulse, float], what: str, verb: str) -> Finding:
    """The pulse that is off by the largest share of its width."""
    limit = board.limits.pulse_error
    m = max(by, key=lambda m: by[m] / m.pulse.width)
    value = by[m] / m.pulse.width
    margin: float | None = (limit.typ - value) / limit.typ
    label = board.channel(m.pulse.channel).label
    said = (
        f"{label}: its pulse of {in_units(m.pulse.width, 's')} at {in_units(m.pulse.start, 's', 4)} "
        f"{'comes early by' if verb == _LATE and m.start < m.pulse.start else verb} {in_units(by[m], 's')}, {value:.1%} of its width; "
    )
    if limit.assumed() and limit.typ < value < 1:
        # Nobody gave a limit: only a pulse that is off by all of its width is broken for certain.
        margin = None
        said += "how much may be was not given ([limits] pulse_error)"
    else:
        said += f"{limit.typ:.0%} is allowed"
    if margin is None or margin < 0:
        said += "; try: a faster clock, a finer timer tick, or pulses that do not change together"
    known = None if margin is None else limit.typ
    return _timing(board, what, label, value, known, "1", margin, m.pulse.start, said, str(limit.origin))


def _joined(board: Board, firing: Firing) -> Iterator[Finding]:
    def say(label: str, p: Pulse) -> str:
        return f"{label}: fired again at {in_units(p.start, 's', 4)} while still commanded on: the pulses run together"

    remedy = "a later start or a shorter pulse"
    return _per_channel(board, firing.merged, "overlap", "pulses commanded while on", say, remedy)


def _lost_pauses(board: Board, firing: Firing) -> Iterator[Finding]:
    def say(label: str, p: Pulse) -> str:
        return (
            f"{label}: the pause before its pulse at {in_units(p.start, 's', 4)} is lost: off and on again fall on one latch, "
            "and the pulses run together"
        )

    remedy = "a longer pause or a faster clock"
    return _per_channel(board, firing.lost_pauses, "overlap", "pauses lost between pulses", say, remedy)


def _wrong(board: Board, firing: Firing) -> Iterator[Finding]:
    for w in firing.wrong:
        channel = board.channel(w.channel)
        if w.by:
            yield _ghost(board, w)
            continue
        did = "stays off although it is commanded on" if w.commanded else "is on although nothing commands it"
        said = (
            f"{channel.label} ({_outputs(channel)}): {did} at {in_units(w.at, 's', 4)}: bit order, order of the registers, "
            "active level and the map from channel to output and bit do not fit together; try: bit_order, first_out, "
            "active, outputs, bits"
        )
        yield _plain("output against command", "wrong-output", w.channel, channel.label, 1, w.at, said)


def _outputs(channel: Channel) -> str:
    """ "output 3", or "outputs 0 and 8" of its row and column."""
    numbers = " and ".join(str(output) for output in channel.outputs)
    return f"output{'s' if len(channel.outputs) > 1 else ''} {numbers}"


def _ghost(board: Board, w: WrongOutput) -> Finding:
    """A channel of a matrix that others turn on: their rows and columns cross at its coil as well."""
    channel = board.channel(w.channel)
    row, column = (driver.label for driver in channel.drivers)
    who = write_labels([board.channel(n).label for n in w.by])
    said = (
        f"{channel.label}: is on from {in_units(w.at, 's', 4)} although nothing commands it: {who} are on together, and "
        f"{row} of one and {column} of the other cross at its coil; try: one row after the other, or only channels along one "
        "line at once"
    )
    return _plain("output against command", "wrong-output", w.channel, channel.label, 1, w.at, said)


def most_together(firing: Firing, channels: tuple[int, ...]) -> tuple[int, float]:
    """The largest number of these channels on at one time, and since when. [s]"""
    spans: list[Floats] = [firing.on[c] for c in channels if len(firing.on[c])]
    if not spans:
        return 0, 0.0
    rows = np.concatenate(spans)
    times = np.concatenate([rows[:, 1], rows[:, 0]])
    steps = np.concatenate([np.full(len(rows), -1), np.full(len(rows), 1)])
    order = np.lexsort((steps, times))  # at equal times off comes before on: they change on one latch
    counts = np.cumsum(steps[order])
    k = int(counts.argmax())
    return int(counts[k]), float(times[order][k])


def _at_once(
    board: Board,
    firing: Firing,
    channels: tuple[int, ...],
    most: int | None,
    quantity: str,
    label: str,
    reason: str,
) -> Finding:
    count, at = most_together(firing, channels)
    margin = None if most is None else (most - count) / most
    verdict: Verdict = "limit-missing" if margin is None else "fail" if margin < 0 else "pass"
    on = write_range([c for c in firing.channels_on(at) if c in channels]) or "none"
    sentence = f"{label}: up to {count} channels are on at once, first at {in_units(at, 's', 4)} (channels {on})"
    if most is None:
        sentence += "; how many may be was not given ([limits] most_on)"
    else:
        sentence += f"; {most} may be" + (f" ({reason})" if reason else "")
        if count > most:
            sentence += "; try: a stagger"
    return Finding(
        "overlap",
        quantity,
        "firing",
        None,
        label,
        float(count),
        None if most is None else float(most),
        "1",
        margin,
        at,
        "misbehave",
        verdict,
        sentence,
        source=f"given: {board.path.name}" if most is not None else "",
        shape="count",
        channels=channels,
    )
