"""The power-up picture: when outputs are enabled, what all coils carry before the first frame, and how rails and lines come."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

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
    WARNING,
    badge,
    band,
    beside,
    caption,
    fitted,
    frame,
    make_room,
    mark,
    own_look,
    plain_axes,
)
from boardsim.report.files import write_whole
from boardsim.report.wording import plain
from boardsim.verdict.findings import Envelope, Result
from boardsim.verdict.studies import BootRow, PowerUp

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_DPI = 120
_WIDTH, _LEFT, _RIGHT, _GAP, _BOTTOM = 11.0, 0.85, 1.75, 0.5, 0.6  # [inch]
_TOP, _STRIP, _CURRENTS, _RAIL, _LINES = 1.3, 0.3, 2.1, 1.3, 1.5  # [inch]
_ANSWER, _MOST_LINES = 9.5, 3
_FAINT = 0.02  # of what is shown, below which a current below 0 is none
_LOWEST_WORDS = 0.12  # height of three lines beside the axes [share]
_DASHES, _DOTS = (0, (6, 2.5)), (0, (1, 1.6))


def draw_power_up(result: Result, path: Path) -> None:
    """Draw the picture of a result whose study is a `PowerUp` as a PNG, whole or not at all.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    with own_look():
        figure = power_up_figure(result)
        write_whole(path, lambda beside: figure.savefig(beside, format="png", dpi=_DPI))


def power_up_figure(result: Result) -> Figure:
    """The picture of a result whose study is a `PowerUp`, as a figure that can be looked at or written.

    Raises
    ------
    TypeError
        If the result holds another study.
    """
    # matplotlib takes 1.4 s to import: only where a picture is drawn
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    study = result.study
    if not isinstance(study, PowerUp):
        raise TypeError("this picture is drawn from a power-up only")
    heights = (_STRIP, _CURRENTS, _RAIL, _LINES)
    height = _TOP + sum(heights) + 3 * _GAP + _BOTTOM if study.waves else 2.2
    figure = Figure(figsize=(_WIDTH, height), facecolor=PAPER, dpi=_DPI)
    FigureCanvasAgg(figure)
    _heading(figure, result, study, height)
    if not study.waves:
        figure.text(_LEFT / _WIDTH, 0.2, "No waveforms: no run came to an end.", color=INK, fontsize=11)
        return figure
    end = float(study.waves["v_rail"].edges[-1])
    unit, scale = ("s", 1.0) if end >= 1 else ("ms", 1e3) if end >= 1e-3 else ("us", 1e6)
    panels = []
    bottom = height - _TOP
    for panel in heights:
        bottom -= panel
        box = (_LEFT / _WIDTH, bottom / height, 1 - (_LEFT + _RIGHT) / _WIDTH, panel / height)
        panels.append(figure.add_axes(box))
        plain_axes(panels[-1], end * scale)
        bottom -= _GAP
    _enabled(panels[0], study, scale)
    _currents(panels[1], study, scale)
    _rail(panels[2], study, scale)
    _lines(panels[3], study, scale)
    for axes in panels:
        for at in (study.reset, study.until):
            if at is not None:
                axes.axvline(at * scale, color=INK, linewidth=1.1, linestyle=_DOTS, zorder=4.5)
    if study.reset is not None:
        beside(panels[0], 0.5, f"reset {in_units(study.reset, 's', 3)}", INK)
    panels[-1].tick_params(axis="x", labelbottom=True)
    panels[-1].set_xlabel(f"time [{unit}]", fontsize=TEXT, color=INK)
    make_room(figure, panels)
    return figure


def _heading(figure: Figure, result: Result, study: PowerUp, height: float) -> None:
    row, left = study.rows[study.shown], 0.25 / _WIDTH
    title = fitted(figure, plain(f"{result.board} - before the first enabled frame"), _WIDTH - 2.75, 1, 14, "bold")
    place = (left, 1 - 0.12 / height)
    figure.text(*place, "\n".join(title), va="top", fontsize=14, fontweight="bold", color=INK, parse_math=False)
    said = [
        _answer(row, study),
        f"Waveforms: {row.name}; {study.corner}. The worst of {len(study.rows)} ways to come up.",
    ]
    if not study.waves:
        said = ["Nothing is proven."]
    words = [line for text in said for line in fitted(figure, plain(text), _WIDTH - 0.55, _MOST_LINES, _ANSWER)]
    style: dict[str, Any] = {"va": "top", "fontsize": _ANSWER, "color": INK}
    figure.text(left, 1 - 0.5 / height, "\n".join(words), parse_math=False, linespacing=1.35, **style)
    badge(figure, result.verdict, f"verdict: {result.verdict}", 1 - 0.3 / _WIDTH, 1 - 0.27 / height, 12)


def _answer(row: BootRow, study: PowerUp) -> str:
    if not row.count or row.current is None or row.energy is None:
        return (
            f"No coil carries a current that counts ({in_units(study.limit, 'A')}) before the first frame is enabled."
        )
    one = row.count == 1
    coils = "1 coil carries" if one else f"{row.count} coils carry"
    ends = "only the first frame ends it" if row.stays else "it ends by itself"
    return (
        f"{coils} up to {in_units(row.current, 'A')} ({row.label}) without command and {'takes' if one else 'take'} "
        f"{in_units(row.energy, 'J')}{'' if one else ' together'}; {ends}."
    )


