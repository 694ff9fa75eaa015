"""The chain's picture: each link over time, what is taken, when it has to be there, and what is left on either side."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

from boardsim.quantities import in_units
from boardsim.report.drawing import (
    DARK,
    FAINT,
    INK,
    MIDDLE,
    PALE,
    PAPER,
    SMALL,
    TEXT,
    WARNING,
    badge,
    fitted,
    own_look,
    plain_axes,
)
from boardsim.report.files import write_whole
from boardsim.report.wording import plain
from boardsim.verdict.findings import Result
from boardsim.verdict.studies import ChainStudy, LinkView

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_DPI = 120
_WIDTH, _LEFT, _RIGHT, _GAP, _BOTTOM = 11.0, 1.05, 2.0, 0.62, 0.6  # [inch]
_TOP, _PANEL, _NOTHING = 1.3, 1.45, 1.2  # title with its legend, each link, where there is none [inch]
_LANE, _UPPER, _LOWER = 0.8, 1.6, 0.3  # height of a lane, where the two begin [share of a lane's pitch]
_SLANT = 0.006  # of what is shown: an edge that is seen at one moment is drawn this wide
_LEGEND = (
    ("may still change", FAINT, "////"),
    ("is there", PALE, ""),
    ("set-up", MIDDLE, ""),
    ("hold", DARK, ""),
    ("edge may be seen", "#f2d88a", ""),
)


def draw_chain(result: Result, path: Path) -> None:
    """Draw the picture of a result whose study is a `ChainStudy` as a PNG, whole or not at all.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    with own_look():
        figure = chain_figure(result)
        write_whole(path, lambda beside: figure.savefig(beside, format="png", dpi=_DPI))


def chain_figure(result: Result) -> Figure:
    """The picture of a result whose study is a `ChainStudy`, as a figure that can be looked at or written.

    Raises
    ------
    TypeError
        If the result holds another study.
    """
    # matplotlib takes 1.4 s to import: only where a picture is drawn
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    study = result.study
    if not isinstance(study, ChainStudy):
        raise TypeError("this picture is drawn from a chain only")
    n = len(study.views)
    height = _TOP + n * _PANEL + max(n - 1, 0) * _GAP + _BOTTOM if n else _TOP + _NOTHING
    figure = Figure(figsize=(_WIDTH, height), facecolor=PAPER, dpi=_DPI)
    FigureCanvasAgg(figure)
    _heading(figure, result, height, bool(n))
    if not n:
        said = "No times to draw: they are not known, or levels are not reached; the findings say which."
        figure.text(_LEFT / _WIDTH, 0.4, said, color=INK, fontsize=11)
    bottom = height - _TOP
    for view in study.views:
        bottom -= _PANEL
        axes = figure.add_axes((_LEFT / _WIDTH, bottom / height, 1 - (_LEFT + _RIGHT) / _WIDTH, _PANEL / height))
        _link(axes, view)
        bottom -= _GAP
    return figure


def _heading(figure: Figure, result: Result, height: float, legend: bool) -> None:
    from matplotlib.patches import Patch

    left = 0.25 / _WIDTH
    title = "\n".join(fitted(figure, plain(f"{result.board} - timing of the chain"), _WIDTH - 2.75, 1, 14, "bold"))
    figure.text(left, 1 - 0.12 / height, title, va="top", fontsize=14, fontweight="bold", color=INK, parse_math=False)
    line = "; ".join(fitted(figure, plain(result.firing[1]), _WIDTH - 0.5, 1, TEXT)) if len(result.firing) > 1 else ""
    figure.text(left, 1 - 0.5 / height, line, va="top", fontsize=TEXT, color=INK, parse_math=False)
    badge(figure, result.verdict, f"verdict: {result.verdict}", 1 - 0.3 / _WIDTH, 1 - 0.27 / height, 12)
    if legend:
        patches = [Patch(facecolor=c, edgecolor=INK, linewidth=0.5, hatch=h, label=name) for name, c, h in _LEGEND]
        figure.legend(
            handles=patches,
            loc="upper left",
            bbox_to_anchor=(left, 1 - 0.66 / height),
            ncols=len(patches),
            frameon=False,
            fontsize=SMALL,
            labelcolor=INK,
            borderaxespad=0.0,
            borderpad=0.0,
            handlelength=1.7,
        )


