"""Close-ups can be read: any number of channels, limits near, far and negative, any name; and they show what was found."""

from __future__ import annotations

import datetime
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from made_up_results import closeup, finding, result, wave
from matplotlib.axes import Axes
from matplotlib.collections import PolyCollection
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure
from matplotlib.text import Text
from picture_text import collisions, pixels, visible_texts, words

from boardsim.board.reader import read_board
from boardsim.circuit.deck import Deck, Window
from boardsim.engine.waves import Waves
from boardsim.errors import InputError
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.firing.schedule import fire
from boardsim.parts.base import NOMINAL
from boardsim.report import drawing
from boardsim.report.closeup import closeup_figure, draw_closeups
from boardsim.report.overview import overview_figure
from boardsim.verdict.closeups import Closeup, Panel, take_closeups
from boardsim.verdict.findings import Acceptance, Finding, Traces, Verdict
from boardsim.verdict.readings import take_readings

FRUIT_SORTER = Path(__file__).parents[2] / "netlists" / "fruit-sorter" / "board.toml"
CHANNELS = (1, 2, 24, 64, 96)
LONG = "seed slot {n} of the second row from the left, lower drum"
WIDE = "W" * 55 + "{n}"


def drawn(of: Finding, seen: Closeup | None = None, **changes: object) -> Figure:
    return closeup_figure(result((of,), **changes), seen or closeup(of))


def panel(figure: Figure, title: str) -> Axes:
    return next(axes for axes in figure.axes if axes.get_title(loc="left").startswith(title))


def band_range(axes: Axes, tone: str = drawing.DARK) -> tuple[float, float]:
    """Lowest and highest value of the waveform of a tone, as it is drawn."""
    found = [
        path.vertices[:, 1]
        for area in axes.collections
        if len(area.get_facecolor()) and tuple(area.get_facecolor()[0][:3]) == to_rgb(tone)
        for path in area.get_paths()
    ]
    values = np.concatenate(found)
    return float(values.min()), float(values.max())


def limit_heights(axes: Axes) -> list[float]:
    return [float(line.get_ydata()[0]) for line in axes.lines if line.get_color() == drawing.WARNING]  # type: ignore[index]


def note(figure: Figure, start: str) -> Text:
    return next(text for text in visible_texts(figure) if text.get_text().startswith(start))


# ------------------------------------------------------------------------------------------------- words


@pytest.mark.parametrize("channels", CHANNELS)
@pytest.mark.parametrize("limit", [3.1, 3.199, 0.001, -0.2, 0.0, 40.0, None])
def test_no_words_overlap(channels: int, limit: float | None) -> None:
    of = finding("fail", 0, limit=limit, lasting=0.0031)
    assert collisions(drawn(of, closeup(of, channels))) == []


@pytest.mark.parametrize("channels", CHANNELS)
@pytest.mark.parametrize("label", [LONG, WIDE])
def test_no_words_overlap_with_the_longest_names(channels: int, label: str) -> None:
    of = finding("fail", 0, label=label.format(n=0), sentence="The clamp diode of the lower drum carries 3.2 A; " * 12)
    seen = closeup(of, channels, label=label, asked={}, corner="supply low, coils hot, clamps low, bulk high")
    figure = drawn(of, seen, board="bean planter " * 5, pattern="a very dense field " * 5)
    assert collisions(figure) == []


@pytest.mark.parametrize("at", [0.0, 0.02, 0.0201, 0.04, 0.0599, 0.06, 0.07])
@pytest.mark.parametrize("value", [3.2, 0.0, 1.4])
def test_the_reading_is_named_within_its_panel_wherever_it_is(at: float, value: float) -> None:
    of = finding("fail", 0, at=at, value=value)
    figure = drawn(of)
    assert collisions(figure) == []
    box = visible_texts(figure)[note(figure, f"{value:.3g} A" if value == 0 else f"{value:#.3g} A at")]
    frame = figure.axes[0].get_window_extent()
    assert frame.x0 <= box.x0 < box.x1 <= frame.x1
    assert frame.y0 <= box.y0 < box.y1 <= frame.y1


