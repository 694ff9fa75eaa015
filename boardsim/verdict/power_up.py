"""What flows before the first enabled frame: read from the waveforms of a boot, and held against what matters."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from boardsim.board.reader import Board, Channel
from boardsim.circuit.boot import Boot
from boardsim.circuit.deck import Deck
from boardsim.engine.waves import Waves
from boardsim.errors import NoConvergence
from boardsim.parts.base import Assumption, Corner
from boardsim.parts.clocked import level_points
from boardsim.quantities import in_units
from boardsim.verdict.findings import Envelope, Finding, Floats, Reading, verdict_of
from boardsim.verdict.readings import Key, SignalTable, our_name
from boardsim.verdict.release import Crossings, from_time
from boardsim.verdict.watch import Extremes, Integrals, Slices

CHECK = "uncommanded"
SLICES = 1600  # across a picture
_AT_REST = (
    0.05  # [V], within which a rail that is off has to begin; the supply's rounded bend alone leaves some millivolts
)
_RELEASE_SHARE = 0.1  # of the settled current: where no release current was given
_SHOWN = {
    "v_rail": "coil rail",
    "v_logic": "logic rail",
    "v_enable": "output enable",
    "v_clear": "clear",
    "enabled": "outputs enabled",
    "i_total": "all coils together",
}


@dataclass(frozen=True)
class Uncommanded:
    """What one channel carried while nothing had been commanded.

    Attributes
    ----------
    peak, at : float
        Highest current [A], and when [s].
    energy : float
        That the coil took. [J]
    last : float
        Current when the first enabled frame came. [A]
    """

    peak: float
    at: float
    energy: float
    last: float


@dataclass(frozen=True)
class BootReading:
    """One boot in one corner.

    Attributes
    ----------
    corner : str
    channels : mapping of channel to Uncommanded
    cleared_until : float or None
        Since when clear is surely high; None where it is tied, infinite where it never is. [s]
    waves : mapping of quantity to Envelope
    """

    corner: str
    channels: Mapping[int, Uncommanded]
    cleared_until: float | None
    waves: Mapping[str, Envelope]


class BootWatch:
    """Takes the readings of a boot from its runs, and keeps the last of each corner.

    Attributes
    ----------
    found : dict of corner name to BootReading
    """

    def __init__(self, board: Board, boot: Boot):
        self.board, self.boot = board, boot
        self.found: dict[str, BootReading] = {}

    def __call__(self, waves: Waves, deck: Deck) -> tuple[Reading, ...]:
        """Read one run.

        Raises
        ------
        NoConvergence
            If a rail that is off does not begin at 0 V.
        """
        taken = take_boot(waves, deck, self.board, self.boot)
        self.found[deck.corner.name] = taken
        found = []
        for c in self.board.channels:
            mine = taken.channels[c.number]
            full = settled(self.board, c, deck.corner)
            held = 0.5 * deck.corner.take(c.coil.inductance, "inductance") * full**2
            found.append(Reading("highest current before the first frame", c.label, mine.peak, "A", full))
            found.append(Reading("energy before the first frame", c.label, mine.energy, "J", held))
            found.append(Reading("current at the first frame", c.label, mine.last, "A", full))
        if taken.cleared_until is not None and np.isfinite(taken.cleared_until):
            found.append(Reading("end of clear", "chain", taken.cleared_until, "s", taken.cleared_until))
        return tuple(found)


def settled(board: Board, channel: Channel, corner: Corner) -> float:
    """The coil's current once it has settled, from the supply's voltage and the winding alone. [A]"""
    return float(corner.take(board.supply.voltage, "supply") / channel.coil.winding(corner, board.around))


def take_boot(waves: Waves, deck: Deck, board: Board, boot: Boot) -> BootReading:
    """Read a boot's waveforms.

    Raises
    ------
    NoConvergence
        If a rail that is off does not begin at 0 V: the search for the operating point went wrong.

    Notes
    -----
    From switch-on the coil's own current counts. After a reset the switch's: what a coil still holds from its last pulse runs
    down through its clamp, whatever the outputs do.
    """
    watch = _Watch(deck, board, boot)
    table = SignalTable(deck, tuple(our_name(name) for name in waves.names), watch.keys)
    for block in waves.blocks():
        watch.feed(block[:, 0], table.values(block))
    return watch.reading()


class _Watch:
    """Everything that is read of one boot, block by block."""

    def __init__(self, deck: Deck, board: Board, boot: Boot):
        self.deck, self.boot = deck, boot
        self.numbers = [c.number for c in board.channels]
        through = "i_d" if boot.reset else "i_coil"
        shown = [name for name in _SHOWN if (None, name) in deck.signals]
        self.keys: tuple[Key, ...] = (
            *((c, through) for c in self.numbers),
            *((c, "v_coil") for c in self.numbers),
            *((None, name) for name in shown),
        )
        n = len(self.numbers)
        self.shown = {name: 2 * n + k for k, name in enumerate(shown)}
        self.peak, self.taken = Extremes(n), Integrals(n)
        self.last = np.zeros(n)
        self.slices = Slices(np.linspace(0.0, boot.duration, SLICES + 1), len(shown))
        self.rails, self.highs = np.array(level_points(board.chain.register_, "high")).T
        corner = deck.corner
        self.full = {"v_rail": corner.take(board.supply.voltage, "supply"), "v_logic": board.logic.level(corner)}
        self.clear = Crossings(0.0) if "v_clear" in self.shown else None

    def feed(self, t: Floats, y: Floats) -> None:
        """Take a stretch of waveforms.

        Parameters
        ----------
        t : (m,) array
            [s]
        y : (n, m) array
            Rows in the order of `keys`.

        Raises
        ------
        NoConvergence
            If a rail that is off does not begin at 0 V.
        """
        if t[0] == 0.0 and not self.boot.reset:
            for name, full in self.full.items():
                begun = float(y[self.shown[name], 0])
                if abs(begun) > _AT_REST * full:
                    raise NoConvergence(f"ngspice began with a {_SHOWN[name]} of {begun:.4g} V that is still off")
        self.slices.feed(t, y[list(self.shown.values())])
        if self.clear is not None:
            bound = np.interp(y[self.shown["v_logic"]], self.rails, self.highs)
            # Without a rail nothing is high, whatever the line's rounding errors say.
            over = np.where(bound > _AT_REST * self.full["v_logic"], y[self.shown["v_clear"]] - bound, -1.0)
            self.clear.feed(t, over)
        if (part := between(self.boot.since, self.boot.until, t, y)) is not None:
            n = len(self.numbers)
            current, volts = part[1][:n], part[1][n : 2 * n]
            self.peak.feed(part[0], np.abs(current))
            self.taken.feed(part[0], current * volts)
            self.last = np.abs(current[:, -1])

    def reading(self) -> BootReading:
        """What was found once every block was fed."""
        until = None
        if self.clear is not None:
            until = self.clear.first if self.clear.first is not None else np.inf
        return BootReading(
            self.deck.corner.name,
            {
                c: Uncommanded(
                    float(self.peak.high[k]),
                    float(self.peak.high_at[k]),
                    float(self.taken.total[k]),
                    float(self.last[k]),
                )
                for k, c in enumerate(self.numbers)
            },
            until,
            {
                name: Envelope(
                    _SHOWN[name],
                    self.deck.units[None, name],
                    self.slices.edges,
                    self.slices.low[k],
                    self.slices.high[k],
                )
                for k, name in enumerate(self.shown)
            },
        )


def between(start: float, stop: float, t: Floats, rows: Floats) -> tuple[Floats, Floats] | None:
    """A stretch of signals from one time to another; None where it has no part of it.

    Parameters
    ----------
    start, stop : float
        [s]
    t : (m,) array
        [s]
    rows : (n, m) array

    Returns
    -------
    tuple of (k,) and (n, k) arrays, or None
        Ends that lie inside are interpolated.
    """
    part = from_time(start, t, rows)
    if part is None or part[0][0] >= stop:
        return None
    t, rows = part
    k = int(np.searchsorted(t, stop, side="left"))
    if k == len(t):
        return t, rows
    at_stop = rows[:, k - 1] + (stop - t[k - 1]) / (t[k] - t[k - 1]) * (rows[:, k] - rows[:, k - 1])
    return np.append(t[:k], stop), np.column_stack([rows[:, :k], at_stop])


def harmless(board: Board, channel: Channel, corner: Corner) -> float:
    """The uncommanded current from which on it counts: a share of the current that the coil lets go at. [A]

    Notes
    -----
    A coil that carries less than its release current lets go of what it holds, and cannot pick it up either. Where no
    release current was given a tenth of the settled current stands for it (`release_assumed` lists it).
    """
    release = channel.coil.release
    amperes = release.min if release is not None else _RELEASE_SHARE * settled(board, channel, corner)
    return float(board.power_up.harmless.typ * amperes)


def release_assumed(board: Board) -> Iterator[Assumption]:
    """What stands for release currents that were not given."""
    for channel in board.channels:
        if channel.coil.release is None:
            why = "not given; of a coil that lets go late, from memory"
            yield Assumption(f"coil {channel.coil_name}", "release current", "10 % of the settled current", why)


def judge_boot(board: Board, boot: Boot, found: BootReading, corner: Corner, nominal: tuple[str, ...]) -> list[Finding]:
    """Every channel's current before the first enabled frame against what counts, and the end of clear against the frame."""
    findings = [_judge_channel(board, boot, c, found, corner, nominal) for c in board.channels]
    if found.cleared_until is not None and not boot.reset:
        findings.append(_judge_clear(board, boot, found, nominal))
    return findings


