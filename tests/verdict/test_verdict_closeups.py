"""Close-ups hold what the waveforms hold, wherever blocks begin and end, and only what belongs to the finding."""

from __future__ import annotations

import itertools
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from numpy.typing import NDArray

from boardsim.board.reader import Board, read_board
from boardsim.circuit.deck import Deck, PlacedRule, Window
from boardsim.engine.waves import Waves
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.firing.schedule import Firing, fire
from boardsim.parts.base import NOMINAL
from boardsim.parts.rules import BreakdownRule, Limit
from boardsim.scenarios.fire import fire_pattern
from boardsim.verdict.closeups import Closeup, take_closeups, wants_closeup
from boardsim.verdict.cutting import RunningEnergy, between
from boardsim.verdict.findings import Envelope, Finding
from boardsim.verdict.watch import HYSTERESIS, Avalanches

Floats = NDArray[np.float64]
FRUIT_SORTER = Path(__file__).parents[2] / "netlists" / "fruit-sorter" / "board.toml"
UNCLAMPED = """
supply = { voltage = "24 V", resistance = "50 mohm", current_ceiling = "3 A" }
cable = { gauge = "16 AWG", length = "1.5 m" }
bulk = { capacitance = "1000 uF", esr = "40 mohm" }
logic = { voltage = "5 V" }
[chain]
register = "74HC595"
count = 1
clock = "4 MHz"
[coils.gate]
resistance = "16 ohm"
inductance = "12 mH"
pull_in = "1.4 A"
release = "0.2 A"
[parts.rated]
kind = "n-mosfet"
breakdown = "60 V"
avalanche_current = "1.4 A"
avalanche_energy = "12 mJ"
threshold = "1.7 V"
on_resistance = [{ value = "55 mohm", gate = "4.5 V" }, { value = "45 mohm", gate = "10 V" }]
input_capacitance = "560 pF"
output_capacitance = "95 pF"
reverse_capacitance = "35 pF"
gate_drain_charge = "3 nC"
charge_voltage = "30 V"
[channels."0-3"]
label = "tray gate {n}"
coil = "gate"
switch = { part = "rated", gate = "100 ohm" }
clamp = { kind = "none" }
[limits]
most_on = 1
brown_out = { voltage = "23 V", lasting = "0.5 ms" }
"""


def finding(**changes: object) -> Finding:
    values: dict[str, object] = {
        "check": "overcurrent",
        "quantity": "peak current of the switch",
        "part": "n-logic-60v",
        "channel": 0,
        "label": "lane 0",
        "value": 3.0,
        "limit": 2.0,
        "unit": "A",
        "margin": -0.5,
        "at": 0.02,
        "consequence": "destroy",
        "verdict": "fail",
        "sentence": "",
        "probes": ("i_d",),
    }
    return Finding(**{**values, **changes})  # type: ignore[arg-type]


class SmallBlocks(Waves):
    """Waveforms that come a few points at a time."""

    rows = 5

    def blocks(self, size: int = 0) -> Iterator[Floats]:
        return super().blocks(size or self.rows)


class Run:
    """A made-up run on the fruit sorter: any waveforms under the names of its signals."""

    def __init__(self, folder: Path, times: Floats, signals: dict[tuple[int | None, str], Floats]) -> None:
        # Without its timer's tick: what frames do to edges is told apart to microseconds here.
        self.board: Board = replace(read_board(FRUIT_SORTER), controller=None)
        self.folder, self.times = folder, times
        vectors = tuple(f"v(n{n})" for n in range(len(signals)))
        self.rows = np.column_stack([times, *signals.values()])
        units = {key: "V" if key[1].startswith("v") else "A" for key in signals}
        named = {key: ((1.0, name),) for key, name in zip(signals, vectors, strict=True)}
        none = Limit(None, "A", None, "", "")
        rule = BreakdownRule("overvoltage", "v_ds", "i_d", 60.0, none, none, none, none)
        rules = (PlacedRule(rule, 0, "n-logic-60v", "lane 0"),)
        window = Window(0.0, float(times[-1]), (0,))
        self.deck = Deck("", window, NOMINAL, vectors, named, units, (), rules, (), {}, (), {})

    def firing(self, *pulses: tuple[int, float, float], duration: float | None = None) -> Firing:
        made = tuple(sorted((Pulse(*p) for p in pulses), key=lambda p: (p.start, p.channel)))
        fired = fire(self.board, Pattern(Path("p.toml"), "made up", None, made))
        return replace(fired, duration=float(self.times[-1]) if duration is None else duration)

    def waves(self, block: int = 0) -> Waves:
        path = self.folder / "run.raw"
        self.rows.tofile(path)
        kind = SmallBlocks if block else Waves
        waves = kind(path, ("time", *self.deck.vectors), len(self.times), 0)
        if block:
            object.__setattr__(waves, "rows", block)
        return waves

    def closeup(self, of: Finding, firing: Firing, block: int = 0) -> Closeup:
        (taken,) = take_closeups(self.waves(block), self.deck, self.board, firing, [of], "nominal")
        return taken


