"""The volley's picture: what rail, coils and supply come to as more channels are on at once, and how many pass."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from itertools import groupby, pairwise
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from boardsim.quantities import in_units
from boardsim.report.drawing import (
    BADGES,
    DARK,
    INK,
    PALE,
    PAPER,
    TEXT,
    WARNING,
    badge,
    beside,
    caption,
    fitted,
    frame,
    limit_line,
    make_room,
    own_look,
    plain_axes,
    width_of,
)
from boardsim.report.files import write_whole
from boardsim.report.wording import plain
from boardsim.verdict.findings import Floats, Result, Verdict
from boardsim.verdict.studies import Volley

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

_DPI = 120
_WIDTH, _LEFT, _RIGHT, _GAP, _BOTTOM = 11.0, 0.85, 1.5, 0.5, 0.6  # [inch]
_TOP, _MARKS, _STRIP, _PANEL = 0.65, 0.42, 0.24, 1.7  # title, names of the marks, verdicts, each panel [inch]
_ANSWER, _LINE, _MOST_LINES = 9.5, 0.165, 5  # the answer: size of letters [point], distance of lines [inch]
_MOST_TICKS = 32


def draw_volley(result: Result, path: Path) -> None:
    """Draw the picture of a volley as a PNG, whole or not at all.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    with own_look():
        figure = volley_figure(result)
        write_whole(path, lambda beside: figure.savefig(beside, format="png", dpi=_DPI))


def volley_figure(result: Result) -> Figure:
    """The picture of a result whose study is a volley, as a figure that can be looked at or written.

    Raises
    ------
    TypeError
        If the result holds another study.
    """
    # matplotlib takes 1.4 s to import: only where a picture is drawn
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    study = result.study
    if not isinstance(study, Volley):
        raise TypeError("this picture is drawn from a volley only")
    figure = Figure(figsize=(_WIDTH, 1.0), facecolor=PAPER, dpi=_DPI)
    FigureCanvasAgg(figure)
    answer = _lines_of_answer(figure, result)
    top = _TOP + len(answer) * _LINE
    height = top + _MARKS + _STRIP + 3 * (_GAP + _PANEL) + _BOTTOM
    figure.set_size_inches(_WIDTH, height)
    _heading(figure, result, study, answer, height)
    boxes = []
    bottom = height - top - _MARKS
    for panel in (_STRIP, _PANEL, _PANEL, _PANEL):
        bottom -= panel
        boxes.append((_LEFT / _WIDTH, bottom / height, 1 - (_LEFT + _RIGHT) / _WIDTH, panel / height))
        bottom -= _GAP
    strip, *panels = (figure.add_axes(box) for box in boxes)
    for axes in (strip, *panels):
        plain_axes(axes, study.steps[-1].on + 0.5, 0.5)
    _count(panels, study.steps[-1].on)
    _rail(panels[0], study)
    _coils(panels[1], study)
    _supply(panels[2], study)
    for axes in (strip, *panels):
        _bounds(axes, study)
    make_room(figure, [strip, *panels])
    _verdicts(strip, study)
    _names(strip, study)
    return figure


def _lines_of_answer(figure: Figure, result: Result) -> list[str]:
    said = next((f.sentence for f in result.findings if f.check == "volley"), "")
    return fitted(figure, plain(said[:1].upper() + said[1:]), _WIDTH - 0.55, _MOST_LINES, _ANSWER)


def _heading(figure: Figure, result: Result, study: Volley, answer: Sequence[str], height: float) -> None:
    title = plain(f"{result.board} - pulses of {in_units(study.width, 's')} on ever more channels at once")
    title = "\n".join(fitted(figure, title, _WIDTH - 2.75, 1, 14, "bold"))
    left = 0.25 / _WIDTH
    figure.text(left, 1 - 0.12 / height, title, va="top", fontsize=14, fontweight="bold", color=INK, parse_math=False)
    figure.text(left, 1 - 0.52 / height, "\n".join(answer), va="top", fontsize=_ANSWER, color=INK, parse_math=False)
    badge(figure, result.verdict, f"verdict: {result.verdict}", 1 - 0.3 / _WIDTH, 1 - 0.27 / height, 12)


