"""Lean axes over a stretch of time, for pictures that are drawn by the hundred: lines and words instead of ticks."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from boardsim.quantities import in_units
from boardsim.report.drawing import FAINT, INK, SMALL, TEXT

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.transforms import Transform


@dataclass(frozen=True)
class Clock:
    """Times as an axis shows them: (time - origin) x scale, in `unit`.

    Attributes
    ----------
    start, stop, origin : float
        [s]
    scale : float
        [unit/s]
    """

    start: float
    stop: float
    unit: str
    scale: float
    origin: float = 0.0

    @staticmethod
    def over(start: float, stop: float) -> Clock:
        """A fitting unit for a stretch; counted from near its start where absolute times would be long numbers. [s]"""
        span = stop - start
        unit, scale = ("s", 1.0) if span >= 1 else ("ms", 1e3) if span >= 1e-3 else ("us", 1e6)
        coarse = 10 ** math.ceil(math.log10(span)) if span > 0 else 1.0
        far = stop > 1e4 * span and stop * scale >= 1e4
        return Clock(start, stop, unit, scale, math.floor(start / coarse) * coarse if far else 0.0)

    def __call__(self, t: Any) -> Any:
        """Times on the axis: a number or an array. [unit]"""
        return (t - self.origin) * self.scale

    @property
    def name(self) -> str:
        """What stands below the axis."""
        if not self.origin:
            return f"time [{self.unit}]"
        return f"time from {in_units(self.origin, 's', 7)} on [{self.unit}]"


def lean_axes(panels: Sequence[Axes], clock: Clock) -> None:
    """Axes over one stretch of time, with times below the last; their values are ruled by `rule`.

    matplotlib's own ticks take most of the time of a small picture; lines and words do the same for a third of it.
    """
    start, stop = clock(clock.start), clock(clock.stop)
    ticks = nice_ticks(start, stop, 9)
    for axes in panels:
        axes.set_facecolor("white")
        axes.set_xlim(start, stop)
        axes.xaxis.set_visible(False)
        axes.yaxis.set_visible(False)
        for side, spine in axes.spines.items():
            spine.set_visible(side in ("left", "bottom"))
            spine.set_color(INK)
        _lines(axes, [((t, 0.0), (t, 1.0)) for t in ticks], axes.get_xaxis_transform())
    last = panels[-1]
    below: dict[str, Any] = {"ha": "center", "va": "top", "color": INK, "transform": last.get_xaxis_transform()}
    drop = 3.5 / 72 * last.figure.dpi / last.bbox.height
    for t in ticks:
        last.text(t, -drop, number(t), fontsize=SMALL, **below)
    last.text((start + stop) / 2, -5 * drop, clock.name, fontsize=TEXT, **below)


def rule(axes: Axes, at: Sequence[float], names: Sequence[str], lines: bool = True) -> None:
    """Name values on the left of lean axes, with faint lines from there across the panel if wanted."""
    gap = 3.5 / 72 * axes.figure.dpi / axes.bbox.width
    across = axes.get_yaxis_transform()
    _lines(axes, [((-0.7 * gap, y), (1.0 if lines else 0.0, y)) for y in at], across)
    for y, name in zip(at, names, strict=True):
        axes.text(-gap, y, name, ha="right", va="center", fontsize=SMALL, color=INK, transform=across, parse_math=False)


def _lines(axes: Axes, lines: Sequence[tuple[tuple[float, float], tuple[float, float]]], transform: Transform) -> None:
    from matplotlib.collections import LineCollection

    faint: dict[str, Any] = {"colors": FAINT, "linewidths": 0.6, "zorder": 0.9, "clip_on": False}
    axes.add_collection(LineCollection(lines, transform=transform, **faint), autolim=False)


def nice_ticks(low: float, high: float, most: int, whole: bool = False) -> list[float]:
    """Round numbers within a range, about `most` of them; only whole ones if wanted."""
    from matplotlib.ticker import MaxNLocator

    ticks = MaxNLocator(most, steps=[1, 2, 2.5, 5, 10], integer=whole).tick_values(low, high)
    return [float(t) for t in ticks if low <= t <= high]


def number(value: float) -> str:
    """A number beside an axis, without the rounding errors of its digits."""
    return f"{round(value, 9):.10g}"


def prefixed(largest: float, unit: str) -> tuple[float, str]:
    """The unit in which values up to `largest` [unit] are best written, and what it stands for: (1e-3, "mA")."""
    if unit == "1":
        return 1.0, ""
    name = in_units(largest, unit).split()[-1]
    return {"n": 1e-9, "u": 1e-6, "m": 1e-3, "k": 1e3, "M": 1e6, "G": 1e9}.get(name.removesuffix(unit), 1.0), name