def noisy(folder: Path, points: int = 400, end: float = 0.1) -> Run:
    rng = np.random.default_rng(7)
    times = np.concatenate([[0.0], np.sort(rng.uniform(0.0, end, points - 2)), [end]])
    keys = ((None, "v_rail"), (None, "i_total"), (None, "i_supply"), (0, "i_d"), (0, "i_coil"), (0, "v_ds"))
    return Run(folder, times, {key: rng.normal(1.0, 5.0, points) for key in keys})


def spans(closeup: Closeup) -> list[tuple[float, float]]:
    return [(float(w.low.min()), float(w.high.max())) for p in closeup.panels for w in p.waves]


def within(run: Run, key: tuple[int | None, str], start: float, stop: float) -> tuple[float, float]:
    """Lowest and highest value in a stretch, on a far finer grid than the run's: not how close-ups do it."""
    column = list(run.deck.signals).index(key) + 1
    grid = np.union1d(np.linspace(start, stop, 100_001), run.times[(run.times >= start) & (run.times <= stop)])
    values = np.interp(grid, run.times, run.rows[:, column])
    return float(values.min()), float(values.max())


# ------------------------------------------------------------------------------------------------- cutting


@given(
    st.lists(st.floats(-9, 9), min_size=2, max_size=30),
    st.floats(0, 1),
    st.floats(0, 1),
    st.integers(2, 9),
)
def test_a_stretch_cut_block_by_block_is_the_stretch_cut_from_the_whole(
    values: list[float], a: float, b: float, block: int
) -> None:
    t, y = np.arange(len(values), dtype=float), np.array([values])
    start, stop = sorted((a * t[-1], b * t[-1]))
    assume(stop - start > 1e-6)  # a stretch is never empty
    whole_t, whole = between(t, y, start, stop)
    assert whole_t[0] == pytest.approx(start)
    assert whole_t[-1] == pytest.approx(stop)
    np.testing.assert_allclose(whole[0], np.interp(whole_t, t, values), atol=1e-9)
    assert (np.diff(whole_t) > 0).all()
    pieces = [slice(k, min(k + block, len(t))) for k in range(0, len(t) - 1, block - 1)]
    cut = [between(t[p], y[:, p], start, stop) for p in pieces if t[p][0] <= stop and t[p][-1] >= start]
    np.testing.assert_allclose(np.unique(np.concatenate([part for part, _ in cut])), whole_t)
    for part_t, part in cut:
        np.testing.assert_allclose(part[0], np.interp(part_t, t, values), atol=1e-9)


@pytest.mark.parametrize("block", [0, 2, 3, 7, 64])
@pytest.mark.parametrize("at", [0.0, 0.02, 0.0999, 0.1])
def test_close_ups_do_not_depend_on_where_blocks_begin(tmp_path: Path, block: int, at: float) -> None:
    run = noisy(tmp_path)
    firing = run.firing((0, 0.001, 0.09))
    of = finding(at=at)
    one, other = run.closeup(of, firing), run.closeup(of, firing, block)
    for a, b in itertools.zip_longest(one.panels, other.panels):
        assert (a.title, a.limit, a.marked) == (b.title, b.limit, b.marked)
        for u, v in itertools.zip_longest(a.waves, b.waves):
            np.testing.assert_allclose(u.low, v.low)
            np.testing.assert_allclose(u.high, v.high)


