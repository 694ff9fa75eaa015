"""The picture of an overlay: computed and measured over each other, below them their difference with its largest value marked."""

from __future__ import annotations

import io
from pathlib import Path
from typing import TYPE_CHECKING

from boardsim.quantities import in_units
from boardsim.report.drawing import (
    DARK,
    INK,
    MIDDLE,
    PAPER,
    TEXT,
    WARNING,
    badge,
    caption,
    fitted,
    frame,
    mark,
    own_look,
)
from boardsim.report.files import write_bytes
from boardsim.report.lean import Clock, lean_axes, nice_ticks, number, prefixed, rule
from boardsim.report.wording import moment, percent, plain
from boardsim.verdict.overlaid import Overlaid
from boardsim.verdict.overlay import Difference

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_DPI = 110
_WIDTH, _LEFT, _RIGHT, _GAP, _BOTTOM, _TOP = 8.6, 0.75, 0.3, 0.42, 0.55, 1.15  # [inch]
_EDGE, _BADGE = 0.2, 1.4  # border; the verdict's width [inch]
_BOTH, _APART = 2.1, 1.25  # heights of the panels [inch]
_STRIP = 0.34  # share of the difference's range kept free for its largest value in words
_ON = "#efece2"  # ground of the time in which the output is on
_TICK = 0.27  # between two numbers beside an axis, about [inch]
_CHUNK = 20_000  # points of a line drawn at a time: the renderer gives up on longer ones


def draw_overlay(found: Overlaid, path: Path) -> None:
    """Draw an overlay as PNG, whole or not at all.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    with own_look():
        import matplotlib

        matplotlib.rcParams["agg.path.chunksize"] = _CHUNK  # back to the user's when `own_look` ends
        picture = io.BytesIO()
        overlay_figure(found).savefig(picture, format="png", dpi=_DPI)
    write_bytes(path, picture.getvalue())


def overlay_figure(found: Overlaid) -> Figure:
    """An overlay as a figure that can be looked at or written."""
    # matplotlib takes long to import: only where a picture is drawn
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    heights = [tall for _ in found.overlay.differences for tall in (_BOTH, _APART)]
    height = _TOP + sum(heights) + _GAP * (len(heights) - 1) + _BOTTOM
    figure = Figure(figsize=(_WIDTH, height), facecolor=PAPER, dpi=_DPI)
    FigureCanvasAgg(figure)
    _heading(figure, found, height)
    panels, top = [], _TOP
    for tall in heights:
        box = (_LEFT / _WIDTH, 1 - (top + tall) / height, 1 - (_LEFT + _RIGHT) / _WIDTH, tall / height)
        panels.append(figure.add_axes(box))
        top += tall + _GAP
    course = found.overlay.course
    clock = Clock.over(float(course.t[0]), max(float(d.t[-1]) for d in found.overlay.differences))
    lean_axes(panels, clock)
    for axes in panels:
        axes.axvspan(clock(course.on), clock(course.off), color=_ON, zorder=0.5, linewidth=0)
    for n, d in enumerate(found.overlay.differences):
        _both(panels[2 * n], d, found, clock)
        _apart(panels[2 * n + 1], d, found, clock)
    return figure


def _heading(figure: Figure, found: Overlaid, height: float) -> None:
    room = _WIDTH - 2 * _EDGE
    title = f"{found.label}, pulse {found.pulse}: {plain(found.trace.name)} over the computed waveform"
    shift = f"the trace is shifted by {moment(found.overlay.shift)}; the output is on where the ground is darker"
    where = f"{found.board} - {found.pattern}; {found.corner}; {shift}"
    worst = found.judged
    says = (
        f"The {worst.quantity} differs by up to {in_units(abs(worst.largest), worst.unit)}, {percent(worst.share)} of its peak, and by "
        f"{in_units(worst.rms, worst.unit)} root mean square."
    )
    down = 0.14
    for text, size, weight, width, step in (
        (title, 12.0, "bold", room - _BADGE, 0.26),
        (where, TEXT, "normal", room, 0.2),
        (says, TEXT, "normal", room, 0.2),
    ):
        (line, *_) = fitted(figure, plain(text), width, 1, size, weight)
        style = {"fontsize": size, "fontweight": weight, "color": INK}
        figure.text(_EDGE / _WIDTH, 1 - down / height, line, va="top", parse_math=False, **style)  # type: ignore[arg-type]
        down += step
    if (verdict := found.verdict) is not None:
        badge(figure, verdict, verdict, 1 - _EDGE / _WIDTH - 0.01, 1 - 0.27 / height, 10)


def _both(axes: Axes, d: Difference, found: Overlaid, clock: Clock) -> None:
    """Measured and computed over each other; the fitted model too, where there is one."""
    course = found.overlay.course
    legend: dict[str, Artist] = {}
    (legend["measured"],) = axes.plot(
        clock(d.t), d.measured, color=MIDDLE, linewidth=3.0, zorder=2, solid_joinstyle="round"
    )
    (legend["computed"],) = axes.plot(clock(course.t), course.waves[d.quantity], color=DARK, linewidth=1.3, zorder=3)
    if found.fit is not None and d.quantity == "current":
        fit, dashes = found.fit, (0, (5, 2))
        (legend["fitted coil"],) = axes.plot(
            clock(fit.t), fit.current + fit.offset, color=WARNING, linewidth=1.4, linestyle=dashes, zorder=4
        )
    low = min(float(d.measured.min()), float(course.waves[d.quantity].min()))
    high = max(float(d.measured.max()), float(course.waves[d.quantity].max()))
    frame(axes, low, high, None, 0.07, 0.07)
    name = "Current through the coil" if d.quantity == "current" else "Voltage across the coil"
    _values(axes, name, d.unit, legend)


def _apart(axes: Axes, d: Difference, found: Overlaid, clock: Clock) -> None:
    """Measured less computed."""
    apart = d.measured - d.computed
    axes.axhline(0.0, color=INK, linewidth=0.8, zorder=1.5)
    axes.plot(clock(d.t), apart, color=DARK, linewidth=1.1, zorder=3)
    low, high = min(float(apart.min()), 0.0), max(float(apart.max()), 0.0)
    above = d.largest > 0
    frame(axes, low, high, None, _STRIP if above else 0.1, 0.1 if above else _STRIP, max(1e-6, 1e-3 * d.peak))
    legend: dict[str, Artist] = {}
    if found.within is not None and d is found.judged:
        for edge in (found.within * d.peak, -found.within * d.peak):
            if axes.get_ylim()[0] < edge < axes.get_ylim()[1]:
                line = axes.axhline(edge, color=WARNING, linewidth=1.5, linestyle=(0, (6, 2.5)), zorder=4)
                legend[f"allowed, {percent(found.within)}"] = line
    words = f"{in_units(d.largest, d.unit)} at {moment(d.at)}, {percent(d.share)} of the peak"
    _values(axes, f"Measured less computed: {in_units(d.rms, d.unit)} root mean square", d.unit, legend)
    mark(axes, clock(d.at), d.largest, words, above)


def _values(axes: Axes, title: str, unit: str, legend: dict[str, Artist]) -> None:
    """Numbers beside the axis, and the panel's name."""
    factor, name = prefixed(max(abs(y) for y in axes.get_ylim()), unit)
    ticks = nice_ticks(*axes.get_ylim(), round(axes.bbox.height / _DPI / _TICK))
    rule(axes, ticks, [number(y / factor) for y in ticks])
    caption(axes, f"{title} [{name}]", legend)
