"""The picture of motion: current, position and speed over one pulse, with every blow marked; a column for each kind of coil."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from boardsim.quantities import in_units
from boardsim.report.drawing import (
    DARK,
    INK,
    PALE,
    PAPER,
    TEXT,
    WARNING,
    badge,
    band,
    caption,
    fitted,
    mark,
    own_look,
)
from boardsim.report.files import write_whole
from boardsim.report.lean import Clock, lean_axes, nice_ticks, number, prefixed, rule
from boardsim.report.wording import plain
from boardsim.verdict.closeups import Closeup, Panel
from boardsim.verdict.findings import Envelope, Finding, Result

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

MOST = 3  # kinds of coil side by side; those whose findings are worst
_DPI = 120
_LEFT, _RIGHT, _GAP, _BOTTOM = 0.75, 0.3, 0.45, 0.6  # [inch]
_ALONE, _SEVERAL = 7.6, 4.6  # width of the panels [inch]
_TOP, _LINE, _PANEL = 0.55, 0.165, 1.7  # title, a line of words, each panel [inch]
_MOST_LINES = 5
_MOST_NAMED = 1  # blows in words; rebounds are only marked


def draw_motion(result: Result, path: Path) -> None:
    """Draw what a run's coils move as a PNG, whole or not at all.

    Parameters
    ----------
    result : Result
        With at least one of `motions`.
    path : Path

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    with own_look():
        figure = motion_figure(result)
        write_whole(path, lambda beside: figure.savefig(beside, format="png", dpi=_DPI))


def motion_figure(result: Result) -> Figure:
    """The same as a figure that can be looked at or written.

    Raises
    ------
    ValueError
        If the result shows no motion.
    """
    # matplotlib takes 1.4 s to import: only where a picture is drawn
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    shown = result.motions[:MOST]
    if not shown:
        raise ValueError("no coil of this run moves anything")
    wide = _ALONE if len(shown) == 1 else _SEVERAL
    column = _LEFT + wide + _RIGHT
    width = len(shown) * column
    figure = Figure(figsize=(width, 1.0), facecolor=PAPER, dpi=_DPI)
    FigureCanvasAgg(figure)
    words = [_about(figure, result, one, column - 0.4) for one in shown]
    most = max(map(len, words))
    top = _TOP + most * _LINE + _GAP
    height = top + 3 * _PANEL + 2 * _GAP + _BOTTOM
    figure.set_size_inches(width, height)
    title = plain(f"{result.board} - {result.pattern}: what the coils move")
    title = "\n".join(fitted(figure, title, width - 2.4, 1, 13, "bold"))
    style = {"va": "top", "color": INK, "parse_math": False}
    figure.text(0.25 / width, 1 - 0.14 / height, title, fontsize=13, fontweight="bold", **style)  # type: ignore[arg-type]
    badge(figure, result.verdict, f"verdict: {result.verdict}", 1 - 0.25 / width, 1 - 0.27 / height, 10)
    for k, (one, lines) in enumerate(zip(shown, words, strict=True)):
        left = k * column
        figure.text((left + 0.25) / width, 1 - _TOP / height, "\n".join(lines), fontsize=TEXT, **style)  # type: ignore[arg-type]
        panels, bottom = [], height - top
        for _ in range(3):
            bottom -= _PANEL
            panels.append(figure.add_axes(((left + _LEFT) / width, bottom / height, wide / width, _PANEL / height)))
            bottom -= _GAP
        _motion(panels, one)
    return figure


def _about(figure: Figure, result: Result, one: Closeup, room: float) -> list[str]:
    """Whose motion it is, in which corner, and what was found of it."""
    finding = next(f for f in result.findings if f.key == one.finding)
    names = f"{finding.label}, {finding.part}; corner: {one.corner}. Its worst: {_verdict(finding)}."
    return [
        *fitted(figure, plain(names), room, 2, TEXT),
        *fitted(figure, plain(finding.sentence), room, _MOST_LINES - 2, TEXT),
    ]


def _verdict(finding: Finding) -> str:
    return f"{finding.check}, {finding.verdict}"


def _motion(panels: list[Axes], one: Closeup) -> None:
    """Current, position and speed, the pulse as a pale ground, the blows as points."""
    clock = Clock.over(one.start, one.stop)
    lean_axes(panels, clock)
    by_unit: dict[str, Panel] = {p.unit: p for p in one.panels}
    for axes, unit in zip(panels, ("A", "m", "m/s"), strict=True):
        for start, stop in (span for channel in one.who for span in one.on.get(channel, ())):
            low, high = max(float(start), one.start), min(float(stop), one.stop)
            axes.axvspan(clock(low), clock(high), facecolor=PALE, alpha=0.55, linewidth=0, zorder=0.5)
        for at, _ in one.hits:
            axes.axvline(clock(at), color=INK, linewidth=0.8, linestyle=(0, (1, 2)), zorder=1.2)
        _wave(axes, by_unit[unit], clock, one)
    if one.hits:
        at, speed = one.hits[0]
        mark(
            panels[2], clock(at), speed, f"hits its stop with {in_units(speed, 'm/s')} at {in_units(at, 's', 4)}", True
        )
        for at, speed in one.hits[_MOST_NAMED:]:
            panels[2].plot([clock(at)], [speed], "o", markersize=3.5, color="white", mec=INK, mew=1.0, zorder=6)


def _wave(axes: Axes, panel: Panel, clock: Clock, one: Closeup) -> None:
    """One quantity; of a position the stop, or the limit that it is held against."""
    wave: Envelope = panel.waves[0]
    band(axes, wave, clock.scale, None, clock.origin, facecolor=DARK, edgecolor=DARK, linewidth=1.3, zorder=3)
    low, high = float(wave.low.min()), float(wave.high.max())
    line, named = (panel.levels[0], "stop") if panel.levels else (panel.limit, "limit")
    if line is not None:
        low, high = min(low, line), max(high, line)
        tone = INK if named == "stop" else WARNING
        axes.axhline(line, color=tone, linewidth=1.3, linestyle=(0, (6, 2.5)), zorder=2.5)
    span = (high - low) or 1.0
    above = 0.3 if panel.unit == "m/s" and one.hits else 0.1  # for words
    axes.set_ylim(low - 0.08 * span, high + above * span)
    factor, name = prefixed(max(abs(low), abs(high)), panel.unit)
    ticks = nice_ticks(low - 0.08 * span, high + 0.08 * span, 5)
    rule(axes, ticks, [number(y / factor) for y in ticks])
    said = f"{panel.title.partition(';')[0]} [{name}]" + ("" if line is None else f"; dashed: the {named}")
    caption(axes, plain(said + ("; pale: while the channel is on" if panel.unit == "A" else "")), {})