@pytest.mark.parametrize("value", [3.2, 3.0, 2.9, 1.0, 0.0])
@pytest.mark.parametrize("limit", [2.0, 3.3, -0.3, 400.0])
def test_the_words_at_the_reading_keep_clear_of_waveform_and_limit(value: float, limit: float) -> None:
    of = finding("fail", 0, value=value, limit=limit)
    figure = drawn(of)
    axes = figure.axes[0]
    box = visible_texts(figure)[next(t for t in visible_texts(figure) if t.get_text().endswith(" at 35.20 ms"))]
    low, high = axes.get_ylim()
    occupied = [*band_range(axes), *(y for y in limit_heights(axes) if low <= y <= high)]
    lowest, highest = (float(axes.transData.transform((0, y))[1]) for y in (min(occupied), max(occupied)))
    assert box.y0 > highest or box.y1 < lowest


def test_words_of_files_are_taken_literally() -> None:
    of = finding("fail", 0, label="$x_{1}$ \\frac", sentence="lane $\\alpha$ is % full")
    figure = drawn(of, closeup(of, 1, label="$x_{{{n}}}$ \\frac"), board="$\\frac$", pattern="a_b")
    assert "$x_{1}$ \\frac" in words(figure)
    assert "$x_{0}$ \\frac" in words(figure)
    assert "lane $\\alpha$ is % full" in words(figure)
    assert collisions(figure) == []


@pytest.mark.parametrize("length", range(20, 60, 4))
@pytest.mark.parametrize("verdict", ["fail", "tight"])
def test_the_title_keeps_clear_of_the_verdict(length: int, verdict: Verdict) -> None:
    known = Acceptance("the next revision has larger diodes", datetime.date(2099, 1, 1), False)
    of = finding(verdict, 0, label="tray gate" + "m" * length, accepted=known)
    assert collisions(drawn(of, closeup(of, 1))) == []


def test_a_sentence_too_long_for_two_lines_ends_in_dots() -> None:
    of = finding("fail", 0, sentence="The clamp diode carries 3.2 A at turn-off. " * 20)
    lines = [text for text in visible_texts(drawn(of)) if text.get_text().endswith("...")]
    assert len(lines) == 1


@pytest.mark.parametrize(("start", "width"), [(0.0, 5e-6), (1200.0, 4e-5), (3e4, 2.0), (12.0, 3e-3), (0.0, 900.0)])
def test_times_far_into_a_pattern_can_be_read(start: float, width: float) -> None:
    of = finding("fail", 0, at=start + width / 2)
    figure = drawn(of, closeup(of, span=(start, start + width)))
    assert collisions(figure) == []
    assert len([text for text in visible_texts(figure) if text.get_text().startswith("time ")]) == 1


# ------------------------------------------------------------------------------------------ what was found


def test_the_heading_says_what_and_where_verdict_and_corner() -> None:
    said = words(drawn(finding("fail", 7)))
    for part in (
        "lane 7: peak current of the clamp diode",
        "fail",
        "fruit sorter - rush",
        "corner: supply high, coils cold",
        "The clamp diode of lane 7 carries 3.2 A",
    ):
        assert part in said


def test_what_is_accepted_says_so() -> None:
    known = Acceptance("the next revision has larger diodes", datetime.date(2099, 1, 1), False)
    assert "fail, accepted" in words(drawn(finding("fail", 7, accepted=known)))
    assert "accepted" not in words(drawn(finding("fail", 7, accepted=replace(known, expired=True))))


@pytest.mark.parametrize(("worse", "name"), [("high", "at most"), ("low", "at least")])
def test_the_limit_is_drawn_in_and_named_with_its_value(worse: str, name: str) -> None:
    figure = drawn(finding("fail", 0, worse=worse))
    assert limit_heights(figure.axes[0]) == [2.0]
    assert f"{name}\n2.00 A" in words(figure)


