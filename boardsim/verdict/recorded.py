"""What a capture of the bus says of the bus itself: times that a register needs, bits per frame, and what is not in it."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Protocol, runtime_checkable

import numpy as np

from boardsim.board.ranges import write_labels
from boardsim.board.reader import Board
from boardsim.firing.bus import Intervals, Recorded
from boardsim.firing.schedule import Firing
from boardsim.parts.base import Assumption
from boardsim.parts.register import Register
from boardsim.quantities import apart, in_units
from boardsim.verdict.chain_findings import where_limits_hold
from boardsim.verdict.findings import Finding, Verdict, verdict_of

_SAME = 0.5e-12  # [s], what recorded times are rounded to; less apart than this they are one


class NeededTimes(Protocol):
    """How long the things on the bus have to last at some logic rail; None where that is not printed. [s]"""

    @property
    def setup(self) -> float | None:
        """Data before the rising clock. [s]"""

    @property
    def hold(self) -> float | None:
        """Data after the rising clock. [s]"""

    @property
    def latch_setup(self) -> float | None:
        """Rising clock before the rising latch. [s]"""

    @property
    def clock_width(self) -> float | None:
        """Clock pulse, high or low. [s]"""

    @property
    def latch_width(self) -> float | None:
        """Latch pulse, high or low. [s]"""

    @property
    def clear_width(self) -> float | None:
        """Clear pulse, low. [s]"""


@runtime_checkable
class TimedRegister(Protocol):
    """A register whose datasheet prints its times."""

    def timing(self, volts: float) -> NeededTimes | None:
        """Its times at a logic rail; None where they are not known. [V]"""


_SAID: dict[str, tuple[str, str, str, str]] = {
    # of each interval: the field of the needed time, the quantity, how it is told, what to try
    "setup": ("setup", "set-up of the data", "the data is set {} before the clock rises", "set it earlier"),
    "hold": ("hold", "hold of the data", "the data changes {} after the clock rises", "change it on the falling edge"),
    "latch setup": (
        "latch_setup",
        "set-up of the latch",
        "the latch rises {} after the last clock edge",
        "a pause before the latch",
    ),
    "clock high": ("clock_width", "high clock", "a clock pulse is high for {}", "a slower clock, a look for glitches"),
    "clock low": ("clock_width", "low clock", "the clock is low for {}", "a slower clock, a look for glitches"),
    "latch high": ("latch_width", "high latch", "a latch pulse is high for {}", "a longer pulse, a look for glitches"),
    "latch low": ("latch_width", "low latch", "the latch is low for {}", "a longer pause, a look for glitches"),
    "clear low": ("clear_width", "low clear", "a clear pulse is low for {}", "a longer pulse, a look for glitches"),
}


def timing_of(register: Register, volts: float) -> NeededTimes | None:
    """What a register needs at a logic rail [V]; None where its record does not say."""
    return register.timing(volts) if isinstance(register, TimedRegister) else None


def judge_recorded(board: Board, firing: Firing, needed: NeededTimes | None = None) -> list[Finding]:
    """Findings on a recorded bus.

    Parameters
    ----------
    board : Board
    firing : Firing
        Nothing is found on one that was not recorded.
    needed : NeededTimes or None
        What the register needs at the lowest logic rail, where it is slowest; from its own record if not given.

    Notes
    -----
    Each recorded time may be off by the capture's resolution p, so an interval that reads t lies between t - p and t + p
    (both ends are rounded the same way). It is shown to be long enough where t - p reaches what is needed, and too short where
    t + p does not exceed it; between the two the capture does not tell, and that is `unproven`.
    """
    recorded = firing.recorded
    if recorded is None:
        return []
    rail = board.logic.voltage.min
    needed = needed or timing_of(board.chain.register_, rail)
    found = [_interval(board, recorded, what, needed) for what in _SAID if what in recorded.intervals]
    of_register = [*(f for f in found if f is not None), *_clock(board, recorded, needed)]
    return [
        *where_limits_hold(board, of_register),
        _bits(board, recorded),
        *_unfinished(board, firing, recorded),
        *_let_go(board, recorded),
    ]


def _shown(value: float, needed: float, resolution: float, guard: float) -> tuple[float, Verdict]:
    """Margin and verdict of an interval that has to last so long. [s], guard in [1]"""
    scale = max(needed, resolution)
    if value - resolution >= needed - _SAME:
        margin = max(value - resolution - needed, 0.0) / scale
        return margin, verdict_of(margin, guard)
    margin = (value - needed) / scale
    return margin, "fail" if value + resolution <= needed + _SAME else "unproven"


def _interval(board: Board, recorded: Recorded, what: str, needed: NeededTimes | None) -> Finding | None:
    """The shortest interval of a kind against what the register needs; None where there was none."""
    found: Intervals = recorded.intervals[what]
    if not len(found.lasting):
        return None
    field, quantity, words, advice = _SAID[what]
    register = board.chain.register_
    name, rail = register.title or "register", board.logic.voltage.min
    k = int(found.lasting.argmin())
    value, at = float(found.lasting[k]), float(found.at[k])
    least: float | None = getattr(needed, field) if needed is not None else None
    margin: float | None = None
    verdict: Verdict = "limit-missing"
    if least is None:
        text = (
            f"chain: {words.format(in_units(value, 's'))} at {in_units(at, 's', 6)}, the shortest; what {name} needs at "
            f"{in_units(rail, 'V')} was not given"
        )
    else:
        p = recorded.resolution
        margin, verdict = _shown(value, least, p, board.limits.guard_band.typ)
        reading, wanted = apart(value, least, "s")
        text = f"chain: {words.format(reading)} at {in_units(at, 's', 6)}"
        if verdict == "fail":
            count = int((found.lasting + p <= least + _SAME).sum())
            text += f", too short {count} of {len(found.lasting)} times"
        else:
            text += ", the shortest"
        text += f"; {name} needs {wanted} at {in_units(rail, 'V')}"
        if verdict == "fail":
            text += f"; try: {advice}"
        elif verdict == "unproven":
            text += f"; the capture is exact to {in_units(p, 's')} only and does not show it; try: a finer capture"
    return Finding(
        "bus-timing",
        quantity,
        name,
        None,
        "chain",
        value,
        least,
        "s",
        margin,
        at,
        "misbehave",
        verdict,
        text,
        source="" if least is None else f"times of {name} at {in_units(rail, 'V')}",
        worse="low",
    )


def _clock(board: Board, recorded: Recorded, needed: NeededTimes | None) -> Iterator[Finding]:
    """The fastest clock that was sent, against the register's highest; what [chain] says of it is judged elsewhere."""
    found = recorded.intervals["clock period"]
    if not len(found.lasting):
        return
    register = board.chain.register_
    name, rail = register.title or "register", board.logic.voltage.min
    k = int(found.lasting.argmin())
    period, at, p = float(found.lasting[k]), float(found.at[k]), recorded.resolution
    highest: float | None = getattr(needed, "alone_up_to", None)
    source = "" if highest is None else f"times of {name} at {in_units(rail, 'V')}"
    if highest is None and register.highest_clock is not None:
        at_rail = register.timing_supply
        if at_rail is None or rail >= at_rail.typ * (1 - 1e-9):
            highest, source = register.highest_clock.typ, str(register.highest_clock.origin)
    value = 1 / period
    margin: float | None = None
    verdict: Verdict = "limit-missing"
    text = f"chain: clock edges follow each other at up to {in_units(value, 'Hz')}, first at {in_units(at, 's', 6)}; "
    if highest is None:
        text += f"no highest clock of {name} was given for {in_units(rail, 'V')}"
    else:
        _, verdict = _shown(period, 1 / highest, p, 0.0)
        margin = (highest - value) / highest
        verdict = verdict_of(margin, board.limits.guard_band.typ) if verdict == "pass" else verdict
        text += f"one {name} alone follows up to {in_units(highest, 'Hz')}"
        text += "; the capture is too coarse to show it" if verdict == "unproven" else ""
        text += "; try: a slower clock" if verdict == "fail" else ""
    yield Finding(
        "chain",
        "clock in the capture",
        name,
        None,
        "chain",
        value,
        highest,
        "Hz",
        margin,
        at,
        "misbehave",
        verdict,
        text,
        source=source,
    )


