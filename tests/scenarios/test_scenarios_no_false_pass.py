"""Ways in which a board once could, or might, pass without proof."""

from __future__ import annotations

import math
import os
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import pytest
from test_scenarios_fire import PULSES, SMALL, fire, worst

from boardsim.scenarios.all_corners import worst as worst_of
from boardsim.verdict.audit import refinement
from boardsim.verdict.findings import Finding, verdict_of

UNCLAMPED = SMALL.replace('{ kind = "diode", diode = "fast-2a" }', '{ kind = "none" }')
ONE_PULSE = '[[pulses]]\nchannels = "0"\nstart = "1 ms"\nwidth = "9 ms"\n'


def finding(value: float, limit: float | None = None, **changes: object) -> Finding:
    margin = None if limit is None else (limit - value) / limit
    whole = Finding(
        "check",
        "quantity",
        "part",
        0,
        "gate 0",
        value,
        limit,
        "A",
        margin,
        0.0,
        "misbehave",
        verdict_of(margin, 0.1),
        "It is so",
    )
    return replace(whole, **changes)  # type: ignore[arg-type]


@pytest.mark.engine
def test_a_duration_that_ends_with_the_pulse_does_not_hide_the_turn_off(tmp_path: Path) -> None:
    board = UNCLAMPED.replace("n-logic-60v", "n-logic-30v")
    status, found, _, _ = fire(tmp_path, board, 'duration = "10 ms"\n' + ONE_PULSE)
    assert status == 1
    assert next(f for f in found["findings"] if f["verdict"] == "fail")["quantity"] == "avalanche energy"


@pytest.mark.engine
def test_a_switch_below_its_specified_gate_voltage_does_not_pass(tmp_path: Path) -> None:
    status, found, _, _ = fire(tmp_path, SMALL.replace('logic = { voltage = "5 V" }', 'logic = { voltage = "3.3 V" }'))
    drive = worst(found, "under-drive")
    assert (status, drive["verdict"], drive["consequence"], drive["limit"]) == (1, "fail", "destroy", 4.5)


@pytest.mark.engine
def test_a_clock_that_makes_pulses_late_does_not_pass(tmp_path: Path) -> None:
    status, found, _, _ = fire(tmp_path, SMALL.replace('clock = "1 MHz"', 'clock = "1 kHz"'))
    assert status == 1
    late = worst(found, "pulse-timing")
    # 8 bits at 1 kHz and the latch: at least 8 ms for a pulse of 8 ms.
    assert late["verdict"] == "fail"
    assert late["value"] >= 1.0


@pytest.mark.engine
def test_two_exclusive_groups_are_two_questions(tmp_path: Path) -> None:
    groups = "".join(f'[[limits.exclusive]]\nchannels = "{c}"\n' for c in ("0", "1"))
    _, found, _, _ = fire(tmp_path, SMALL + groups)
    assert len([f for f in found["findings"] if f["quantity"] == "exclusive channels on at once"]) == 2


@pytest.mark.engine
def test_a_board_without_release_current_is_proven_all_the_same(tmp_path: Path) -> None:
    """A current of nanoamperes without a limit must not decide whether the rest is believed."""
    _, found, _, _ = fire(tmp_path, SMALL.replace('release = "0.1 A"\n', ""), PULSES)
    assert found["audit"]["passed"]


def test_an_old_verdict_does_not_stand_for_a_run_that_came_to_nothing(tmp_path: Path) -> None:
    (tmp_path / "board.toml").write_text(SMALL)
    (tmp_path / "pattern.toml").write_text(PULSES)
    out = tmp_path / "out"
    out.mkdir()
    for name in ("findings.json", "junit.xml"):
        (out / name).write_text("old")
    done = subprocess.run(
        [sys.executable, "-m", "boardsim.cli", "fire", "board.toml", "pattern.toml", "--out", "out"],
        cwd=tmp_path,
        env={**os.environ, "NGSPICE_LIBRARY_PATH": "no-such-library.so"},
        capture_output=True,
        check=False,
    )
    assert done.returncode == 3
    assert not list(out.iterdir())