def quantity_of(boot: Boot) -> str:
    """What a boot's current is called."""
    return f"current {'after a reset' if boot.reset else 'before the first frame'}, {boot.name}"


def _judge_channel(
    board: Board, boot: Boot, c: Channel, found: BootReading, corner: Corner, nominal: tuple[str, ...]
) -> Finding:
    mine = found.channels[c.number]
    limit = harmless(board, c, corner)
    margin = (limit - mine.peak) / limit
    lasts = mine.last > limit
    given = c.coil.release
    share = f"{board.power_up.harmless.typ:.0%} of {c.coil_name}'s "
    share += f"release current{'' if given is not None else ', taken as 10 % of its settled one'}"
    what = "after a reset its switch still carries" if boot.reset else "before the first enabled frame it carries"
    said = f"{c.label}: {what} up to {in_units(mine.peak, 'A')} ({boot.name}); {in_units(limit, 'A')} count ({share})"
    if margin < 0:
        said = f"{c.label}: {what} {in_units(mine.peak, 'A')} at {in_units(mine.at, 's', 4)} ({boot.name}) and takes "
        said += f"{in_units(mine.energy, 'J')}; {in_units(limit, 'A')} count ({share}); "
        said += (
            f"only the first enabled frame at {in_units(boot.until, 's', 4)} ends it, and a controller that is being "
            "programmed or held in reset sends none"
            if lasts
            else "it ends by itself"
        )
        said += f"; try: {_remedy(board, c)}"
    return Finding(
        CHECK,
        quantity_of(boot),
        c.coil_name,
        c.number,
        c.label,
        mine.peak,
        limit,
        "A",
        margin,
        mine.at,
        "destroy" if lasts else "misbehave",
        verdict_of(margin, board.limits.guard_band.typ),
        said,
        found.corner,
        str(given.origin if given is not None else board.power_up.harmless.origin),
        nominal_only=nominal,
        assumed=tuple(_hangs_on(board)),
        scale=settled(board, c, corner),
        probes=("i_d" if boot.reset else "i_coil",),
    )


