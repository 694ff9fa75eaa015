"""The whole way from what a firmware sent: a capture gives the findings of its pattern, a broken one ends in its place."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest
from bus_writer import CAPTURE, BusWriter, frames_of
from second_reader import levels_in

from boardsim.board.reader import read_board
from boardsim.firing.pattern import read_pattern
from boardsim.scenarios.plan import read_scenarios

HERE = Path(__file__).resolve().parents[2]
SORTER = HERE / "netlists" / "fruit-sorter"
BUS_CHECKS = {"bus-timing", "frame-bits"}  # only a capture can be asked
COMMAND_CHECKS = {"pulse-timing"}  # only a pattern can be asked

GATES = """\
name = "tray gates"
ambient = "10 to 30 degC"
supply = { voltage = "24 V +/- 5 %", resistance = "20 mohm", current_ceiling = "5 A" }
cable = { gauge = "18 AWG", length = "1 m", spacing = "2 mm" }
bulk = { capacitance = "2200 uF", esr = "50 mohm", esl = "20 nH", rated = "35 V" }
logic = { voltage = "5 V" }
[chain]
register = "74HC595"
count = 1
clock = "1 MHz"
[controller]
high_drop = "0.8 V"
low_output = "0.6 V"
[coils.gate]
resistance = "24 ohm"
inductance = "30 mH"
core_loss = "4.8 kohm"
pull_in = "0.5 A"
release = "0.1 A"
longest_on = "12 ms"
least_off = "10 ms"
[channels."0-1"]
label = "gate {n}"
coil = "gate"
switch = { part = "n-logic-60v", gate = "100 ohm", pulldown = "100 kohm" }
clamp = { kind = "diode", diode = "fast-2a" }
[limits]
most_on = 2
most_current = "2.5 A"
all_off = { within = "1 ms" }
brown_out = { voltage = "18 V", lasting = "1 ms" }
"""
PULSES = """\
duration = "60 ms"
[[pulses]]
channels = "0-1"
start = "1 ms"
width = "8 ms"
repeat = 2
every = "25 ms"
stagger = "3 ms"
"""
EVENTS = "channel,start [ms],width\ngate 0,1,8 ms\ngate 1,4,8 ms\ngate 0,26,8 ms\ngate 1,29,8 ms\n"


def fire(out: Path, board: Path, pattern: Path, *options: str) -> tuple[int, dict, str]:
    done = subprocess.run(
        [sys.executable, "-m", "boardsim.cli", "fire", str(board), str(pattern), "--out", str(out), *options],
        capture_output=True,
        text=True,
        cwd=HERE,
        env=os.environ | {"PYTHONPATH": str(HERE)},
        check=False,
    )
    found = json.loads((out / "findings.json").read_text()) if (out / "findings.json").exists() else {}
    return done.returncode, found, done.stderr


def put_bus(folder: Path, board: Path, pattern: Path, half: int, settle: int, end: int) -> Path:
    """The bus of a pattern as a controller would send it, in steps of a nanosecond, and the file that names its lines."""
    the_board = read_board(board)
    outputs = {c.number: c.output for c in the_board.channels}
    pulses = read_pattern(pattern, the_board).pulses
    bus = BusWriter(the_board.chain.outputs, half, settle)
    for at, on in frames_of([(outputs[p.channel], round(p.start * 1e9), round(p.width * 1e9)) for p in pulses]):
        bus.frame(at, on)
    folder.mkdir(exist_ok=True)
    (folder / "bus.vcd").write_text(bus.text(end))
    path = folder / "capture.toml"
    path.write_text(CAPTURE)
    return path


def gates(folder: Path) -> tuple[Path, Path, Path]:
    (folder / "board.toml").write_text(GATES)
    (folder / "pattern.toml").write_text(PULSES)
    capture = put_bus(folder, folder / "board.toml", folder / "pattern.toml", 500, 500, 60_000_000)
    return folder / "board.toml", folder / "pattern.toml", capture


def by_question(found: dict, leave_out: set[str]) -> dict[tuple[str, ...], dict]:
    return {
        (f["check"], f["quantity"], f["part"], f["label"]): f
        for f in found["findings"]
        if f["check"] not in leave_out and f["quantity"] != "clock in the capture"
    }


def assert_same(pattern: dict, capture: dict) -> None:
    """The same questions, answered alike.

    The writer's edges lie on the dump's steps of 1 ns and so do the pattern's, so both runs see the same edges but for binary
    fractions (1e-16 s): verdicts are equal. Readings are to 1e-4 of themselves or of their limit: the engine chooses its
    steps anew when an edge moves by a last digit, which moved a peak by 1e-5; two runs of one deck may differ by 1 %. So where
    two corners read nearly alike either may be named; what is broken or tight names the same.
    """
    first, second = by_question(pattern, COMMAND_CHECKS), by_question(capture, BUS_CHECKS)
    assert first.keys() == second.keys()
    for key, mine in first.items():
        theirs = second[key]
        assert (mine["verdict"], mine["limit"]) == (theirs["verdict"], theirs["limit"]), key
        scale = max(abs(mine["value"]), abs(mine["limit"] or 0.0))
        assert theirs["value"] == pytest.approx(mine["value"], abs=1e-4 * scale), key
        if mine["verdict"] != "pass":
            assert mine["corner"] == theirs["corner"], key


@pytest.mark.engine
def test_a_capture_and_an_event_list_of_a_pattern_give_its_findings(tmp_path: Path) -> None:
    board, pattern, capture = gates(tmp_path)
    status, commanded, err = fire(tmp_path / "out1", board, pattern)
    assert (status, commanded["verdict"], err) == (0, "pass", "")
    edges = tmp_path / "edges.vcd"
    status, recorded, err = fire(tmp_path / "out2", board, capture, "--edges", str(edges))
    assert (status, err) == (0, "")
    assert recorded["audit"]["passed"]
    assert_same(commanded, recorded)
    assert {f["check"] for f in commanded["findings"]} >= {"on-time", "off-time", "most-current", "all-off"}
    assert any("lost-pulse, pulse-timing, wrong-output" in line for line in recorded["firing"])
    assert len(levels_in(edges.read_text())[1]["tray_gates.gate_0"]) == 5
    (tmp_path / "events.csv").write_text(EVENTS)
    _, listed, _ = fire(tmp_path / "out3", board, tmp_path / "events.csv")
    averages = {key for key, f in by_question(listed, set()).items() if f["unit"] == "W" or "average" in f["quantity"]}
    same = {
        k: f["value"] for k, f in by_question(listed, set()).items() if k not in averages and "junction" not in k[1]
    }
    for key, value in same.items():  # without a duration the list looks less long: averages differ
        assert value == pytest.approx(by_question(commanded, set())[key]["value"], rel=2e-3, abs=1e-9)


@pytest.mark.engine
@pytest.mark.slow
def test_the_fruit_sorters_steady_bus_gives_the_findings_of_its_pattern(tmp_path: Path) -> None:
    board, pattern = SORTER / "board.toml", SORTER / "patterns" / "steady.toml"
    capture = put_bus(tmp_path / "bus", board, pattern, 125, 500, 1_000_000_000)
    first, commanded, _ = fire(tmp_path / "out1", board, pattern)
    second, recorded, _ = fire(tmp_path / "out2", board, capture)
    assert first == second == 0
    assert commanded["audit"]["passed"]
    assert recorded["audit"]["passed"]
    assert_same(commanded, recorded)


@pytest.mark.engine
def test_firmware_that_breaks_its_rules_and_glitches_is_found_out(tmp_path: Path) -> None:
    (tmp_path / "board.toml").write_text(GATES)
    bus = BusWriter(8, 500, 500)
    bus.frame(1_000_000, {0})
    bus.frame(15_000_000, ())  # 14 ms on
    bus.frame(20_000_000, {0})  # 5 ms off
    bus.frame(26_000_000, {0, 1}, bits=7)
    bus.frame(30_000_000, {0})
    (tmp_path / "bus.vcd").write_text(bus.text(60_000_000))
    (tmp_path / "capture.toml").write_text(CAPTURE)
    status, found, _ = fire(tmp_path / "out", tmp_path / "board.toml", tmp_path / "capture.toml")
    assert status == 1
    broken = {f["check"] for f in found["findings"] if f["verdict"] == "fail"}
    assert broken >= {"on-time", "off-time", "all-off", "frame-bits"}
    assert {f["check"] for f in found["findings"] if f["verdict"] == "unproven"} == {"capture"}
    assert {f["check"] for f in found["findings"]}.isdisjoint({"lost-pulse", "pulse-timing", "wrong-output"})


def test_a_broken_capture_ends_in_one_message_with_file_and_line_and_status_2(tmp_path: Path) -> None:
    board, _, capture = gates(tmp_path)
    dump, text = tmp_path / "bus.vcd", (tmp_path / "bus.vcd").read_text()
    names = capture.read_text()
    lines = text.split("\n")
    late = next(k for k, line in enumerate(lines) if line.startswith("#2600"))
    backwards = "\n".join([*lines[:late], "#25", *lines[late:]])
    for damaged, named, expected in (
        (text, names.replace('latch = "latch"\n', ""), 'capture.toml:2: signals: "latch" is missing'),
        (text, names.replace('"latch"', '"rck"'), 'capture.toml:5: signals.latch: "rck" is not in bus.vcd'),
        (text[: len(text) // 2] + "#2", names, "is cut off: the last line has no end"),
        (backwards, names, f"bus.vcd:{late + 1}: time goes back from"),
    ):
        dump.write_text(damaged)
        capture.write_text(named)
        status, found, err = fire(tmp_path / "out", board, capture)
        assert (status, found) == (2, {})
        assert expected in err
        assert "Traceback" not in err
        assert err.count("\n") == 1
        assert ":" in err.split(" ")[0]


def test_scenario_files_take_lists_and_captures(tmp_path: Path) -> None:
    gates(tmp_path)
    (tmp_path / "events.csv").write_text(EVENTS)
    (tmp_path / "scenarios.toml").write_text(
        '[scenarios.list]\npattern = "events.csv"\n[scenarios.bus]\npattern = "capture.toml"\n[scenarios.bad]\npattern = "bus.vcd"\n'
    )
    scenarios, problems = read_scenarios(tmp_path / "scenarios.toml")
    assert [s.name for s in scenarios] == ["list", "bus"]
    assert all(s.pattern is not None and len(s.pattern.pulses) == 4 for s in scenarios)
    (problem,) = problems
    assert "names a TOML" in problem.text or "name a TOML file beside it" in problem.text


def test_edges_that_would_overwrite_an_input_are_refused_before_anything_is_run(tmp_path: Path) -> None:
    board, _, capture = gates(tmp_path)
    before = (tmp_path / "bus.vcd").read_text()
    status, _, err = fire(tmp_path / "out", board, capture, "--edges", str(tmp_path / "bus.vcd"))
    assert status == 2
    assert "is one of the files to read; name another" in err
    assert (tmp_path / "bus.vcd").read_text() == before
