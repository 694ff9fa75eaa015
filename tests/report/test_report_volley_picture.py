"""The volley's picture can be read: one channel or very many, limits near or far or not given, in grey, no words over words."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from made_up_results import finding, result
from matplotlib.axes import Axes
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure
from picture_text import collisions, words

from boardsim.report import drawing
from boardsim.report.volley_picture import draw_volley, volley_figure
from boardsim.verdict.findings import Result, Verdict
from boardsim.verdict.studies import Volley, VolleyStep

CHANNELS = (1, pytest.param(8, marks=pytest.mark.slow), 24, 64)
LONG = (
    "any 5 of the 24 channels at once pass, with a pulse of 85.0 ms; with 6: the supply came within 1 % of its ceiling of 10.0 A "
    "for 82.7 ms, first at 3.918 ms (seed slots of the second row from the left, lower drum 0-5 (6 channels) were on): a supply "
    "that trips or hiccups instead of limiting would drop the rail. The firmware may fire 6 at once. And so on, " * 3
)


def step(on: int, verdict: Verdict, **changes: object) -> VolleyStep:
    values: dict[str, object] = {
        "on": on,
        "channels": tuple(range(on)),
        "who": f"slots 0-{on - 1}",
        "lowest_rail": 24.0 - 0.2 * on,
        "coil_current": 1.4 - 0.01 * on,
        "pull_in": 0.8,
        "supply_peak": min(1.5 * on, 10.0),
        "at_ceiling": 0.08 if on > 6 else 0.0,
        "verdict": verdict,
        "broken": "",
    }
    return VolleyStep(**{**values, **changes})  # type: ignore[arg-type]


def volley(channels: int, most: int, **changes: object) -> Volley:
    steps = tuple(step(n, "pass" if n <= most else "fail") for n in range(1, channels + 1))
    values = {"steps": steps, "most": most, "wanted": 6, "width": 0.085, "rail_limit": 19.0}
    return Volley(**{**values, "rail_lasting": 1e-3, "ceiling": 10.0, **changes})  # type: ignore[arg-type]


def judged(study: Volley, sentence: str = LONG, verdict: Verdict = "fail", **changes: object) -> Result:
    answer = finding(verdict, None, check="volley", sentence=sentence)
    return result((answer,), study=study, traces=None, pattern="volley", **changes)


def drawn(study: Volley, **changes: object) -> Figure:
    return volley_figure(judged(study, **changes))  # type: ignore[arg-type]


def markers(axes: Axes) -> dict[int, tuple[str, str]]:
    """Marker and its filling for every number of channels that is drawn."""
    return {
        int(x): (str(line.get_marker()), str(line.get_markerfacecolor()))
        for line in axes.lines
        if line.get_marker() not in ("None", None, "")
        for x, y in zip(line.get_xdata(), line.get_ydata(), strict=True)  # type: ignore[arg-type, call-overload]
        if np.isfinite(y)
    }


@pytest.mark.parametrize("channels", CHANNELS)
@pytest.mark.parametrize("share", [0.0, 0.3, 1.0])
@pytest.mark.parametrize("wanted", [None, 1, 0.5, 1.0])
def test_no_words_overlap(channels: int, share: float, wanted: float | None) -> None:
    asked = None if wanted is None else max(1, round(wanted * channels)) if isinstance(wanted, float) else wanted
    assert collisions(drawn(volley(channels, round(share * channels), wanted=asked))) == []


@pytest.mark.parametrize("channels", CHANNELS)
@pytest.mark.parametrize(
    "changes",
    [
        {"rail_limit": None, "ceiling": None},
        {"rail_limit": 2.0, "ceiling": 400.0},
        {"rail_limit": 23.9, "ceiling": 1.0},
    ],
)
def test_no_words_overlap_wherever_limits_are(channels: int, changes: dict[str, float | None]) -> None:
    figure = drawn(volley(channels, channels // 2, **changes), sentence="all pass", board="bean planter " * 8)
    assert collisions(figure) == []


def test_the_answer_stands_at_the_top_with_the_verdict() -> None:
    said = words(drawn(volley(24, 5), sentence="any 5 of the 24 channels at once pass"))
    for part in ("Any 5 of the 24 channels at once pass", "verdict: fail", "fruit sorter", "85.0 ms", "wanted: 6"):
        assert part in said
    assert "any 5 pass" in said


@pytest.mark.parametrize(
    ("channels", "most", "said"),
    [(24, 0, "not one passes"), (24, 1, "any 1 passes"), (24, 24, "all pass"), (1, 1, "it passes"), (1, 0, "not one")],
)
def test_how_many_pass_is_named(channels: int, most: int, said: str) -> None:
    assert said in words(drawn(volley(channels, most, wanted=None)))


def test_points_are_full_where_a_number_passes_hollow_where_not_and_crossed_where_not_proven() -> None:
    study = volley(10, 5)
    steps = tuple(
        replace(s, verdict="unproven", proven=False)
        if s.on == 6
        else replace(s, verdict="tight")
        if s.on < 3
        else replace(s, proven=s.on != 9)
        for s in study.steps
    )
    figure = drawn(replace(study, steps=steps))
    for axes in figure.axes[1:]:
        found = markers(axes)
        assert {n for n, look in found.items() if look == ("o", drawing.DARK)} == {1, 2, 3, 4, 5}
        assert {n for n, look in found.items() if look == ("o", "white")} == {7, 8, 10}
        assert {n for n, look in found.items() if look[0] == "X"} == {6, 9}
    assert {"passes", "does not pass", "not proven"} <= {
        text.get_text()
        for text in figure.axes[1].get_legend().get_texts()  # type: ignore[union-attr]
    }


def test_the_readings_are_drawn_at_their_numbers() -> None:
    study = volley(8, 4)
    axes = drawn(study).axes
    for panel, name in ((1, "lowest_rail"), (2, "coil_current"), (3, "supply_peak")):
        line = axes[panel].lines[0]
        assert list(line.get_xdata()) == list(range(1, 9))  # type: ignore[arg-type]
        assert list(line.get_ydata()) == [getattr(s, name) for s in study.steps]  # type: ignore[arg-type]


def test_limits_are_named_with_their_values_or_that_they_were_not_given() -> None:
    said = words(drawn(volley(24, 5)))
    for part in ("brown-out limit\n19.0 V", "pull-in\n800 mA", "supply's ceiling\n10.0 A", "at its ceiling from 7 on"):
        assert part in said
    bare = volley(24, 5, rail_limit=None, ceiling=None, wanted=None)
    bare = replace(bare, steps=tuple(replace(s, pull_in=None, at_ceiling=None) for s in bare.steps))
    said = words(drawn(bare))
    for part in ("brown-out limit:\nnot given", "pull-in:\nnot given", "supply's ceiling:\nnot given"):
        assert part in said
    assert "how many are wanted was not given" in said


def test_where_the_coil_that_comes_nearest_changes_its_own_limit_is_drawn() -> None:
    study = volley(8, 4)
    mixed = replace(study, steps=tuple(replace(s, pull_in=0.8 if s.on < 5 else 0.3) for s in study.steps))
    figure = drawn(mixed)
    assert "of the coil nearest its pull-in" in words(figure)
    limits = [line for line in figure.axes[2].lines if to_rgb(line.get_color()) == to_rgb(drawing.WARNING)]
    assert list(limits[0].get_ydata()) == [0.8] * 4 + [0.3] * 4  # type: ignore[arg-type]
    assert collisions(figure) == []


def test_numbers_that_were_not_run_leave_the_others_where_they_belong() -> None:
    study = volley(64, 20)
    some = tuple(s for s in study.steps if s.on <= 32 or s.on % 8 == 0)
    axes = drawn(replace(study, steps=some)).axes
    assert sorted(markers(axes[1])) == [s.on for s in some]
    assert axes[1].get_xlim() == (0.5, 64.5)


def test_a_number_without_any_reading_is_a_gap_and_none_at_all_is_said() -> None:
    study = volley(6, 3)
    gone = {"lowest_rail": None, "coil_current": None, "supply_peak": None, "at_ceiling": None, "proven": False}
    part = tuple(replace(s, **gone) if s.on == 4 else s for s in study.steps)  # type: ignore[arg-type]
    assert 4 not in markers(drawn(replace(study, steps=part)).axes[1])
    nothing = replace(study, most=0, steps=tuple(replace(s, verdict="unproven", **gone) for s in study.steps))  # type: ignore[arg-type]
    figure = drawn(nothing, verdict="unproven")
    assert words(figure).count("no run came to an end") == 3
    assert collisions(figure) == []


def test_neighbours_of_one_verdict_share_a_bar_that_names_it() -> None:
    study = volley(24, 12)
    steps = tuple(replace(s, verdict="tight") if 6 < s.on <= 12 else s for s in study.steps)
    bars = [text.get_text() for text in drawn(replace(study, steps=steps)).axes[0].texts]
    assert bars[:3] == ["pass", "tight", "fail"]


def test_another_study_is_no_volley() -> None:
    with pytest.raises(TypeError):
        volley_figure(result())


def test_the_file_is_a_picture_and_stands_alone_in_its_folder(tmp_path: Path) -> None:
    draw_volley(judged(volley(8, 3), board="a_b $\\frac$ {n} 桃"), tmp_path / "out" / "volley.png")
    assert [path.name for path in (tmp_path / "out").iterdir()] == ["volley.png"]
    assert (tmp_path / "out" / "volley.png").read_bytes().startswith(b"\x89PNG\r\n")
