"""Models from a file against what they say: our own MOSFET by way of a text, and a diode's equation solved by SciPy."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from reference_boards import STIFF, Floats, Run, board_text, pattern_text, pulse, run_board, run_plain
from scipy.integrate import solve_ivp

from boardsim.board.reader import library_part
from boardsim.circuit.deck import Settings
from boardsim.engine.run import Engine
from boardsim.parts.base import NOMINAL
from boardsim.parts.elements import PowerMosfet, Resistor
from boardsim.parts.mosfet import NMosfet
from boardsim.parts.switches.n_mosfet import NMosfetStage
from boardsim.parts.vendor.cards import read_library
from boardsim.parts.vendor.flatten import flatten
from boardsim.parts.vendor.text import read_statements
from boardsim.scenarios.parts import copy_part

pytestmark = pytest.mark.engine

OFF = 6e-3  # [s], asked end of the pulse
PULSE = pattern_text(pulse("1 ms", "5 ms"), duration="9 ms")
COIL = 'resistance = "48 ohm"\ninductance = "40 mH"'


def as_text(part: NMosfet) -> str:
    """Our own model of a MOSFET as a file of a subcircuit: the numbers that a deck would take, in SPICE's words."""
    stage = NMosfetStage.model_validate({"part": part, "gate": "100 ohm"}, context={})
    device = next(e for e in stage.stamp("x", "p", "l", NOMINAL).elements if isinstance(e, PowerMosfet))
    numbers = "\n+ ".join(f"{k}={v!r}" for k, v in device.model.parameters.items())
    return f".subckt same d g s\nM1 d g s s core\n.model core VDMOS(nchan\n+ {numbers})\n.ends\n"


def fired(engine: Engine, folder: Path, switch: str, parts: str) -> Run:
    text = board_text(
        supply=f'voltage = "24 V", {STIFF}',
        coil=COIL,
        clamp='{ kind = "diode-zener", diode = "rectifier-1a", zener = "20v-5w" }',
        switch=f'{{ part = "{switch}", gate = "100 ohm", pulldown = "10 kohm" }}',
        parts=parts,
        bulk='{ capacitance = "1000 uF", esr = "10 mohm" }',
    )
    folder.mkdir()
    if "same.lib" in parts:
        part = library_part("n-logic-60v")
        assert isinstance(part, NMosfet)
        (folder / "same.lib").write_text(as_text(part), encoding="utf-8")
    return run_board(engine, folder, text, PULSE, Settings("gear", 1e-5, 20e-6))


def test_a_channel_fired_with_our_mosfet_by_way_of_a_file_is_the_same_channel(engine: Engine, tmp_path: Path) -> None:
    """Coil current, drain voltage and the clamp's energy: the same equations with the same numbers.

    1e-5 of each scale, the tolerance of integration: the two decks differ in a device that stands beside the circuit, and may
    differ in the steps that are taken. At the edges the drain moves by volts in a step; there times are held instead.
    """
    copied = copy_part("n-logic-60v").replace("[parts.n-logic-60v]", "[parts.same]")
    pins = 'pins = { drain = "d", gate = "g", source = "s" }'
    model = f'model = {{ file = "same.lib", subcircuit = "same", {pins} }}\n'
    head, title, rest = copied.partition("[parts.same]\n")
    ours = fired(engine, tmp_path / "ours", "n-logic-60v", "")
    theirs = fired(engine, tmp_path / "theirs", "same", head + title + model + rest)
    assert any(q.startswith("i_off") for _, q in theirs.deck.signals)
    assert not any(q.startswith("i_off") for _, q in ours.deck.signals)
    times = np.linspace(0.2e-3, 8.9e-3, 400)
    current, other = (run.at(times, "i_coil", 0) for run in (ours, theirs))
    assert current.max() == pytest.approx(0.5, rel=0.01)  # 24 V over 48 ohm, after six time constants
    assert np.abs(current - other).max() < 1e-5 * current.max()
    quiet = times[(np.abs(times - 1e-3) > 0.1e-3) & (np.abs(times - OFF) > 0.1e-3) & (times < OFF + 0.9e-3)]
    drain, there = (run.at(quiet, "v_ds", 0) for run in (ours, theirs))
    assert drain.max() > 44
    assert np.abs(drain - there).max() < 1e-5 * drain.max()
    half = [half_way(run) for run in (ours, theirs)]
    assert half[0] == pytest.approx(half[1], abs=1e-9)  # of an edge of about a microsecond
    ours_joule, theirs_joule = (clamp_energy(run) for run in (ours, theirs))
    assert ours_joule > 1e-3
    assert theirs_joule == pytest.approx(ours_joule, rel=1e-5)


