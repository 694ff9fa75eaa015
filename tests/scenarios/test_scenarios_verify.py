"""`boardsim verify`: every scenario below a folder, one verdict, whole files whatever happens."""

from __future__ import annotations

import csv
import json
import os
import signal
import subprocess
import sys
import time
import xml.etree.ElementTree as ET
from pathlib import Path

import pytest
from jsonschema import Draft202012Validator
from matplotlib.image import imread
from test_scenarios_fire import HERE, PULSES, SMALL

from boardsim.report.collection import SCHEMA_FILE

TOGETHER = '[[pulses]]\nchannels = "0-1"\nstart = "1 ms"\nwidth = "8 ms"\n'
WEAK = SMALL.replace('voltage = "18 V"', 'voltage = "23.9 V"')  # two gates at once are one too many for this limit


def laid_out(folder: Path, scenarios: str, board: str = SMALL) -> Path:
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "board.toml").write_text(board)
    (folder / "pattern.toml").write_text(PULSES)
    (folder / "together.toml").write_text(TOGETHER)
    (folder / "scenarios.toml").write_text(scenarios)
    return folder


def verify(tmp_path: Path, *arguments: str | Path) -> tuple[int, str, str]:
    done = subprocess.run(
        [sys.executable, "-m", "boardsim.cli", "verify", *map(str, arguments), "--out", str(tmp_path / "out")],
        capture_output=True,
        text=True,
        cwd=HERE,
        check=False,
    )
    assert "Traceback" not in done.stderr
    return done.returncode, done.stdout, done.stderr


def collected(tmp_path: Path) -> dict:
    found: dict = json.loads((tmp_path / "out" / "findings.json").read_text())
    Draft202012Validator(json.loads(SCHEMA_FILE.read_text())).validate(found)
    return found


CALM = '[scenarios.calm]\npattern = "pattern.toml"\n'
CLASH = '[scenarios.clash]\npattern = "together.toml"\n'


@pytest.mark.engine
def test_all_as_expected_is_status_0_with_a_folder_of_files_for_each(tmp_path: Path) -> None:
    laid_out(tmp_path / "gates", CALM + '[scenarios."both at once"]\npattern = "together.toml"\n')
    status, out, err = verify(tmp_path, tmp_path / "gates")
    assert status == 0, err
    assert "verdict: pass - 2 of 2 scenarios as expected" in out.splitlines()[-1]
    assert {"1/2", "2/2"} == {line.split()[0] for line in err.splitlines()}
    found = collected(tmp_path)
    assert (found["verdict"], found["status"], found["audit"]["passed"]) == ("pass", 0, True)
    assert [s["folder"] for s in found["scenarios"]] == ["gates/calm", "gates/both-at-once"]
    for scenario in found["scenarios"]:
        names = {p.name for p in (tmp_path / "out" / scenario["folder"]).iterdir()}
        assert {"findings.json", "junit.xml", "overview.png", "board.cir", "report.txt"} <= names
    suites = ET.parse(tmp_path / "out" / "junit.xml").getroot()
    assert [s.attrib["name"] for s in suites] == ["gates.calm", "gates.both-at-once"]
    assert all(s.attrib["failures"] == s.attrib["errors"] == "0" for s in suites)


@pytest.mark.engine
def test_a_broken_limit_is_status_1_and_the_sentence_names_who_what_and_when(tmp_path: Path) -> None:
    laid_out(
        tmp_path / "gates", CALM + CLASH, WEAK.replace('{ kind = "diode", diode = "fast-2a" }', '{ kind = "none" }')
    )
    status, out, _ = verify(tmp_path, tmp_path / "gates")
    assert status == 1
    said = " ".join(out.split())
    assert "channel 1: avalanche energy is" in said
    assert "(the same for channel 0)" in said
    assert "the repetitive avalanche energy of n-logic-60v, 4.00 mJ, allows less" in said
    assert "channels 0, 1 (2 channels) were on" in said
    failing = [f for f in collected(tmp_path)["findings"] if f["verdict"] == "fail"]
    assert {f["scenario"] for f in failing} == {"gates/calm", "gates/clash"}


