"""The stroke's picture: time to arrive, speed and energy of the blow over the width of the pulse, a curve for each corner."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from boardsim.quantities import in_units
from boardsim.report.drawing import (
    DARK,
    INK,
    MIDDLE,
    PALE,
    PAPER,
    SMALL,
    TEXT,
    WARNING,
    badge,
    beside,
    caption,
    fitted,
    make_room,
    own_look,
    plain_axes,
)
from boardsim.report.files import write_whole
from boardsim.report.wording import plain
from boardsim.verdict.findings import Floats, Result
from boardsim.verdict.strokes_study import StrokePoint, StrokeRow, StrokeStudy

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

MOST_ROWS = 3  # channels side by side; more stand in the table
_DPI = 120
_LEFT, _RIGHT, _GAP, _BOTTOM = 0.85, 1.75, 0.5, 0.6  # [inch]
_ALONE, _SEVERAL = 8.4, 4.4  # width of the panels of one channel; of each of several [inch]
_TOP, _LINE, _STRIP, _PANEL = (
    0.62,
    0.165,
    0.42,
    2.0,
)  # title, a line of words, names above the panels, each panel [inch]
_ANSWER, _MOST_LINES = 9.5, 5
_DASHES = (0, (6, 2.5))
_STYLES = ((DARK, "-"), (DARK, (0, (5, 1.5))), (MIDDLE, "-"), (MIDDLE, (0, (5, 1.5))), (INK, (0, (1, 1))), (INK, "-"))
_SAME, _NEAR = 0.035, 0.08  # of a panel's height: curves that end closer share a number; numbers keep this distance


def draw_stroke(result: Result, path: Path) -> None:
    """Draw the picture of a result whose study is a `StrokeStudy` as a PNG, whole or not at all.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    with own_look():
        figure = stroke_figure(result)
        write_whole(path, lambda beside: figure.savefig(beside, format="png", dpi=_DPI))


def stroke_figure(result: Result) -> Figure:
    """The picture of a result whose study is a `StrokeStudy`, as a figure that can be looked at or written.

    Raises
    ------
    TypeError
        If the result holds another study.
    """
    # matplotlib takes 1.4 s to import: only where a picture is drawn
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    study = result.study
    if not isinstance(study, StrokeStudy):
        raise TypeError("this picture is drawn from a stroke study only")
    rows = study.rows[:MOST_ROWS]
    wide = _ALONE if len(rows) == 1 else _SEVERAL
    width = len(rows) * (_LEFT + wide + _RIGHT)
    figure = Figure(figsize=(width, 1.0), facecolor=PAPER, dpi=_DPI)
    FigureCanvasAgg(figure)
    answers = [line for row in rows for line in _answer(figure, result, row, width)]
    corners = _corners(figure, study, rows, width)
    top = _TOP + len(answers) * _LINE + _STRIP + (_LINE if any(row.asked is not None for row in rows) else 0.0)
    height = top + 3 * _PANEL + 2 * _GAP + _BOTTOM + len(corners) * _LINE + 0.1
    figure.set_size_inches(width, height)
    _heading(figure, result, rows, answers, (width, height))
    for k, row in enumerate(rows):
        panels, bottom = [], height - top
        for _ in range(3):
            bottom -= _PANEL
            left = k * (_LEFT + wide + _RIGHT) + _LEFT
            panels.append(figure.add_axes((left / width, bottom / height, wide / width, _PANEL / height)))
            bottom -= _GAP
        _channel(panels, row, figure)
    small = 0.1 + (len(corners) - 0.2) * _LINE
    figure.text(0.25 / width, small / height, "\n".join(corners), va="top", fontsize=TEXT, color=INK, parse_math=False)
    return figure


def _answer(figure: Figure, result: Result, row: StrokeRow, width: float) -> list[str]:
    said = next((f.sentence for f in result.findings if f.check == "stroke-width" and f.label == row.label), "")
    return fitted(figure, plain(said[:1].upper() + said[1:]), width - 0.55, _MOST_LINES, _ANSWER)


def _corners(figure: Figure, study: StrokeStudy, rows: Sequence[StrokeRow], width: float) -> list[str]:
    """What the numbers beside the curves stand for, and what is not drawn."""
    named = "; ".join(f"{k} {name}" for k, name in enumerate(rows[0].points, 1))
    more = (
        f" {len(study.rows) - len(rows)} more channels stand in findings.json." if len(study.rows) > len(rows) else ""
    )
    said = f"Corners: {plain(named)}. A ring: the shortest pulse that still brings it to its stop.{more}"
    return fitted(figure, said, width - 0.5, 4, TEXT)


