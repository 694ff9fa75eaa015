"""A half bridge against the closed forms of its driver's lags and of its coil."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
from reference_boards import NO_LOSS, PERFECT_SWITCH, STIFF, Run, board_text, pattern_text, pulse, run_board
from test_reference_high_side import PERFECT_P

from boardsim.circuit.deck import Settings
from boardsim.engine.run import Engine
from boardsim.parts.rules import MeanRule, PeakRule

pytestmark = pytest.mark.engine

V, R, L = 24.0, 16.0, 12e-3


def run(engine: Engine, tmp_path: Path, delay: str, dead: str) -> Run:
    driver = f'{{ supply = "12 V", delay = "{delay}", dead_time = "{dead}", output_resistance = "1 ohm" }}'
    text = board_text(
        supply=f'voltage = "24 V", {STIFF}',
        coil=f'resistance = "16 ohm"\ninductance = "12 mH"\n{NO_LOSS}',
        clamp='{ kind = "none" }',
        bulk='{ capacitance = "1000 uF", esr = "10 mohm", esl = "0.1 nH" }',
        switch=f'{{ kind = "half-bridge", high = "perfect-p", low = "perfect", gate = "0 ohm", driver = {driver} }}',
        parts=PERFECT_SWITCH.format(breakdown="100 V") + PERFECT_P.format(breakdown="100 V"),
    )
    return run_board(engine, tmp_path, text, pattern_text(pulse("100 us", "2 ms")), Settings("gear", 1e-5, 50e-6))


def crosses(found: Run, quantity: str, after: float, *, rises: bool, level: float = 1.5) -> float:
    """When a gate passes a level after an edge. [V] -> [s]"""
    y = found.signal(quantity, 0) - level
    k = np.flatnonzero((found.t[1:] > after) & ((y[:-1] < 0) == rises) & ((y[1:] >= 0) == rises))[0]
    return float(found.t[k] - y[k] * (found.t[k + 1] - found.t[k]) / (y[k + 1] - y[k])) - after


def test_each_edge_comes_after_its_delay_and_the_dead_time(engine: Engine, tmp_path: Path) -> None:
    """Half of 1 - exp(-t / tau) is reached at tau ln 2: gates turn off after t_d, and on after t_d + t_dead."""
    found = run(engine, tmp_path, "2 us", "3 us")
    on, off = found.on()
    # 5 %: the gates' own 300 pF take some nanoseconds, and an eighth of 12 V is crossed 1.5 % of the lag after the half.
    assert crosses(found, "v_gs_low", on, rises=False) == pytest.approx(2e-6, rel=0.05)
    assert crosses(found, "v_gs", on, rises=True) == pytest.approx(5e-6, rel=0.05)
    assert crosses(found, "v_gs", off, rises=False) == pytest.approx(2e-6, rel=0.05)
    assert crosses(found, "v_gs_low", off, rises=True) == pytest.approx(5e-6, rel=0.05)


def test_an_edge_lasts_as_long_after_a_long_dead_time_as_after_a_short_one(engine: Engine, tmp_path: Path) -> None:
    """The driver's 10 ns, and what 300 pF and the charge of the drain take at 1 + 2 ohm: 12 nC / 12 V at 3 ohm, 7 ns from 10 to 90 %."""
    lasting = []
    for n, dead in enumerate(("200 ns", "5 us")):
        (tmp_path / str(n)).mkdir()
        found = run(engine, tmp_path / str(n), "100 ns", dead)
        on, _ = found.on()
        begins, ends = (crosses(found, "v_gs", on, rises=True, level=share * 12) for share in (0.1, 0.9))
        lasting.append(ends - begins)
        assert begins == pytest.approx(100e-9 + float(dead[:-3]) * {"ns": 1e-9, "us": 1e-6}[dead[-2:]], rel=0.05)
    assert lasting[1] == pytest.approx(lasting[0], rel=0.05)
    assert 10e-9 < lasting[0] < 17e-9  # the two stages one after the other: between the slower one and their sum


def test_the_coil_freewheels_through_the_low_transistor(engine: Engine, tmp_path: Path) -> None:
    """I = V/R (1 - exp(-t R/L)), then I exp(-t R/L) through 1 mohm; in the dead time one body diode's voltage besides."""
    found = run(engine, tmp_path, "100 ns", "200 ns")
    on, off = found.on()
    peak = V / R * (1 - math.exp(-(off - on) * R / L))
    times = np.linspace(1e-5, 2e-3, 50)
    assert found.at(off, "i_coil", 0) == pytest.approx(peak, rel=5e-3)
    # 0.5 % of the peak: 300 ns of 750 us, and the supply's and transistors' milliohms.
    assert np.abs(found.at(off + times, "i_coil", 0) - peak * np.exp(-times * R / L)).max() < 5e-3 * peak
    # Backwards through the low transistor all the time: its average counts by magnitude, and is the coil's.
    after = found.t > off + 1e-5
    backwards, size = (found.signal(quantity, 0)[after] for quantity in ("i_d_low", "i_d_size_low"))
    assert backwards.max() < 1e-3
    np.testing.assert_allclose(size, np.abs(backwards), atol=1e-6)
    low = [
        p.rule for p in found.deck.rules if isinstance(p.rule, PeakRule | MeanRule) and p.rule.check == "overcurrent"
    ]
    assert {r.quantity for r in low if isinstance(r, PeakRule) and r.magnitude} == {"i_d", "i_d_low"}
    assert {r.quantities for r in low if isinstance(r, MeanRule)} == {("i_d_size",), ("i_d_size_low",)}
