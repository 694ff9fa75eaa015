"""One picture per finding that fails or is tight: the reading at its limit, what causes it, and who was on."""

from __future__ import annotations

import io
import re
import unicodedata
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from boardsim.report.drawing import (
    DARK,
    FAILING,
    INK,
    MIDDLE,
    PALE,
    PAPER,
    SMALL,
    TEXT,
    WARNING,
    badge,
    band,
    beside,
    caption,
    fitted,
    frame,
    limit_line,
    mark,
    own_look,
    shortened,
    width_of,
)
from boardsim.report.files import write_bytes
from boardsim.report.lanes import who_was_on
from boardsim.report.lean import Clock, lean_axes, nice_ticks, number, prefixed, rule
from boardsim.report.wording import by_severity, plain, value_and_limit, when
from boardsim.verdict.closeups import Closeup, Panel
from boardsim.verdict.findings import Finding, Result

if TYPE_CHECKING:
    from matplotlib.artist import Artist
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

Key = tuple[str, str, str, str]
Style = dict[str, Any]

_DPI = 110
_WIDTH, _LEFT, _RIGHT, _GAP, _BOTTOM = 8.6, 0.75, 1.25, 0.42, 0.5  # [inch]
_EDGE, _BADGE, _ROW = 0.2, 1.4, 0.155  # border; the verdict's width; a line of the sentence [inch]
_UNDER_BAR = 0.15  # for the numbers below it [inch]
_BAR, _MAIN, _CAUSE = 0.3, 1.8, 1.05  # heights of the panels [inch]
_LANE, _LEAST_LANES, _MOST_LANES = 0.15, 0.25, 1.4  # height of a lane; of all lanes [inch]
_LONGEST_NAME = 1.6  # of a lane [inch]
_TICK = 0.27  # between two numbers beside an axis, about [inch]
_LEAST_RANGE = {
    "V": 1e-2,
    "A": 1e-2,
    "W": 1e-2,
    "J": 1e-6,
    "m": 1e-5,
    "m/s": 1e-2,
}  # the smallest that is worth a picture [unit]
_WORDS_STRIP = 0.24  # share of the waveform's range kept free for the reading in words
_TONES = (DARK, MIDDLE, PALE)


def draw_closeups(result: Result, folder: Path) -> dict[Key, str]:
    """Draw the close-ups of a result as PNG files, each whole or not at all; numbered by severity.

    Returns
    -------
    dict of finding key to str
        The file name of each finding that has a close-up.

    Raises
    ------
    InputError
        If a file cannot be written.
    """
    of = {closeup.finding: closeup for closeup in result.closeups}
    names: dict[Key, str] = {}
    with own_look():
        for place, finding in enumerate((f for f in by_severity(result.findings) if f.key in of), 1):
            name = f"closeup-{place:03d}-{_safe(finding.check)}-{_safe(finding.label)}.png"
            picture = io.BytesIO()
            figure = closeup_figure(result, of[finding.key])
            # Little compression: a larger file is written sooner, and there may be a hundred.
            figure.savefig(picture, format="png", dpi=_DPI, pil_kwargs={"compress_level": 1})
            write_bytes(folder / name, picture.getvalue())
            names[finding.key] = name
    return names


def _safe(name: str) -> str:
    """A name as part of a file's name that any file system takes: a few plain letters and digits."""
    plain_letters = unicodedata.normalize("NFKD", name).encode("ascii", "ignore").decode("ascii")
    return re.sub(r"[^a-z0-9]+", "-", plain_letters.lower()).strip("-")[:40].strip("-") or "unnamed"