def test_a_limit_far_away_is_pointed_at() -> None:
    figure = drawn(finding("tight", 0, limit=400.0))
    assert limit_heights(figure.axes[0]) == []
    assert "at most\n400 A,\nfar above" in words(figure)


def test_reading_and_limit_have_digits_enough_to_tell_them_apart() -> None:
    said = words(drawn(finding("fail", 0, value=2.0004)))
    assert "at most\n2.0000 A" in said
    assert "2.0004 A at" in said


def test_the_reading_is_marked_and_told_with_its_time_and_duration() -> None:
    figure = drawn(finding("fail", 0, value=2.9, at=0.0352, lasting=0.0031))
    marker = next(line for line in figure.axes[0].lines if line.get_marker() == "o")
    assert (marker.get_xdata()[0], marker.get_ydata()[0]) == pytest.approx((35.2, 2.9))  # type: ignore[index]
    assert "2.90 A at 35.20 ms, for 3.100 ms" in words(figure)


def test_a_magnitude_that_was_read_below_zero_has_its_limit_there() -> None:
    of = finding("fail", 0, quantity="gate-source voltage of the switch", unit="V", value=18.0, limit=16.0)
    seen = closeup(of, waves=(("gate voltage of the switch", -18.0, 5.0),), sign=-1.0)
    figure = drawn(of, seen)
    assert limit_heights(figure.axes[0]) == [-16.0]
    assert "not below\n-16.0 V" in words(figure)
    assert "-18.0 V at 35.20 ms" in words(figure)
    assert collisions(figure) == []


def test_the_energy_of_an_event_is_told_by_when_it_began() -> None:
    of = finding("fail", 0, quantity="avalanche energy", unit="J", value=0.0284, limit=0.017, shape="energy", at=0.03)
    figure = drawn(of, closeup(of, waves=(("avalanche energy", 0.0, 0.0284),)))
    assert "28.4 mJ from the event at 30.00 ms" in words(figure)
    assert panel(figure, "Avalanche energy").get_title(loc="left") == "Avalanche energy [mJ]"


def mean_closeup(value: float, limit: float) -> tuple[Finding, Closeup]:
    of = finding("tight", 0, quantity="average power", unit="W", value=value, limit=limit, at=None, shape="mean")
    seen = closeup(of, waves=(("power of the clamp Zener", 0.0, 40.0),))
    first = replace(seen.panels[0], marked=None, mean=value)
    return of, replace(seen, panels=(first, *seen.panels[1:]))


def test_a_mean_is_drawn_as_a_line_and_as_a_bar_against_its_limit() -> None:
    of, seen = mean_closeup(0.43, 0.45)
    figure = drawn(of, seen)
    bar, power = figure.axes[:2]
    assert bar.patches[0].get_width() == pytest.approx(0.43)  # type: ignore[attr-defined]
    assert [float(line.get_xdata()[0]) for line in bar.lines] == [0.45]  # type: ignore[index]
    assert limit_heights(power) == [0.45]
    assert 0.43 in [float(line.get_ydata()[0]) for line in power.lines]  # type: ignore[index]
    assert "mean, 430 mW" in words(figure)
    assert "Average power: 430 mW" in words(figure)
    assert collisions(figure) == []


def test_counts_are_drawn_as_steps_on_whole_numbers() -> None:
    of = finding(
        "fail", None, check="overlap", quantity="channels on at once", unit="1", value=3.0, limit=2.0, shape="count"
    )
    steps = np.repeat([0.0, 1.0, 3.0, 1.0], 200)
    counted = replace(wave("channels on at once", "1", 0, 3, 0.02, 0.06), low=steps, high=steps)
    seen = replace(closeup(of), panels=(Panel("Channels on at once", "1", (counted,), 2.0, (0.0352, 3.0)),))
    figure = drawn(of, seen)
    assert band_range(figure.axes[0]) == (0.0, 3.0)
    assert "3 at 35.20 ms" in words(figure)
    assert "at most\n2" in words(figure)
    beside = [t.get_text() for t in figure.axes[0].texts if t.get_ha() == "right"]
    assert beside == ["0", "1", "2", "3"]


