"""The release picture can be read: one clamp or a dozen, limits near or far, nothing given, in grey."""

from __future__ import annotations

import itertools
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from made_up_results import result
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure
from picture_text import collisions, pixels, words

from boardsim.report import drawing, release_picture
from boardsim.report.release_picture import MOST_ROWS, draw_release, release_figure
from boardsim.verdict.findings import Envelope, Result, Verdict
from boardsim.verdict.studies import Release, ReleaseRow

HIGH = "supply high, coils cold, clamps high"
LOW = "supply high, coils cold, clamps low"


def row(
    k: int = 0,
    *,
    opposing: float = 24.0,
    clamp: str | None = None,
    label: str = "lane 0",
    release: float | None = 0.2,
    limit: float | None = 60.0,
    verdict: Verdict = "pass",
    slices: int = 1500,
    span: float = 7e-3,
    current: float = 1.8,
) -> ReleaseRow:
    """A coil of 14 ohm and 14 mH that gives its current away against a voltage; the first row is the board's own."""
    edges = np.linspace(-0.05 * span, span, slices + 1)
    t = np.maximum((edges[:-1] + edges[1:]) / 2, 0.0)
    i = np.maximum((current + opposing / 14) * np.exp(-t / 1e-3) - opposing / 14, 0.0)
    v = np.where(edges[:-1] < 0, 0.1, 25.0 + np.where(i > 0, opposing, 0.0))
    peak = 25.0 + 1.1 * opposing
    gone = float(np.log((current + opposing / 14) / ((release or 0.2) + opposing / 14))) * 1e-3
    return ReleaseRow(
        clamp or f"diode-zener: fast-2a, {opposing:g}v-5w",
        k == 0,
        0,
        label,
        "ejector",
        peak,
        limit,
        15.8e-3,
        7.5e-6,
        0.98e-3,
        gone if release is not None else None,
        0.8,
        release,
        verdict,
        "" if verdict == "pass" else "lane 0: the switch takes more than it stands",
        HIGH if k % 2 else LOW,
        Envelope("voltage at the switch", "V", edges, v, v),
        Envelope("coil current", "A", edges, i, i),
    )


def many(n: int, **changes: object) -> tuple[ReleaseRow, ...]:
    voltages = np.geomspace(40.0, 0.9, n) if n > 1 else [24.0]
    return tuple(row(k, opposing=float(v), **changes) for k, v in enumerate(voltages))  # type: ignore[arg-type]


def drawn(rows: tuple[ReleaseRow, ...], **changes: object) -> Figure:
    return release_figure(judged(rows, **changes))


def judged(rows: tuple[ReleaseRow, ...], **changes: object) -> Result:
    return result(study=Release(rows), pattern="release", **changes)


COUNTS = (1, pytest.param(3, marks=pytest.mark.slow), pytest.param(9, marks=pytest.mark.slow), MOST_ROWS)


@pytest.mark.parametrize("n", COUNTS)
@pytest.mark.parametrize(
    ("limit", "release"), [(60.0, 0.2), (24.0, 1.7), (900.0, 0.001), (None, None), (60.0, None), (None, 0.2)]
)
def test_no_words_overlap(n: int, limit: float | None, release: float | None) -> None:
    assert collisions(drawn(many(n, limit=limit, release=release))) == []


@pytest.mark.parametrize("n", COUNTS)
@pytest.mark.parametrize("own", [True, False])
def test_no_words_overlap_with_the_longest_names(n: int, own: bool) -> None:
    """Names are at most 60 letters long; a clamp may name three parts."""
    clamp = f"diode-zener: {'rectifier of the seed drum ' * 2}, {'suppressor of the second row ' * 2}, 33.0 ohm"
    rows = many(
        n, clamp=clamp, label="seed slot 12 of the second row from the left, lower drum", verdict="limit-missing"
    )
    rows = tuple(replace(r, own=own or k == 0) for k, r in enumerate(rows))
    figure = drawn(rows, board="bean planter of the northern field " * 3, findings=())
    assert collisions(figure) == []


def test_no_words_overlap_with_large_and_tiny_numbers() -> None:
    big = replace(row(), peak=1234.5, peak_limit=999.6, clamp_energy=123.4e-3, switch_energy=999e-9, pulls_in=123.4e-3)
    for one in (big, replace(big, let_go=888e-6), replace(big, peak=0.1234, peak_limit=12345.0)):
        assert collisions(drawn((one, replace(one, own=False, clamp="none")))) == []


def test_each_row_names_its_clamp_its_numbers_and_its_verdict() -> None:
    rows = (row(), replace(row(1, opposing=36.0, clamp="none", verdict="fail"), peak=61.2))
    said = words(drawn(rows))
    for part in (
        "diode-zener",
        "fast-2a, 24v-5w",
        "the board's own",
        "none",
        "pass",
        "fail",
        "peak 51.4 V",
        "peak 61.2 V",
    ):
        assert part in said
    for part in ("rated 60.0 V", "into the clamp 15.8 mJ", "into the switch 7.50 uJ", "release 200 mA", "re-fire "):
        assert said.count(part) == 2
    assert "lane 0 turned off" in said
    assert HIGH in said
    assert LOW in said
    assert f"lets go in {1e6 * rows[0].let_go:.0f} us" in said  # type: ignore[operator]


def test_builds_of_one_board_are_named_by_their_channels() -> None:
    rows = tuple(replace(row(k, label=f"gate {k}"), own=True, channel=k) for k in range(3))
    said = words(drawn(rows))
    assert "channels turned off" in said
    assert "the board's own" not in said
    assert all(f"gate {k}" in said for k in range(3))


