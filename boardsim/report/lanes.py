"""Lanes: one row per channel with a bar for as long as it is on."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from boardsim.report.drawing import (
    DARK,
    FAILING,
    INK,
    MIDDLE,
    PALE,
    SMALL,
    beside,
    caption,
)
from boardsim.report.lean import Clock, rule
from boardsim.verdict.closeups import Closeup
from boardsim.verdict.findings import Floats

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes

_LINE = 1.3  # distance of two lines of text over the height of their letters
_PIXELS = 700  # across a close-up's panels, about; what is shorter than two of them cannot be told apart
_OUTLINED = 6  # height of lanes from which outlines of neighbours do not run together [pixel]
_MOST_OUTLINES = 20  # pulses of one group; more are outlined together
_OWN, _OTHERS, _STRAY = (DARK, DARK), (PALE, MIDDLE), (FAILING, FAILING)  # fill and edge of a channel's bars


def joined(spans: Floats | None, longest_gap: float) -> list[tuple[float, float]]:
    """On-times (n, 2) with the gaps closed that no picture can show: a chopped hold phase has many thousands. [s]"""
    if spans is None or not len(spans):
        return []
    rows = spans[np.argsort(spans[:, 0], kind="stable")]
    until = np.maximum.accumulate(rows[:, 1])
    begins = np.concatenate([[True], rows[1:, 0] - until[:-1] >= longest_gap])
    ends = np.concatenate([begins[1:], [True]])
    return [(float(a), float(b)) for a, b in zip(rows[begins, 0], until[ends], strict=True)]


class Bar(NamedTuple):
    """A bar in a row of lanes, from and to in the axes' own times, `thick` as a share of the row."""

    row: int
    start: float
    stop: float
    fill: str
    edge: str
    thick: float = 0.68


def lane_bars(axes: Axes, bars: Sequence[Bar], **style: Any) -> None:
    """Bars as one artist; the line around each keeps a pulse in sight that is thinner than a pixel."""
    from matplotlib.collections import PolyCollection

    corners = []
    for bar in bars:
        top, bottom = bar.row - bar.thick / 2, bar.row + bar.thick / 2
        corners.append([(bar.start, top), (bar.stop, top), (bar.stop, bottom), (bar.start, bottom)])
    tones = {"facecolors": [bar.fill for bar in bars], "edgecolors": [bar.edge for bar in bars]}
    axes.add_collection(PolyCollection(corners, **{"linewidth": 0.5, "snap": False, **tones, **style}), autolim=False)


def named_rows(axes: Axes, count: int, always: int = 0) -> range:
    """The rows out of 0, 1, ... from the top down that there is room to name: all, or every nth, `always` among them."""
    axes.set_ylim(count - 0.4, -0.6)
    height = axes.bbox.height / axes.figure.dpi
    step = max(1, math.ceil(SMALL * _LINE / 72 * count / height))
    return range(always % step, count, step)


def who_was_on(axes: Axes, closeup: Closeup, names: dict[int, str], clock: Clock) -> None:
    """When each channel was on, and when it was commanded to be where that is something else.

    Parameters
    ----------
    axes : Axes
        Lean ones.
    closeup : Closeup
    names : dict of channel to str
        The rows, from the top down.
    clock : Clock
    """
    from matplotlib.patches import Patch

    pixel = (closeup.stop - closeup.start) / _PIXELS
    channels = list(names)
    own = set(closeup.who) or set(channels)
    height = axes.bbox.height / len(channels)
    bars: list[Bar] = []
    outlines: list[Bar] = []
    for row, channel in enumerate(channels):
        on, asked = (_inside(spans.get(channel), closeup) for spans in (closeup.on, closeup.asked))
        # The lane in question is drawn over its neighbours where lanes are thin.
        rows = max(1.0, _OUTLINED / height) if closeup.who == (channel,) else 1.0
        different = _different(asked, on, 2 * pixel) if rows * height >= _OUTLINED else []
        outlines += [Bar(row, clock(a), clock(b), "none", INK, 0.86 * rows) for a, b in different]
        thick = (0.4 if different else 0.68) * rows  # leaves the outline in sight
        groups = joined(asked, 2 * pixel)
        for start, stop in joined(on, 2 * pixel):
            stray = not any(a <= stop and start <= b for a, b in groups)
            fill, edge = _STRAY if stray else _OWN if channel in own else _OTHERS
            bars.append(Bar(row, clock(start), clock(stop), fill, edge, thick))
    lane_bars(axes, sorted(bars, key=lambda bar: bar.thick))
    lane_bars(axes, outlines, linewidth=0.9, zorder=2)
    named = named_rows(axes, len(channels), min((row for row, c in enumerate(channels) if c in own), default=0))
    rule(axes, named, [names[channels[row]] for row in named], lines=False)
    used = {(bar.fill, bar.edge) for bar in bars}
    meant = {_OWN: "this channel" if len(own) == 1 else "in question", _OTHERS: "others"} if _OTHERS in used else {}
    if _STRAY in used:
        meant[_STRAY] = "not commanded"
    if outlines:
        meant["none", INK] = "commanded"
    legend: dict[str, Artist] = {word: Patch(facecolor=fill, edgecolor=edge) for (fill, edge), word in meant.items()}
    count = len({bar.row for bar in bars})
    caption(axes, f"Channels on: {count or 'none'}", legend)
    if named.step > 1:
        beside(axes, 0.5, f"one label\nin {named.step}", INK)


def _inside(spans: Floats | None, closeup: Closeup) -> Floats:
    """What of the spans is in view; (n, 2). [s]"""
    return np.clip(spans, closeup.start, closeup.stop) if spans is not None else np.empty((0, 2))


def _different(asked: Floats, on: Floats, slack: float) -> list[tuple[float, float]]:
    """The commanded pulses of a channel that its output did not follow, or that overlap. [s]"""
    did = joined(on, slack)
    found: list[tuple[float, float]] = []
    for start, stop in joined(asked[asked[:, 1] > asked[:, 0]], slack):
        mine = asked[(asked[:, 0] >= start) & (asked[:, 1] <= stop)]
        overlap = bool(np.any(mine[1:, 0] < mine[:-1, 1]))
        if overlap or not any(abs(a - start) <= slack and abs(b - stop) <= slack for a, b in did):
            found += [(float(a), float(b)) for a, b in mine] if len(mine) <= _MOST_OUTLINES else [(start, stop)]
    return found
