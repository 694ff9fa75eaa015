"""The overview picture can be read: any number of channels, limits near or far, in grey, each spike."""

from dataclasses import replace
from pathlib import Path

import matplotlib
import numpy as np
import pytest
from made_up_results import finding, result, traces
from matplotlib.axes import Axes
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure
from matplotlib.image import imread
from matplotlib.patches import Patch
from matplotlib.text import Text
from picture_text import collisions, pixels, swatches, visible_texts, words

from boardsim.report import drawing
from boardsim.report.overview import draw_overview, overview_figure
from boardsim.verdict.findings import Envelope, Result, Traces

CHANNELS = (1, pytest.param(2, marks=pytest.mark.slow), pytest.param(8, marks=pytest.mark.slow), 24, 64, 96)


def drawn(seen: Traces, **changes: object) -> Figure:
    return overview_figure(result(traces=seen, **changes))


def rail_axes(figure: Figure) -> Axes:
    return figure.axes[2]


def lowest_note(figure: Figure) -> Text:
    return next(text for text in visible_texts(figure) if text.get_text().startswith("lowest"))


def test_the_search_for_overlaps_finds_them() -> None:
    figure = Figure()
    figure.text(0.5, 0.5, "tray gate")
    figure.text(0.51, 0.5, "seed slot")
    figure.text(0.98, 0.2, "needle selector")
    assert collisions(figure) == ["'tray gate' overlaps 'seed slot'", "'needle selector' leaves the picture"]


def test_the_search_for_overlaps_finds_words_on_the_sample_of_a_legend() -> None:
    figure = Figure()
    figure.legend([Patch()], ["tray gate"], loc="upper left")
    assert collisions(figure) == []
    (sample,) = swatches(figure)
    figure.text(sample.x0 / figure.bbox.width, sample.y0 / figure.bbox.height, "W", transform=figure.transFigure)
    assert collisions(figure) == ["'W' overlaps a sample of a legend"]


@pytest.mark.parametrize("channels", CHANNELS)
@pytest.mark.parametrize(
    ("limit", "ceiling", "sag"),
    [(19.0, 10.0, 2.6), (5.0, 4000.0, 0.3), (23.5, 0.4, 9.0), (None, None, 2.0), (22.9, 1.4, 1.0)],
)
def test_no_words_overlap(channels: int, limit: float | None, ceiling: float | None, sag: float) -> None:
    assert collisions(drawn(traces(channels, limit=limit, ceiling=ceiling, sag=sag))) == []


@pytest.mark.parametrize("channels", CHANNELS)
def test_no_words_overlap_with_the_longest_names(channels: int) -> None:
    long = "seed slot {n} of the second row from the left, lower drum"
    figure = drawn(traces(channels, label=long), board="bean planter " * 5, pattern="a very dense field " * 3)
    assert collisions(figure) == []


@pytest.mark.parametrize("at", [0.0, 0.02, 0.5, 0.98, 1.0])
def test_the_lowest_point_is_marked_and_named_free_of_waveform_and_limit(at: float) -> None:
    seen = traces(24, sag=2.6)
    slot = int(at * (len(seen.rail.low) - 1))
    low = seen.rail.low.copy()
    low[slot] = 18.234
    figure = drawn(replace(seen, rail=replace(seen.rail, low=low)))
    note, axes = lowest_note(figure), rail_axes(figure)
    middle = (seen.rail.edges[slot] + seen.rail.edges[slot + 1]) / 2
    assert note.get_text().startswith("lowest: 18.23 V at ")
    marker = next(line for line in axes.lines if line.get_marker() == "o")
    assert (marker.get_xdata()[0], marker.get_ydata()[0]) == pytest.approx((middle * 1e3, 18.234))  # type: ignore[index]
    box, frame = visible_texts(figure)[note], axes.get_window_extent()
    assert frame.x0 <= box.x0
    assert box.x1 <= frame.x1
    assert box.y1 <= frame.y1
    above = axes.transData.transform((0, max(seen.rail.high.max(), 19.0)))[1]
    assert box.y0 > above
    assert collisions(figure) == []


