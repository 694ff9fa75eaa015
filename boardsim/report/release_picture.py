"""The release picture: what each clamp does to the switch, and how soon it lets the coil go, from the turn-off on."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from boardsim.quantities import in_units
from boardsim.report.drawing import (
    DARK,
    INK,
    PAPER,
    SMALL,
    TEXT,
    WARNING,
    badge,
    band,
    fitted,
    own_look,
    plain_axes,
    shortened,
    width_of,
)
from boardsim.report.files import write_whole
from boardsim.report.wording import plain
from boardsim.verdict.findings import Envelope, Result
from boardsim.verdict.studies import Release, ReleaseRow

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

MOST_ROWS = 12  # drawn; more could not be compared at a glance
_GHOST = "#c3bfb2"  # the board's own clamp, repeated behind the others
_DPI = 120
# [inch], from the left: names, voltages, their words, currents, their words.
_WIDTH, _NAMES, _VOLTAGES, _CURRENTS, _PANEL = 11.0, 0.25, 2.65, 7.0, 2.55
_WORDS = 0.12  # from a panel to the words on its right
_TOP, _BOTTOM, _GAP = 1.35, 0.62, 0.2
_ROWS, _LOWEST, _HIGHEST = 6.5, 0.78, 2.4  # height of all rows if there is room, and of one
_FAR = 4.0  # times what is drawn: a limit further away is named, not drawn
_OVER = 0.02  # of the current at turn-off: what is left below that is not worth width
_SPARE = 1.15  # times that moment is shown, so that one sees it end
_DASHES = (0, (6, 2.5))


def draw_release(result: Result, path: Path) -> None:
    """Draw the picture of a result whose study is a `Release` as a PNG, whole or not at all.

    Raises
    ------
    InputError
        If the file cannot be written.
    """
    with own_look():
        figure = release_figure(result)
        write_whole(path, lambda beside: figure.savefig(beside, format="png", dpi=_DPI))


@dataclass(frozen=True)
class _Scales:
    """What all rows share, so that they can be compared.

    Attributes
    ----------
    start, stop : float
        From the turn-off. [s]
    per_second : float
        Of the unit that times are shown in.
    volts, amperes : (low, high)
    """

    start: float
    stop: float
    unit: str
    per_second: float
    volts: tuple[float, float]
    amperes: tuple[float, float]


def release_figure(result: Result) -> Figure:
    """The picture of a result whose study is a `Release`, as a figure that can be looked at or written."""
    # matplotlib takes 1.4 s to import: only where a picture is drawn
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    study = result.study
    assert isinstance(study, Release)
    rows = study.rows[:MOST_ROWS]
    each = min(max(_ROWS / len(rows), _LOWEST), _HIGHEST)
    height = _TOP + len(rows) * each + (len(rows) - 1) * _GAP + _BOTTOM
    figure = Figure(figsize=(_WIDTH, height), facecolor=PAPER, dpi=_DPI)
    FigureCanvasAgg(figure)
    scales, compared = _scales(rows), not all(r.own for r in study.rows)
    _heading(figure, result, study, height)
    if scales is None:
        figure.text(_VOLTAGES / _WIDTH, 0.35, "No waveforms: nothing was turned off.", color=INK, fontsize=11)
    bottom = height - _TOP
    for k, row in enumerate(rows):
        bottom -= each
        _name(figure, row, study, (bottom + each) / height, height)
        if scales is not None:
            ghost = rows[0] if k and rows[0].own and not row.own else None
            mine = scales if compared else _values_of(row, scales)
            _voltage(_panel(figure, _VOLTAGES, bottom, each, height), row, ghost, mine)
            _current(_panel(figure, _CURRENTS, bottom, each, height), row, ghost, mine)
            if k == len(rows) - 1:
                _time_axis(figure, scales)
        bottom -= _GAP
    return figure


def _scales(rows: Sequence[ReleaseRow]) -> _Scales | None:
    """One scale for all: up to where the slowest current is gone."""
    drawn = [(r, r.v_switch, r.i_coil) for r in rows if r.v_switch is not None and r.i_coil is not None]
    if not drawn:
        return None
    stop = _SPARE * max(max(_gone(i), r.let_go or 0.0) for r, _, i in drawn)
    stop = min(stop, max(float(i.edges[-1]) for _, _, i in drawn))
    start = max(-0.04 * stop, min(float(i.edges[0]) for _, _, i in drawn))
    unit, per_second = ("s", 1.0) if stop >= 1 else ("ms", 1e3) if stop >= 1e-3 else ("us", 1e6)
    peak = max(max(float(np.max(v.high)), r.peak or 0.0) for r, v, _ in drawn)
    near = [r.peak_limit for r, _, _ in drawn if r.peak_limit is not None and r.peak_limit <= _FAR * peak]
    most = max(float(np.max(i.high)) for _, _, i in drawn)
    least = min(min(float(np.min(i.low)) for _, _, i in drawn), 0.0)
    return _Scales(start, stop, unit, per_second, (0.0, 1.1 * max([peak, *near])), (least - 0.04 * most, 1.12 * most))


def _values_of(row: ReleaseRow, scales: _Scales) -> _Scales:
    """The times of all with the values of one row: builds of channels differ, and are not held against each other."""
    own = _scales([row])
    return scales if own is None else replace(scales, volts=own.volts, amperes=own.amperes)


def _gone(current: Envelope) -> float:
    """When hardly anything is left of a current. [s]"""
    over = np.flatnonzero(current.high >= _OVER * np.max(current.high))
    return float(current.edges[over[-1] + 1])


def _heading(figure: Figure, result: Result, study: Release, height: float) -> None:
    channels = {r.channel for r in study.rows}
    what = f"{study.rows[0].label} turned off" if len(channels) == 1 else "channels turned off"
    compared = not all(r.own for r in study.rows)
    left = _NAMES / _WIDTH
    title = fitted(figure, plain(f"{result.board} - {what}"), 8.3, 2, 14, "bold")
    figure.text(
        left,
        1 - 0.12 / height,
        "\n".join(title),
        va="top",
        fontsize=14 if len(title) == 1 else 11.5,
        fontweight="bold",
        color=INK,
        parse_math=False,
    )
    corners = list(dict.fromkeys(r.corner for r in study.rows[:MOST_ROWS] if r.corner))
    lines = (
        [f"Waveforms: the corner in which the release takes longest ({plain('; '.join(corners))})."] if corners else []
    )
    lines += ["Numbers: the worst of all corners, each; a ring marks the highest peak."]
    if compared:
        lines[-1] += " The board's own clamp is repeated in grey behind the others."
    if len(study.rows) > MOST_ROWS:
        lines[-1] += f" {len(study.rows) - MOST_ROWS} more rows stand in findings.json."
    words = [line for text in lines for line in fitted(figure, text, _WIDTH - 2 * _NAMES, 2, TEXT)]
    figure.text(left, 1 - 0.56 / height, "\n".join(words), va="top", fontsize=TEXT, color=INK, parse_math=False)
    badge(figure, result.verdict, f"verdict: {result.verdict}", 1 - 0.3 / _WIDTH, 1 - 0.32 / height, 12)
    for x, words_above in ((_VOLTAGES, "Voltage at the switch [V]"), (_CURRENTS, "Coil current [A]")):
        place = (x / _WIDTH, 1 - (_TOP - 0.08) / height)
        figure.text(*place, words_above, va="bottom", fontsize=9.5, fontweight="bold", color=INK)


def _name(figure: Figure, row: ReleaseRow, study: Release, top: float, height: float) -> None:
    """Which clamp or build this row is, and its own verdict."""
    room = _VOLTAGES - 0.5 - _NAMES
    kind, _, parts = plain(row.clamp).partition(": ")
    compared = not all(r.own for r in study.rows)
    first, rest = (kind, parts) if compared else (plain(row.label), plain(row.clamp))
    # A part's name may be long, and differ from the next one's at its end.
    lines = [rest] if width_of(figure, rest, SMALL) <= room * figure.dpi else rest.rsplit(", ", 1)
    small = [shortened(figure, line, room, SMALL) for line in lines if line]
    small += ["the board's own"] if compared and row.own else []
    x, line = _NAMES / _WIDTH, 1.4 / 72 / height
    name = shortened(figure, first, 0.9 * room, TEXT)  # bold letters are wider
    figure.text(x, top, name, va="top", fontsize=TEXT, fontweight="bold", color=INK, parse_math=False)
    below = top - (TEXT + 1) * line
    for words in small:
        figure.text(x, below, words, va="top", fontsize=SMALL, color=INK, parse_math=False)
        below -= SMALL * line
    failing = row.verdict == "fail"
    weight = "bold" if failing else "normal"
    tone = WARNING if failing else INK
    figure.text(x, below, row.verdict, va="top", fontsize=SMALL, fontweight=weight, color=tone)


def _panel(figure: Figure, left: float, bottom: float, high: float, height: float) -> Axes:
    return figure.add_axes((left / _WIDTH, bottom / height, _PANEL / _WIDTH, high / height))


def _voltage(axes: Axes, row: ReleaseRow, ghost: ReleaseRow | None, scales: _Scales) -> None:
    _frame(axes, scales, scales.volts)
    if ghost is not None and ghost.v_switch is not None:
        _line(axes, ghost.v_switch, scales, _GHOST, 2)
    if row.v_switch is None:
        _nothing(axes)
        return
    _line(axes, row.v_switch, scales, DARK, 3)
    limit = row.peak_limit
    drawn = False
    if limit is not None and limit <= scales.volts[1]:
        drawn = True
        axes.axhline(limit, color=WARNING, linewidth=1.3, linestyle=_DASHES, zorder=4)
    if row.peak is not None:
        axes.plot([0.0], [row.peak], "o", markersize=4.5, color="white", mec=INK, mew=1.2, zorder=6)
    _words(axes, _about_voltage(row, drawn))


def _about_voltage(row: ReleaseRow, drawn: bool) -> Iterator[tuple[str, str, str]]:
    """Words, tone and weight of each line beside a row's voltage."""
    over = row.peak is not None and row.peak_limit is not None and row.peak > row.peak_limit
    if row.peak is not None:
        yield f"peak {in_units(row.peak, 'V')}", WARNING if over else INK, "bold"
    if row.peak_limit is None:
        yield "no rating given", INK, "normal"
    else:
        yield f"rated {in_units(row.peak_limit, 'V')}{'' if drawn else ', far above'}", WARNING, "bold"
    if row.clamp_energy is not None and row.switch_energy is not None:
        yield f"into the clamp {in_units(row.clamp_energy, 'J')}", INK, "normal"
        yield f"into the switch {in_units(row.switch_energy, 'J')}", INK, "normal"