@pytest.mark.parametrize(
    ("value", "limit", "unit", "said", "bound"),
    [
        (23e6, 24e6, "Hz", "23.0 MHz", "24.0 MHz"),
        (3.0, 0.0, "1", "3", "0"),
        (0.125, 0.1, "1", "12.5 %", "10 %"),
        (-4.0, 2.0, "V", "-4.00 V", "2.00 V"),
    ],
)
def test_what_has_no_waveform_is_a_bar_against_its_limit(
    value: float, limit: float, unit: str, said: str, bound: str
) -> None:
    of = finding("tight", None, quantity="clock", label="chain", value=value, limit=limit, unit=unit, at=None)
    figure = drawn(of, Closeup(of.key, "", 0.0, 1.0, (), {}, {}, {}))
    (axes,) = figure.axes
    assert axes.patches[0].get_width() == pytest.approx(value)  # type: ignore[attr-defined]
    assert [float(line.get_xdata()[0]) for line in axes.lines] == [limit]  # type: ignore[index]
    assert f"Clock: {said}" in words(figure)
    assert f"at most\n{bound}" in words(figure)
    assert "corner" not in words(figure)
    assert collisions(figure) == []


def test_nothing_against_nothing_can_be_drawn() -> None:
    of = finding("tight", None, value=0.0, limit=0.0, unit="1", at=None)
    assert collisions(drawn(of, Closeup(of.key, "", 0.0, 1.0, (), {}, {}, {}))) == []


def test_causes_are_drawn_below_each_with_its_name() -> None:
    figure = drawn(finding("fail", 0))
    assert band_range(panel(figure, "Coil rail at the board [V]"))[0] == pytest.approx(5.1, abs=0.25)
    currents = panel(figure, "Currents [A]")
    assert band_range(currents, drawing.DARK)[1] == pytest.approx(28.0, rel=1e-3)
    assert band_range(currents, drawing.MIDDLE)[1] == pytest.approx(9.9, rel=1e-3)
    assert "all coils together" in words(figure)
    assert "out of the supply" in words(figure)


def test_two_waveforms_that_run_together_are_both_in_sight() -> None:
    of = finding("fail", 0)
    one, both = ((("current of the clamp diode", 0.0, 3.0), *more) for more in ((), (("coil current", 0.0, 3.0),)))
    middle = np.array(to_rgb(drawing.MIDDLE)) * 255
    near = [
        (np.abs(pixels(drawn(of, closeup(of, waves=names))) - middle).sum(axis=2) < 30).sum() for names in (one, both)
    ]
    assert near[1] > near[0] + 300


def test_the_noise_of_an_idle_coil_is_not_blown_up() -> None:
    of = finding("fail", 0)
    seen = closeup(of)
    idle = Panel("Coil current", "A", (wave("coil current", "A", -1e-9, 2e-9, 0.02, 0.06),))
    axes = panel(drawn(of, replace(seen, panels=(seen.panels[0], idle))), "Coil current [mA]")
    low, high = axes.get_ylim()
    assert low < -1e-3
    assert high > 1e-3


@pytest.mark.parametrize("largest", [2.5e-6, 0.0025, 2.5, 2500.0])
def test_numbers_beside_an_axis_are_in_a_fitting_unit(largest: float) -> None:
    of = finding("fail", 0, value=largest, limit=largest / 2)
    figure = drawn(of, closeup(of, waves=(("leakage", 0.0, largest),)))
    beside = [t.get_text() for t in figure.axes[0].texts if t.get_ha() == "right"]
    assert all(len(number) <= 5 for number in beside)
    assert len(beside) >= 3
    assert panel(figure, "Leakage").get_title(loc="left")[9:-1] in ("uA", "mA", "A", "kA")