@pytest.mark.engine
def test_an_expected_failure_passes_and_its_absence_fails(tmp_path: Path) -> None:
    laid_out(tmp_path / "gates", CLASH + 'breaks = ["rail-sag"]\n', WEAK)
    status, out, _ = verify(tmp_path, tmp_path / "gates")
    assert status == 0
    assert "fail: rail-sag" in out
    suite = ET.parse(tmp_path / "out" / "junit.xml").getroot()[0]
    assert suite.attrib["failures"] == "0"
    assert any("breaks, as this scenario is to show" in (e.text or "") for e in suite.iter("system-out"))
    laid_out(tmp_path / "gates", CLASH + 'breaks = ["rail-sag"]\n', SMALL)
    status, out, _ = verify(tmp_path, tmp_path / "gates")
    assert status == 1
    assert "was expected to break rail-sag, and does not" in out
    assert ET.parse(tmp_path / "out" / "junit.xml").getroot()[0].attrib["failures"] == "1"


@pytest.mark.engine
def test_an_accepted_failure_is_reported_until_it_expires(tmp_path: Path) -> None:
    accepted = 'accepted = [{ check = "rail-sag", reason = "larger supply is ordered", until = 2027-06-30 }]\n'
    laid_out(tmp_path / "gates", CLASH + accepted, WEAK)
    status, out, _ = verify(tmp_path, tmp_path / "gates", "--on", "2027-06-30")
    assert status == 0
    assert "1 accepted" in out
    assert "larger supply is ordered" in out
    skipped = list(ET.parse(tmp_path / "out" / "junit.xml").getroot().iter("skipped"))
    assert [e.attrib["type"] for e in skipped] == ["accepted"]
    assert skipped[0].attrib["message"].startswith("accepted until 2027-06-30, larger supply is ordered: ")
    status, out, _ = verify(tmp_path, tmp_path / "gates", "--on", "2027-07-01")
    assert status == 1
    assert "was accepted until 2027-06-30 (larger supply is ordered)" in " ".join(out.split())


@pytest.mark.engine
def test_wrong_input_is_status_2_and_the_rest_is_still_run(tmp_path: Path) -> None:
    laid_out(tmp_path / "gates", CALM + "[scenarios.bad]\n")
    status, out, err = verify(tmp_path, tmp_path / "gates")
    assert status == 2
    assert f"{tmp_path / 'gates' / 'scenarios.toml'}:3: scenarios.bad: needs a" in err
    assert "verdict: wrong input - 1 of 1 scenario as expected; 1 mistake in files" in out
    found = collected(tmp_path)
    assert [p["line"] for p in found["problems"]] == [3]
    suites = ET.parse(tmp_path / "out" / "junit.xml").getroot()
    assert [s.attrib["errors"] for s in suites] == ["1", "0"]


def test_nothing_to_run_is_status_2_with_one_message(tmp_path: Path) -> None:
    (tmp_path / "empty").mkdir()
    status, out, err = verify(tmp_path, tmp_path / "empty")
    assert (status, out) == (2, "")
    assert "no scenarios.toml at or below it" in err
    assert not (tmp_path / "out").exists()


@pytest.mark.engine
def test_the_same_scenarios_give_the_same_findings_on_one_core_and_on_all(tmp_path: Path) -> None:
    laid_out(tmp_path / "gates", CALM + CLASH)
    runs = []
    for cores in ("1", "0"):
        assert verify(tmp_path, tmp_path / "gates", "--cores", cores)[0] == 0
        found = collected(tmp_path)
        runs.append([(f["scenario"], f["sentence"], f["value"]) for f in found["findings"]])
    assert runs[0] == runs[1]


@pytest.mark.engine
def test_whoever_stops_reading_changes_neither_status_nor_results(tmp_path: Path) -> None:
    gates = laid_out(tmp_path / "gates", CALM)
    for stream in ("stdout", "stderr"):
        running = subprocess.Popen(
            [sys.executable, "-m", "boardsim.cli", "verify", str(gates), "--out", str(tmp_path / "out")],
            cwd=HERE,
            **{"stdout": subprocess.DEVNULL, "stderr": subprocess.DEVNULL, stream: subprocess.PIPE},  # type: ignore[arg-type]
        )
        getattr(running, stream).close()
        assert running.wait() == 0
        assert collected(tmp_path)["verdict"] == "pass"
        (tmp_path / "out" / "findings.json").unlink()


