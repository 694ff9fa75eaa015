"""Pulses that are held: whether the coil stays in, and what became of the chop that was asked for."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass, field

import numpy as np

from boardsim.board.ranges import write_range
from boardsim.board.reader import Board
from boardsim.circuit.deck import PlacedRule
from boardsim.firing.held import HeldPulse
from boardsim.firing.schedule import Firing
from boardsim.parts.base import Assumption
from boardsim.parts.coil import HELD_BY_RELEASE
from boardsim.parts.rules import HoldRule
from boardsim.quantities import in_units
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding, Floats, verdict_of

_EMPTY = 0.01  # of the current at the end of the peak: a chop that lets it fall below has no duty that follows from it


@dataclass
class Valleys:
    """The lowest value of a signal within stretches of time that follow on each other.

    Attributes
    ----------
    spans : (n, 2) array
        Rows (start, stop), by time. [s]
    lowest, at : (n,) array
        In each, and when; infinite where nothing was fed. [unit of the signal], [s]
    first : (n,) array
        At the beginning of each. [unit of the signal]
    """

    spans: Floats
    lowest: Floats = field(init=False)
    at: Floats = field(init=False)
    first: Floats = field(init=False)

    def __post_init__(self) -> None:
        self.lowest, self.at = np.full(len(self.spans), np.inf), np.zeros(len(self.spans))
        self.first = np.full(len(self.spans), np.nan)

    def feed(self, t: Floats, y: Floats) -> None:
        """Times [s] and values, both (m,); each stretch begins with the last point of the one before."""
        first = int(np.searchsorted(self.spans[:, 1], t[0]))
        last = int(np.searchsorted(self.spans[:, 0], t[-1], side="right"))
        for k in range(first, last):
            ends = np.clip(self.spans[k], t[0], t[-1])
            inside = slice(int(np.searchsorted(t, ends[0])), int(np.searchsorted(t, ends[1], side="right")))
            times, values = np.append(t[inside], ends), np.append(y[inside], np.interp(ends, t, y))
            if t[0] <= self.spans[k, 0]:
                self.first[k] = np.interp(self.spans[k, 0], t, y)
            i = int(values.argmin())
            if values[i] < self.lowest[k]:
                self.lowest[k], self.at[k] = values[i], times[i]


def held_spans(firing: Firing, channel: int, start: float, stop: float) -> Floats:
    """When a channel's pulses are held, within a window. (n, 2) [s]"""
    rows = [(p.start, p.stop) for p in firing.held.pulses if p.channel == channel]
    spans = np.clip(np.array(sorted(rows), dtype=np.float64).reshape(-1, 2), start, stop)
    whole: Floats = spans[spans[:, 0] < spans[:, 1]]
    return whole


def judge_hold(rule: HoldRule, placed: PlacedRule, valleys: Valleys, firing: Firing, bench: Bench) -> Iterator[Finding]:
    """Of all held pulses of a channel the one whose current falls lowest before its end; nothing where none is held."""
    if not len(valleys.lowest):
        return
    k = int(valleys.lowest.argmin())
    value, at, bound = float(valleys.lowest[k]), float(valleys.at[k]), rule.limit.value
    margin = None if bound is None else (value - bound) / bound
    pulse = next(p for p in firing.held.pulses if p.channel == placed.channel and p.start <= at <= p.stop)
    said = f"{placed.label}: held at {_chop(pulse)}, its coil current falls to {in_units(value, 'A')} at {in_units(at, 's', 4)}; "
    if bound is None or margin is None:
        said += f"neither a hold nor a release current of {placed.part} was given to hold it against"
    else:
        said += f"{placed.part} stays in above {in_units(bound, 'A')}"
        more = _more(
            pulse, float(valleys.first[k]), value, bound, slow=bench.board.channel(pulse.channel).clamp.kind == "diode"
        )
        said += f"; try: {more}" if margin < 0 else ""
    yield bench.finding(placed, rule.limit, "lowest coil current while held", value, margin, at, said, worse="low")


def _chop(pulse: HeldPulse) -> str:
    return f"{100 * pulse.hold.duty:.3g} % and {in_units(1 / pulse.period, 'Hz')}"


def _more(pulse: HeldPulse, first: float, value: float, bound: float, slow: bool) -> str:
    """What would hold it; `slow` says that its clamp lets the current fall as slowly as any."""
    needed = duty_for(first, pulse.duty if pulse.duty is not None else pulse.hold.duty, value, bound)
    ways = [] if needed is None else [f"a hold of {math.ceil(100 * needed)} %"]
    ways += ["a higher hold_frequency"]
    ways += [] if slow else ["a clamp that lets the current fall more slowly, such as a diode"]
    return ", or ".join(ways)