# ------------------------------------------------------------------------------------------------- lanes


def lanes(figure: Figure) -> Axes:
    return panel(figure, "Channels on")


def bars(figure: Figure, tone: str) -> list[tuple[int, float, float]]:
    """Row, start and stop of each filled bar of a tone, in the axes' times."""
    filled, _ = (artist for artist in lanes(figure).collections if isinstance(artist, PolyCollection))
    return [
        (round((box.y0 + box.y1) / 2), box.x0, box.x1)
        for box, fill in zip([path.get_extents() for path in filled.get_paths()], filled.get_facecolor(), strict=True)
        if tuple(fill[:3]) == to_rgb(tone)
    ]


def outlines(figure: Figure) -> list[tuple[int, float, float]]:
    _, unfilled = (artist for artist in lanes(figure).collections if isinstance(artist, PolyCollection))
    boxes = [path.get_extents() for path in unfilled.get_paths()]
    return [(round((box.y0 + box.y1) / 2), pytest.approx(box.x0), pytest.approx(box.x1)) for box in boxes]


@pytest.mark.parametrize("channels", CHANNELS)
def test_every_channel_that_was_on_has_a_bar_and_the_own_one_stands_out(channels: int) -> None:
    own = channels // 2
    of = finding("fail", own)
    figure = drawn(of, closeup(of, channels))
    assert [row for row, *_ in bars(figure, drawing.DARK)] == [own]
    assert len(bars(figure, drawing.DARK)) + len(bars(figure, drawing.PALE)) == channels
    assert outlines(figure) == []
    assert f"lane {own}" in words(figure).split(" | ")
    assert ("one label" in words(figure)) == (channels > 20)


def test_of_the_whole_board_every_channel_is_in_question() -> None:
    of = finding("fail", None, label="board")
    figure = drawn(of, closeup(of, 3))
    assert len(bars(figure, drawing.DARK)) == 3
    assert "others" not in words(figure)


def test_commanded_pulses_are_outlined_where_outputs_did_something_else() -> None:
    of = finding("fail", 0)
    on = {0: np.array([[0.03, 0.05]]), 1: np.array([[0.03, 0.05]]), 2: np.array([[0.03, 0.05]])}
    asked = {0: np.array([[0.03, 0.05]]), 1: np.array([[0.028, 0.05]]), 3: np.array([[0.04, 0.045]])}
    figure = drawn(of, replace(closeup(of, 4), on=on, asked=asked))
    assert outlines(figure) == [(1, 28.0, 50.0), (3, 40.0, 45.0)]
    assert [row for row, *_ in bars(figure, drawing.FAILING)] == [2]
    assert "commanded" in words(figure)
    assert "not commanded" in words(figure)
    assert collisions(figure) == []


def test_a_difference_that_no_picture_can_show_is_not_outlined() -> None:
    of = finding("fail", 0)
    late = {0: np.array([[0.0300065, 0.0500065]])}
    assert outlines(drawn(of, replace(closeup(of, 1), on=late, asked={0: np.array([[0.03, 0.05]])}))) == []


def test_pulses_that_were_commanded_over_one_another_are_outlined_each() -> None:
    of = finding("fail", 0)
    seen = replace(closeup(of, 1), on={0: np.array([[0.03, 0.05]])}, asked={0: np.array([[0.03, 0.045], [0.04, 0.05]])})
    assert outlines(drawn(of, seen)) == [(0, 30.0, 45.0), (0, 40.0, 50.0)]


def test_outlines_of_very_many_channels_do_not_run_together() -> None:
    of = finding("fail", 40)
    seen = closeup(of, 96)
    figure = drawn(of, replace(seen, asked={n: spans - 0.002 for n, spans in seen.on.items()}))
    assert [row for row, *_ in outlines(figure)] == [40]