@pytest.mark.parametrize("at", [0.0, 0.02, 0.0999, 0.1])
def test_a_close_up_holds_the_highest_and_lowest_value_of_its_stretch(tmp_path: Path, at: float) -> None:
    run = noisy(tmp_path)
    seen = run.closeup(finding(at=at), run.firing((0, 0.001, 0.09)))
    assert 0.0 <= seen.start < seen.stop <= 0.1
    assert seen.start <= at <= seen.stop
    keys = [(0, "i_d"), (0, "i_coil"), (0, "v_ds")]
    assert [w.label for p in seen.panels for w in p.waves] == [
        "current of the switch",
        "coil current",
        "voltage at the switch",
    ]
    for (low, high), key in zip(spans(seen), keys, strict=True):
        assert (low, high) == pytest.approx(within(run, key, seen.start, seen.stop))


def test_of_few_points_what_lies_between_is_interpolated(tmp_path: Path) -> None:
    run = Run(tmp_path, np.array([0.0, 0.1]), {(0, "i_d"): np.array([0.0, 10.0])})
    seen = run.closeup(finding(at=0.05, value=5.0), run.firing((0, 0.001, 0.09)))
    wave = seen.panels[0].waves[0]
    middles = (wave.edges[:-1] + wave.edges[1:]) / 2
    np.testing.assert_allclose((wave.low + wave.high) / 2, 100 * middles)


def test_a_run_that_ended_before_the_stretch_shows_no_waveform(tmp_path: Path) -> None:
    run = noisy(tmp_path)
    firing = run.firing((0, 0.001, 0.098), duration=0.2)
    assert run.closeup(finding(at=0.05), firing).panels != ()
    seen = run.closeup(finding(at=0.1), firing)
    assert seen.panels == ()
    assert list(seen.on) == [0]


@pytest.mark.parametrize(("start", "shape", "at"), [(0.0, "mean", None), (0.3, "value", 0.33)])
def test_a_spike_of_a_microsecond_in_a_second_keeps_its_height(
    tmp_path: Path, start: float, shape: str, at: float | None
) -> None:
    times = np.sort(np.concatenate([np.linspace(0.0, 1.0, 30001), 1 / 3 + np.array([-5e-7, 0.0, 5e-7])]))
    values = np.where(np.abs(times - 1 / 3) < 1e-7, 17.0, 1.0)
    run = Run(tmp_path, times, {(0, "i_d"): values, (0, "i_coil"): -values})
    seen = run.closeup(finding(at=at, shape=shape, value=1.0, lasting=0.01), run.firing((0, 0.1, 0.8)))
    assert seen.start >= start
    assert spans(seen) == [(1.0, 17.0), (-17.0, -1.0)]


def test_the_whole_pattern_is_shown_of_a_mean_and_the_mean_is_no_point_of_it(tmp_path: Path) -> None:
    run = noisy(tmp_path)
    seen = run.closeup(finding(at=None, shape="mean", quantity="average current of the switch"), run.firing((0, 0, 1)))
    assert (seen.start, seen.stop) == (0.0, 0.1)
    assert seen.panels[0].mean == 3.0
    assert seen.panels[0].marked is None
    assert seen.panels[0].limit == 2.0
    assert len(seen.panels[0].waves) == 1
    assert spans(seen)[0] == pytest.approx(within(run, (0, "i_d"), 0.0, 0.1))


def test_of_a_power_the_product_is_shown_and_its_factors_beside(tmp_path: Path) -> None:
    times = np.linspace(0.0, 0.1, 500)
    run = Run(
        tmp_path,
        times,
        {(0, "v_x"): np.full(500, 3.0), (0, "i_x"): np.linspace(-2.0, 2.0, 500), (0, "i_coil"): np.ones(500)},
    )
    of = finding(at=None, shape="mean", probes=("v_x", "i_x"), unit="W", quantity="average power of the clamp")
    seen = run.closeup(of, run.firing((0, 0.01, 0.05)))
    assert seen.panels[0].title == "Power of the clamp"
    assert spans(seen)[0] == pytest.approx((-6.0, 6.0))


# ---------------------------------------------------------------------------------------- negative readings


