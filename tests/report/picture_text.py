"""What can be read in a picture: its words with their extents, which of them overlap or leave it, and its pixels."""

from __future__ import annotations

import itertools

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.legend import Legend
from matplotlib.text import Text
from matplotlib.transforms import Bbox
from numpy.typing import NDArray


def visible_texts(figure: Figure) -> dict[Text, Bbox]:
    """All texts that are drawn, with their extents in pixels."""
    figure.draw_without_rendering()
    outside = set()
    for axes in figure.axes:
        # matplotlib keeps labels of ticks outside the range, and does not draw them.
        for axis, (low, high) in (
            (axes.xaxis, sorted(axes.get_xlim())),
            (axes.yaxis, sorted(axes.get_ylim())),
        ):
            slack = 1e-9 * (high - low)
            outside |= {
                text
                for tick in axis.get_major_ticks()
                for text in (tick.label1, tick.label2)
                if not low - slack <= tick.get_loc() <= high + slack
            }
    # get_window_extent of an annotation includes its arrow; of the words only Text's own counts.
    return {
        text: Text.get_window_extent(text)
        for text in figure.findobj(Text)
        if text.get_visible() and text.get_text().strip() and text not in outside and shown(text)
    }


def shown(text: Text) -> bool:
    axes = text.axes
    ticks = [] if axes is None else [*axes.xaxis.get_major_ticks(), *axes.yaxis.get_major_ticks()]
    return not any(
        (text is tick.label1 and not tick.label1.get_visible())
        or (text is tick.label2 and not tick.label2.get_visible())
        for tick in ticks
    )


def swatches(figure: Figure) -> list[Bbox]:
    """The samples of legends, which no words may cover, with their extents in pixels."""
    legends = [legend for legend in figure.findobj(Legend) if legend.get_visible()]
    return [handle.get_window_extent() for legend in legends for handle in legend.legend_handles if handle]


def collisions(figure: Figure) -> list[str]:
    """What overlaps or leaves the picture."""
    extents = visible_texts(figure)
    found = [
        f"{a.get_text()!r} overlaps {b.get_text()!r}"
        for (a, box), (b, other) in itertools.combinations(extents.items(), 2)
        if box.x0 < other.x1 and other.x0 < box.x1 and box.y0 < other.y1 and other.y0 < box.y1
    ]
    found += [
        f"{text.get_text()!r} overlaps a sample of a legend"
        for text, box in extents.items()
        for other in swatches(figure)
        if box.x0 < other.x1 and other.x0 < box.x1 and box.y0 < other.y1 and other.y0 < box.y1
    ]
    page = figure.bbox
    found += [
        f"{text.get_text()!r} leaves the picture"
        for text, box in extents.items()
        if box.x0 < page.x0 or box.y0 < page.y0 or box.x1 > page.x1 or box.y1 > page.y1
    ]
    return found


def pixels(figure: Figure) -> NDArray[np.float64]:
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    return np.asarray(canvas.buffer_rgba())[..., :3].astype(float)


def words(figure: Figure) -> str:
    return " | ".join(text.get_text() for text in visible_texts(figure))