def test_a_pattern_that_would_fill_the_disk_is_refused(tmp_path: Path) -> None:
    status, _, out, err = fire(tmp_path, SMALL, 'duration = "1000000 s"\n' + ONE_PULSE)
    assert (status, out) == (2, "")
    assert "MiB" in err
    assert "Traceback" not in err


@pytest.mark.parametrize("margin", [math.nan, math.inf, -math.inf])
def test_a_margin_that_is_no_number_proves_nothing(margin: float) -> None:
    assert verdict_of(margin, 0.1) == "unproven"


def test_a_reading_that_is_no_number_fails_the_refinement() -> None:
    entry = refinement([finding(1.0, 2.0)], [finding(math.nan, 2.0)], (100, 200), "nominal", "pair")
    assert not entry.passed


def test_without_a_limit_the_worst_corner_is_the_one_with_the_worst_reading() -> None:
    high = worst_of([[finding(1.0, corner="a")], [finding(3.0, corner="b")], [finding(2.0, corner="c")]])
    low = worst_of([[finding(v, corner=c, worse="low")] for v, c in ((2.0, "a"), (1.0, "b"), (3.0, "c"))])
    assert [f.corner for f in (*high, *low)] == ["b", "b"]


def test_a_worse_reading_in_an_unproven_corner_is_not_kept_quiet() -> None:
    kept = worst_of([[finding(3.0, 2.0, corner="a")], [finding(5.0, 2.0, corner="b", verdict="unproven")]])
    assert [f.verdict for f in kept] == ["fail"]
    assert "unproven, but worse: 5.00 A (b)" in kept[0].sentence


def test_a_dip_that_only_the_coarse_run_has_fails_the_refinement() -> None:
    coarse, fine = finding(2.0, 2.5, lasting=2e-3, verdict="fail"), finding(2.0, 2.5, lasting=0.4e-3)
    assert not refinement([coarse], [fine], (100, 200), "nominal", "pair").passed


@pytest.mark.engine
def test_a_fast_coil_is_proven_on_a_long_pattern(tmp_path: Path) -> None:
    """Its L/R of 20 us must not hold every rung of the ladder to one and the same step."""
    board = SMALL.replace('"24 ohm"', '"50 ohm"').replace('"30 mH"', '"1 mH"').replace('"0.5 A"', '"0.3 A"')
    status, found, _, _ = fire(tmp_path, board, 'duration = "200 ms"\n' + ONE_PULSE)
    assert (status, found["audit"]["passed"]) == (0, True)


def test_two_channels_of_one_name_are_refused(tmp_path: Path) -> None:
    board = SMALL.replace('[channels."0-1"]\n', '[channels."0-1"]\nlabel = "gate"\n')
    status, _, _, err = fire(tmp_path, board)
    assert status == 2
    assert 'channels 0 and 1 are both labelled "gate"' in err


@pytest.mark.engine
def test_a_short_pulse_that_comes_a_little_late_is_no_failure_nobody_asked_for(tmp_path: Path) -> None:
    # 20 us at 1 MHz and 8 bits: 8.5 us late, which is more than a tenth and less than all of it.
    pulse = '[[pulses]]\nchannels = "0"\nstart = "1 ms"\nwidth = "20 us"\n'
    _, found, _, _ = fire(tmp_path, SMALL, pulse)
    late = worst(found, "pulse-timing")
    assert (late["verdict"], late["limit"]) == ("limit-missing", None)
    _, found, _, _ = fire(tmp_path, SMALL + 'pulse_error = "10 %"\n', pulse)
    assert worst(found, "pulse-timing")["verdict"] == "fail"


def test_a_folder_where_a_result_should_stand_is_a_wrong_call(tmp_path: Path) -> None:
    (tmp_path / "out" / "findings.json").mkdir(parents=True)
    (tmp_path / "board.toml").write_text(SMALL)
    (tmp_path / "pattern.toml").write_text(PULSES)
    done = subprocess.run(
        [sys.executable, "-m", "boardsim.cli", "fire", "board.toml", "pattern.toml", "--out", "out"],
        cwd=tmp_path, capture_output=True, text=True, check=False,
    )  # fmt: skip
    assert done.returncode == 2
    assert "cannot be used as a folder for results" in done.stderr
    assert "Traceback" not in done.stderr