def _bits(board: Board, recorded: Recorded) -> Finding:
    """Clock edges per frame against the chain's outputs; latching again without a clock changes nothing."""
    frames, outputs = recorded.frames, board.chain.outputs
    short = (frames.bits < outputs) & (frames.bits > 0) & ~frames.cleared
    wrong = np.flatnonzero(short | (frames.bits > outputs))
    value, at, margin = outputs, None, 0.0
    text = f"chain: each of {len(frames.bits)} register frames brings the chain's {outputs} bits"
    if len(wrong):
        k = int(wrong[0])
        value, at = int(frames.bits[k]), float(frames.latched[k])
        margin = -abs(value - outputs) / outputs
        text = (
            f"chain: {len(wrong)} of {len(frames.bits)} register frames do not bring {outputs} bits, the first at "
            f"{in_units(at, 's', 6)} with {value}; the chain has {outputs} outputs, so that bits end where they do not belong; "
            "try: send whole frames, mend [chain] count, or begin after the first whole frame"
        )
    return Finding(
        "frame-bits",
        "bits of a register frame",
        "register chain",
        None,
        "chain",
        float(value),
        float(outputs),
        "1",
        margin,
        at,
        "misbehave",
        "fail" if len(wrong) else "pass",
        text,
        source=f"given: {board.path.name}",
    )


