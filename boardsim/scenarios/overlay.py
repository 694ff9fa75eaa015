"""Does the board do what was computed? One pulse is computed again, and a trace from an oscilloscope laid over it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

from boardsim.board.corners import corners
from boardsim.board.ranges import write_range
from boardsim.board.reader import Board, Channel
from boardsim.errors import InputError, QuantityError
from boardsim.firing.pattern import Pattern
from boardsim.firing.schedule import Firing, fire
from boardsim.parts.base import NOMINAL, Corner
from boardsim.parts.record import shortened
from boardsim.quantities import Dimension, in_units, parse
from boardsim.scenarios.all_corners import run_corners
from boardsim.scenarios.crew import Crew
from boardsim.scenarios.fitted_record import record_of
from boardsim.verdict.fit import fit
from boardsim.verdict.overlaid import Overlaid
from boardsim.verdict.overlay import CourseWatch, lay_over
from boardsim.verdict.trace import Trace

_BEFORE = 0.1  # share of the pulse that is shown before it
_SETTLE = 5.0  # L/R times to look at after the turn-off
_TRACE_TIME = Dimension("time", "s", "1.2 ms", -1e9, 1e9, zero=True)


@dataclass(frozen=True)
class Asked:
    """What is to be compared.

    Attributes
    ----------
    channel : Channel
    pulse : int
        Counted from 1.
    corner : Corner
    at : float or None
        When the output turns on, in the trace's time. [s]
    within : float or None
        Largest difference allowed, as a share of the peak. [1]
    fitted : bool
        Whether the coil is to be fitted.
    """

    channel: Channel
    pulse: int
    corner: Corner
    at: float | None = None
    within: float | None = None
    fitted: bool = False


def ask(
    board: Board,
    pattern: Pattern,
    channel: int | None,
    pulse: int,
    corner: int | None,
    at: str | None,
    within: float | None,
    fitted: bool,
) -> Asked:
    """Work out what is asked for, before anything is run.

    Parameters
    ----------
    channel, corner : int or None
        The only one that the pattern fires, and nominal parts, if absent; corners are counted from 1.
    pulse : int
        Counted from 1.
    at : str or None
        A time with its unit.
    within : float or None
        [%]
    fitted : bool

    Raises
    ------
    InputError
        If there is no such channel, pulse or corner, or a number cannot be read.
    """
    fired = sorted({p.channel for p in pattern.pulses})
    if channel is None:
        if len(fired) != 1:
            raise InputError(
                f"the pattern fires channels {write_range(fired)}; say with --channel which one the trace shows"
            )
        channel = fired[0]
    if channel not in fired:
        raise InputError(f"--channel {channel}: the pattern does not fire it; it fires {write_range(fired)}")
    wanted = NOMINAL
    if corner is not None:
        known = corners(board, min(p.width for p in pattern.pulses))
        if not 1 <= corner <= len(known):
            listed = "; ".join(f"{i} {c.name}" for i, c in enumerate(known, 1))
            raise InputError(f"--corner {corner}: this board has {len(known)}: {listed}")
        wanted = known[corner - 1]
    try:
        moment = None if at is None else parse(at, _TRACE_TIME).typ
    except QuantityError as err:
        raise InputError(f"--at {shortened(at or '')}: {err}") from None
    return Asked(board.channel(channel), pulse, wanted, moment, None if within is None else within / 100, fitted)


def overlay(
    board: Board,
    pattern: Pattern,
    trace: Trace,
    asked: Asked,
    keep: Path,
    crew: Crew,
    progress: Callable[[float], None] | None = None,
    changes: Sequence[str] = (),
) -> Overlaid:
    """Compute a pulse again, audited, and lay a trace over it.

    Parameters
    ----------
    keep : Path
        Where deck and log of a failed run are kept.
    progress : callable
        Told the share of the work done, from any thread.
    changes : sequence of str
        What is not as it was when the pattern was fired.

    Raises
    ------
    EngineError
        If no run came to an end.
    InputError
        If the channel has no such pulse, or the trace cannot be compared or fitted.

    Notes
    -----
    The whole board is run, since the others that are on pull at the same rail; but only until the pulse is over, in one corner: with
    nominal parts unless told otherwise, since the board on the bench is no worst case. Windings then have the temperature that
    their resistance was given for.
    """
    firing, watch = pulse_of(board, pattern, asked)
    (result,) = run_corners(board, firing, (asked.corner,), keep, crew, progress, measure=watch, pictured=False)
    if result.trial is None or watch.found is None:
        assert result.failure is not None  # without a run there is one
        raise result.failure
    laid = lay_over(trace, watch.found, asked.at)
    channel = asked.channel
    found = fit(channel.coil, laid) if asked.fitted else None
    mine = tuple(
        a for a in result.trial.deck.assumptions if a.part in (f"coil {channel.label}", f"coil {channel.coil_name}")
    )
    return Overlaid(
        board.name,
        pattern.name,
        asked.corner.name,
        channel.number,
        channel.label,
        channel.coil_name,
        asked.pulse,
        trace.path,
        laid,
        asked.within,
        result.audit,
        result.engine,
        tuple(changes),
        trace.assumed,
        mine,
        found,
        record_of(board, channel, found, trace.path.name) if found is not None else "",
    )


def pulse_of(board: Board, pattern: Pattern, asked: Asked) -> tuple[Firing, CourseWatch]:
    """The firing until a pulse is over, and what cuts the pulse out of its waveforms.

    Raises
    ------
    InputError
        If the channel has no such pulse, or is still on at the end.
    """
    firing = fire(board, pattern)
    number, coil = asked.channel.number, asked.channel.coil
    spans = firing.on[number]
    if not 1 <= asked.pulse <= len(spans):
        said = (
            f"its output turns {asked.channel.label} on {len(spans)} times"
            if len(spans)
            else "its output never turns it on"
        )
        raise InputError(f"--pulse {asked.pulse}: {said} in this pattern")
    on, off = (float(t) for t in spans[asked.pulse - 1])
    both = [
        firing.on[c] for c in (number, asked.channel.opposite) if c is not None
    ]  # a full bridge fires its coil both ways
    later = min((float(t) for each in both for t in each[:, 0] if t >= off), default=firing.duration)
    settled = off + _SETTLE * coil.inductances[1] / coil.resistance.min + coil.return_time
    start, stop = max(0.0, on - _BEFORE * (off - on)), min(later, settled, firing.duration)
    if off >= firing.duration:
        raise InputError(
            f"--pulse {asked.pulse}: is still on at the end of the pattern, {in_units(firing.duration, 's')}"
        )
    if pattern.recorded is None:
        kept = tuple(p for p in pattern.pulses if p.start < stop)
        firing = fire(board, replace(pattern, pulses=kept, duration=None))
    return firing, CourseWatch(number, start, stop, on, off)