def _current(axes: Axes, row: ReleaseRow, ghost: ReleaseRow | None, scales: _Scales) -> None:
    _frame(axes, scales, scales.amperes)
    if ghost is not None and ghost.i_coil is not None:
        _line(axes, ghost.i_coil, scales, _GHOST, 2)
    if row.i_coil is None:
        _nothing(axes)
        return
    _line(axes, row.i_coil, scales, DARK, 3)
    if row.release is not None:
        axes.axhline(row.release, color=WARNING, linewidth=1.3, linestyle=_DASHES, zorder=4)
        if row.let_go is not None:
            at = row.let_go * scales.per_second
            axes.axvline(at, color=INK, linewidth=0.9, linestyle=(0, (1, 2)), zorder=2.5)
            axes.plot([at], [row.release], "o", markersize=5.5, color=INK, mec="white", mew=0.8, zorder=6)
    _words(axes, _about_current(row))


def _about_current(row: ReleaseRow) -> Iterator[tuple[str, str, str]]:
    """Words, tone and weight of each line beside a row's current."""
    if row.release is None:
        yield "no release current", INK, "normal"
        yield "given", INK, "normal"
        return
    yield (f"lets go in {in_units(row.let_go, 's')}" if row.let_go is not None else "does not let go"), INK, "bold"
    yield f"release {in_units(row.release, 'A')}", WARNING, "bold"
    if row.refire is not None:
        yield f"re-fire {in_units(row.refire, 's')}", INK, "normal"