def duty_for(settled: float, duty: float, lowest: float, wanted: float) -> float | None:
    """The duty whose chop lets a coil's current fall no lower than is wanted, from what another duty did.

    Parameters
    ----------
    settled : float
        Current at full drive. [A]
    duty : float
        [1]
    lowest : float
        Lowest current of that chop. [A]
    wanted : float
        [A]

    Returns
    -------
    float or None
        None where the current fell to next to nothing, or where no duty below 1 does. [1]

    Notes
    -----
    Once it repeats itself, the lowest current of a coil of L and R behind a switch, with a clamp that takes no voltage, is
    i = I (e^(d a) - 1) / (e^a - 1): I the current at full drive, d the duty, a = T R / L for a period of T. It follows from the
    exponential of either part of the period, whose ends meet (the step-down converter of textbooks on power electronics, in
    continuous conduction). a is taken from the chop that was seen, so that L and R need not be known. A clamp's voltage is in that a, and
    nowhere else: a rule of thumb.

    Examples
    --------
    A chop of a = 2 at 40 %, of 1 A:

    >>> low = (math.exp(0.8) - 1) / (math.exp(2) - 1)
    >>> round(duty_for(1.0, 0.4, low, (math.exp(1.4) - 1) / (math.exp(2) - 1)), 6)
    0.7
    """
    if lowest <= _EMPTY * settled or wanted >= settled:
        return None
    if lowest >= duty * settled:  # hardly any ripple
        return duty * wanted / lowest if duty * wanted < lowest else None
    small, large = 1e-6, 1e3
    for _ in range(100):
        a = math.sqrt(small * large)
        seen = math.expm1(duty * a) / math.expm1(a) if a < 500 else 0.0
        small, large = (a, large) if seen > lowest / settled else (small, a)
    return math.log1p(wanted / settled * math.expm1(small)) / small


def judge_chops(board: Board, firing: Firing) -> Iterator[Finding]:
    """The held pulse whose duty is farthest from what was asked for, as a share of that; nothing where none lasts a period.

    Notes
    -----
    A frame may come later by up to the jitter, each by itself, so that the on-time of any one period may change by as much.
    """
    timed = [(_off(p, firing), p.duty, p) for p in firing.held.pulses if p.duty is not None]
    if not timed:
        return
    off, duty, pulse = max(timed, key=lambda one: one[0])
    limit, label = board.limits.pulse_error, board.channel(pulse.channel).label
    margin: float | None = (limit.typ - off) / limit.typ
    said = (
        f"{label}: from {in_units(pulse.start, 's', 4)} on it is held with a duty of {duty:.1%} where {pulse.hold.duty:.1%} were "
        f"asked for, up to {off:.1%} of it away{' with jitter' if firing.jitter and not pulse.line else ''}; "
    )
    if limit.assumed() and limit.typ < off < 1:
        # Nobody gave a limit, as of the widths of pulses.
        margin = None
        said += "how much may be was not given ([limits] pulse_error)"
    else:
        said += f"{limit.typ:.0%} is allowed"
    if margin is None or margin < 0:
        said += "; try: " + (
            "peaks that do not fall into other pulses' holds, or a chop by register frames, each channel by itself"
            if pulse.line
            else "a lower hold_frequency, or a faster clock"
        )
    yield Finding(
        "pulse-timing",
        "change of the duty of a hold",
        "register chain",
        None,
        label,
        off,
        None if margin is None else limit.typ,
        "1",
        margin,
        pulse.start,
        "misbehave",
        verdict_of(margin, board.limits.guard_band.typ),
        said,
        source=str(limit.origin),
    )


def _off(pulse: HeldPulse, firing: Firing) -> float:
    """How far a hold's duty may be from what was asked for, as a share of that; jitter moves edges of frames only. [1]"""
    assert pulse.duty is not None
    late = 0.0 if pulse.line else firing.jitter / pulse.period
    return (abs(pulse.duty - pulse.hold.duty) + late) / pulse.hold.duty


def told_of_holds(board: Board, firing: Firing) -> Iterator[str]:
    """What the chop of held pulses comes to, and whether a boost feeds any of them, in plain sentences."""
    if board.boost is not None and not any(c in firing.held.peaks for c in board.boosted):
        yield "no pulse of the bank has a peak: the boost's switch stays open, and the coil rail feeds all of them"
    for chop in firing.held.chops:
        yield (
            f"{chop.frames} register frames, one every {in_units(chop.slot, 's')}, fit into a chop's period of "
            f"{in_units(chop.period, 's')}, for all channels together: its duty is {chop.on} of {chop.frames}, {chop.duty:.1%}, in "
            f"steps of {1 / chop.frames:.1%}"
        )
    for chopped in firing.held.lines:
        line = chopped.line
        yield (
            f"the enable line {line.name} chops channels {write_range(line.channels)} together, with "
            f"{100 * chopped.hold.duty:.3g} % at {in_units(chopped.hold.frequency, 'Hz')}; it stays enabled as long as one of them is in "
            "its peak or is fired without a hold, and gives those that are held full drive meanwhile"
        )
    duties = [p.duty for p in firing.held.pulses if p.duty is not None]
    short = len(firing.held.pulses) - len(duties)
    if duties:
        least, most = f"{min(duties):.1%}", f"{max(duties):.1%}"
        yield f"held pulses are on for {least if least == most else f'{least} to {most}'} of each period"
    if short:
        yield f"{short} held pulse{'s end' if short > 1 else ' ends'} within the first period of the chop"


def assumptions_of_holds(board: Board, firing: Firing) -> tuple[Assumption, ...]:
    """What stands in for hold currents that were not given, of coils that are held."""
    found: dict[Assumption, None] = {}
    for number in sorted({p.channel for p in firing.held.pulses}):
        channel = board.channel(number)
        if channel.coil.hold is None and channel.coil.release is not None:
            amperes = in_units(channel.coil.release.max, "A")
            found[Assumption(f"coil {channel.coil_name}", "hold current", amperes, HELD_BY_RELEASE)] = None
    return tuple(found)
