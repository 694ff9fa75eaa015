"""`boardsim chain` through the real command, and as a question of a scenario file."""

from __future__ import annotations

import csv
import json
import sys
from collections.abc import Callable
from pathlib import Path

import pytest
from jsonschema import Draft202012Validator

from boardsim import cli
from boardsim.report.json_report import SCHEMA_FILE
from boardsim.scenarios.plan import read_scenarios

HERE = Path(__file__).resolve().parents[1]
BOARDS = HERE / "boards"
Run = Callable[..., tuple[int, str, str]]


@pytest.fixture
def run(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Run:
    """`boardsim` with arguments, in a folder of its own: (exit status, standard output, standard error)."""
    monkeypatch.chdir(tmp_path)

    def call(*arguments: str) -> tuple[int, str, str]:
        monkeypatch.setattr(sys, "argv", ["boardsim", *arguments])
        with pytest.raises(SystemExit) as caught:
            cli.main()
        printed = capsys.readouterr()
        status = caught.value.code
        return status if isinstance(status, int) else 0, printed.out, printed.err

    return call


def refused(outcome: tuple[int, str, str], *texts: str) -> None:
    status, out, err = outcome
    assert status == 2, outcome
    assert out == ""
    assert "Traceback" not in err
    for text in texts:
        assert text in err


@pytest.mark.parametrize(("name", "status"), [("bad", 1), ("repaired", 0)])
def test_the_command_leaves_findings_cases_and_a_picture(run: Run, tmp_path: Path, name: str, status: int) -> None:
    found, out, _ = run("chain", str(BOARDS / "chain_clock" / f"{name}.toml"), "--out", "there", "--strict")
    assert found == status
    assert out.rstrip().splitlines()[-1].startswith(f"verdict: {'fail' if status else 'tight'}")
    data = json.loads((tmp_path / "there" / "findings.json").read_text(encoding="utf-8"))
    Draft202012Validator(json.loads(SCHEMA_FILE.read_text(encoding="utf-8"))).validate(data)
    assert data["pattern"] == "chain"
    assert data["audit"] == {"passed": True, "entries": []}
    assert [row[0] for row in data["table"]["rows"]] == ["controller to register 1", "register to register"]
    assert (tmp_path / "there" / "chain.png").stat().st_size > 10_000
    junit = (tmp_path / "there" / "junit.xml").read_text(encoding="utf-8")
    assert ("<failure" in junit) == bool(status)
    assert "nothing was simulated" in out


def test_without_strict_a_missing_limit_is_in_view_and_with_it_it_fails(run: Run, tmp_path: Path) -> None:
    text = (BOARDS / "chain_clock" / "repaired.toml").read_text(encoding="utf-8")
    (tmp_path / "mine.toml").write_text(text.replace('lateness = "100 us"\n', ""), encoding="utf-8")
    assert run("chain", "mine.toml", "--out", "a")[0] == 0
    status, out, _ = run("chain", "mine.toml", "--out", "a", "--strict")
    assert status == 1
    assert "how late it may was not given ([limits] lateness)" in " ".join(out.split())


def test_mistakes_in_a_controller_or_a_line_have_their_place(run: Run, tmp_path: Path) -> None:
    text = (BOARDS / "chain_clock" / "repaired.toml").read_text(encoding="utf-8")
    for old, new, said in (
        ("spi_mode = 0", "spi_mode = 4", 'mine.toml:20: controller.spi_mode: "spi_mode" must be 3 or less; found 4'),
        ("spi_mode = 0", 'spi_mode = "0"', '"spi_mode" must be a whole number'),
        ('high_drop = "0.8 V"', 'hi_drop = "0.8 V"', '(did you mean "high_drop"?)'),
        ('clock_line = { pull_down = "10 kohm" }', 'clock_line = { pull_down = "1 ohm", pull_up = "1 ohm" }', "not both"),
        ('register = "74HC595"', 'register = "74HC59"', '(did you mean "74HC595"?)'),
    ):  # fmt: skip
        assert old in text
        (tmp_path / "mine.toml").write_text(text.replace(old, new, 1), encoding="utf-8")
        refused(run("chain", "mine.toml"), "mine.toml:", said)
    refused(run("chain", "nowhere.toml"), "nowhere.toml")
    (tmp_path / "mine.toml").write_text(text, encoding="utf-8")
    refused(run("chain", "mine.toml", "--out", "."), "results must not lie beside")


def test_a_scenario_may_ask_whether_the_chain_works(tmp_path: Path) -> None:
    text = (BOARDS / "chain_clock" / "bad.toml").read_text(encoding="utf-8")
    (tmp_path / "board.toml").write_text(text, encoding="utf-8")
    path = tmp_path / "scenarios.toml"
    path.write_text('[scenarios.chain]\nquestion = "chain"\nbreaks = ["chain", "chain-timing"]\n', encoding="utf-8")
    (only,), problems = read_scenarios(path)
    assert problems == ()
    assert (only.question, only.pattern) == ("chain", None)


def test_verify_puts_the_question_without_the_engine_and_takes_what_it_expects(
    run: Run, tmp_path: Path
) -> None:  # fmt: skip
    for name in ("bad", "repaired"):
        text = (BOARDS / "chain_clock" / f"{name}.toml").read_text(encoding="utf-8")
        (tmp_path / f"{name}.toml").write_text(text, encoding="utf-8")
    (tmp_path / "scenarios.toml").write_text(
        'strict = true\n[scenarios.bad]\nboard = "bad.toml"\nquestion = "chain"\nbreaks = ["chain", "chain-timing"]\n'
        '[scenarios.good]\nboard = "repaired.toml"\nquestion = "chain"\nexpect = "tight"\n',
        encoding="utf-8",
    )
    status, out, _ = run("verify", "scenarios.toml", "--out", "v")
    assert status == 0, out
    (tmp_path / "scenarios.toml").write_text(
        '[scenarios.bad]\nboard = "bad.toml"\nquestion = "chain"\nexpect = "tight"\n', encoding="utf-8"
    )
    assert run("verify", "scenarios.toml", "--out", "v")[0] == 1


@pytest.mark.engine
def test_fire_writes_every_pulse_as_asked_as_timed_and_as_it_came(run: Run, tmp_path: Path) -> None:
    text = (BOARDS / "chain_clock" / "repaired.toml").read_text(encoding="utf-8")
    (tmp_path / "mine.toml").write_text(text.replace("spi_mode = 0", 'spi_mode = 0\ntick = "100 us"'), encoding="utf-8")
    (tmp_path / "pulses.toml").write_text(
        '[[pulses]]\nchannels = "0-1"\nstart = "1.24 ms"\nwidth = "12.44 ms"\n', encoding="utf-8"
    )
    status, out, _ = run("fire", "mine.toml", "pulses.toml", "--out", "f")
    assert status == 0, out
    rows = list(csv.DictReader((tmp_path / "f" / "edges.csv").read_text(encoding="utf-8").splitlines()))
    assert [r["label"] for r in rows] == ["row 0", "row 1"]
    times = [float(rows[0][f"{what} [s]"]) for what in ("asked on", "timer on", "output on", "timer off", "output off")]
    frame, delay = 8.5e-6, 44e-9  # 64 bits at 8 MHz and 500 ns; of the register
    assert times == pytest.approx([1.24e-3, 1.2e-3, 1.2e-3 + frame + delay, 13.6e-3, 13.6e-3 + frame + delay], abs=2e-9)
    assert "the timer's tick of 100 us" in " ".join(out.split())
