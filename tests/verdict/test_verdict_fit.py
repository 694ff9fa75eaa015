"""Coils fitted to traces whose values are known: exact formulas, not runs of the tool."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from scope_traces import VOLTS, course, trace

from boardsim.errors import InputError
from boardsim.parts.coil import Coil
from boardsim.parts.moving_magnet import MovingMagnetCoil
from boardsim.verdict.fit import Fit, Fitted, fit
from boardsim.verdict.fit_model import Drive, at_rest, model_of
from boardsim.verdict.overlay import lay_over

COIL = Coil.model_validate({"resistance": "24 ohm", "inductance": "20 mH"})
R, L = 27.0, 16e-3  # of the coil that was measured


def number(found: Fit, name: str) -> Fitted:
    return next(n for n in found.numbers if n.name == name)


def test_the_model_follows_the_table_of_a_textbook() -> None:
    # 15 V, 1 ohm, 1 H: Kuphaldt, Lessons in Electric Circuits vol. I, inductor transient table.
    drive = Drive(np.array([0.0, 6.0]), np.array([15.0, 15.0]))
    t, i, moved = at_rest(drive, {"resistance": 1.0, "inductance": 1.0, "loss": 0.0}, 0.0)
    for at, amperes in ((0.5, 5.902), (1, 9.482), (2, 12.97), (3, 14.25), (4, 14.73), (5, 14.90)):
        assert np.interp(at, t, i) == pytest.approx(amperes, rel=1e-3)
    assert moved == 0.0


def test_a_core_loss_takes_its_current_at_once_and_lengthens_the_rise() -> None:
    # R in series with (L parallel to R_c): i = V/R - (V/R - V/(R + R_c)) exp(-t/tau), tau = L (R + R_c) / (R R_c).
    drive = Drive(np.array([0.0, 1e-12, 8e-3]), np.array([0.0, 24.0, 24.0]))
    t, i, _ = at_rest(drive, {"resistance": 24.0, "inductance": 20e-3, "loss": 1 / 480.0}, 0.0)
    tau = 20e-3 * 504 / (24 * 480)
    exactly = 1 - (1 - 24 / 504) * np.exp(-t / tau)
    np.testing.assert_allclose(i[2:], exactly[2:], atol=1e-4)


def test_the_volt_seconds_of_a_drive_are_kept_whatever_the_step() -> None:
    t = np.array([0.0, 0.31, 0.32, 1.7, 1.71, 3.0])
    drive = Drive(t, np.array([0.0, 0.0, 24.0, 22.0, -30.0, 0.0]))
    for step in (0.5, 0.1, 0.003):
        at, _, means = drive.evenly(step)
        assert float(np.sum(means[:-1] * np.diff(at))) == pytest.approx(float(np.trapezoid(drive.volts, t)), rel=1e-9)


@pytest.mark.parametrize("voltage", [True, False])
@pytest.mark.parametrize(("begins", "points", "offset"), [(0.0, 3000, 0.0), (0.7, 1234, 0.05), (-2.0, 20_000, -0.02)])
def test_resistance_and_inductance_come_back_from_noise_of_one_percent(
    voltage: bool, begins: float, points: int, offset: float
) -> None:
    seen = trace(R, L, begins=begins, points=points, offset=offset, noise=0.01, voltage=voltage)
    found = fit(COIL, lay_over(seen, course()))
    for name, true in (("resistance", R), ("inductance", L)):
        n = number(found, name)
        assert n.told == "fitted"
        assert n.value == pytest.approx(true, rel=0.01)
        assert abs(n.value - true) < 4 * n.error, n  # of some thirty such errors none is expected beyond
        assert n.error < 0.01 * true
    assert found.offset == pytest.approx(offset, abs=4e-3)
    assert found.follows
    assert found.rms == pytest.approx(found.noise, rel=0.15)


def test_standard_errors_are_those_that_repeated_measurements_scatter_by() -> None:
    # Twenty traces that differ by their noise only: what is printed for one of them is how far they lie apart.
    # Driven by the computed voltage and without core loss, nothing counts but noise.
    coil = Coil.model_validate({"resistance": "24 ohm", "inductance": "20 mH", "core_loss": "10 Mohm"})
    clean = trace(R, L, points=1000, voltage=False)
    random = np.random.default_rng(11)
    found = []
    for _ in range(20):
        noisy = clean.waves["current"] + 0.02 * VOLTS / R * random.standard_normal(1000)
        found.append(fit(coil, lay_over(replace(clean, current=noisy), course())))
    for name, true in (("resistance", R), ("inductance", L)):
        values = np.array([number(f, name).value for f in found])
        errors = np.array([number(f, name).error for f in found])
        # The spread of 20 values is known to 1 / sqrt(40) = 16 %: three of these.
        assert np.median(errors) == pytest.approx(values.std(), rel=0.5)
        assert abs(values.mean() - true) < 3 * values.std() / math.sqrt(20)


def test_a_core_loss_comes_back_where_the_voltage_was_measured() -> None:
    loss, k = 300.0, 300 / (300 + R)  # as above, with -V_c after the turn-off
    tau = L / (R * k)
    t = np.linspace(-1e-3, 5.9e-3, 4000)
    i = np.where(t < 0, 0.0, VOLTS / R - (VOLTS / R - VOLTS / (R + loss)) * np.exp(-np.maximum(t, 0) / tau))
    v = np.where(t < 0, 0.0, VOLTS)
    i = i + 0.004 * np.random.default_rng(3).standard_normal(len(t))
    c = course()
    seen = replace(trace(), t=t, current=i, voltage=v)
    found = fit(COIL, lay_over(seen, replace(c, off=c.on + 5.8e-3)))
    for name, true in (("resistance", R), ("inductance", L), ("core_loss", loss)):
        assert number(found, name).told == "fitted"
        assert number(found, name).value == pytest.approx(true, rel=0.03)
        assert abs(number(found, name).value - true) < 4 * number(found, name).error


def test_a_trace_without_core_loss_only_says_how_small_it_is() -> None:
    found = number(fit(COIL, lay_over(trace(R, L, points=12_000, noise=0.003), course())), "core_loss")
    assert found.told == "at least"
    assert found.value > found.before == pytest.approx(4800.0)
    left = number(fit(COIL, lay_over(trace(R, L, noise=0.003, voltage=False), course())), "core_loss")
    assert (left.told, left.value) == ("left", pytest.approx(4800.0))
    assert "delay" in left.why


def test_what_a_trace_does_not_tell_is_left_as_it_was() -> None:
    # A coil of 1/3 s in a pulse of 6 ms: the current rises in a straight line, V/L t, bent by 1 % of it whatever R is.
    coil = Coil.model_validate({"resistance": "24 ohm", "inductance": "8 H", "core_loss": "10 Mohm"})
    slow = trace(R, 8.0, voltage=False)
    noise = 0.05 * slow.waves["current"].max() * np.random.default_rng(1).standard_normal(len(slow.t))
    c = course(24.0, 8.0)
    noisy = slow.waves["current"] + noise
    found = fit(coil, lay_over(replace(slow, current=noisy), c))
    assert number(found, "resistance").told == "left"
    assert number(found, "resistance").value == pytest.approx(24.0)
    assert "does not tell it" in number(found, "resistance").why
    assert number(found, "inductance").told == "fitted"
    assert number(found, "inductance").value == pytest.approx(8.0, rel=0.02)


def test_a_coil_that_does_not_behave_like_r_and_l_is_said_not_to_follow() -> None:
    # A core that saturates: the current bends upwards where that of R and L bends down.
    seen = trace(R, L)
    bent = seen.waves["current"] * (1 + 0.4 * (seen.waves["current"] > 0.5) * (seen.waves["current"] - 0.5))
    found = fit(COIL, lay_over(replace(seen, current=bent), course()))
    assert not found.follows


def test_a_magnet_that_is_held_fast_is_a_coil() -> None:
    # It does not move against a spring of 50 N, and the force constant then does not matter.
    held = MovingMagnetCoil.model_validate(
        {
            "resistance": "24 ohm",
            "inductance": "20 mH",
            "force_constant": "2 N/A",
            "motion": {"travel": "5 mm", "mass": "20 g", "spring_preload": "50 N", "contact": "300 us"},
        }
    )
    found = fit(held, lay_over(trace(R, L, noise=0.01, points=800), course()))
    assert number(found, "resistance").value == pytest.approx(R, rel=0.01)
    assert number(found, "inductance").value == pytest.approx(L, rel=0.01)
    assert found.moved < 0.01


def test_a_fit_without_current_or_without_a_model_is_refused() -> None:
    seen = trace()
    with pytest.raises(InputError, match="needs the measured current"):
        fit(COIL, lay_over(replace(seen, current=None), course()))

    class Stranger(Coil):
        kind: str = "stranger"  # type: ignore[assignment]

    with pytest.raises(InputError, match="'stranger' have no model"):
        model_of(
            Stranger.model_validate({"resistance": "1 ohm", "inductance": "1 mH"}), Drive(seen.t, seen.waves["voltage"])
        )
