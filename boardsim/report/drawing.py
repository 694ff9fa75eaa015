"""The look that all pictures share: tones, axes, envelopes, and limits drawn in and named.

Tones and dashes carry the meaning as well as hues do, for readers who print in grey or see colours otherwise.
Words stand where no waveform comes: above the axes, on their right, or in a strip kept free.
"""

from __future__ import annotations

import functools
import textwrap
import warnings
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any, cast

import numpy as np

from boardsim.quantities import in_units
from boardsim.verdict.findings import Envelope, Floats, Verdict

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

BADGES: Mapping[Verdict, tuple[str, str]] = {  # background, writing
    "fail": (WARNING, "white"),
    "unproven": ("#6b4c8a", "white"),
    "limit-missing": ("#f2d88a", INK),
    "tight": ("#f2d88a", INK),
    "pass": (PALE, INK),
}

SMALL, TEXT = 7.5, 8.5  # sizes of letters [point]
# The share of a panel that its waveform must get; a limit too far away for that is marked at the edge.
_LEAST_SHARE = 0.12


@contextmanager
def own_look() -> Iterator[None]:
    """Within it pictures look the same on every machine, whatever settings the user keeps for drawings of their own.

    A label in a script that the font lacks shows as boxes, which is no reason to disturb the user.
    """
    import matplotlib

    with warnings.catch_warnings(), matplotlib.rc_context():
        matplotlib.rcdefaults()
        warnings.filterwarnings("ignore", message="Glyph .* missing")
        yield


def plain_axes(axes: Axes, end: float, start: float = 0.0) -> None:
    """Axes over time from `start` to `end`, in its unit, with a faint grid and numbers written out."""
    axes.set_facecolor("white")
    axes.set_xlim(start, end)
    for side in ("top", "right"):
        axes.spines[side].set_visible(False)
    for side in ("left", "bottom"):
        axes.spines[side].set_color(INK)
    axes.tick_params(labelsize=SMALL, colors=INK, labelbottom=False, length=3)
    axes.ticklabel_format(useOffset=False, style="plain")
    axes.grid(True, color=FAINT, linewidth=0.5)
    axes.set_axisbelow(True)


def badge(figure: Figure, verdict: Verdict, words: str, x: float, y: float, size: float) -> None:
    """A verdict in its tones, right-aligned at `x` and centred on `y` [shares of the figure]."""
    ground, ink = BADGES[verdict]
    figure.text(
        x,
        y,
        words,
        ha="right",
        va="center",
        fontsize=size,
        color=ink,
        fontweight="bold",
        parse_math=False,
        bbox={"boxstyle": "round,pad=0.4", "facecolor": ground, "edgecolor": INK, "linewidth": 0.8},
    )


def caption(axes: Axes, text: str, legend: Mapping[str, Artist]) -> None:
    """Name a panel and what is drawn in it, above the axes, where no waveform comes."""
    # A height of its own keeps matplotlib from measuring all that is drawn to find one.
    axes.set_title(text, loc="left", y=1.0, pad=5, fontsize=9.5, fontweight="bold", color=INK, parse_math=False)
    if legend:
        axes.legend(
            legend.values(),
            legend.keys(),
            loc="lower right",
            bbox_to_anchor=(1.0, 1.0),
            ncols=4,
            frameon=False,
            fontsize=SMALL,
            labelcolor=INK,
            borderaxespad=0.1,
            handlelength=1.7,
            columnspacing=1.3,
        )


def band(
    axes: Axes, wave: Envelope, scale: float, low: Floats | None = None, origin: float = 0.0, **style: Any
) -> None:
    """Lowest to highest value per slice; its outline shows a slice that is thinner than a pixel."""
    low = wave.low if low is None else low
    lower, upper = (np.append(values, values[-1:]) for values in (low, wave.high))
    axes.fill_between((wave.edges - origin) * scale, lower, upper, step="post", joinstyle="round", **style)


def width_of(figure: Figure, words: str, size: float, weight: str = "normal") -> float:
    """How wide a line of text is drawn. [pixel]"""
    return _width(figure.dpi, words, size, weight)


@functools.lru_cache(4096)
def _width(dpi: float, words: str, size: float, weight: str) -> float:
    from matplotlib.font_manager import FontProperties

    return float(_ruler(dpi).get_text_width_height_descent(words, FontProperties(size=size, weight=weight), False)[0])


@functools.cache
def _ruler(dpi: float) -> Any:
    from matplotlib.backends import backend_agg

    return cast("Any", backend_agg).RendererAgg(1, 1, dpi)


