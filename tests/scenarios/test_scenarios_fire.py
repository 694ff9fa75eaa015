"""The whole way on the real engine: board and pattern to verdict, files and exit status."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

HERE = Path(__file__).resolve().parents[2]
SORTER = HERE / "netlists" / "fruit-sorter"

SMALL = """\
name = "two gates"
supply = { voltage = "24 V", resistance = "20 mohm", current_ceiling = "5 A" }
cable = { gauge = "18 AWG", length = "1 m", spacing = "2 mm" }
bulk = { capacitance = "2200 uF", esr = "50 mohm", esl = "20 nH", rated = "35 V" }
logic = { voltage = "5 V" }
[controller]
high_drop = "0.8 V"
low_output = "0.6 V"

[chain]
register = "74HC595"
count = 1
clock = "1 MHz"
[coils.gate]
resistance = "24 ohm"
inductance = "30 mH"
core_loss = "4.8 kohm"
pull_in = "0.5 A"
release = "0.1 A"
[channels."0-1"]
coil = "gate"
switch = { part = "n-logic-60v", gate = "100 ohm", pulldown = "100 kohm" }
clamp = { kind = "diode", diode = "fast-2a" }
[limits]
most_on = 2
brown_out = { voltage = "18 V", lasting = "1 ms" }
"""

PULSES = """\
[[pulses]]
channels = "0-1"
start = "1 ms"
width = "8 ms"
repeat = 2
every = "25 ms"
stagger = "3 ms"
"""


def fire(tmp_path: Path, board: str = SMALL, pattern: str = PULSES, *options: str) -> tuple[int, dict, str, str]:
    """Run the command; returns status, findings, and what it printed."""
    (tmp_path / "board.toml").write_text(board)
    (tmp_path / "pattern.toml").write_text(pattern)
    return command(tmp_path, tmp_path / "board.toml", tmp_path / "pattern.toml", *options)


def command(tmp_path: Path, board: Path, pattern: Path, *options: str) -> tuple[int, dict, str, str]:
    out = tmp_path / "out"
    done = subprocess.run(
        [sys.executable, "-m", "boardsim.cli", "fire", str(board), str(pattern), "--out", str(out), *options],
        capture_output=True,
        text=True,
        cwd=HERE,
        check=False,
    )
    found = json.loads((out / "findings.json").read_text()) if (out / "findings.json").exists() else {}
    return done.returncode, found, done.stdout, done.stderr


def worst(found: dict, check: str) -> dict:
    return next(f for f in found["findings"] if f["check"] == check)


@pytest.mark.engine
def test_a_sound_board_passes_and_leaves_every_file_of_the_contract(tmp_path: Path) -> None:
    status, found, out, err = fire(tmp_path)
    assert (status, found["verdict"], err) == (0, "pass", "")
    assert found["audit"]["passed"]
    assert {p.name for p in (tmp_path / "out").iterdir()} == {
        "findings.json",
        "junit.xml",
        "overview.png",
        "board.cir",
        "report.txt",
        "edges.csv",
        "fired.json",
    }
    assert "verdict: pass" in out
    assert "overview.png" in out.splitlines()[-1]


@pytest.mark.engine
@pytest.mark.slow
def test_rush_names_lowest_rail_time_duration_and_lanes(tmp_path: Path) -> None:
    status, found, out, _ = command(tmp_path, SORTER / "board.toml", SORTER / "patterns" / "rush.toml")
    sag = worst(found, "rail-sag")
    assert status == 1
    assert found["audit"]["passed"]
    assert (sag["verdict"], sag["consequence"]) == ("fail", "misbehave")
    # The supply gives 10 A, 24 lanes at 14.4 ohm and colder want more than twice as much at the brown-out level.
    assert sag["value"] < 19.0
    assert sag["lasting"] > 0.001
    assert 0.010 < sag["at"] < 0.0351
    assert "lanes 0-23 (24 channels) were on" in sag["sentence"]
    assert {f["quantity"] for f in found["findings"] if f["check"] == "overlap" and f["verdict"] == "fail"} == {
        "channels on at once",
        "coil current when fired again",
    }
    assert "the coil rail fell to" in " ".join(out.split())


@pytest.mark.engine
@pytest.mark.slow
def test_steady_passes(tmp_path: Path) -> None:
    status, found, _, _ = command(tmp_path, SORTER / "board.toml", SORTER / "patterns" / "steady.toml")
    assert status == 0
    assert found["verdict"] in ("pass", "tight")
    assert found["audit"]["passed"]
    assert len(found["corners"]) == 4


UNRATED = """
[parts.unrated]
kind = "n-mosfet"
breakdown = "60 V"
gate_rating = "16 V"
continuous_current = "5 A"
pulse_current = "20 A"
avalanche_current = "5 A"
avalanche_energy = "50 mJ"
threshold = "1.7 V"
on_resistance = [{ value = "55 mohm", gate = "4.5 V" }, { value = "45 mohm", gate = "10 V" }]
input_capacitance = "560 pF"
output_capacitance = "95 pF"
reverse_capacitance = "35 pF"
gate_drain_charge = "3 nC"
charge_voltage = "30 V"
"""


@pytest.mark.engine
def test_without_clamps_repeated_avalanche_is_not_covered_by_a_single_pulse_rating(tmp_path: Path) -> None:
    board = SMALL.replace('{ kind = "diode", diode = "fast-2a" }', '{ kind = "none" }')
    board = board.replace("n-logic-60v", "unrated") + UNRATED
    status, found, _, _ = fire(tmp_path, board)
    energy = next(f for f in found["findings"] if f["quantity"] == "avalanche energy")
    assert (status, energy["verdict"], energy["limit"]) == (0, "limit-missing", None)
    assert "covers one pulse only" in energy["sentence"]
    status, found, _, _ = fire(tmp_path, board, PULSES, "--strict")
    assert (status, found["verdict"]) == (1, "fail")


@pytest.mark.engine
def test_repeated_avalanche_is_held_against_the_repetitive_rating(tmp_path: Path) -> None:
    board = SMALL.replace('{ kind = "diode", diode = "fast-2a" }', '{ kind = "none" }')
    board = board.replace("n-logic-60v", "unrated") + UNRATED + 'avalanche_repetitive = "1 mJ"\n'
    status, found, _, _ = fire(tmp_path, board)
    energy = next(f for f in found["findings"] if f["quantity"] == "avalanche energy")
    assert (status, energy["verdict"], energy["limit"]) == (1, "fail", 1e-3)
    assert "repetitive avalanche energy of unrated, 1.00 mJ" in energy["sentence"]


@pytest.mark.engine
def test_avalanche_without_any_rating_destroys(tmp_path: Path) -> None:
    board = SMALL.replace('{ kind = "diode", diode = "fast-2a" }', '{ kind = "none" }').replace(
        "n-logic-60v", "n-logic-30v"
    )
    status, found, _, _ = fire(tmp_path, board, PULSES.replace('repeat = 2\nevery = "25 ms"\n', ""))
    energy = next(f for f in found["findings"] if f["quantity"] == "avalanche energy")
    assert (status, energy["verdict"], energy["consequence"]) == (1, "fail", "destroy")
    assert "no avalanche rating" in energy["sentence"]


@pytest.mark.engine
def test_a_missing_limit_is_in_view_and_breaks_under_strict_only(tmp_path: Path) -> None:
    board = SMALL.replace('release = "0.1 A"\n', "").replace(', current_ceiling = "5 A"', "")
    status, found, out, _ = fire(tmp_path, board)
    missing = {f["quantity"] for f in found["findings"] if f["verdict"] == "limit-missing"}
    assert (status, found["verdict"]) == (0, "limit-missing")
    assert missing == {"coil current when fired again", "supply current"}
    assert "limit-missing" in out
    assert fire(tmp_path, board, PULSES, "--strict")[0] == 1


@pytest.mark.engine
def test_derating_moves_the_limit_and_says_whose_it_is(tmp_path: Path) -> None:
    board = SMALL + '[derating]\nvoltage = "40 %"\nreason = "house rule"\n'
    status, found, _, _ = fire(tmp_path, board)
    v_ds = next(f for f in found["findings"] if f["quantity"] == "drain-source voltage")
    assert (status, v_ds["verdict"]) == (1, "fail")
    assert v_ds["limit"] == pytest.approx(0.4 * 60)
    assert "40% of 60.0 V: house rule" in v_ds["sentence"]


@pytest.mark.engine
def test_no_tolerances_means_one_nominal_corner_that_says_so(tmp_path: Path) -> None:
    _, found, _, _ = fire(tmp_path)
    assert found["corners"] == ["nominal"]
    assert "supply voltage" in worst(found, "pull-in")["nominal_only"]


@pytest.mark.engine
def test_what_a_finding_hangs_on_is_said(tmp_path: Path) -> None:
    _, found, _, _ = fire(tmp_path, SMALL.replace('core_loss = "4.8 kohm"\n', ""))
    v_ds = next(f for f in found["findings"] if f["quantity"] == "drain-source voltage")
    assert any("core loss resistance" in a for a in v_ds["assumed"])
    assert any(a["quantity"] == "core loss resistance" for a in found["assumptions"])


def test_without_an_engine_the_status_is_3_and_the_message_says_what_to_install(tmp_path: Path) -> None:
    (tmp_path / "board.toml").write_text(SMALL)
    (tmp_path / "pattern.toml").write_text(PULSES)
    done = subprocess.run(
        [sys.executable, "-m", "boardsim.cli", "fire", "board.toml", "pattern.toml"],
        capture_output=True,
        text=True,
        cwd=tmp_path,
        env={**os.environ, "NGSPICE_LIBRARY_PATH": "no-such-library.so"},
        check=False,
    )
    assert done.returncode == 3
    assert "apt-get install ngspice libngspice0" in done.stderr
    assert "Traceback" not in done.stderr


@pytest.mark.engine
def test_a_single_shot_is_averaged_over_its_own_length_or_over_the_duration_that_is_given(tmp_path: Path) -> None:
    """One pulse carries one charge through its switch: average current times time is the same however long one looks."""
    (tmp_path / "board.toml").write_text(SMALL)
    (tmp_path / "shot.csv").write_text("channel,start,width\n0,1 ms,20 ms\n")
    (tmp_path / "shot.toml").write_text('events = "shot.csv"\nduration = "2 s"\n')
    charge = []
    for file, said, goes_on in (
        ("shot.csv", "over the list's own 27.3 ms", True),
        ("shot.toml", "over the list's 2.00 s", False),
    ):
        status, found, out, _ = command(tmp_path, tmp_path / "board.toml", tmp_path / file)
        assert status == 0
        mean = next(f for f in found["findings"] if f["quantity"] == "average current of the switch")
        assert said in mean["sentence"]
        assert all(said in f["sentence"] for f in found["findings"] if f["check"] == "overheating")
        assert ("as if it were fired again and" in out) == goes_on
        charge.append(mean["value"] * (2.0 if not goes_on else 27.3e-3))
    assert charge[0] == pytest.approx(charge[1], rel=1e-2)  # 27.3 ms is rounded, and so are a run's points