def _count(panels: Sequence[Axes], last: int) -> None:
    """Whole numbers below the panels, as many as there is room for; written below the lowest only."""
    step = 1
    while last / step > _MOST_TICKS:
        step *= 2
    for axes in panels:
        axes.set_xticks(range(step, last + 1, step))
    panels[-1].tick_params(axis="x", labelbottom=True)
    panels[-1].set_xlabel("channels on at once", fontsize=TEXT, color=INK)


def _bounds(axes: Axes, study: Volley) -> None:
    """How many pass, as a pale ground; how many are wanted, as a dotted line."""
    if study.most:
        axes.axvspan(0.5, study.most + 0.5, facecolor=PALE, alpha=0.55, linewidth=0, zorder=0.5)
    if study.wanted is not None:
        axes.axvline(study.wanted, color=INK, linewidth=1.1, linestyle=(0, (1, 2)), zorder=2)


def _verdicts(axes: Axes, study: Volley) -> None:
    """One bar for every row of numbers with the same verdict, with its name where there is room."""
    axes.set_axis_off()
    axes.set_ylim(0, 1)
    scale = axes.get_window_extent().width / study.steps[-1].on
    for verdict, first, last in _rows(study):
        ground, ink = BADGES[verdict]
        axes.axvspan(first, last, facecolor=ground, edgecolor=PAPER, linewidth=0.8)
        if width_of(axes.figure, verdict, TEXT, "bold") + 4 < (last - first) * scale:  # type: ignore[arg-type]
            axes.text(
                (first + last) / 2, 0.46, verdict, ha="center", va="center", fontsize=TEXT, fontweight="bold", color=ink
            )
    axes.annotate(
        "verdict",
        xy=(1.0, 0.46),
        xycoords="axes fraction",
        xytext=(8, 0),
        textcoords="offset points",
        va="center",
        fontsize=TEXT,
        color=INK,
        annotation_clip=False,
    )


def _rows(study: Volley) -> Iterator[tuple[Verdict, float, float]]:
    """Neighbours with the same verdict together: (verdict, from, to); between numbers that were run the bounds are halfway."""
    numbers = [s.on for s in study.steps]
    bounds = [0.5, *((a + b) / 2 for a, b in pairwise(numbers)), numbers[-1] + 0.5]
    cells = zip(study.steps, bounds, bounds[1:], strict=False)
    for verdict, group in groupby(cells, key=lambda cell: cell[0].verdict):
        several = list(group)
        yield verdict, several[0][1], several[-1][2]


def _names(axes: Axes, study: Volley) -> None:
    """What the pale ground and the dotted line mean, each in a line of its own above the verdicts."""
    count = study.steps[-1].on
    passing = "not one passes" if not study.most else f"any {study.most} pass" if study.most < count else "all pass"
    if study.most == 1:
        passing = "it passes" if count == 1 else "any 1 passes"
    wanted = "how many are wanted was not given" if study.wanted is None else f"wanted: {study.wanted}"
    inch = axes.get_window_extent().height / axes.figure.dpi
    for words, x, above, weight in (
        (passing, study.most + 0.5 if study.most else 0.5, 0.28, "bold"),
        (wanted, study.wanted if study.wanted is not None else 0.5, 0.10, "normal"),
    ):
        across = (x - 0.5) / count
        # Centred on the place as far as the words stay over the axes.
        half = 0.5 * width_of(axes.figure, words, TEXT, weight) / axes.get_window_extent().width  # type: ignore[arg-type]
        axes.text(
            min(max(across, half), 1 - half),
            1 + above / inch,
            words,
            transform=axes.transAxes,
            ha="center",
            va="center",
            fontsize=TEXT,
            fontweight=weight,
            color=INK,
        )


