"""The pictures of strokes and of motion can be read: few or many corners, limits given or not, no words over words."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from made_up_results import closeup, finding, result, wave
from matplotlib.figure import Figure
from picture_text import collisions, words

from boardsim.report.motion_picture import draw_motion, motion_figure
from boardsim.report.stroke_picture import draw_stroke, stroke_figure
from boardsim.verdict.closeups import Closeup, Panel
from boardsim.verdict.findings import Result
from boardsim.verdict.strokes_study import StrokePoint, StrokeRow, StrokeStudy

MS = 1e-3
CORNERS = (
    "supply high, coils cold, clamps high and hot",
    "supply high, coils cold, clamps low and cold",
    "supply low, coils hot",
    "supply low, coils cold",
    "supply high, coils cold, low inductance, clamps high and hot",
    "supply high, coils cold, low inductance, clamps low and cold",
)
SAID = (
    "row 0: the shortest pulse that works in every corner is 9.56 ms: rod arrives within 10.5 ms of its command, with 155 uJ to 721 uJ; "
    "with 9.50 ms, the softest blow of rod, 147 uJ at 10.47 ms, is held against at least 150 uJ (supply low, coils hot); from 10.3 ms on a "
    "longer pulse makes no harder blow: in every corner it comes before the end of the pulse"
)


def point(width: float, flies: float) -> StrokePoint:
    """A blow that grows with the width until the pulse is as long as the travel time. [s]"""
    if width < 0.7 * flies:
        return StrokePoint(width, None, None, None, None, MS, 10 * MS, "fail", "too short")
    share = min(width / flies, 1.0)
    speed = share / flies * 6 * MS
    verdict = "pass" if width > 0.9 * flies else "fail"
    return StrokePoint(
        width, flies / share, flies / share, speed, 0.7 * MS * speed**2, 2 * MS, 10 * MS, verdict, "too soft"
    )


def row(corners: int, **changes: Any) -> StrokeRow:
    widths = [*np.linspace(2 * MS, 13 * MS, 20), 80 * MS]
    points = {name: tuple(point(w, (6 + 0.8 * k) * MS) for w in widths) for k, name in enumerate(CORNERS[:corners])}
    values: dict[str, Any] = {"shown": 13 * MS, "due": 14 * MS, "least": 0.15 * MS, "most": 0.9 * MS}
    return StrokeRow(0, "row 0", "rod", 2 * MS, points, **{**values, **changes})


def judged(*rows: StrokeRow, sentence: str = SAID) -> Result:
    answer = finding("pass", 0, check="stroke-width", sentence=sentence, label="row 0")
    return result((answer,), study=StrokeStudy(rows), traces=None, pattern="stroke")


@pytest.mark.parametrize("corners", [1, 6])
@pytest.mark.parametrize(
    "changes",
    [
        {},
        {"due": None, "least": None, "most": None},
        {"asked": 12.4 * MS},
        {"asked": 3 * MS, "due": 40 * MS},
    ],
)
def test_no_words_overlap_in_a_stroke(corners: int, changes: dict[str, Any]) -> None:
    assert collisions(stroke_figure(judged(row(corners, **changes)))) == []


def test_several_channels_stand_side_by_side_and_more_are_named() -> None:
    figure = stroke_figure(judged(*[replace(row(2), label=f"row {k}") for k in range(4)]))
    assert len(figure.axes) == 9
    assert "1 more channels stand in findings.json" in words(figure).replace("\n", " ")
    assert collisions(figure) == []


def test_every_corner_has_a_curve_and_a_number_and_limits_are_named() -> None:
    figure = stroke_figure(judged(row(6)))
    said = words(figure).replace("\n", " ")
    for name in ("1 supply high", "6 supply high", "latest arrival", "most", "least", "works in every corner from"):
        assert name in said
    times, speeds, blows = figure.axes
    assert sum(len(line.get_xdata()) > 3 for line in speeds.lines) == 6  # type: ignore[arg-type]
    for axes in (times, speeds, blows):  # what is far beyond is known, and not drawn
        assert axes.get_xlim()[1] < 14.0
    assert blows.get_ylim()[1] > 0.9


def test_a_stroke_in_which_nothing_arrives_is_a_picture_too(tmp_path: Path) -> None:
    stuck = StrokePoint(50 * MS, None, None, None, None, 0.0, None, "fail", "stays at its rest")
    alone = StrokeRow(0, "row 0", "rod", 2 * MS, {CORNERS[2]: (stuck,)}, 50 * MS, 14 * MS, None, None)
    figure = stroke_figure(judged(alone, sentence="row 0: no pulse up to 50.0 ms works in every corner"))
    assert "no width works in every corner" in words(figure)
    assert collisions(figure) == []
    draw_stroke(judged(alone), tmp_path / "stroke.png")
    assert (tmp_path / "stroke.png").stat().st_size > 5_000


def moved(part: str, hits: tuple[tuple[float, float], ...], **changes: Any) -> tuple[Any, Closeup]:
    found = finding(
        "pass",
        0,
        check="impact",
        quantity="energy of the hardest blow",
        part=part,
        value=0.7 * MS,
        unit="J",
        at=30 * MS,
    )
    span = (20 * MS, 45 * MS)
    panels = (
        Panel("Position; dashed: the stop", "m", (wave("position", "m", 0.0, 2 * MS, *span),), levels=(2 * MS,)),
        Panel("Speed", "m/s", (wave("speed", "m/s", -0.2, 0.9, *span),)),
        Panel("Coil current", "A", (wave("coil current", "A", 0.0, 0.1, *span),)),
    )
    return found, closeup(found, 3, span=span, panels=panels, hits=hits, **changes)


@pytest.mark.parametrize("kinds", [1, 3])
@pytest.mark.parametrize("hits", [(), ((32.4 * MS, 0.6),), ((21 * MS, 0.9), (22 * MS, 0.2), (22.5 * MS, 0.05))])
def test_no_words_overlap_in_a_picture_of_motion(kinds: int, hits: tuple[tuple[float, float], ...]) -> None:
    several = [moved(f"rod {k}", hits) for k in range(kinds)]
    shown = result(tuple(f for f, _ in several), motions=tuple(c for _, c in several))
    figure = motion_figure(shown)
    assert len(figure.axes) == 3 * kinds
    assert collisions(figure) == []
    assert words(figure).count("hits its stop with") == (kinds if hits else 0)


def test_every_blow_is_marked_in_all_three_panels(tmp_path: Path) -> None:
    found, one = moved("rod", ((30 * MS, 0.9), (33 * MS, 0.2)))
    shown = result((found,), motions=(one,))
    figure: Figure = motion_figure(shown)
    for axes in figure.axes:
        upright = {
            round(float(np.ravel(line.get_xdata())[0]), 3)
            for line in axes.lines
            if len(set(np.ravel(line.get_xdata()))) == 1
        }
        assert {30.0, 33.0} <= upright
    draw_motion(shown, tmp_path / "motion.png")
    assert (tmp_path / "motion.png").stat().st_size > 5_000


def test_a_run_without_motion_has_no_such_picture() -> None:
    with pytest.raises(ValueError, match="no coil of this run moves anything"):
        motion_figure(result())