@pytest.mark.parametrize(("limit", "in_view"), [(19.0, True), (23.9, True), (22.0, True), (1.0, False)])
def test_the_brown_out_limit_is_named_with_its_value_wherever_it_is(limit: float, in_view: bool) -> None:
    figure = drawn(traces(24, limit=limit, sag=1.5))
    low, high = rail_axes(figure).get_ylim()
    assert (low <= limit <= high) == in_view
    assert f"brown-out limit\n{limit:#.3g} V" in words(figure)
    assert ("far below" in words(figure)) != in_view


def test_the_ceiling_is_named_with_its_value() -> None:
    assert "supply's ceiling\n10.0 A" in words(drawn(traces(24)))
    assert "supply's ceiling\n4.00 kA,\nfar above" in words(drawn(traces(24, ceiling=4000.0)))
    assert "supply's ceiling:\nnot given" in words(drawn(traces(24, ceiling=None)))


def test_the_title_says_board_pattern_verdict_and_corner() -> None:
    said = words(drawn(traces(24)))
    for part in ("fruit sorter", "rush", "verdict: fail", "supply low, coils hot"):
        assert part in said


def test_every_channel_has_a_label_as_long_as_there_is_room() -> None:
    labels = [text.get_text() for text in drawn(traces(24)).axes[0].get_yticklabels()]
    assert labels == [f"lane {n}" for n in range(24)]


@pytest.mark.parametrize("channels", [64, 96])
def test_of_very_many_channels_every_nth_is_labelled_and_all_are_drawn(channels: int) -> None:
    axes = drawn(traces(channels)).axes[0]
    labels = [int(text.get_text().removeprefix("lane ")) for text in axes.get_yticklabels()]
    assert labels[0] == 0
    assert len(set(np.diff(labels))) == 1
    assert len(labels) >= channels // 4
    assert sum(len(bars.get_paths()) for bars in axes.collections) == 2 * channels


@pytest.mark.parametrize("panel", ["rail", "total", "supply"])
def test_a_spike_of_a_microsecond_can_be_seen(panel: str) -> None:
    # 1 us in 10 s, far less than a pixel; the other slices are made as long as a picture needs.
    seen = traces(24)
    wave: Envelope = getattr(seen, panel)
    slot = np.searchsorted(wave.edges, 0.18)  # nothing is on
    edges = np.insert(wave.edges, slot, wave.edges[slot] - 1e-6)
    low, high = (np.insert(values, slot, values[slot]) for values in (wave.low, wave.high))
    calm = replace(seen, **{panel: replace(wave, edges=edges, low=low, high=high)})
    struck = low.copy(), high.copy()
    struck[0][slot] -= 2.0 if panel == "rail" else 0.0
    struck[1][slot] += 0.0 if panel == "rail" else 6.0
    spiked = replace(seen, **{panel: replace(wave, edges=edges, low=struck[0], high=struck[1])})
    before, after = pixels(drawn(calm)), pixels(drawn(spiked))
    changed = np.abs(before - after).sum(axis=2) > 60
    rows = np.flatnonzero(changed.any(axis=1))
    assert changed.sum(axis=0).max() > 50, "no column of pixels shows the spike"
    assert np.diff(rows).max() < 12, "the spike is broken"


def test_a_pulse_thinner_than_a_pixel_can_be_seen() -> None:
    seen = traces(24)
    without = pixels(drawn(replace(seen, on={**seen.on, 5: np.empty((0, 2))})))
    pulse = np.array([[0.15, 0.1500005]])
    assert (np.abs(without - pixels(drawn(replace(seen, on={**seen.on, 5: pulse})))).sum(axis=2) > 60).sum() >= 5


