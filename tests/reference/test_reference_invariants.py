"""What must hold for any board: permutation of identical channels, clamp voltage and release, supply and peak current."""

from __future__ import annotations

import tempfile
from pathlib import Path

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from reference_boards import Run, board_text, crossing, pattern_text, pulse, run_board

from boardsim.circuit.deck import Settings
from boardsim.engine.run import Engine

pytestmark = pytest.mark.engine

# The engine is one process for all examples; each example has its own folder.
few = settings(
    max_examples=6,
    deadline=None,
    derandomize=True,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
QUICK = Settings("gear", 5e-5, 100e-6)


def run_small(engine: Engine, *, volts: float = 24.0, zener: float = 24.0, channels: str = "0", fired: str) -> Run:
    text = board_text(
        supply=f'voltage = "{volts:.6g} V", resistance = "30 mohm"', channels=channels,
        cable='{ gauge = "18 AWG", length = "1 m" }', bulk='{ capacitance = "470 uF", esr = "40 mohm" }',
        coil='resistance = "12 ohm"\ninductance = "8 mH"',
        clamp='{ kind = "diode-zener", diode = "fast-2a", zener = "any" }',
        switch='{ part = "wide", gate = "100 ohm" }',
        parts='[parts.any]\nkind = "zener"\ntest_current = "50 mA"\nimpedance = "2 ohm"\n' + f'voltage = "{zener:.6g} V"\n'
        '[parts.wide]\nkind = "n-mosfet"\nbreakdown = "200 V"\nthreshold = "1.7 V"\n'
        'on_resistance = [{ value = "55 mohm", gate = "4.5 V" }, { value = "45 mohm", gate = "10 V" }]\n'
        'input_capacitance = "560 pF"\noutput_capacitance = "95 pF"\nreverse_capacitance = "35 pF"\n'
        'gate_drain_charge = "3 nC"\ncharge_voltage = "30 V"\n',
    )  # fmt: skip
    with tempfile.TemporaryDirectory() as folder:
        return run_board(engine, Path(folder), text, fired, QUICK)


@few
@given(order=st.permutations([0, 1, 2, 3]))
def test_a_permutation_of_identical_channels_changes_nothing_but_names(engine: Engine, order: list[int]) -> None:
    starts, widths = [1.0, 1.5, 3.0, 6.0], [5.0, 2.0, 4.0, 1.0]  # [ms], of four pulses that overlap in part

    def fired(channels: list[int]) -> str:
        return pattern_text(
            *(pulse(f"{a} ms", f"{w} ms", str(c)) for c, a, w in zip(channels, starts, widths, strict=True)),
            duration="9 ms",
        )

    plain = run_small(engine, channels="0-3", fired=fired([0, 1, 2, 3]))
    moved = run_small(engine, channels="0-3", fired=fired(order))
    # 5e-4: the same equations in another order, at other steps, solved to a relative tolerance of 5e-5.
    assert moved.signal("v_rail").min() == pytest.approx(plain.signal("v_rail").min(), rel=5e-4)
    for mine, theirs in enumerate(order):
        for quantity in ("i_coil", "v_ds"):
            a, b = plain.signal(quantity, mine).max(), moved.signal(quantity, theirs).max()
            assert b == pytest.approx(a, rel=5e-4), (quantity, mine, theirs)


@few
@given(zener=st.floats(5.0, 80.0), more=st.floats(0.5, 20.0))
def test_more_clamp_voltage_never_slows_the_release(engine: Engine, zener: float, more: float) -> None:
    fired = pattern_text(pulse("1 ms", "5 ms"), duration="12 ms")
    times = []
    for volts in (zener, zener + more):
        run = run_small(engine, zener=volts, fired=fired)
        _, off = run.on()
        times.append(crossing(run.t, run.signal("i_coil", 0), 0.2, off + 1e-5) - off)
    assert times[1] < times[0]


@few
@given(volts=st.floats(8.0, 40.0), more=st.floats(0.1, 10.0))
def test_a_higher_supply_never_lowers_the_peak_current(engine: Engine, volts: float, more: float) -> None:
    fired = pattern_text(pulse("1 ms", "5 ms"), duration="7 ms")
    low, high = (run_small(engine, volts=v, fired=fired).signal("i_coil", 0).max() for v in (volts, volts + more))
    assert high > low
    # Nothing in this circuit but the diode is bent, and it is off: current and supply are in proportion. 0.2 %: the
    # supply's smooth bend at 0 A.
    assert high / low == pytest.approx((volts + more) / volts, rel=2e-3)
    assert np.isfinite(high)