def _heading(
    figure: Figure, result: Result, rows: Sequence[StrokeRow], answers: Sequence[str], size: tuple[float, float]
) -> None:
    width, height = size
    what = rows[0].label if len(rows) == 1 else f"{len(rows)} channels"
    title = plain(f"{result.board} - {what} fired with ever wider pulses")
    title = "\n".join(fitted(figure, title, width - 2.75, 1, 14, "bold"))
    left = 0.25 / width
    figure.text(left, 1 - 0.12 / height, title, va="top", fontsize=14, fontweight="bold", color=INK, parse_math=False)
    figure.text(left, 1 - 0.52 / height, "\n".join(answers), va="top", fontsize=_ANSWER, color=INK, parse_math=False)
    badge(figure, result.verdict, f"verdict: {result.verdict}", 1 - 0.3 / width, 1 - 0.27 / height, 12)


def _channel(panels: Sequence[Axes], row: StrokeRow, figure: Figure) -> None:
    """The three panels of one channel."""
    widths = [w for w in row.widths if w <= row.shown]
    span = (widths[-1] - widths[0]) or widths[0]
    start, end = max(widths[0] - 0.03 * span, 0.0), widths[-1] + 0.03 * span
    unit, scale = ("s", 1.0) if end >= 1 else ("ms", 1e3) if end >= 1e-3 else ("us", 1e6)
    for axes in panels:
        plain_axes(axes, end * scale, start * scale)
        _works(axes, row, scale)
    _times(panels[0], row, unit, scale)
    _speeds(panels[1], row, scale)
    _blows(panels[2], row, scale)
    panels[2].tick_params(axis="x", labelbottom=True)
    panels[2].set_xlabel(f"{plain(row.label)}: width of the pulse [{unit}]", fontsize=TEXT, color=INK, parse_math=False)
    make_room(figure, list(panels))
    _names(panels[0], row, scale)


def _works(axes: Axes, row: StrokeRow, scale: float) -> None:
    """Widths that work in every corner, as a pale ground; and from where on a longer pulse changes nothing, dotted."""
    if row.stretch is not None:
        first, last = row.stretch
        axes.axvspan(first * scale, min(last, row.shown) * scale, facecolor=PALE, alpha=0.55, linewidth=0, zorder=0.5)
    for at in (row.settled, row.asked):
        if at is not None and at <= row.shown:
            axes.axvline(at * scale, color=INK, linewidth=1.1, linestyle=(0, (1, 2)), zorder=2)


def _names(axes: Axes, row: StrokeRow, scale: float) -> None:
    """What the pale ground and the dotted lines mean, in two lines above the panels."""
    low, high = axes.get_xlim()
    inch = axes.get_window_extent().height / axes.figure.dpi
    named = [("no width works in every corner", low, 0.46, "bold")]
    if row.stretch is not None:
        first, last = row.stretch
        until = "on" if last == row.widths[-1] else f"to {in_units(last, 's')}"
        named = [(f"works in every corner from {in_units(first, 's')} {until}", first * scale, 0.46, "bold")]
    if row.settled is not None and row.settled <= row.shown:
        named.append((f"no harder from {in_units(row.settled, 's')} on", row.settled * scale, 0.31, "normal"))
    if row.asked is not None and row.asked <= row.shown:
        named.append((f"asked for: {in_units(row.asked, 's')}", row.asked * scale, 0.61, "normal"))
    for words, x, above, weight in named:
        across = (x - low) / (high - low)
        side = "left" if across < 0.7 else "right"
        axes.text(
            across,
            1 + above / inch,
            words,
            transform=axes.transAxes,
            ha=side,
            va="center",
            fontsize=TEXT,
            fontweight=weight,
            color=INK,
        )


