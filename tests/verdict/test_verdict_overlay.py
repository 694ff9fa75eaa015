"""A trace over a computed pulse: found, aligned, compared; and every trace that cannot be, refused."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scope_traces import VOLTS, WIDTH, course, trace

from boardsim.errors import InputError
from boardsim.verdict.overlay import Course, lay_over, noise_of
from boardsim.verdict.trace import Trace


def as_trace(c: Course, **changes: object) -> Trace:
    made = replace(trace(), t=c.t, current=c.current, voltage=c.voltage)
    return replace(made, **changes)  # type: ignore[arg-type]


@pytest.mark.parametrize("with_voltage", [True, False])
def test_a_waveform_over_itself_differs_by_nothing(with_voltage: bool) -> None:
    c = course()
    laid = lay_over(as_trace(c) if with_voltage else as_trace(c, voltage=None), c)
    assert abs(laid.shift) < 1e-12
    assert all(abs(d.largest) < 1e-9 and d.rms < 1e-9 and d.share < 1e-9 for d in laid.differences)


@pytest.mark.parametrize("begins", [0.0, 0.1234, -3.0])
@pytest.mark.parametrize("with_voltage", [True, False])
def test_another_clock_and_an_offset_come_out_as_such(begins: float, with_voltage: bool) -> None:
    # The same coil, resampled, its clock elsewhere, 30 mA too high: the difference is 30 mA everywhere.
    c, seen = course(on=1e-3), trace(begins=begins, offset=0.03, voltage=with_voltage)
    laid = lay_over(seen, c)
    assert laid.shift == pytest.approx(1e-3 - begins, abs=5e-6)  # a point of the trace is 3.7 us long
    (current, *_) = laid.differences
    assert current.mean == pytest.approx(0.03, abs=1e-3)
    assert current.largest == pytest.approx(
        0.03, abs=7e-3
    )  # after the turn-off the current falls by 2.4 A/ms: 3 us are 7 mA
    assert current.share == pytest.approx(
        abs(current.largest) / (VOLTS / 24 * (1 - np.exp(-WIDTH * 24 / 20e-3))), rel=1e-3
    )
    assert laid.baseline["current"] == pytest.approx(0.03, abs=1e-3)


def test_the_beginning_is_found_in_noise_and_does_not_hang_on_the_inductance() -> None:
    # A crossing of half the swing would lie (ln 2) (1.17 - 0.83) ms = 0.2 ms later for 28 mH than for 20 mH.
    c = course()
    for henries in (14e-3, 20e-3, 28e-3):
        laid = lay_over(trace(henries=henries, noise=0.01, voltage=False), c)
        assert laid.shift == pytest.approx(1e-3, abs=30e-6), henries


def test_a_spike_before_the_pulse_is_no_pulse() -> None:
    seen = trace(noise=0.005, voltage=False)
    assert seen.current is not None
    seen.current[200] = 2.0
    assert lay_over(seen, course()).shift == pytest.approx(1e-3, abs=30e-6)


def test_the_largest_difference_is_named_with_its_time_and_share() -> None:
    c = course()
    bent = c.current.copy()
    k = int(np.argmin(np.abs(c.t - 4e-3)))
    bent[k] -= 0.2
    (d, _) = lay_over(as_trace(c, current=bent), c).differences
    assert d.largest == pytest.approx(-0.2)
    assert d.at == pytest.approx(4e-3, abs=1e-6)
    assert d.share == pytest.approx(0.2 / c.current.max())
    assert d.unit == "A"


def test_root_mean_square_is_over_time_and_not_over_points() -> None:
    # 10 mA in the first half and 20 mA in the second, which has ten times the points: sqrt((0.01^2 + 0.02^2) / 2).
    c = course()
    middle = (c.t[0] + c.t[-1]) / 2
    t = np.concatenate([np.linspace(c.t[0], middle, 400), np.linspace(middle, c.t[-1], 4001)[1:]])
    current = np.interp(t, c.t, c.current) + np.where(t <= middle, 0.01, 0.02)
    (d,) = lay_over(replace(trace(), t=t, current=current, voltage=None), c, at=c.on).differences
    assert d.rms == pytest.approx(np.sqrt((0.01**2 + 0.02**2) / 2), rel=0.01)


def test_a_told_moment_is_laid_on_the_edge_of_the_output() -> None:
    c = course(on=1e-3)
    laid = lay_over(trace(begins=0.5), c, at=0.5001)
    assert laid.shift == pytest.approx(1e-3 - 0.5001)
    assert laid.told_by == "as told"


def test_noise_is_what_changes_from_point_to_point() -> None:
    y = 3.0 * np.linspace(0, 1, 20_000) + 0.02 * np.random.default_rng(5).standard_normal(20_000)
    assert noise_of(y) == pytest.approx(0.02, rel=0.03)
    assert noise_of(np.linspace(0, 1, 100) ** 2) < 2e-4


def cut(seen: Trace, low: float, high: float, step: int = 1) -> Trace:
    keep = np.flatnonzero((seen.t >= low) & (seen.t <= high))[::step]
    some = {n: y[keep] for n, y in seen.waves.items()}
    return replace(seen, t=seen.t[keep], current=some.get("current"), voltage=some.get("voltage"))


@pytest.mark.parametrize(
    ("seen", "at", "said"),
    [
        (cut(trace(), -1e-3, 4e-3), None, "ends 4.00 ms after the turn-on, and the pulse is on for 6.00 ms"),
        (cut(trace(), 1e-3, 9e-3), 0.0, "begins 1.00 ms after the pulse's turn-on"),
        (cut(trace(), -1e-3, 9e-3, 200), None, r"has \d+ points while the coil is on, and it takes at least 20"),
        (cut(trace(), -1e-3, -1e-5), None, "no pulse found"),
        (replace(trace(voltage=False), current=np.full(3000, 0.4)), None, "current: no pulse found"),
        (replace(trace(voltage=False), current=1e-3 * trace().waves["current"]), None, "check the column and its scale"),
        (replace(trace(voltage=False), current=-trace().waves["current"]), None, "the wrong sign; turn the probe.*--current-scale"),
        (replace(trace(), voltage=-trace().waves["voltage"]), None, "the wrong sign; turn the probe.*--voltage-scale"),
        (replace(trace(), voltage=0.1 * trace().waves["voltage"]), None, "voltage: no pulse found"),
    ],
)  # fmt: skip
def test_a_trace_that_cannot_be_compared_is_refused(seen: Trace, at: float | None, said: str) -> None:
    with pytest.raises(InputError, match=said):
        lay_over(seen, course(), at)
