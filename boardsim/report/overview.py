"""The overview picture: which channels fire when, what they draw, and what that does to the coil rail."""

from __future__ import annotations

import textwrap
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from boardsim.quantities import in_units
from boardsim.report.drawing import (
    DARK,
    FAILING,
    INK,
    MIDDLE,
    PALE,
    PAPER,
    TEXT,
    badge,
    band,
    caption,
    frame,
    limit_line,
    make_room,
    mark,
    own_look,
    plain_axes,
)
from boardsim.report.files import write_whole
from boardsim.report.lanes import Bar, joined, lane_bars, named_rows
from boardsim.report.wording import plain
from boardsim.verdict.findings import Result, Traces

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_DPI = 120
_WIDTH, _LEFT, _RIGHT, _TOP, _GAP, _BOTTOM = 11.0, 0.85, 1.5, 1.1, 0.5, 0.6  # [inch]
_CURRENTS, _RAIL = 2.0, 2.2  # heights of the lower panels [inch]
_LANE, _LEAST_LANES, _MOST_LANES = 0.16, 0.4, 5.0  # height of a lane; of all lanes [inch]
_SLICES = 2000  # of the whole time; a gap shorter than one is not drawn


def draw_overview(result: Result, path: Path) -> None:
    """Draw the overview of a result as a PNG, whole or not at all.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    with own_look():
        figure = overview_figure(result)
        write_whole(path, lambda beside: figure.savefig(beside, format="png", dpi=_DPI))


def overview_figure(result: Result) -> Figure:
    """The overview of a result, as a figure that can be looked at or written."""
    # matplotlib takes 1.4 s to import: only where a picture is drawn
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    traces = result.traces
    channels = sorted({*traces.labels, *traces.on}) if traces else []
    lanes = min(max(_LANE * len(channels), _LEAST_LANES), _MOST_LANES)
    height = _TOP + lanes + _CURRENTS + _RAIL + 2 * _GAP + _BOTTOM if traces else 2.2
    figure = Figure(figsize=(_WIDTH, height), facecolor=PAPER, dpi=_DPI)
    FigureCanvasAgg(figure)
    _heading(figure, result, height)
    if traces is None:
        figure.text(_LEFT / _WIDTH, 0.3, "No waveforms: the run did not deliver any.", color=INK, fontsize=11)
        return figure

    end = max(result.duration, float(traces.rail.edges[-1]))
    unit, scale = ("s", 1.0) if end >= 1 else ("ms", 1e3) if end >= 1e-3 else ("us", 1e6)
    boxes = []
    bottom = height - _TOP
    for panel in (lanes, _CURRENTS, _RAIL):
        bottom -= panel
        boxes.append((_LEFT / _WIDTH, bottom / height, 1 - (_LEFT + _RIGHT) / _WIDTH, panel / height))
        bottom -= _GAP
    panels = [figure.add_axes(box) for box in boxes]
    for axes in panels:
        plain_axes(axes, end * scale)
    _lanes(panels[0], result, traces, channels, scale)
    _currents(panels[1], traces, scale)
    _coil_rail(panels[2], traces, scale)
    panels[2].tick_params(axis="x", labelbottom=True)
    panels[2].set_xlabel(f"time [{unit}]", fontsize=TEXT, color=INK)
    make_room(figure, panels)
    return figure


def _heading(figure: Figure, result: Result, height: float) -> None:
    # The badge stands on the right; the title gets the rest, on up to two lines.
    names = plain(f"{result.board} - pattern {result.pattern}")
    title = textwrap.wrap(names, 70, max_lines=2, placeholder=" ...")
    left = 0.25 / _WIDTH
    figure.text(
        left,
        1 - 0.12 / height,
        "\n".join(title),
        va="top",
        fontsize=14 if len(title) == 1 else 11.5,
        fontweight="bold",
        color=INK,
        parse_math=False,
    )
    corner = f"waveforms of the corner: {result.traces.corner}" if result.traces else ""
    figure.text(left, 1 - 0.58 / height, plain(corner), va="center", fontsize=9, color=INK, parse_math=False)
    badge(figure, result.verdict, f"verdict: {result.verdict}", 1 - 0.3 / _WIDTH, 1 - 0.32 / height, 12)


def _lanes(axes: Axes, result: Result, traces: Traces, channels: list[int], scale: float) -> None:
    from matplotlib.patches import Patch

    failing = {f.channel for f in result.findings if f.verdict == "fail"} & set(channels)
    longest_gap = float(axes.get_xlim()[1]) / scale / _SLICES
    tones = {channel: FAILING if channel in failing else DARK for channel in channels}
    bars = [
        Bar(row, start * scale, stop * scale, tones[channel], tones[channel])
        for row, channel in enumerate(channels)
        for start, stop in joined(traces.on.get(channel), longest_gap)
    ]
    lane_bars(axes, bars)
    rows = named_rows(axes, len(channels))
    names = [plain(traces.labels.get(channels[row], f"channel {channels[row]}")) for row in rows]
    axes.set_yticks(list(rows), names, parse_math=False)
    axes.tick_params(axis="y", length=0 if rows.step == 1 else 2)
    axes.grid(False, axis="y")
    firing = sum(len(traces.on.get(n, ())) > 0 for n in channels)
    caption(
        axes,
        f"Channels on: {firing} of {len(channels)} fire" + (f" (one label in {rows.step})" if rows.step > 1 else ""),
        {"on": Patch(color=DARK), "on, and fails a check in some corner": Patch(color=FAILING)} if failing else {},
    )


def _currents(axes: Axes, traces: Traces, scale: float) -> None:
    from matplotlib.patches import Patch

    total, supply = traces.total, traces.supply
    band(axes, total, scale, low=np.zeros_like(total.low), facecolor=PALE, linewidth=0, zorder=1.5)
    band(axes, total, scale, facecolor=MIDDLE, edgecolor=MIDDLE, linewidth=0.9, zorder=2)
    band(axes, supply, scale, facecolor=DARK, edgecolor=DARK, linewidth=1.3, zorder=3)
    peak = float(np.max(total.high, initial=0.0))
    lowest = float(min(np.min(total.low, initial=0.0), np.min(supply.low, initial=0.0), 0.0))
    highest = max(peak, float(np.max(supply.high, initial=0.0)))
    frame(axes, lowest, highest, traces.supply_limit, above=0.08, below=0.0)
    limit_line(axes, traces.supply_limit, "supply's ceiling", "A")
    caption(
        axes,
        "Currents [A]",
        {
            f"sum of the coil currents, highest {in_units(peak, 'A')}": Patch(
                facecolor=PALE, edgecolor=MIDDLE, linewidth=1.2
            ),
            "current out of the supply": Patch(color=DARK),
        },
    )


def _coil_rail(axes: Axes, traces: Traces, scale: float) -> None:
    rail = traces.rail
    band(axes, rail, scale, facecolor=DARK, edgecolor=DARK, linewidth=1.0, zorder=3)
    # The strip above the waveform is kept free for the words at the lowest point: a rail sags, so that the
    # way from there down to the point is free too.
    frame(axes, float(np.min(rail.low)), float(np.max(rail.high)), traces.rail_limit, above=0.26, below=0.08)
    limit_line(axes, traces.rail_limit, "brown-out limit", "V")
    caption(axes, "Coil rail at the board [V]", {})

    slot = int(np.argmin(rail.low))
    middle = float(rail.edges[slot] + rail.edges[slot + 1]) / 2
    v, t = traces.lowest or (float(rail.low[slot]), middle)
    mark(axes, t * scale, v, f"lowest: {in_units(v, 'V', 4)} at {in_units(t, 's', 4)}", above=True)