@pytest.mark.engine
def test_old_results_of_scenarios_that_are_gone_or_broken_do_not_stay(tmp_path: Path) -> None:
    gates = laid_out(tmp_path / "gates", CALM + CLASH)
    assert verify(tmp_path, gates)[0] == 0
    laid_out(gates, CLASH)
    assert verify(tmp_path, gates)[0] == 0
    assert {p.name for p in (tmp_path / "out" / "gates").iterdir()} == {"clash"}
    laid_out(gates, "x = 1\n")
    status, out, _ = verify(tmp_path, gates)
    assert status == 2
    assert "verdict: wrong input" in out
    assert not (tmp_path / "out" / "gates").exists()
    (suite,) = ET.parse(tmp_path / "out" / "junit.xml").getroot()
    assert suite.attrib["errors"] == "2"


@pytest.mark.engine
def test_a_release_that_nothing_was_measured_of_never_passes(tmp_path: Path) -> None:
    accepted = 'accepted = [{ check = "wrong-output", reason = "known", until = 2030-01-01 }]\n'
    gates = laid_out(
        tmp_path / "gates",
        '[scenarios.off]\nquestion = "release"\n' + accepted,
        SMALL.replace('clock = "1 MHz"', 'clock = "1 MHz"\nactive = "low"'),
    )
    status, out, _ = verify(tmp_path, gates, "--on", "2029-01-01")
    assert status == 3, out


def whole(path: Path) -> bool:
    """Whether a file can be read to its end by who reads such files."""
    match path.suffix:
        case ".json":
            return bool(json.loads(path.read_text()))
        case ".xml":
            return ET.parse(path).getroot().tag == "testsuites"
        case ".png":
            return imread(path).size > 0 and path.read_bytes().endswith(b"IEND\xaeB`\x82")
        case ".cir":
            return path.read_text().endswith(".end\n")
        case ".csv":
            rows = list(csv.reader(path.read_text().splitlines()))
            return path.read_text().endswith("\n") and len({len(row) for row in rows}) == 1
        case ".txt":
            return "verdict:" in path.read_text().splitlines()[-1]
    return False


MANY = "".join(f'[scenarios."number {n}"]\npattern = "pattern.toml"\n' for n in range(6))


@pytest.mark.engine
@pytest.mark.parametrize("how", [signal.SIGKILL, signal.SIGTERM, signal.SIGINT])
@pytest.mark.parametrize("after", ["junit.xml", "findings.json"])
def test_killed_in_the_middle_it_leaves_whole_files_only(tmp_path: Path, how: signal.Signals, after: str) -> None:
    laid_out(tmp_path / "gates", MANY)
    out = tmp_path / "out"
    running = subprocess.Popen(
        [sys.executable, "-m", "boardsim.cli", "verify", str(tmp_path / "gates"), "--out", str(out)],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        cwd=HERE,
        env={**os.environ, "TMPDIR": str(tmp_path)},
    )
    while running.poll() is None and not list(out.glob(f"gates/*/{after}")):
        time.sleep(0.002)
    running.send_signal(how)
    printed, said = running.communicate()
    assert running.returncode == (-signal.SIGKILL if how is signal.SIGKILL else 130)
    assert "verdict" not in printed
    assert "Traceback" not in said
    files = [p for p in out.rglob("*") if p.is_file() and not p.name.startswith(".")]
    assert files
    assert [str(p) for p in files if not whole(p)] == []
    assert not (out / "findings.json").exists()
    assert not (out / "junit.xml").exists()


@pytest.mark.engine
def test_an_old_verdict_does_not_stand_for_a_run_that_was_stopped(tmp_path: Path) -> None:
    gates = laid_out(tmp_path / "gates", CALM)
    assert verify(tmp_path, gates)[0] == 0
    beside = tmp_path / "out" / "gates" / "calm" / ".overview.png.0123abcd.part"
    beside.write_bytes(b"half a picture")
    os.utime(beside, (0, 0))  # long ago: what is fresh may be another run's
    (gates / "scenarios.toml").write_text("")
    assert verify(tmp_path, gates)[0] == 2
    laid_out(gates, MANY + CALM)
    running = subprocess.Popen(
        [sys.executable, "-m", "boardsim.cli", "verify", str(gates), "--out", str(tmp_path / "out")],
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
        cwd=HERE,
        env={**os.environ, "TMPDIR": str(tmp_path)},
    )
    while running.poll() is None and (tmp_path / "out" / "findings.json").exists():
        time.sleep(0.002)
    while running.poll() is None and beside.exists():
        time.sleep(0.002)
    running.kill()
    running.wait()
    assert not (tmp_path / "out" / "findings.json").exists()
    assert not beside.exists()