def _frame(axes: Axes, scales: _Scales, values: tuple[float, float]) -> None:
    from matplotlib.ticker import MaxNLocator

    plain_axes(axes, scales.stop * scales.per_second)
    axes.set_xlim(scales.start * scales.per_second, scales.stop * scales.per_second)
    axes.set_ylim(*values)
    axes.yaxis.set_major_locator(MaxNLocator(3))
    axes.xaxis.set_major_locator(MaxNLocator(6))


def _line(axes: Axes, wave: Envelope, scales: _Scales, tone: str, zorder: float) -> None:
    seen = (wave.edges[1:] >= scales.start) & (wave.edges[:-1] <= scales.stop)
    edges = wave.edges[np.concatenate([seen, [False]]) | np.concatenate([[False], seen])]
    part = replace(wave, edges=edges, low=wave.low[seen], high=wave.high[seen])
    band(axes, part, scales.per_second, facecolor=tone, edgecolor=tone, linewidth=1.5, zorder=zorder)


def _words(axes: Axes, lines: Iterator[tuple[str, str, str]]) -> None:
    """Lines on the right of the axes, from their top down."""
    for k, (words, tone, weight) in enumerate(lines):
        axes.annotate(
            words,
            xy=(1.0, 1.0),
            xycoords="axes fraction",
            xytext=(_WORDS * 72, -k * 1.45 * SMALL),
            textcoords="offset points",
            va="top",
            fontsize=SMALL,
            fontweight=weight,
            color=tone,
            annotation_clip=False,
        )


def _nothing(axes: Axes) -> None:
    axes.text(0.5, 0.5, "no waveforms", transform=axes.transAxes, ha="center", va="center", fontsize=TEXT, color=INK)


def _time_axis(figure: Figure, scales: _Scales) -> None:
    """Times below the last row only: all rows share them."""
    for axes in figure.axes[-2:]:
        axes.tick_params(axis="x", labelbottom=True)
        axes.set_xlabel(f"time from turn-off [{scales.unit}]", fontsize=TEXT, color=INK)