@pytest.mark.parametrize("channels", [3, 24, 64, 96])
@pytest.mark.parametrize("label", ["lane {n}", WIDE])
def test_everything_at_once_in_the_lanes_can_be_read(channels: int, label: str) -> None:
    of = finding("fail", 1)
    seen = closeup(of, channels, label=label)
    figure = drawn(of, replace(seen, asked={n: spans - 0.002 for n, spans in seen.on.items() if n != 2}))
    for said in ("this channel", "others", "not commanded", "commanded"):
        assert said in words(figure).split(" | ")
    assert collisions(figure) == []


def test_a_chopped_hold_phase_is_drawn_as_few_bars_and_not_outlined() -> None:
    of = finding("fail", 0)
    starts = 0.03 + np.arange(1000) * 1e-5
    asked, on = (np.column_stack([starts + late, starts + late + 5e-6]) for late in (0.0, 3e-6))
    figure = drawn(of, replace(closeup(of, 1), on={0: on}, asked={0: asked}))
    assert len(bars(figure, drawing.DARK)) == 1
    assert outlines(figure) == []


def test_an_output_that_still_follows_a_command_from_before_the_stretch_is_not_astray() -> None:
    of = finding("fail", 0)
    seen = replace(closeup(of, 1), on={0: np.array([[0.01, 0.021]])}, asked={0: np.array([[0.0095, 0.0199]])})
    figure = drawn(of, seen)
    assert [row for row, *_ in bars(figure, drawing.DARK)] == [0]
    assert bars(figure, drawing.FAILING) == []
    assert outlines(figure) == []


def test_bars_end_where_the_picture_does() -> None:
    of = finding("fail", 0)
    figure = drawn(of, replace(closeup(of, 1), on={0: np.array([[0.0, 9.0]])}, asked={0: np.array([[0.0, 9.0]])}))
    assert bars(figure, drawing.DARK) == [(0, pytest.approx(20.0), pytest.approx(60.0))]
    assert outlines(figure) == []


# ------------------------------------------------------------------------------------------------ spikes

SPIKE = 17.0
KEYS = ((None, "v_rail"), (None, "i_total"), (None, "i_supply"), (0, "i_coil"), (0, "v_ds"))


@pytest.fixture
def spiked(tmp_path: Path) -> tuple[Waves, Deck]:
    """One second of waveforms at 1, all with one point at 17 within 1 us, a third of the way."""
    times = np.sort(np.concatenate([np.linspace(0.0, 1.0, 20001), 1 / 3 + np.array([-5e-7, 0.0, 5e-7])]))
    values = np.ones((len(times), len(KEYS)))
    values[np.argmin(np.abs(times - 1 / 3))] = SPIKE
    path = tmp_path / "run.raw"
    np.column_stack([times, values]).tofile(path)
    vectors = tuple(f"v(n{n})" for n in range(len(KEYS)))
    signals = {key: ((1.0, name),) for key, name in zip(KEYS, vectors, strict=True)}
    units = {key: "V" if key[1].startswith("v") else "A" for key in KEYS}
    deck = Deck("", Window(0.0, 1.0, (0,)), NOMINAL, vectors, signals, units, (), (), (), {}, (), {})
    return Waves(path, ("time", *vectors), len(times), 0), deck


@pytest.mark.parametrize(
    ("shape", "at", "probes"), [("mean", None, ("i_coil",)), ("value", 0.334, ("i_coil",)), ("value", 0.9, ("v_ds",))]
)
def test_a_spike_of_a_microsecond_in_a_second_keeps_its_height(
    spiked: tuple[Waves, Deck], shape: str, at: float | None, probes: tuple[str, ...]
) -> None:
    board = read_board(FRUIT_SORTER)
    firing = fire(board, Pattern(Path("p.toml"), "p", 1.0, (Pulse(0, 0.1, 0.8),)))
    unit = "V" if probes == ("v_ds",) else "A"
    of = finding("fail", 0, value=1.0, unit=unit, at=at, shape=shape, probes=probes, lasting=0.9)
    (seen,) = take_closeups(*spiked, board, firing, [of], "nominal")
    assert seen.stop - seen.start > 0.5 or at == 0.334
    figure = drawn(of, seen)
    named = {"i_coil": "Coil current", "v_ds": "Voltage at the switch"}
    for title in (named[probes[0]], "Voltage at the switch" if unit == "A" else "Coil current"):
        axes = panel(figure, title)
        assert band_range(axes) == (pytest.approx(1.0), pytest.approx(SPIKE))
        low, high = axes.get_ylim()
        assert low < 1.0 < SPIKE < high