def _curves(axes: Axes, row: StrokeRow, scale: float, values: Sequence[Sequence[float | None]], top: float) -> None:
    """A curve for each corner from where its pulses first bring it to its stop, with its number at its end."""
    ends: list[tuple[float, int]] = []
    axes.set_ylim(0.0, top)
    for k, (points, mine) in enumerate(zip(row.points.values(), values, strict=True)):
        x = np.array([p.width * scale for p in points if p.width <= row.shown])
        y = _array(mine)[: len(x)]
        tone, dash = _STYLES[k % len(_STYLES)]
        known = np.isfinite(y)
        if not known.any():
            continue
        axes.plot(x[known], y[known], color=tone, linestyle=dash, linewidth=1.6, zorder=3 + 0.01 * k)
        first = int(np.argmax(known))
        if first:
            axes.plot([x[first]], [y[first]], "o", markersize=5, color="white", mec=tone, mew=1.3, zorder=5)
        ends.append((float(y[known][-1]), k + 1))
    _number(axes, ends, top)


def _array(values: Sequence[float | None]) -> Floats:
    return np.array([np.nan if v is None else v for v in values], dtype=np.float64)


def _number(axes: Axes, ends: Sequence[tuple[float, int]], top: float) -> None:
    """The corners' numbers beside the ends of their curves; those that end together share one place."""
    groups: list[list[tuple[float, int]]] = []
    for end in sorted(ends):
        if groups and end[0] - groups[-1][0][0] < _SAME * top:
            groups[-1].append(end)
        else:
            groups.append([end])
    lowest = 0.0
    for group in groups:
        y, numbers = max(sum(y for y, _ in group) / len(group), lowest), [number for _, number in group]
        lowest = y + _NEAR * top
        axes.annotate(
            ", ".join(map(str, sorted(numbers))),
            xy=(1.0, y / top),
            xycoords="axes fraction",
            xytext=(3, 0),
            textcoords="offset points",
            va="center",
            fontsize=SMALL,
            fontweight="bold",
            color=INK,
            annotation_clip=False,
        )


def _limit(axes: Axes, value: float, words: str) -> None:
    """A limit across a panel, named beyond the numbers on its right."""
    axes.axhline(value, color=WARNING, linewidth=1.4, linestyle=_DASHES, zorder=4)
    beside(axes, value / axes.get_ylim()[1], words, WARNING, further=26)


def _highest(values: Sequence[Sequence[float | None]], *limits: float | None) -> float:
    known = [v for mine in values for v in mine if v is not None] + [v for v in limits if v is not None]
    return 1.12 * max(known, default=1.0)


def _drawn(row: StrokeRow) -> list[tuple[StrokePoint, ...]]:
    return [tuple(p for p in points if p.width <= row.shown) for points in row.points.values()]


def _times(axes: Axes, row: StrokeRow, unit: str, scale: float) -> None:
    from matplotlib.lines import Line2D

    values = [[None if p.arrives is None else p.arrives * scale for p in points] for points in _drawn(row)]
    due = None if row.due is None else row.due * scale
    _curves(axes, row, scale, values, _highest(values, due))
    low, high = axes.get_xlim()
    axes.plot([low, high], [low, high], color=INK, linewidth=0.9, linestyle=(0, (1, 2)), zorder=2.5)
    slope = Line2D([], [], color=INK, linewidth=0.9, linestyle=(0, (1, 2)))
    caption(axes, f"Arrival after the command [{unit}]", {"as the pulse ends": slope})
    if due is not None and row.due is not None:
        _limit(axes, due, f"latest arrival\n{in_units(row.due, 's')}")
    else:
        beside(axes, 0.9, "latest arrival:\nend of the pulse", INK, further=26)


def _speeds(axes: Axes, row: StrokeRow, scale: float) -> None:
    values = [[p.speed for p in points] for points in _drawn(row)]
    _curves(axes, row, scale, values, _highest(values))
    caption(axes, "Speed of the blow [m/s]", {})


def _blows(axes: Axes, row: StrokeRow, scale: float) -> None:
    top = max([p.energy for points in _drawn(row) for p in points if p.energy is not None], default=1e-3)
    unit, per = ("J", 1.0) if top >= 1 else ("mJ", 1e3) if top >= 1e-4 else ("uJ", 1e6)
    values = [[None if p.energy is None else p.energy * per for p in points] for points in _drawn(row)]
    band = [None if v is None else v * per for v in (row.least, row.most)]
    _curves(axes, row, scale, values, _highest(values, *band))
    caption(axes, f"Energy of the blow [{unit}]", {})
    for value, given, word in zip(band, (row.least, row.most), ("least", "most"), strict=True):
        if value is not None and given is not None:
            _limit(axes, value, f"{word}\n{in_units(given, 'J')}")
    if row.most is None:
        beside(axes, 0.9, "band of the blow:\nnot given", INK, further=26)