def _unfinished(board: Board, firing: Firing, recorded: Recorded) -> Iterator[Finding]:
    """Channels that are on where the capture ends: what becomes of them is not in it."""
    on = recorded.unfinished
    if not on:
        return
    labels = write_labels([board.channel(n).label for n in on])
    verb = "is" if len(on) == 1 else "are"
    yield Finding(
        "capture",
        "channels on at its end",
        "capture",
        None,
        "board",
        float(len(on)),
        0.0,
        "1",
        -1.0,
        firing.duration,
        "misbehave",
        "unproven",
        f"{labels} {verb} on where {recorded.capture.name} ends: how long, and what the turn-off does, is not in it; try: "
        "capture until all are off, or set a stop before",
        source="what was not captured is not shown",
        channels=on,
    )


def _not_held(board: Board) -> tuple[int, ...]:
    """Channels whose switch nothing keeps off while the register's output lets go."""
    return tuple(c.number for c in board.channels if not c.held_off)


def _let_go(board: Board, recorded: Recorded) -> Iterator[Finding]:
    """Channels that nothing holds off while the outputs are disabled: what they do then is not in a capture of the bus.

    Notes
    -----
    A disabled output of a 74HC595 is in high impedance (NXP 74HC595; 74HCT595 rev. 6, table 3). A gate or base without a
    resistor to ground keeps the charge that it has, and leakage of either sign moves it: the run, which takes it as off, shows
    nothing of it.
    """
    loose, spans = _not_held(board), recorded.disabled
    if not loose or not len(spans):
        return
    labels = write_labels([board.channel(n).label for n in loose])
    times = f" ({len(spans)} times)" if len(spans) > 1 else ""
    start, stop = (float(t) for t in spans[0])
    yield Finding(
        "capture",
        "channels that nothing holds off while outputs are disabled",
        "capture",
        None,
        "board",
        float(len(loose)),
        0.0,
        "1",
        -1.0,
        start,
        "destroy",
        "unproven",
        f"the outputs are disabled from {in_units(start, 's', 6)} to {in_units(stop, 's', 6)}{times}, and nothing holds {labels} off "
        "then: the inputs of their switches float, on, off or half on; try: a pulldown in their switch",
        source="what was not captured is not shown",
        lasting=float((spans[:, 1] - spans[:, 0]).max()),
        channels=loose,
    )


def assumptions_of_capture(board: Board, firing: Firing) -> tuple[Assumption, ...]:
    """What had to be supposed to make a run of a recorded bus."""
    recorded = firing.recorded
    if recorded is None:
        return ()
    name = f"capture {recorded.capture.name}"
    found = [
        Assumption(
            name, "outputs before the first latch edge", "off", "what the registers hold until then is not recorded"
        )
    ]
    if not recorded.sampled:
        step = in_units(recorded.resolution, "s")
        found.append(
            Assumption(name, "resolution", step, "the step of its times; sample_period tells that of an analyser")
        )
    if len(recorded.disabled):
        loose = _not_held(board)
        why = (
            f"nothing holds {write_labels([board.channel(n).label for n in loose])}, what they do is not known; "
            if loose
            else ""
        )
        why += (
            ""
            if len(loose) == len(board.channels)
            else "a resistor of their own holds the others; "
            if loose
            else "a resistor of its own holds each; "
        )
        found.append(
            Assumption(name, "switches while outputs are disabled", "off", f"{why}not simulated (power-up does)")
        )
    if "enable" not in recorded.mapped:
        found.append(Assumption(name, "enable", "always enabled", "no signal was named for it"))
    if "clear" not in recorded.mapped:
        found.append(Assumption(name, "clear", "never cleared", "no signal was named for it"))
    return tuple(found)


def told(firing: Firing) -> tuple[str, ...]:
    """What a recorded bus carried, and which checks it leaves out, in sentences."""
    recorded = firing.recorded
    if recorded is None:
        return ()
    frames, period = recorded.frames, recorded.intervals["clock period"].lasting
    spent = f", up to {in_units(firing.frame_time, 's')} from first clock edge to latch" if firing.frame_time else ""
    clock = f", clock edges at least {in_units(float(period.min()), 's')} apart" if len(period) else ""
    lines = [
        f"{len(frames.bits)} register frames recorded in {recorded.capture.name}{spent}{clock}; its times are exact to "
        f"{in_units(recorded.resolution, 's')}",
        "only the outputs tell what was commanded: whether pulses were lost, moved, joined or misdirected is not judged "
        "(lost-pulse, pulse-timing, wrong-output)",
    ]
    if recorded.origin:
        lines.append(f"time 0 is {in_units(recorded.origin, 's', 6)} of the capture")
    return tuple(lines)