def test_the_overview_keeps_the_height_of_a_spike_of_a_microsecond_in_a_second(spiked: tuple[Waves, Deck]) -> None:
    board = read_board(FRUIT_SORTER)
    firing = fire(board, Pattern(Path("p.toml"), "p", 1.0, (Pulse(0, 0.1, 0.8),)))
    seen = take_readings(*spiked, firing).envelopes
    traces = Traces("nominal", seen["rail"], seen["total"], seen["supply"], firing.on, {0: "lane 0"}, None, None)
    figure = overview_figure(result((), traces=traces, duration=1.0))
    assert band_range(panel(figure, "Coil rail"))[1] == pytest.approx(SPIKE)
    assert band_range(panel(figure, "Currents"), drawing.MIDDLE)[1] == pytest.approx(SPIKE)
    assert band_range(panel(figure, "Currents"), drawing.DARK)[1] == pytest.approx(SPIKE)


# ------------------------------------------------------------------------------------------------- files


def test_there_is_one_file_per_close_up_numbered_by_severity(tmp_path: Path) -> None:
    found = (finding("tight", 2), finding("fail", 1), finding("pass", 0), finding("fail", 3, value=9.0, margin=-3.5))
    judged = result(found, closeups=tuple(closeup(f, 2) for f in (*found[:2], found[3])))
    names = draw_closeups(judged, tmp_path / "out")
    assert names == {
        found[3].key: "closeup-001-overcurrent-lane-3.png",
        found[1].key: "closeup-002-overcurrent-lane-1.png",
        found[0].key: "closeup-003-overcurrent-lane-2.png",
    }
    assert sorted(path.name for path in (tmp_path / "out").iterdir()) == sorted(names.values())
    for name in names.values():
        assert (tmp_path / "out" / name).read_bytes().startswith(b"\x89PNG\r\n")


@pytest.mark.parametrize("label", ['a/b\\c:*?"<>|', "桃の列", "CON", "Ägypten 3", "." * 40, "x" * 60, "$x_{n}$"])
def test_names_of_files_are_safe_on_every_file_system(tmp_path: Path, label: str) -> None:
    of = finding("fail", 0, label=label)
    (name,) = draw_closeups(result((of,), closeups=(closeup(of, 1, label=label),)), tmp_path).values()
    assert set(name) <= set("abcdefghijklmnopqrstuvwxyz0123456789-.")
    assert len(name) < 100
    assert name.count(".") == 1
    assert (tmp_path / name).is_file()


def test_names_that_come_out_alike_do_not_overwrite_each_other(tmp_path: Path) -> None:
    found = tuple(finding("fail", n, label=label) for n, label in enumerate(("桃", "杏", "梨")))
    names = draw_closeups(result(found, closeups=tuple(closeup(f, 1) for f in found)), tmp_path)
    assert len(set(names.values())) == len(list(tmp_path.iterdir())) == 3


def test_without_close_ups_there_is_no_file(tmp_path: Path) -> None:
    assert draw_closeups(result(), tmp_path) == {}
    assert list(tmp_path.iterdir()) == []


def test_a_folder_that_cannot_be_written_is_a_mistake_of_the_user(tmp_path: Path) -> None:
    (tmp_path / "out").write_text("a file", encoding="utf-8")
    of = finding("fail", 0)
    with pytest.raises(InputError, match="cannot be written"):
        draw_closeups(result((of,), closeups=(closeup(of, 1),)), tmp_path / "out")