def half_way(run: Run) -> float:
    """When the drain passes 24 V at turn-off. [s]"""
    after = (run.t > OFF - 1e-5) & (run.t < OFF + 1e-4)
    return float(np.interp(24.0, run.signal("v_ds", 0)[after], run.t[after]))


def clamp_energy(run: Run) -> float:
    """What diode and Zener take. [J]"""
    after = run.t > OFF - 1e-5
    power = sum(run.signal(f"v_clamp {which}", 0) * run.signal(f"i_clamp {which}", 0) for which in ("diode", "Zener"))
    return float(np.trapezoid(np.asarray(power)[after], run.t[after]))


SATURATION, EMISSION, SERIES = 2e-9, 1.75, 0.9  # [A], [1], [ohm] of the diode's file
THERMAL = 8.617333e-5 * 298.15  # [V] k T / q, CODATA, 25 degC
DIODE = """
[parts.free]
kind = "diode"
forward = [{ voltage = "1.8 V", current = "1 A" }]
reverse_voltage = "100 V"
model = { file = "free.lib", subcircuit = "free", pins = { anode = "a", cathode = "k" } }
"""


def freewheeling(start: float, times: Floats) -> Floats:
    """Current of coil and diode from `start`, at times after it. [A], [s]

    L di/dt = -(R i + N V_T ln(1 + i / I_S) + R_S i), Shockley's equation with a series resistance; solved to 1e-9.
    """

    def slope(_: float, i: Floats) -> Floats:
        return -((48.0 + SERIES) * i + EMISSION * THERMAL * np.log1p(np.maximum(i, 0) / SATURATION)) / 40e-3

    return np.asarray(
        solve_ivp(slope, (0, times[-1]), [start], t_eval=times, rtol=1e-9, atol=1e-12, method="LSODA").y[0]
    )


def test_a_coil_that_freewheels_through_a_diode_of_a_file_decays_as_shockleys_equation_says(
    engine: Engine, tmp_path: Path
) -> None:
    lines = f"D1 a m junction\nR1 m k {{2*half}}\n.param half={SERIES / 2}\n.model junction D(IS={SATURATION} N={EMISSION} TNOM=25)"
    (tmp_path / "free.lib").write_text(f".subckt free a k\n{lines}\n.ends\n", encoding="utf-8")
    text = board_text(
        supply=f'voltage = "24 V", {STIFF}',
        coil=COIL + '\ncore_loss = "1 Gohm"',
        clamp='{ kind = "diode", diode = "free" }',
        switch='{ part = "n-logic-60v", gate = "10 ohm" }',
        parts=DIODE,
        bulk='{ capacitance = "1000 uF", esr = "10 mohm" }',
    )
    run = run_board(engine, tmp_path, text, PULSE, Settings("gear", 1e-5, 20e-6))
    after = np.linspace(20e-6, 2.5e-3, 60)
    began = OFF + 20e-6  # the switch is off, and the diode carries the whole current
    start = float(run.at(began, "i_coil", 0))
    expected = freewheeling(start, np.concatenate([[0.0], after]))[1:]
    found = run.at(began + after, "i_coil", 0)
    # 2e-4 of where it began: twenty times the tolerance of integration of one step, for some hundred steps.
    assert np.abs(found - expected).max() < 2e-4 * start
    # The diode's share shows: without it after 1 ms a fortieth of where it began would be left besides.
    bare = start * np.exp(-48.0 / 40e-3 * 1e-3)
    assert bare - np.interp(1e-3, after, expected) > start / 40
    drop = run.at(began + after, "v_clamp diode", 0)
    shockley = EMISSION * THERMAL * np.log1p(found / SATURATION) + SERIES * found
    assert np.abs(drop - shockley)[found > 1e-3].max() < 1e-3


def test_a_resistors_temperature_coefficients_are_worked_out_as_ngspice_itself_does(
    engine: Engine, tmp_path: Path
) -> None:
    """The file's line as it stands in a deck at 127 degC, against the number that goes into ours."""
    line = "100 tc1=0.003 tc2=2e-5"
    plain = f".title plain\nI1 0 a 1m\nR1 a 0 {line}\n.options temp=127\n.save v(a)\n.tran 1u 10u\n.end\n"
    theirs = run_plain(engine, plain, 10e-6)["v(a)"][-1] / 1e-3
    (tmp_path / "r.lib").write_text(f".subckt s a b\nR1 a b {line}\n.ends\n", encoding="utf-8")
    library = read_library(read_statements(tmp_path / "r.lib", tmp_path))
    (found,) = flatten(library, library.subcircuits["s"], "x", {"a": "a", "b": "0"}, 127.0).elements
    assert isinstance(found, Resistor)
    assert found.ohms == pytest.approx(theirs, rel=1e-6)