def closeup_figure(result: Result, closeup: Closeup) -> Figure:
    """One close-up as a figure that can be looked at or written.

    Parameters
    ----------
    result : Result
        That holds the close-up's finding.
    closeup : Closeup
    """
    # matplotlib takes long to import: only where a picture is drawn
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    finding = next(f for f in result.findings if f.key == closeup.finding)
    channels = sorted(closeup.labels)
    lanes = [min(max(_LANE * len(channels), _LEAST_LANES), _MOST_LANES)] if channels else []
    bars = [_BAR] if not closeup.shows_reading or any(p.mean is not None for p in closeup.panels) else []
    heights = [*bars, *(_MAIN if p.limit is not None or p.levels else _CAUSE for p in closeup.panels), *lanes]
    figure = Figure(figsize=(_WIDTH, 1.0), facecolor=PAPER, dpi=_DPI)
    FigureCanvasAgg(figure)
    rows = _heading(figure, result, finding, closeup)
    top = rows[-1][0] + _ROW + _GAP
    height = top + sum(heights) + _GAP * (len(heights) - 1) + _UNDER_BAR * len(bars) + _BOTTOM
    figure.set_figheight(height)
    for down, words, style in rows:
        figure.text(_EDGE / _WIDTH, 1 - down / height, words, va="top", color=INK, parse_math=False, **style)
    badge(figure, finding.verdict, _verdict(finding), 1 - _EDGE / _WIDTH - 0.01, 1 - 0.27 / height, 10)

    names = [shortened(figure, plain(closeup.labels[n]), _LONGEST_NAME, SMALL) for n in channels]
    left = max(_LEFT, _EDGE + 0.1 + max((width_of(figure, name, SMALL) for name in names), default=0.0) / _DPI)
    panels = []
    for n, tall in enumerate(heights):
        box = (left / _WIDTH, 1 - (top + tall) / height, 1 - (left + _RIGHT) / _WIDTH, tall / height)
        panels.append(figure.add_axes(box))
        top += tall + _GAP + (_UNDER_BAR if n < len(bars) else 0.0)
    if bars:
        _bar(panels[0], finding)
    _over_time(panels[len(bars) :], closeup, finding, dict(zip(channels, names, strict=True)))
    return figure


def _verdict(finding: Finding) -> str:
    return f"{finding.verdict}, accepted" if finding.excused else finding.verdict


def _heading(figure: Figure, result: Result, finding: Finding, closeup: Closeup) -> list[tuple[float, str, Style]]:
    """Title, place and sentence as rows: distance from the top [inch], words, style."""
    where = f"{result.board} - {result.pattern}"
    if closeup.corner:
        where += f"; corner: {closeup.corner}"
    title: Style = {"fontsize": 12, "fontweight": "bold"}
    small: Style = {"fontsize": TEXT}
    parts = (
        (f"{finding.label}: {finding.quantity}", 2, _WIDTH - 2 * _EDGE - _BADGE, title, 0.22),
        (where, 1, _WIDTH - 2 * _EDGE, small, 0.22),
        (finding.sentence, 2, _WIDTH - 2 * _EDGE, small, _ROW),
    )
    rows: list[tuple[float, str, Style]] = []
    down = 0.14
    for text, most, room, style, step in parts:
        for line in fitted(figure, plain(text), room, most, style["fontsize"], style.get("fontweight", "normal")):
            rows.append((down, line, style))
            down += step
    return rows


def _bar(axes: Axes, finding: Finding) -> None:
    """The reading as a bar against its limit."""
    shares = _as_shares(finding)
    value, limit = shares or value_and_limit(finding)
    ends = [0.0, finding.value, finding.limit or 0.0]
    low, high = min(ends), max(ends)
    span = (high - low) or 1.0
    axes.set_xlim(low - (0.05 * span if low < 0 else 0.0), high + 0.05 * span)
    axes.set_ylim(-0.5, 0.5)
    axes.barh([0.0], [finding.value], 0.6, color=FAILING if finding.verdict == "fail" else DARK, zorder=2)
    if finding.limit is not None:
        axes.axvline(finding.limit, color=WARNING, linewidth=1.5, linestyle=(0, (6, 2.5)), zorder=4)
    beside(axes, 0.5, f"{_allowed(finding, False)}\n{limit}", WARNING)
    factor, name = prefixed(max(abs(low), abs(high)), finding.unit)
    if shares:
        factor, name = 0.01, "%"
    ticks = nice_ticks(*axes.get_xlim(), 6, finding.unit == "1" and not shares)
    axes.set_xticks(ticks, [f"{number(x / factor)} {name}".strip() for x in ticks], parse_math=False)
    axes.set_yticks([])
    axes.set_facecolor("white")
    for side, line in axes.spines.items():
        line.set_visible(side in ("left", "bottom"))
        line.set_color(INK)
    axes.tick_params(labelsize=SMALL, colors=INK, length=3)
    caption(axes, plain(f"{_sentence_case(finding.quantity)}: {value}"), {})


def _as_shares(finding: Finding) -> tuple[str, str] | None:
    """Reading and limit in percent, where they are shares and no counts."""
    if finding.unit != "1" or finding.limit is None or (finding.value % 1 == 0 and finding.limit % 1 == 0):
        return None
    as_percent = replace(finding, value=100 * finding.value, limit=100 * finding.limit)
    value, limit = value_and_limit(as_percent)
    return f"{value} %", f"{limit} %"