def _points(axes: Axes, study: Volley, values: Floats) -> None:
    """Readings over numbers of channels: full where the number passes, hollow where not, crossed where not proven."""
    numbers = np.array([s.on for s in study.steps])
    axes.plot(numbers, values, color=DARK, linewidth=1.1, zorder=3)
    kinds = np.array(
        ["x" if not s.proven else "o" if s.verdict not in ("fail", "unproven") else "." for s in study.steps]
    )
    for kind, marker, ground in (("o", "o", DARK), (".", "o", "white"), ("x", "X", "white")):
        here = kinds == kind
        axes.plot(
            numbers[here],
            values[here],
            linestyle="none",
            marker=marker,
            markersize=5.2,
            color=ground,
            mec=DARK,
            mew=1.2,
            zorder=5,
        )


def _array(values: Sequence[float | None]) -> Floats:
    return np.array([np.nan if v is None else v for v in values], dtype=np.float64)


def _framed(axes: Axes, values: Floats, limit: float | None, from_zero: bool) -> bool:
    """Set the range of a panel; False where there is nothing to show."""
    if not np.isfinite(values).any():
        axes.set_yticks([])
        axes.text(0.5, 0.5, "no run came to an end", transform=axes.transAxes, ha="center", fontsize=TEXT, color=INK)
        return False
    low, high = 0.0 if from_zero else float(np.nanmin(values)), float(np.nanmax(values))
    # A range below a fiftieth of the value is not worth a picture.
    frame(axes, low, high, limit, above=0.1, below=0.0 if from_zero else 0.1, least=abs(high) / 50)
    return True


def _rail(axes: Axes, study: Volley) -> None:
    values = _array([s.lowest_rail for s in study.steps])
    caption(axes, "Lowest coil rail at the board [V]", _legend(study))
    if _framed(axes, values, study.rail_limit, from_zero=False):
        _points(axes, study, values)
        limit_line(axes, study.rail_limit, "brown-out limit", "V")


def _legend(study: Volley) -> dict[str, Artist]:
    from matplotlib.lines import Line2D

    looks = {
        "passes": ("o", DARK, any(s.verdict not in ("fail", "unproven") for s in study.steps)),
        "does not pass": ("o", "white", any(s.verdict in ("fail", "unproven") and s.proven for s in study.steps)),
        "not proven": ("X", "white", any(not s.proven for s in study.steps)),
    }
    return {
        name: Line2D([], [], linestyle="none", marker=marker, markersize=5.2, color=ground, mec=DARK, mew=1.2)
        for name, (marker, ground, there) in looks.items()
        if there
    }


def _coils(axes: Axes, study: Volley) -> None:
    values, limits = (
        _array(column) for column in zip(*((s.coil_current, s.pull_in) for s in study.steps), strict=True)
    )
    several = len({s.pull_in for s in study.steps}) > 1
    caption(
        axes,
        "Coil current at the end of the pulse [A]" + (", of the coil nearest its pull-in" if several else ""),
        {},
    )
    known = limits[np.isfinite(limits)]
    if not _framed(axes, values, float(known.max()) if len(known) else None, from_zero=True):
        return
    _points(axes, study, values)
    if not several:
        limit_line(axes, study.steps[-1].pull_in, "pull-in", "A")
        return
    # Another coil comes nearest as more are on: the limit is that coil's own.
    axes.step(
        [s.on for s in study.steps],
        limits,
        where="mid",
        color=WARNING,
        linewidth=1.5,
        linestyle=(0, (6, 2.5)),
        zorder=4,
    )
    high = axes.get_ylim()[1]
    beside(axes, float(known[-1]) / high, "pull-in of\nthat coil", WARNING)


def _supply(axes: Axes, study: Volley) -> None:
    values = _array([s.supply_peak for s in study.steps])
    longest = max((s.at_ceiling or 0.0 for s in study.steps), default=0.0)
    first = next((s.on for s in study.steps if s.at_ceiling), None)
    reached = "" if first is None else f"; at its ceiling from {first} on, for up to {in_units(longest, 's')}"
    caption(axes, f"Highest current out of the supply [A]{reached}", {})
    if _framed(axes, values, study.ceiling, from_zero=True):
        _points(axes, study, values)
        limit_line(axes, study.ceiling, "supply's ceiling", "A")