def fitted(figure: Figure, text: str, room: float, lines: int, size: float, weight: str = "normal") -> list[str]:
    """Text in lines that are no wider than there is room; what does not fit ends in dots.

    Parameters
    ----------
    figure : Figure
    text : str
    room : float
        [inch]
    lines : int
        At most so many.
    size : float
        [point]
    weight : str
    """
    shortest = 8  # letters; less is not worth writing
    letters = max(int(room * 72 / (0.4 * size)), shortest)
    while True:
        rows = textwrap.wrap(text, letters, max_lines=lines, placeholder=" ...")
        widest = max((width_of(figure, row, size, weight) for row in rows), default=0.0)
        if widest <= room * figure.dpi or letters <= shortest:
            return rows
        letters = max(min(letters - 1, int(letters * room * figure.dpi / widest)), shortest)


def shortened(figure: Figure, text: str, room: float, size: float) -> str:
    """Text on one line of at most `room` [inch]; what is too long loses its middle, since names differ at their ends."""
    if len(text) * size <= room * 72:
        return text  # no letter is wider than it is high
    keep = len(text)
    short = text
    while keep > 4 and (wide := width_of(figure, short, size)) > room * figure.dpi:
        keep = max(min(keep - 1, int(keep * room * figure.dpi / wide)), 4)
        short = f"{text[: (keep + 1) // 2].rstrip()}...{text[len(text) - keep // 2 :].lstrip()}"
    return short


def frame(
    axes: Axes, low: float, high: float, limit: float | None, above: float, below: float, least: float = 1e-3
) -> None:
    """Set the range of values: the waveform, free strips [shares of it], the limit unless it is far away.

    Parameters
    ----------
    axes : Axes
    low, high : float
        Of the waveform. [unit]
    limit : float or None
        [unit]
    above, below : float
        Free strips. [1]
    least : float
        The smallest range that is worth a picture; an idle rail's last digits are not. [unit]
    """
    if limit is not None:
        with_limit = (min(low, limit), max(high, limit))
        if high - low >= _LEAST_SHARE * (with_limit[1] - with_limit[0]):
            low, high = with_limit
            below = max(below, 0.08) if limit == low else below
    if high - low < least:
        low, high = (low + high - least) / 2, (low + high + least) / 2
    span = high - low
    axes.set_ylim(low - below * span, high + above * span)


def limit_line(axes: Axes, limit: float | None, name: str, unit: str, value: str = "") -> None:
    """Draw a limit and name it on the right, where no waveform comes; at the edge if it is out of range.

    `value` is the limit in words where it takes other digits than usual.
    """
    if limit is None:
        beside(axes, 0.5, f"{name}:\nnot given", INK)
        return
    words = f"{name}\n{value or in_units(limit, unit)}"
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
    right = 1.0 + (8 + further) / 72 * axes.figure.dpi / axes.bbox.width
    style: dict[str, Any] = {"va": "center", "fontsize": TEXT, "fontweight": "bold", "color": tone}
    axes.text(right, height, words, transform=axes.transAxes, parse_math=False, **style)


def mark(axes: Axes, x: float, y: float, words: str, above: bool) -> None:
    """Mark a point, with words in the strip above or below the waveforms and a dotted line from there to it."""
    figure = axes.figure
    low, high = axes.get_xlim()
    across = (x - low) / (high - low)
    # Centred on the point as far as the words stay within the axes.
    half = 0.5 * width_of(figure, words, TEXT) / axes.bbox.width + 0.01  # type: ignore[arg-type]
    centre = min(max(across, half), 1 - half)
    axes.text(
        centre,
        0.96 if above else 0.04,
        words,
        transform=axes.transAxes,
        va="top" if above else "bottom",
        ha="center",
        fontsize=TEXT,
        color=INK,
        zorder=5,
        parse_math=False,
        bbox={"facecolor": "white", "edgecolor": "none", "pad": 1.5},  # keeps the grid off the words
    )
    bottom, top = axes.get_ylim()
    strip = bottom + (0.9 if above else 0.1) * (top - bottom)  # hidden behind the words
    axes.plot([x, x], [y, strip], color=INK, linewidth=0.8, linestyle=(0, (1, 2)), zorder=4.5)
    axes.plot([x], [y], "o", markersize=6, color="white", mec=INK, mew=1.4, zorder=6, clip_on=False)


def make_room(figure: Figure, panels: list[Axes]) -> None:
    """Move the left borders until the longest label has room; all by the same, so that times stay aligned."""
    labels = [label for axes in panels for label in axes.get_yticklabels() if label.get_text()]
    furthest = min((label.get_window_extent().x0 for label in labels), default=np.inf)
    missing = (0.08 * figure.dpi - furthest) / figure.bbox.width
    if missing > 0:
        for axes in panels:
            box = axes.get_position()
            axes.set_position((box.x0 + missing, box.y0, box.width - missing, box.height))