@pytest.mark.parametrize(("peak", "sign"), [(18.0, 1.0), (-18.0, -1.0)])
@pytest.mark.parametrize("block", [0, 3])
def test_limit_and_reading_of_a_magnitude_stand_on_the_side_where_it_was_read(
    tmp_path: Path, peak: float, sign: float, block: int
) -> None:
    times = np.linspace(0.0, 0.1, 1001)
    values = np.where(np.isclose(times, 0.05), peak, -0.1 * peak)
    run = Run(tmp_path, times, {(0, "v_gs"): values})
    at = float(times[np.abs(values).argmax()])
    of = finding(probes=("v_gs",), unit="V", value=18.0, limit=16.0, at=at)
    panel = run.closeup(of, run.firing((0, 0.01, 0.05)), block).panels[0]
    assert panel.limit == sign * 16.0
    assert panel.marked == (at, sign * 18.0)


def test_a_reading_below_zero_that_is_no_magnitude_stays_where_it_is(tmp_path: Path) -> None:
    times = np.linspace(0.0, 0.1, 1001)
    run = Run(tmp_path, times, {(None, "v_rail"): np.where(np.isclose(times, 0.05), -2.0, 24.0)})
    of = finding(check="rail-sag", channel=None, label="board", probes=("v_rail",), unit="V", value=-2.0, limit=19.0)
    panel = run.closeup(replace(of, at=0.05, worse="low"), run.firing((0, 0.01, 0.05))).panels[0]
    assert panel.limit == 19.0
    assert panel.marked == (0.05, -2.0)


def test_a_reading_just_beyond_the_window_is_marked_at_its_end(tmp_path: Path) -> None:
    run = noisy(tmp_path)
    seen = run.closeup(finding(at=0.1 + 1e-9), run.firing((0, 0.001, 0.09)))
    assert seen.panels[0].marked == (0.1, abs(seen.panels[0].marked[1]) * np.sign(seen.panels[0].marked[1]))
    assert seen.stop == 0.1


# -------------------------------------------------------------------------------------------------- energy


def avalanche_run(folder: Path) -> Run:
    """Two avalanches of 60 V with a current that falls to zero, and ringing with positive power in between."""
    times = np.linspace(0.0, 0.1, 2001)
    v, i = np.full_like(times, 24.0), np.zeros_like(times)
    for begin in (0.02, 0.06):
        here = (times >= begin) & (times < begin + 0.002)
        v[here], i[here] = 60.5, 1.5 * (1 - (times[here] - begin) / 0.002)
    ringing = (times > 0.023) & (times < 0.03)
    i[ringing] = 0.2 * np.sin(times[ringing] * 5000)
    return Run(folder, times, {(0, "v_ds"): v, (0, "i_d"): i, (0, "i_coil"): i})


def energy_finding(event: object, **changes: object) -> Finding:
    value, start = event.energy, event.start  # type: ignore[attr-defined]
    probes = ("v_ds", "i_d")
    quantity = "avalanche energy"
    return finding(value=value, at=start, unit="J", shape="energy", probes=probes, quantity=quantity, **changes)


@pytest.mark.parametrize("which", [0, 1])
@pytest.mark.parametrize("block", [0, 2, 7, 100])
def test_the_energy_of_an_avalanche_rises_to_its_reading_and_stays_there(
    tmp_path: Path, which: int, block: int
) -> None:
    run = avalanche_run(tmp_path)
    watch = Avalanches(60.0)
    watch.feed(run.times, run.rows[:, 1], run.rows[:, 2])
    event = watch.all()[which]
    # 60.5 V times 1.5 A falling to nothing within 2 ms, the step into the avalanche counted whole
    assert event.energy == pytest.approx(60.5 * 1.5 * 0.002 / 2, rel=0.05)
    seen = run.closeup(energy_finding(event), run.firing((0, 0.01, 0.01), (0, 0.05, 0.01)), block)
    wave = seen.panels[0].waves[0]
    assert wave.low[0] == 0.0
    assert (np.diff(wave.high) >= -1e-15).all()
    assert wave.high[-1] == pytest.approx(event.energy, rel=1e-9)
    end, value = seen.panels[0].marked or (0.0, 0.0)
    assert value == event.energy
    assert end == pytest.approx(event.start + 0.002, abs=1e-4)
    after = wave.low[wave.edges[:-1] >= end]
    assert len(after) > 10
    np.testing.assert_allclose(after, event.energy)