def _link(axes: Axes, view: LinkView) -> None:
    """One link: above the signal whose edge takes, below what it takes."""
    times = [0.0, view.settled, view.seen[1] + view.after, view.seen[0] - view.before, *(t for t, _ in view.edges)]
    times += [view.leaves] if view.leaves is not None else []
    span = max(times) - min(times)
    start, stop = min(times) - 0.06 * span, max(times) + (0.12 if view.leaves is not None else 0.3) * span
    unit, scale = ("us", 1e6) if stop - start >= 2e-6 else ("ns", 1e9)
    plain_axes(axes, stop * scale, start * scale)
    axes.set_ylim(-0.05, 2.55)
    axes.set_yticks([_UPPER + _LANE / 2, _LOWER + _LANE / 2], [view.edge, view.signal])
    axes.tick_params(axis="y", length=0, labelsize=TEXT)
    axes.tick_params(axis="x", labelbottom=True)
    axes.grid(False)
    name = f"{view.name} at {in_units(view.volts, 'V')}"
    axes.set_title(name, loc="left", y=1.0, pad=5, fontsize=9.5, fontweight="bold", color=INK, parse_math=False)
    axes.set_xlabel(f"time from the controller's {view.edge} edge [{unit}]", fontsize=SMALL, color=INK, labelpad=1)
    _wave(axes, view, start, stop, scale)
    _taken(axes, view, start, stop, scale)
    _spare(axes, view, scale)


def _wave(axes: Axes, view: LinkView, start: float, stop: float, scale: float) -> None:
    """The signal whose edge takes; the clock before a latch edge is marked, not drawn."""
    low, high = _UPPER, _UPPER + _LANE
    slant = _SLANT * (stop - start)
    edges = sorted([*view.edges, (0.0, True)]) if view.edge == "clock" else [(0.0, True)]
    level = low if edges[0][1] else high
    points = [(start, level)]
    for t, rises in edges:
        level = high if rises else low
        points += [(t - slant, points[-1][1]), (t + slant, level)]
    points.append((stop, level))
    axes.plot([t * scale for t, _ in points], [y for _, y in points], color=INK, linewidth=1.5, zorder=4)
    _box(axes, view.seen[0], view.seen[1], low - 0.08, high + 0.08, scale, "#f2d88a", zorder=2)
    if view.edge != "clock":
        (t, _), *_ = view.edges
        axes.plot([t * scale] * 2, [_LOWER, high], color=INK, linewidth=1.0, linestyle=(0, (1, 2)), zorder=3)
        style: dict[str, Any] = {"fontsize": SMALL, "color": INK, "va": "top", "parse_math": False}
        axes.annotate("last clock edge", (t * scale, high), xytext=(4, 0), textcoords="offset points", **style)


def _taken(axes: Axes, view: LinkView, start: float, stop: float, scale: float) -> None:
    """What is taken: when it may still change, when it is there, and when it has to be."""
    low, high = _LOWER, _LOWER + _LANE
    until = stop if view.leaves is None else view.leaves
    _box(axes, start, stop, low, high, scale, "white", hatch="////", edgecolor="#b9b4a5", zorder=1)
    if until > view.settled:
        _box(axes, view.settled, until, low, high, scale, PALE, edgecolor=INK, zorder=2)
    inset = 0.14
    _box(axes, view.seen[0] - view.before, view.seen[0], low + inset, high - inset, scale, MIDDLE, zorder=3)
    _box(axes, view.seen[0], view.seen[1], low + inset, high - inset, scale, "#f2d88a", zorder=3)
    if view.after > 0:
        _box(axes, view.seen[1], view.seen[1] + view.after, low + inset, high - inset, scale, DARK, zorder=3)


def _box(
    axes: Axes, start: float, stop: float, low: float, high: float, scale: float, tone: str, zorder: float, **style: Any
) -> None:
    from matplotlib.patches import Rectangle

    style = {"edgecolor": "none", "linewidth": 0.7, **style}
    size = (stop - start) * scale
    axes.add_patch(Rectangle((start * scale, low), size, high - low, facecolor=tone, zorder=zorder, **style))


def _spare(axes: Axes, view: LinkView, scale: float) -> None:
    """What is left before and after the edge, as arrows below and in words on the right."""
    sides = [("before the edge", view.early, view.settled, view.seen[0] - view.before)]
    if view.late is not None and view.leaves is not None:
        sides.append(("after the edge", view.late, view.seen[1] + view.after, view.leaves))
    right = 1.0 + 10 / 72 * axes.figure.dpi / axes.bbox.width
    for k, (where, spare, start, stop) in enumerate(sides):
        tone = INK if spare >= 0 else WARNING
        arrow = {"arrowstyle": "<->", "color": tone, "linewidth": 1.2, "shrinkA": 0, "shrinkB": 0}
        axes.annotate("", xy=(stop * scale, 0.12), xytext=(start * scale, 0.12), arrowprops=arrow, zorder=5)
        words = f"spare {where}:" if spare >= 0 else f"too late {where}:" if not k else f"gone {where}:"
        style: dict[str, Any] = {"transform": axes.transAxes, "va": "top", "color": tone, "parse_math": False}
        axes.text(right, 0.95 - 0.45 * k, words, fontsize=SMALL, **style)
        axes.text(right, 0.83 - 0.45 * k, in_units(abs(spare), "s"), fontsize=TEXT + 1, fontweight="bold", **style)
        asked = f"{'hold' if k else 'set-up'} {in_units(view.after if k else view.before, 's')}"
        axes.text(right, 0.69 - 0.45 * k, asked, fontsize=SMALL, **{**style, "color": INK})