def _hangs_on(board: Board) -> Iterator[str]:
    """Assumed numbers that the current before the first frame hangs on."""
    table = board.power_up
    for name, field in (("rails' order", table.coils_at), ("rails' rise", table.coils_rise)):
        if field.assumed():
            yield name
    if table.first_frame.assumed():
        yield "time of the first frame"
    if board.chain.output_enable is None:
        yield "output enable tied low"


def _remedy(board: Board, c: Channel) -> str:
    """What usually keeps a channel off until the first frame."""
    line = board.chain.output_enable
    if line is None or line.rests == "low" or line.rests is None:
        return "hold output enable high with a pull_up, and let the firmware pull it low after its first frame"
    if line.capacitance is not None:
        return "a smaller capacitor or pull-up at output enable: it lags behind the logic rail"
    if not c.switch.held_off():
        return "a pull-down at its gate, which floats while the outputs are not enabled"
    return "a smaller pull-down at its gate, and the coil rail after the logic rail"


def _judge_clear(board: Board, boot: Boot, found: BootReading, nominal: tuple[str, ...]) -> Finding:
    """Clear must have ended before anything is shifted in: what comes earlier is lost."""
    assert found.cleared_until is not None
    first = boot.frames[0][0]
    until = found.cleared_until
    never = not np.isfinite(until)
    value = boot.duration if never else until
    margin = (first - value) / first
    when = "never surely high" if never else f"surely high from {in_units(until, 's', 4)} on"
    said = f"chain: clear is {when}; "
    said += f"the first register frame starts at {in_units(first, 's', 4)}"
    said += "; what is shifted in before is lost; try: a smaller resistor or capacitor at clear" if margin < 0 else ""
    return Finding(
        "clear",
        f"end of clear before the first frame, {boot.name}",
        "chain",
        None,
        "chain",
        value,
        first,
        "s",
        margin,
        value,
        "misbehave",
        verdict_of(margin, board.limits.guard_band.typ),
        said,
        found.corner,
        str(board.power_up.first_frame.origin),
        nominal_only=nominal,
        assumed=("time of the first frame",) if board.power_up.first_frame.assumed() else (),
    )