def test_the_energy_panel_ends_before_the_next_turn_on_and_has_voltage_and_current_beside(tmp_path: Path) -> None:
    run = avalanche_run(tmp_path)
    watch = Avalanches(60.0)
    watch.feed(run.times, run.rows[:, 1], run.rows[:, 2])
    firing = run.firing((0, 0.01, 0.01), (0, 0.0215, 0.01))
    seen = run.closeup(energy_finding(watch.all()[0]), firing)
    assert seen.stop == pytest.approx(firing.on[0][1, 0])
    assert [p.title for p in seen.panels] == ["Avalanche energy", "Coil current", "Voltage at the switch"]


@given(st.lists(st.floats(40, 70), min_size=3, max_size=40), st.integers(2, 9))
def test_running_energy_agrees_with_the_watch_for_every_event_and_block(values: list[float], block: int) -> None:
    t, v = np.arange(len(values), dtype=float), np.array(values)
    i = np.ones_like(v)
    watch = Avalanches(60.0)
    watch.feed(t, v, i)
    for event in watch.all():
        running = RunningEnergy(event.start, HYSTERESIS * 60.0)
        seen = [
            running.feed(t[p], v[p], i[p])
            for p in (slice(k, min(k + block, len(t))) for k in range(0, len(t) - 1, block - 1))
        ]
        assert running.energy == pytest.approx(event.energy)
        assert seen[-1][-1] == pytest.approx(event.energy)
        assert (np.diff(np.concatenate(seen)) >= -1e-9).all()
        assert running.end >= event.start + event.lasting


# ------------------------------------------------------------------------------------------ counts and lanes


def count_finding(firing: Firing, channels: tuple[int, ...], limit: float) -> Finding:
    """The largest number of channels on, by trying every edge: not how findings or close-ups do it."""
    edges = sorted({float(t) for c in channels for t in firing.on[c][:, 0]})
    numbers = [
        sum(bool(((s[:, 0] <= t) & (t < s[:, 1])).any()) for c in channels for s in [firing.on[c]]) for t in edges
    ]
    best = max(numbers)
    return finding(
        check="overlap",
        quantity="channels on at once",
        channel=None,
        label="board",
        value=float(best),
        limit=limit,
        unit="1",
        at=edges[numbers.index(best)],
        probes=(),
        shape="count",
        channels=channels,
    )


def stepped(wave: Envelope, at: float) -> tuple[float, float]:
    slot = int(np.searchsorted(wave.edges, at, side="right")) - 1
    return float(wave.low[slot]), float(wave.high[slot])


def test_a_count_is_drawn_as_it_was_and_only_of_the_stretch(tmp_path: Path) -> None:
    run = noisy(tmp_path, end=1.0)
    # Four together far before the stretch's three, which are the most of their group.
    others = [(n, 0.05, 0.02) for n in (10, 11, 12, 13)]
    firing = run.firing(*others, (0, 0.4, 0.05), (1, 0.41, 0.05), (2, 0.42, 0.05), (0, 0.8, 0.05), (1, 0.8, 0.05))
    of = count_finding(firing, (0, 1, 2), 2.0)
    assert of.value == 3.0
    seen = run.closeup(of, firing)
    wave = seen.panels[0].waves[0]
    assert seen.panels[0].marked == (of.at, 3.0)
    assert wave.high.max() == 3.0
    # Nothing of what comes before and after the stretch is piled up at its ends.
    assert (wave.low[0], wave.high[0]) == (2.0, 2.0)
    assert (wave.low[-1], wave.high[-1]) == (2.0, 2.0)
    assert seen.start > 0.39
    assert seen.stop < 0.5
    for t in np.linspace(seen.start, seen.stop, 997)[1:-1]:
        now = sum(n in firing.channels_on(float(t)) for n in (0, 1, 2))
        low, high = stepped(wave, float(t))
        assert low <= now <= high
    assert stepped(wave, 0.435) == (3.0, 3.0)
    assert set(seen.who) == {0, 1, 2}
    assert set(seen.labels) == {0, 1, 2}