def test_what_was_not_given_is_said() -> None:
    said = words(drawn((row(release=None, limit=None),)))
    assert "no release current" in said
    assert "no rating given" in said
    assert "re-fire" not in said


def test_a_current_that_does_not_fall_far_enough_is_said() -> None:
    assert "does not let go" in words(drawn((replace(row(), let_go=None),)))


def test_a_limit_far_away_is_named_and_does_not_flatten_the_waveform() -> None:
    figure = drawn((row(limit=900.0),))
    assert "rated 900 V, far above" in words(figure)
    assert figure.axes[0].get_ylim()[1] < 100
    near = drawn((row(limit=60.0),))
    assert "far above" not in words(near)
    assert near.axes[0].get_ylim()[1] > 60


def test_limit_and_release_current_are_drawn_where_they_are() -> None:
    voltage, current = drawn((row(limit=60.0, release=0.2),)).axes
    assert any(np.allclose(line.get_ydata(), 60.0) for line in voltage.lines)
    assert any(np.allclose(line.get_ydata(), 0.2) for line in current.lines)


def test_the_moment_of_letting_go_is_marked_on_the_current() -> None:
    one = row(opposing=0.9)  # slow enough for an axis in milliseconds
    _, current = drawn((one,)).axes
    marker = next(line for line in current.lines if line.get_marker() == "o")
    assert marker.get_xdata()[0] == pytest.approx(one.let_go * 1e3)  # type: ignore[index, operator]
    assert marker.get_ydata()[0] == one.release  # type: ignore[index]


def test_all_rows_share_their_scales_and_show_the_slowest_release() -> None:
    rows = many(6)
    figure = drawn(rows)
    for kind in (0, 1):
        panels = figure.axes[kind::2]
        assert len({(axes.get_xlim(), axes.get_ylim()) for axes in panels}) == 1
    slowest = max(r.let_go for r in rows if r.let_go is not None)
    assert figure.axes[1].get_xlim()[1] > 1e3 * slowest


def test_builds_of_different_coils_have_values_of_their_own_and_share_their_times() -> None:
    big, small = row(), replace(row(current=0.05, release=0.01), channel=5, label="shaker")
    figure = drawn((big, small))
    assert figure.axes[1].get_xlim() == figure.axes[3].get_xlim()
    assert figure.axes[1].get_ylim()[1] > 1.8
    assert 0.05 < figure.axes[3].get_ylim()[1] < 0.1


def test_names_that_differ_at_their_ends_stay_different() -> None:
    clamps = [f"diode-zener: a very ordinary rectifier of the seed drum, a suppressor of class {k}" for k in "AB"]
    said = words(drawn(tuple(row(k, clamp=clamp) for k, clamp in enumerate(clamps))))
    assert "class A" in said
    assert "class B" in said


def test_the_board_s_own_clamp_is_repeated_behind_the_others_only() -> None:
    figure = drawn(many(3))
    ghost = to_rgb(release_picture._GHOST)
    counted = [sum(tuple(c.get_facecolor()[0][:3]) == ghost for c in axes.collections) for axes in figure.axes]
    assert counted == [0, 0, 1, 1, 1, 1]


def test_more_clamps_than_can_be_compared_are_counted() -> None:
    figure = drawn(many(MOST_ROWS + 3))
    assert len(figure.axes) == 2 * MOST_ROWS
    assert "3 more rows stand in findings.json" in words(figure)
    assert collisions(figure) == []


def test_a_spike_of_one_slice_can_be_seen() -> None:
    calm = row(slices=20_000)
    assert calm.v_switch is not None
    high = calm.v_switch.high.copy()
    high[1400] += 8.0  # 0.16 ms after the turn-off
    struck = replace(calm, v_switch=replace(calm.v_switch, high=high))
    changed = np.abs(pixels(drawn((calm,))) - pixels(drawn((struck,)))).sum(axis=2) > 60
    assert changed.sum(axis=0).max() > 15


def test_tones_that_meet_can_be_told_apart_in_grey() -> None:
    # Luma after ITU-R BT.601, as programs convert to grey; a seventh suffices on paper, from memory.
    tones = ["#ffffff", release_picture._GHOST, drawing.WARNING, drawing.DARK]
    luma = [float(np.dot(to_rgb(tone), (0.299, 0.587, 0.114))) for tone in tones]
    assert all(lighter - darker > 1 / 7 for lighter, darker in itertools.pairwise(luma))


def test_a_row_without_waveforms_says_so_beside_others() -> None:
    empty = replace(row(1, verdict="unproven"), peak=None, clamp_energy=None, v_switch=None, i_coil=None, let_go=None)
    figure = drawn((row(), empty))
    assert words(figure).count("no waveforms") == 2
    assert collisions(figure) == []


def test_without_any_waveform_the_picture_says_so(tmp_path: Path) -> None:
    empty = replace(row(verdict="unproven"), peak=None, v_switch=None, i_coil=None, let_go=None, corner="")
    figure = drawn((empty,))
    assert "No waveforms" in words(figure)
    assert collisions(figure) == []
    draw_release(judged((empty,)), tmp_path / "release.png")
    assert (tmp_path / "release.png").stat().st_size > 5000


def test_the_file_is_a_picture_and_stands_alone_in_its_folder(tmp_path: Path) -> None:
    one = judged(many(2, label="桃 $x_{n}$", clamp="a_b $\\frac$ {n}"), board="桃 $x_{n}$")
    draw_release(one, tmp_path / "out" / "release.png")
    assert [path.name for path in (tmp_path / "out").iterdir()] == ["release.png"]
    assert (tmp_path / "out" / "release.png").read_bytes().startswith(b"\x89PNG\r\n")
