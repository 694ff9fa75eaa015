"""The lines between controller and registers as they were recorded, and what the registers make of them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from boardsim.firing.registers import ChainState

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

LINES = ("data", "clock", "latch", "enable", "clear")


@dataclass(frozen=True)
class Line:
    """One line at the registers' pins.

    Attributes
    ----------
    times : (n,) array
        When it takes each level, rising. [s]
    levels : (n,) array
        High or low; before the first it is unknown.
    """

    times: Floats
    levels: NDArray[np.bool_]

    def edges(self, rising: bool) -> Floats:
        """When it rises, or falls; the first level is no edge. [s]"""
        found: Floats = self.times[1:][self.levels[1:] == rising]
        return found

    def before(self, times: Floats) -> NDArray[np.int8]:
        """Its levels just before some times [s]: 0, 1, or -1 where it is unknown; (n,)."""
        place = np.searchsorted(self.times, times, side="left") - 1
        levels = np.concatenate([[-1], self.levels.astype(np.int8)])
        found: NDArray[np.int8] = levels[place + 1].astype(np.int8)
        return found


@dataclass(frozen=True)
class Intervals:
    """How long something took each time.

    Attributes
    ----------
    at, lasting : (n,) array
        When it ended (a hold time: when it began), and its length. [s]
    """

    at: Floats
    lasting: Floats

    def within(self, start: float, stop: float) -> Intervals:
        """Those that ended between two times, told from `start` on, to the picosecond. [s]"""
        keep = (self.at >= start) & (self.at <= stop)
        return Intervals(np.round(self.at[keep] - start, 12), np.round(self.lasting[keep], 12))


@dataclass(frozen=True)
class Frames:
    """Every latch edge.

    Attributes
    ----------
    latched, begun : (n,) array
        When, and when the first clock edge after the one before was; the same where there was none. [s]
    bits : (n,) array
        Clock edges since the one before.
    cleared : (n,) array
        Whether the shift stages were cleared in between, so that fewer bits leave nothing undefined.
    """

    latched: Floats
    begun: Floats
    bits: Ints
    cleared: NDArray[np.bool_]

    def within(self, start: float, stop: float) -> Frames:
        """Those between two times, told from `start` on, to the picosecond. [s]"""
        keep = (self.latched >= start) & (self.latched <= stop)
        latched, begun = (np.round(times[keep] - start, 12) for times in (self.latched, self.begun))
        return Frames(latched, begun, self.bits[keep], self.cleared[keep])


@dataclass(frozen=True)
class Recorded:
    """What a capture says of the bus, in the stretch that was looked at.

    Attributes
    ----------
    capture : Path
        The value change dump.
    origin : float
        The time in the capture at which the run begins. [s]
    resolution : float
        By how much each of its times may be off. [s]
    sampled : bool
        Whether the resolution was given; else it is the step of the dump's times.
    mapped : tuple of str
        Lines that the capture has.
    frames : Frames
    intervals : mapping
        How long things took, by their names in `measured`.
    unfinished : tuple of int
        Channels that are on where the capture ends.
    disabled : (n, 2) array
        From when to when the outputs were disabled, counted from the run's begin. [s]
    """

    capture: Path
    origin: float
    resolution: float
    sampled: bool
    mapped: tuple[str, ...]
    frames: Frames
    intervals: Mapping[str, Intervals]
    unfinished: tuple[int, ...]
    disabled: Floats


def measured(bus: Mapping[str, Line]) -> dict[str, Intervals]:
    """How long the things took that a register needs to last long enough.

    Notes
    -----
    "setup": from the last change of the data to the rising clock; "hold": from there to the next change; "latch setup":
    from the last rising clock to the rising latch. A change at the very time of the edge comes after it: it leaves the
    set-up alone and makes the hold time zero. "clock high", "clock low", "latch high", "latch low" and "clear low" are
    widths, "clock period" lies between two rising edges.
    """
    data, clock, latch = bus["data"], bus["clock"], bus["latch"]
    rises, latched = clock.edges(True), latch.edges(True)
    changes = data.times[1:]
    found = {
        "setup": _since(changes, rises, "left"),
        "hold": _until(changes, rises),
        "latch setup": _since(rises, latched, "right"),
        "clock period": Intervals(rises[1:], np.diff(rises)),
        "clock high": _width(clock, True),
        "clock low": _width(clock, False),
        "latch high": _width(latch, True),
        "latch low": _width(latch, False),
    }
    if "clear" in bus:
        found["clear low"] = _width(bus["clear"], False)
    return found


def _since(earlier: Floats, later: Floats, side: str) -> Intervals:
    """From the last of some times to each of others; "right" lets the two be equal."""
    place = np.searchsorted(earlier, later, side="right" if side == "right" else "left") - 1
    keep = place >= 0
    return Intervals(later[keep], later[keep] - earlier[place[keep]])


def _until(later: Floats, earlier: Floats) -> Intervals:
    """From each of some times to the next of others, or to one at the same time."""
    place = np.searchsorted(later, earlier, side="left")
    keep = place < len(later)
    return Intervals(earlier[keep], later[place[keep]] - earlier[keep])


def _width(line: Line, high: bool) -> Intervals:
    """Every stretch of a level that begins and ends with an edge."""
    keep = line.levels[1:-1] == high
    return Intervals(line.times[2:][keep], np.diff(line.times[1:])[keep])


def disabled_in(enable: Line | None, start: float, stop: float) -> Floats:
    """From when to when the outputs are disabled: enable is high, or not known yet.

    Parameters
    ----------
    enable : Line or None
        Always enabled if absent.
    start, stop : float
        Stretch to look at. [s]

    Returns
    -------
    (n, 2) array
        Counted from `start`. [s]
    """
    if enable is None:
        return np.zeros((0, 2))
    begins = np.concatenate([[-np.inf], enable.times])
    ends = np.concatenate([enable.times, [np.inf]])
    off = np.concatenate([[True], enable.levels])
    spans = np.column_stack([np.maximum(begins, start), np.minimum(ends, stop)])[off] - start
    found: Floats = np.round(spans[spans[:, 1] > spans[:, 0]], 12)
    return found


@dataclass(frozen=True)
class Replayed:
    """What the chain's outputs did.

    Attributes
    ----------
    words : tuple of (time, word)
        All outputs from each time on; bit k is output k. [s]
    frames : Frames
    trailing : (clocks, time)
        Clock edges after the last latch edge, and when the first of them was. [s]
    """

    words: tuple[tuple[float, int], ...]
    frames: Frames
    trailing: tuple[int, float]


_LATCH, _CLOCK, _CLEAR, _ENABLE = range(4)  # the order in which edges of one time count


def replay(bus: Mapping[str, Line], width: int, off: int) -> Replayed:
    """Give recorded lines to a chain of registers.

    Parameters
    ----------
    bus : mapping
        The lines by name; "enable" and "clear" may be absent: then the outputs are enabled, and nothing is cleared.
    width : int
        Outputs of the chain.
    off : int
        Word that turns every channel off.

    Notes
    -----
    As in the function table of the 74HC595 (NXP 74HC595; 74HCT595 rev. 6, table 3): a rising clock moves every bit on and
    takes in the data as it was just before; a rising latch copies the shift stages to the outputs, as they were just
    before where both rise together; clear, while it is low, empties the shift stages and leaves the outputs alone;
    enable, while it is high, turns the outputs off. Until the first latch edge the storage is what the supply's rise
    left there; it is taken as `off`, and so are bits that were never shifted in. While enable is high, or not yet known,
    the outputs let go, and that is taken as `off` too: true of switches that something else holds off, which is judged
    elsewhere.
    """
    latches, clocks = bus["latch"].edges(True), bus["clock"].edges(True)
    bits = bus["data"].before(clocks)
    clear, enable = bus.get("clear"), bus.get("enable")
    parts: list[tuple[Floats, int, NDArray[np.int8]]] = [
        (latches, _LATCH, np.zeros(len(latches), np.int8)),
        (clocks, _CLOCK, bits),
    ]
    for line, kind in ((clear, _CLEAR), (enable, _ENABLE)):
        if line is not None:
            parts.append((line.times, kind, line.levels.astype(np.int8)))
    times = np.concatenate([p[0] for p in parts])
    kinds = np.concatenate([np.full(len(p[0]), p[1]) for p in parts])
    values = np.concatenate([p[2] for p in parts])
    order = np.lexsort((kinds, times))
    return _run(
        ChainState(width, off, off),
        off,
        enable is None,
        times[order].tolist(),
        kinds[order].tolist(),
        values[order].tolist(),
    )


def _run(
    state: ChainState, off: int, enabled: bool, times: Sequence[float], kinds: Sequence[int], values: Sequence[int]
) -> Replayed:
    clearing = cleared = False
    shown, words = off, [(0.0, off)]
    begun: float | None = None
    count = 0
    rows: list[tuple[float, float, int, bool]] = []
    for t, kind, value in zip(times, kinds, values, strict=True):
        if kind == _CLOCK:
            begun = t if begun is None else begun
            count += 1
            if not clearing:
                state = state.clock(max(value, 0))
            continue
        if kind == _LATCH:
            state = state.latch()
            rows.append((t, t if begun is None else begun, count, cleared))
            begun, count, cleared = None, 0, clearing
        elif kind == _CLEAR:
            clearing = value == 0
            if clearing:
                state = ChainState(state.width, 0, state.storage)
                cleared = True
        else:
            enabled = value == 0
        now = state.storage if enabled else off
        if now != shown:
            words.append((t, now))
            shown = now
    columns = np.array(rows, dtype=np.float64).reshape(-1, 4)
    frames = Frames(columns[:, 0], columns[:, 1], columns[:, 2].astype(np.int64), columns[:, 3] > 0)
    return Replayed(tuple(words), frames, (count, begun or 0.0))