def test_channels_that_change_on_one_latch_edge_make_no_dip(tmp_path: Path) -> None:
    run = noisy(tmp_path, end=1.0)
    firing = run.firing((0, 0.125, 0.5), (1, 0.125, 0.25), (2, 0.375, 0.25))
    assert firing.on[1][0, 1] == firing.on[2][0, 0]
    wave = run.closeup(count_finding(firing, (0, 1, 2), 1.0), firing).panels[0].waves[0]
    assert stepped(wave, float(firing.on[2][0, 0])) == (2.0, 2.0)


def test_who_is_on_and_what_was_commanded_is_cut_to_the_stretch(tmp_path: Path) -> None:
    run = noisy(tmp_path, end=1.0)
    firing = run.firing((0, 0.1, 0.05), (0, 0.5, 0.05), (1, 0.11, 0.05), (5, 0.9, 0.01))
    seen = run.closeup(finding(at=0.12), firing)
    assert set(seen.on) == {0, 1}
    assert len(seen.on[0]) == 1
    np.testing.assert_allclose(seen.asked[0], [[0.1, 0.15]])
    np.testing.assert_allclose(seen.asked[1], [[0.11, 0.16]])
    assert seen.labels == {0: "lane 0", 1: "lane 1"}
    assert seen.who == (0,)


def test_pulses_commanded_over_one_another_are_all_there_though_the_output_made_one(tmp_path: Path) -> None:
    run = noisy(tmp_path, end=1.0)
    firing = run.firing((0, 0.1, 0.05), (0, 0.12, 0.05))
    of = finding(quantity="pulses commanded while on", check="overlap", unit="1", limit=0.0, at=0.12, probes=())
    seen = run.closeup(of, firing)
    np.testing.assert_allclose(seen.asked[0], [[0.1, 0.15], [0.12, 0.17]])
    assert len(seen.on[0]) == 1
    assert seen.start < 0.1
    assert seen.stop > 0.17
    assert [p.title for p in seen.panels] == ["Coil current"]
    assert not seen.shows_reading


def test_a_channel_that_never_comes_on_has_its_lane(tmp_path: Path) -> None:
    run = noisy(tmp_path, end=1.0)
    # Both edges of two channels come while a frame is under way.
    firing = run.firing((3, 0.1, 0.01), (0, 0.100001, 2e-6), (7, 0.100001, 2e-6))
    assert not len(firing.on[0])
    of = finding(quantity="pulses lost", check="lost-pulse", unit="1", limit=0.0, at=0.100001, probes=())
    seen = run.closeup(of, firing)
    assert seen.labels == {0: "lane 0", 3: "lane 3", 7: "lane 7"}
    assert set(seen.on) == {3}
    np.testing.assert_allclose(seen.asked[0], [[0.100001, 0.100003]])


# ---------------------------------------------------------------------------------------- which, and without


def test_only_broken_and_tight_findings_get_a_close_up_in_their_order(tmp_path: Path) -> None:
    run = noisy(tmp_path)
    verdicts = ("pass", "tight", "unproven", "fail", "limit-missing")
    found = [finding(verdict=v, quantity=v) for v in verdicts]
    assert [wants_closeup(f) for f in found] == [False, True, False, True, False]
    taken = take_closeups(run.waves(), run.deck, run.board, run.firing((0, 0.01, 0.05)), found, "nominal")
    assert [c.finding for c in taken] == [found[1].key, found[3].key]


def test_without_a_run_who_was_on_and_the_count_are_still_shown(tmp_path: Path) -> None:
    run = noisy(tmp_path, end=1.0)
    firing = run.firing((0, 0.1, 0.05), (1, 0.1, 0.05))
    found = [finding(at=0.12), count_finding(firing, (0, 1), 1.0)]
    for waves, deck in ((None, None), (None, run.deck)):
        one, counted = take_closeups(waves, deck, run.board, firing, found, "")
        assert one.panels == ()
        assert set(one.on) == {0, 1}
        assert [p.title for p in counted.panels] == ["Channels on at once"]
        assert counted.corner == ""