def _enabled(axes: Axes, study: PowerUp, scale: float) -> None:
    """When the registers' outputs drive, and when they are of high impedance, or off."""
    from matplotlib.patches import Patch

    wave = study.waves["enabled"]
    on = (wave.low + wave.high) / 2 > 0.5
    edges = wave.edges * scale
    high = np.append(on, on[-1:]).astype(float)
    axes.fill_between(edges, 0, high, step="post", facecolor=DARK, linewidth=0, zorder=3)
    axes.fill_between(edges, 0, 1 - high, step="post", facecolor=PALE, linewidth=0, zorder=2)
    axes.set_ylim(0, 1)
    axes.set_yticks([])
    axes.grid(False)
    caption(axes, "Outputs of the registers", {"enabled": Patch(color=DARK), study.disabled: Patch(color=PALE)})


def _currents(axes: Axes, study: PowerUp, scale: float) -> None:
    from matplotlib.patches import Patch

    wave = study.waves["i_total"]
    peak = float(np.max(wave.high, initial=0.0))
    floor = np.zeros_like(wave.low)
    band(axes, wave, scale, low=floor, facecolor=PALE, linewidth=0, zorder=1.5)
    early = _stretch(wave, study.since, study.until)
    legend = {"current": Patch(facecolor=PALE, edgecolor=MIDDLE, linewidth=1.2)}
    if study.rows[study.shown].count and early is not None:
        band(axes, early, scale, low=np.zeros_like(early.low), facecolor=FAILING, linewidth=0, zorder=2)
        legend = {"without command": Patch(facecolor=FAILING, edgecolor=MIDDLE, linewidth=1.2), **legend}
    band(axes, wave, scale, facecolor=DARK, edgecolor=DARK, linewidth=1.3, zorder=3)
    # From 0 to what counts at least: an idle board's last digits are no picture.
    low, high = float(np.min(wave.low)), max(peak, study.limit)
    frame(axes, low if low < -_FAINT * high else 0.0, high, None, above=0.3, below=0.02)
    axes.axhline(study.limit, color=WARNING, linewidth=1.3, linestyle=_DASHES, zorder=4)
    bottom, top = axes.get_ylim()
    counts = max((study.limit - bottom) / (top - bottom), _LOWEST_WORDS)
    if early is not None:
        slot = int(np.argmax(early.high))
        at = float(early.edges[slot] + early.edges[slot + 1]) / 2
        most = float(early.high[slot])
        if study.rows[study.shown].count:
            mark(axes, at * scale, most, f"{in_units(most, 'A')} at {in_units(at, 's', 4)}", above=True)
    beside(axes, 0.8 if counts < 0.5 else 0.3, f"first enabled\nframe {in_units(study.until, 's', 4)}", INK)
    beside(axes, counts, f"counts from\n{in_units(study.limit, 'A')}\nper coil", WARNING)
    caption(axes, "All coils together [A]", legend)


def _stretch(wave: Envelope, start: float, stop: float) -> Envelope | None:
    """The slices of a wave that lie between two times; None if there is none."""
    inside = (wave.edges[:-1] >= start) & (wave.edges[1:] <= stop)
    if not inside.any():
        return None
    edges = wave.edges[np.append(inside, False) | np.append(False, inside)]
    return Envelope(wave.label, wave.unit, edges, wave.low[inside], wave.high[inside])


def _rail(axes: Axes, study: PowerUp, scale: float) -> None:
    wave = study.waves["v_rail"]
    band(axes, wave, scale, facecolor=DARK, edgecolor=DARK, linewidth=1.3, zorder=3)
    frame(axes, min(float(np.min(wave.low)), 0.0), float(np.max(wave.high)), None, above=0.12, below=0.02)
    caption(axes, "Coil rail at the board [V]", {})


def _lines(axes: Axes, study: PowerUp, scale: float) -> None:
    """Logic rail, output enable and clear, told apart by tone and dashes."""
    from matplotlib.lines import Line2D

    legend = {}
    top = 0.0
    looks: tuple[tuple[str, str, Any, float], ...] = (
        ("v_logic", MIDDLE, "solid", 3.2),
        ("v_enable", DARK, _DASHES, 1.6),
        ("v_clear", WARNING, _DOTS, 1.8),
    )
    for name, tone, style, width in looks:
        wave = study.waves.get(name)
        if wave is None:
            continue
        # Both ends of each slice, so that an edge is drawn as high as it is.
        times = np.repeat(wave.edges, 2)[1:-1] * scale
        values = np.column_stack([wave.low, wave.high]).ravel()
        falling = np.append(np.diff((wave.low + wave.high) / 2) < 0, False)
        values = np.where(np.repeat(falling, 2), np.column_stack([wave.high, wave.low]).ravel(), values)
        (line,) = axes.plot(times, values, color=tone, linestyle=style, linewidth=width, zorder=3)
        legend[wave.label] = Line2D([], [], color=tone, linestyle=style, linewidth=line.get_linewidth())
        top = max(top, float(np.max(wave.high)))
    frame(axes, 0.0, top, None, above=0.12, below=0.05)
    caption(axes, "Logic rail and control lines [V]", legend)