def _sentence_case(text: str) -> str:
    return text[:1].upper() + text[1:]


def _allowed(finding: Finding, turned: bool) -> str:
    """How a limit is named; `turned` where it holds for a magnitude and the value is negative."""
    if turned:
        return "not below"
    return "at most" if finding.worse == "high" else "at least"


def _over_time(panels: list[Axes], closeup: Closeup, finding: Finding, names: dict[int, str]) -> None:
    """Waveforms, and who was on, over one axis of time."""
    if not panels:
        return
    clock = Clock.over(closeup.start, closeup.stop)
    lean_axes(panels, clock)
    if finding.at is not None:
        for axes in panels:
            moment = clock(min(max(finding.at, closeup.start), closeup.stop))
            axes.axvline(moment, color=INK, linewidth=0.8, linestyle=(0, (1, 2)), zorder=1.2)
    for axes, panel in zip(panels, closeup.panels, strict=False):
        _panel(axes, panel, finding, clock)
    if names:
        who_was_on(panels[-1], closeup, names, clock)


def _panel(axes: Axes, panel: Panel, finding: Finding, clock: Clock) -> None:
    """Waveforms of one unit; with the limit and the reading where they are what was judged."""
    from matplotlib.lines import Line2D

    value, limit = value_and_limit(finding)
    turned = panel.limit is not None and finding.limit is not None and panel.limit != finding.limit
    if turned:
        value, limit = value_and_limit(replace(finding, value=-finding.value, limit=-(finding.limit or 0.0)))
    legend = _waves(axes, panel, clock)
    on_top = _range(axes, panel)
    if panel.mean is not None:
        axes.axhline(panel.mean, color=INK, linewidth=1.3, linestyle=(0, (1, 1)), zorder=4)
        legend[f"mean, {value}"] = Line2D([], [], color=INK, linewidth=1.3, linestyle=(0, (1, 1)))
    if panel.limit is not None:
        limit_line(axes, panel.limit, _allowed(finding, turned), panel.unit, limit)
    factor, name = prefixed(max(abs(y) for y in axes.get_ylim()), panel.unit)
    ticks = nice_ticks(*axes.get_ylim(), round(axes.bbox.height / _DPI / _TICK), panel.unit == "1")
    rule(axes, ticks, [number(y / factor) for y in ticks])
    caption(axes, plain(panel.title) + (f" [{name}]" if name else ""), legend)
    if panel.marked is not None:
        mark(axes, clock(panel.marked[0]), panel.marked[1], _reading(finding, value), on_top)


def _waves(axes: Axes, panel: Panel, clock: Clock) -> dict[str, Artist]:
    """Draw the waveforms of a panel; what to name where there are several."""
    from matplotlib.patches import Patch

    legend: dict[str, Artist] = {}
    for n, wave in enumerate(panel.waves):
        tone = _TONES[n % len(_TONES)]
        # What lies behind is drawn wider: two that run together are both seen.
        width, order = 1.1 + 1.3 * n, 3 - 0.1 * n
        band(axes, wave, clock.scale, None, clock.origin, facecolor=tone, edgecolor=tone, linewidth=width, zorder=order)
        if len(panel.waves) > 1:
            legend[plain(wave.label)] = Patch(color=tone)
        if panel.levels:
            axes.axhline(panel.levels[n], color=tone, linewidth=1.3, linestyle=(0, (4, 2)), zorder=4)
    return legend


def _range(axes: Axes, panel: Panel) -> bool:
    """Set the range of a panel's values; whether the words at its reading stand above the waveform, else below."""
    low = min(float(wave.low.min()) for wave in panel.waves)
    high = max(float(wave.high.max()) for wave in panel.waves)
    above = below = 0.07
    on_top = True
    if panel.marked is not None:
        on_top = panel.marked[1] >= (low + high) / 2
        low, high = min(low, panel.marked[1]), max(high, panel.marked[1])
        above, below = (_WORDS_STRIP, below) if on_top else (above, _WORDS_STRIP)
    least = _LEAST_RANGE.get(panel.unit, 1.0)
    if panel.limit:
        least = min(least, 0.05 * abs(panel.limit))
    frame(axes, low, high, panel.limit, above, below, least)
    return on_top


def _reading(finding: Finding, value: str) -> str:
    """The reading in words, with its time."""
    at, *lasting = when(finding)
    if finding.shape == "energy":
        return ", ".join([f"{value} from the event {at}", *lasting])
    return ", ".join([f"{value} {at}", *lasting])