def test_a_finding_without_moment_and_waveform_has_no_stretch_of_other_things(tmp_path: Path) -> None:
    run = noisy(tmp_path)
    of = finding(check="chain", quantity="clock", channel=None, label="chain", unit="Hz", at=None, probes=())
    seen = run.closeup(of, run.firing((0, 0.01, 0.05)))
    assert (seen.panels, seen.on, seen.asked, seen.labels, seen.corner) == ((), {}, {}, {}, "")


def test_a_finding_named_by_its_channel_is_about_that_channel(tmp_path: Path) -> None:
    run = noisy(tmp_path, end=1.0)
    firing = run.firing((0, 0.1, 1e-4), (3, 0.5, 1e-4))
    of = finding(check="pulse-timing", channel=None, unit="1", quantity="lateness of a pulse", at=0.1, probes=())
    seen = run.closeup(of, firing)
    assert seen.who == (0,)
    assert [p.title for p in seen.panels] == ["Coil current"]
    assert seen.stop - seen.start < 5e-4


def test_a_finding_of_a_package_shows_its_members_and_their_sum_only(tmp_path: Path) -> None:
    run = noisy(tmp_path)
    run.board = replace(
        run.board,
        channels=tuple(replace(c, package=f"array {1 + (c.number > 1)}") for c in run.board.channels),
    )
    whole = (None, "i_ground, array 1")
    run.deck = replace(
        run.deck,
        signals={**run.deck.signals, whole: run.deck.signals[0, "i_d"]},
        units={**run.deck.units, whole: "A"},
    )
    firing = run.firing((0, 0.01, 0.05), (1, 0.02, 0.05), (7, 0.01, 0.05))
    taken = finding(check="overvoltage", quantity="clamp energy", channel=None, label="array 1", unit="J", probes=())
    seen = run.closeup(taken, firing)
    assert seen.who == (0, 1)
    assert seen.labels.keys() == seen.on.keys() == seen.asked.keys() == {0, 1}
    assert [p.title for p in seen.panels] == ["All outputs of the package"]
    sums = finding(quantity="current of all outputs of the package", channel=None, label="array 1", probes=(whole[1],))
    seen = run.closeup(sums, firing)
    assert [[w.label for w in p.waves] for p in seen.panels] == [["current of all outputs of the package"]]
    assert seen.labels.keys() == {0, 1}


# -------------------------------------------------------------------------------------------------- an engine


@pytest.mark.engine
def test_every_reading_lies_on_the_waveform_that_is_shown_with_it(tmp_path: Path) -> None:
    (tmp_path / "board.toml").write_text(UNCLAMPED, encoding="utf-8")
    board = read_board(tmp_path / "board.toml")
    made = (*(Pulse(n, 1e-3, 4e-3) for n in range(3)), Pulse(0, 5.2e-3, 2e-3))
    judged = fire_pattern(board, Pattern(Path("p.toml"), "made up", None, made), tmp_path / "kept")
    assert judged.proven
    by_key = {f.key: f for f in judged.findings}
    wanted = {f.key for f in judged.findings if f.verdict in ("fail", "tight")}
    assert {c.finding for c in judged.closeups} == wanted
    checks = set()
    for seen in judged.closeups:
        f = by_key[seen.finding]
        checks.add((f.check, f.unit))
        assert seen.shows_reading
        panel = seen.panels[0]
        assert panel.marked is not None
        at, value = panel.marked
        wave = panel.waves[0]
        slot = min(int(np.searchsorted(wave.edges, at, side="right")) - 1, len(wave.low) - 1)
        near = slice(max(slot - 1, 0), slot + 2)
        # 1 %: a current that stays at a ceiling, or in avalanche, is marked where it gets there
        slack = 0.01 * abs(value)
        assert wave.low[near].min() - slack <= value <= wave.high[near].max() + slack, f.sentence
        if f.quantity in ("peak current of the switch", "drain-source voltage", "supply current"):
            assert wave.high.max() <= value * (1 + 1e-9), f.sentence
    for part in (("overvoltage", "J"), ("overvoltage", "A"), ("pull-in", "A"), ("overlap", "A"), ("overlap", "1")):
        assert part in checks
    assert ("rail-sag", "V") in checks