def test_a_chopped_hold_phase_is_drawn_as_few_bars() -> None:
    seen = traces(2)
    starts = 0.05 + np.arange(5000) * 4e-5
    chopped = replace(seen, on={**seen.on, 1: np.column_stack([starts, starts + 2e-5])})
    extents = [bar.get_extents() for bar in drawn(chopped).axes[0].collections[0].get_paths()]
    bars = [box for box in extents if box.y0 < 1 < box.y1]
    assert len(bars) == 1
    assert bars[0].width == pytest.approx((starts[-1] + 2e-5 - starts[0]) * 1e3)


def test_channels_that_fail_are_marked_and_the_mark_explained() -> None:
    failing = drawn(traces(24), findings=(finding("fail", 7),))
    (bars,) = failing.axes[0].collections
    rows = [(box.y0 + box.y1) / 2 for box in (path.get_extents() for path in bars.get_paths())]
    tones = [tuple(tone[:3]) for tone in bars.get_facecolor()]
    marked = {round(row) for row, tone in zip(rows, tones, strict=True) if tone == to_rgb(drawing.FAILING)}
    assert marked == {7}
    assert "fails a check" in words(failing)
    assert "fails a check" not in words(drawn(traces(24), findings=(finding("pass", 7),)))


@pytest.mark.parametrize(
    "side_by_side",
    [
        ("PAPER", "INK"),
        ("FAILING", "DARK"),
        ("PALE", "MIDDLE"),
        ("PALE", "DARK"),
        ("PALE", "FAILING"),
        ("MIDDLE", "DARK"),
        ("PALE", "WARNING"),
        ("WARNING", "DARK"),
    ],
)
def test_tones_can_be_told_apart_in_grey(side_by_side: tuple[str, str]) -> None:
    # Luma after ITU-R BT.601, as programs convert to grey; a seventh suffices on paper, from memory.
    light, dark = (float(np.dot(to_rgb(getattr(drawing, tone)), (0.299, 0.587, 0.114))) for tone in side_by_side)
    assert light - dark > 1 / 7


@pytest.mark.parametrize(("duration", "unit"), [(2.0, "time [s]"), (0.4, "time [ms]")])
def test_times_are_in_a_fitting_unit(duration: float, unit: str) -> None:
    assert unit in words(drawn(traces(3), duration=duration))


def test_an_idle_board_is_drawn_without_odd_numbers() -> None:
    seen = traces(4, sag=0.0)
    still = np.zeros_like(seen.total.low)
    flat = replace(
        seen,
        on={},
        total=replace(seen.total, low=still, high=still),
        supply=replace(seen.supply, low=still, high=still),
        rail=replace(seen.rail, low=still + 24, high=still + 24),
    )
    figure = drawn(flat)
    assert collisions(figure) == []
    assert "e-" not in words(figure).replace("brown-out", "")


def test_without_waveforms_the_picture_says_so(tmp_path: Path) -> None:
    judged = result((), traces=None, audit=())
    assert "No waveforms" in words(overview_figure(judged))
    assert collisions(overview_figure(judged)) == []
    draw_overview(judged, tmp_path / "overview.png")
    assert (tmp_path / "overview.png").stat().st_size > 5000


def test_the_file_is_a_picture_and_stands_alone_in_its_folder(tmp_path: Path) -> None:
    judged: Result = result(traces=traces(8, label="桃 $x_{n}$"), board="a_b $\\frac$ {n}")
    draw_overview(judged, tmp_path / "out" / "overview.png")
    assert [path.name for path in (tmp_path / "out").iterdir()] == ["overview.png"]
    assert (tmp_path / "out" / "overview.png").read_bytes().startswith(b"\x89PNG\r\n")


def test_settings_that_a_user_keeps_for_other_drawings_change_nothing(tmp_path: Path) -> None:
    draw_overview(result(traces=traces(8)), tmp_path / "plain.png")
    with matplotlib.rc_context({"axes.labelsize": 30, "figure.facecolor": "black", "font.size": 24, "savefig.dpi": 30}):
        draw_overview(result(traces=traces(8)), tmp_path / "theirs.png")
    assert np.array_equal(imread(tmp_path / "plain.png"), imread(tmp_path / "theirs.png"))
