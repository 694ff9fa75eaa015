"""The look that all pictures share: tones, axes, envelopes, and limits drawn in and named.

Tones and dashes carry the meaning as well as hues do, for readers who print in grey or see colours otherwise.
Words stand where no waveform comes: above the axes, on their right, or in a strip kept free.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from boardsim.quantities import in_units
from boardsim.verdict.findings import Envelope, Floats

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

PAPER = "#fbfaf6"
INK = "#22303c"
FAINT = "#d9d6cc"
# Luminances are far apart, so that they stay apart in grey: pale, middle, dark.
PALE = "#cfe4f1"
MIDDLE = "#56a3cf"
DARK = "#0b3c5d"
WARNING = "#c2410c"
FAILING = "#ee9152"  # filled areas; lighter than WARNING, to stand off from DARK in grey

SMALL, TEXT = 7.5, 8.5  # sizes of letters [point]
# The share of a panel that its waveform must get; a limit too far away for that is marked at the edge.
_LEAST_SHARE = 0.12


def plain_axes(axes: Axes, end: float) -> None:
    """Axes over time from 0 to `end`, in its unit, with a faint grid and numbers written out."""
    axes.set_facecolor("white")
    axes.set_xlim(0, end)
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)
    for side in ("left", "bottom"):
        axes.spines[side].set_color(INK)
    axes.tick_params(labelsize=SMALL, colors=INK, labelbottom=False, length=3)
    axes.ticklabel_format(useOffset=False, style="plain")
    axes.grid(True, color=FAINT, linewidth=0.5)
    axes.set_axisbelow(True)


def caption(axes: Axes, text: str, legend: Mapping[str, Artist]) -> None:
    """Name a panel and what is drawn in it, above the axes, where no waveform comes."""
    axes.set_title(text, loc="left", fontsize=9.5, fontweight="bold", color=INK, pad=5)
    if legend:
        axes.legend(
            legend.values(),
            legend.keys(),
            loc="lower right",
            bbox_to_anchor=(1.0, 1.0),
            ncols=3,
            frameon=False,
            fontsize=SMALL,
            labelcolor=INK,
            borderaxespad=0.1,
            handlelength=2.4,
            columnspacing=1.6,
        )


def band(axes: Axes, wave: Envelope, scale: float, low: Floats | None = None, **style: Any) -> None:
    """Lowest to highest value per slice; its outline shows a slice that is thinner than a pixel."""
    low = wave.low if low is None else low
    lower, upper = (np.append(values, values[-1:]) for values in (low, wave.high))
    axes.fill_between(wave.edges * scale, lower, upper, step="post", joinstyle="round", **style)


def frame(axes: Axes, low: float, high: float, limit: float | None, above: float, below: float) -> None:
    """Set the range of values: the waveform, free strips [shares of it], the limit unless it is far away."""
    if limit is not None:
        with_limit = (min(low, limit), max(high, limit))
        if high - low >= _LEAST_SHARE * (with_limit[1] - with_limit[0]):
            low, high = with_limit
            below = max(below, 0.08) if limit == low else below
    span = max(high - low, 1e-3)  # an idle rail's last digits are not worth a picture [V, A]
    axes.set_ylim(low - below * span, high + above * span)


def limit_line(axes: Axes, limit: float | None, name: str, unit: str) -> None:
    """Draw a limit and name it on the right, where no waveform comes; at the edge if it is out of range."""
    if limit is None:
        beside(axes, 0.5, f"{name}:\nnot given", INK)
        return
    words = f"{name}\n{in_units(limit, unit)}"
    low, high = axes.get_ylim()
    if low <= limit <= high:
        axes.axhline(limit, color=WARNING, linewidth=1.5, linestyle=(0, (6, 2.5)), zorder=4)
        beside(axes, (limit - low) / (high - low), words, WARNING)
        return
    edge, start, where = (1.0, 0.72, "above") if limit > high else (0.0, 0.28, "below")
    axes.annotate(
        "",
        xy=(1.012, edge),
        xytext=(1.012, start),
        xycoords="axes fraction",
        annotation_clip=False,
        arrowprops={"arrowstyle": "-|>", "color": WARNING, "linewidth": 1.5},
    )
    beside(axes, (edge + start) / 2, f"{words},\nfar {where}", WARNING, further=10)


def beside(axes: Axes, height: float, words: str, tone: str, further: float = 0.0) -> None:
    """Words on the right of the axes at a height [share], `further` [point] than usual."""
    axes.annotate(
        words,
        xy=(1.0, height),
        xycoords="axes fraction",
        xytext=(8 + further, 0),
        textcoords="offset points",
        va="center",
        fontsize=TEXT,
        fontweight="bold",
        color=tone,
        annotation_clip=False,
    )


def make_room(figure: Figure, panels: list[Axes]) -> None:
    """Move the left borders until the longest label has room; all by the same, so that times stay aligned."""
    labels = [label for axes in panels for label in axes.get_yticklabels() if label.get_text()]
    furthest = min((label.get_window_extent().x0 for label in labels), default=np.inf)
    missing = (0.08 * figure.dpi - furthest) / figure.bbox.width
    if missing > 0:
        for axes in panels:
            box = axes.get_position()
            axes.set_position((box.x0 + missing, box.y0, box.width - missing, box.height))
