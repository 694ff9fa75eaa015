"""`overlay` through the command: what is asked, what is refused, and one pulse on the real engine."""

from __future__ import annotations

import csv
import json
import shutil
import sys
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from boardsim import cli
from boardsim.board.reader import read_board
from boardsim.board.toml_file import read_toml
from boardsim.firing.schedule import fire
from boardsim.firing.sources import read_source
from boardsim.parts.coil import Coil
from boardsim.report.origin import origin_of, read_origin, write_origin
from boardsim.scenarios.fitted_record import record_of
from boardsim.scenarios.overlay import ask, pulse_of
from boardsim.verdict.fit import Fit, Fitted

BOARDS = Path(__file__).resolve().parents[1] / "boards"
TRACE = BOARDS / "overlay" / "valve.csv"
COLUMNS = ("--current", "CH2", "--current-scale", "100 mV/A", "--voltage", "CH1")
Run = Callable[..., tuple[int, str, str]]


@pytest.fixture
def run(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Run:
    """`boardsim` with arguments, beside a board with one seed valve: (exit status, standard output, standard error)."""
    shutil.copy(BOARDS / "f08_slow_release" / "repaired.toml", tmp_path / "board.toml")
    shutil.copy(BOARDS / "f08_slow_release" / "pattern.toml", tmp_path / "pattern.toml")
    shutil.copy(TRACE, tmp_path / "valve.csv")
    monkeypatch.chdir(tmp_path)

    def call(*arguments: str) -> tuple[int, str, str]:
        monkeypatch.setattr(sys, "argv", ["boardsim", *arguments])
        with pytest.raises(SystemExit) as caught:
            cli.main()
        printed = capsys.readouterr()
        status = caught.value.code
        return status if isinstance(status, int) else 0, printed.out, printed.err

    return call


@pytest.fixture
def fired(tmp_path: Path, run: Run) -> Path:
    """A folder as `fire` leaves it, as far as `overlay` reads it."""
    origin = origin_of(tmp_path / "board.toml", tmp_path / "pattern.toml", ())
    write_origin(origin, tmp_path / "out")
    return tmp_path / "out"


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (("nowhere", "valve.csv", "--current", "CH2"), "nowhere: is no folder; name the one that boardsim fire wrote"),
        ((".", "valve.csv", "--current", "CH2"), "holds no fired.json"),
        (("out", "none.csv", "--current", "CH2"), "none.csv: cannot be read"),
        (("out", "valve.csv"), "name at least one column to compare: --current COLUMN"),
        (("out", "valve.csv", "--current", "CH7"), 'there is no column "CH7" for --current'),
        (("out", "valve.csv", "--current", "CH2"), "its column is in mV; say what the probe or shunt gives"),
        (("out", "valve.csv", *COLUMNS, "--channel", "3"), "--channel 3: the pattern does not fire it; it fires 0"),
        (("out", "valve.csv", *COLUMNS, "--pulse", "3"), "--pulse 3: its output turns seed valve on 2 times"),
        (("out", "valve.csv", *COLUMNS, "--corner", "9"), "--corner 9: this board has"),
        (("out", "valve.csv", *COLUMNS, "--at", "soon"), "--at soon: 'soon' is not a number with a unit"),
        (("out", "valve.csv", *COLUMNS, "--out", "."), "results must not lie beside"),
        (("out", "valve.csv", *COLUMNS, "--voltage-scale", "0"), "--voltage-scale must be a number other than 0"),
    ],
)
def test_what_cannot_be_compared_ends_in_one_message(
    run: Run, fired: Path, arguments: tuple[str, ...], said: str
) -> None:
    status, out, err = run("overlay", *arguments)
    assert (status, out) == (2, "")
    assert said in err
    assert "Traceback" not in err


def test_a_pulse_is_looked_at_until_its_coil_is_fired_again_either_way() -> None:
    folder = BOARDS / "f15_both_directions"
    board = read_board(folder / "board.toml")
    pattern = read_source(folder / "repaired.toml", board)
    firing, watch = pulse_of(board, pattern, ask(board, pattern, 0, 1, None, None, None, False))
    assert (watch.on, watch.stop) == (firing.on[0][0, 0], firing.on[4][0, 0])
    assert watch.start < watch.on < watch.off < watch.stop


def test_only_pulses_that_matter_are_run_again(tmp_path: Path) -> None:
    sorter = Path(__file__).resolve().parents[2] / "netlists" / "fruit-sorter"
    board = read_board(sorter / "board.toml")
    pattern = read_source(sorter / "patterns" / "steady.toml", board)
    asked = ask(board, pattern, 7, 1, None, None, None, False)
    whole, (part, watch) = fire(board, pattern), pulse_of(board, pattern, asked)
    assert len(part.asked) < 0.1 * len(whole.asked)
    assert part.duration >= watch.stop
    for channel, spans in whole.on.items():  # until then the outputs do what they do in the whole pattern
        mine = spans[spans[:, 0] < watch.stop]
        np.testing.assert_array_equal(mine, part.on[channel][: len(mine)])


def test_a_folder_whose_record_is_damaged_is_refused(run: Run, fired: Path) -> None:
    (fired / "fired.json").write_text('{"schema": "boardsim-fired/1", "board": 3}', encoding="utf-8")
    status, _, err = run("overlay", "out", "valve.csv", *COLUMNS)
    assert status == 2
    assert "fired.json: cannot be read; fire the pattern again" in err


def test_what_changed_since_it_was_fired_is_said(run: Run, fired: Path, tmp_path: Path) -> None:
    assert read_origin(fired).changes() == ()
    with (tmp_path / "board.toml").open("a", encoding="utf-8") as handle:
        handle.write("# another coil was put in\n")
    (tmp_path / "pattern.toml").unlink()
    (first, second) = read_origin(fired).changes()
    assert first.startswith("board.toml has changed since it was fired")
    assert second.startswith("pattern.toml is gone since it was fired")


def test_results_and_files_may_move_together(run: Run, fired: Path, tmp_path: Path) -> None:
    there = tmp_path / "elsewhere"
    there.mkdir()
    for name in ("board.toml", "pattern.toml", "out"):
        shutil.move(tmp_path / name, there / name)
    origin = read_origin(there / "out")
    assert origin.changes() == ()
    assert origin.board == Path("elsewhere/board.toml")


@pytest.mark.engine
@pytest.mark.slow
def test_fire_leaves_what_overlay_needs_and_no_more(run: Run, tmp_path: Path) -> None:
    run("fire", "board.toml", "pattern.toml", "--out", "out")
    assert (tmp_path / "out" / "fired.json").stat().st_size < 2000
    status, out, _ = run("overlay", "out", "valve.csv", *COLUMNS, "--pulse", "2")
    assert status == 0
    assert "seed valve, pulse 2" in out
    assert (
        json.loads((tmp_path / "out" / "overlay-valve" / "overlay.json").read_text(encoding="utf-8"))["verdict"] is None
    )


@pytest.mark.engine
def test_a_valve_from_its_trace_to_its_record(run: Run, fired: Path, tmp_path: Path) -> None:
    # A made-up trace of 25.2 ohm and 22.4 mH, 0.25 V and 8 mA to a step, over the board's 24 ohm and 20 mH.
    status, out, _ = run("overlay", "out", "valve.csv", *COLUMNS, "--fit", "--within", "3")
    assert status == 1, out
    folder = tmp_path / "out" / "overlay-valve"
    found = json.loads((folder / "overlay.json").read_text(encoding="utf-8"))
    assert found["verdict"] == "fail"
    assert "the current does not stay within 3.0 % of the peak" in out.splitlines()[-1]
    assert "\x89PNG".encode("latin-1") == (folder / "overlay.png").read_bytes()[:4]
    # Settled, both differ by 24 V/24 ohm - 23.8 V/25.2 ohm = 56 mA, less what cable and switch take.
    current = found["differences"][0]
    assert -0.16 < current["largest"] < -0.05
    fitted = {n["name"]: n for n in found["fit"]["numbers"]}
    for name, true in (("resistance", 25.2), ("inductance", 22.4e-3)):
        assert fitted[name]["value"] == pytest.approx(true, rel=0.01)
        assert abs(fitted[name]["value"] - true) < 4 * fitted[name]["standard_error"]
    record = read_toml(folder / "coil.toml", "coil").data["coils"]["valve"]
    coil = Coil.model_validate(record)
    assert coil.resistance.typ == pytest.approx(fitted["resistance"]["value"], rel=1e-4)
    assert coil.pull_in is not None
    assert coil.pull_in.typ == 0.5

    # The computed waveform over itself.
    shutil.copy(folder / "computed.csv", tmp_path / "again.csv")
    status, out, _ = run(
        "overlay",
        "out",
        "again.csv",
        "--current",
        "current",
        "--voltage",
        "voltage",
        "--within",
        "0.001",
        "--out",
        "zero",
    )
    assert status == 0, out
    zero = json.loads((tmp_path / "zero" / "overlay.json").read_text(encoding="utf-8"))
    assert abs(zero["shift"]) < 1e-12
    assert all(abs(d["largest"]) < 1e-9 for d in zero["differences"])
    with (tmp_path / "zero" / "computed.csv").open(encoding="utf-8") as handle:
        assert next(csv.reader(handle)) == ["time [s]", "current [A]", "voltage [V]"]


def test_a_fitted_record_can_be_pasted_into_its_board(run: Run, tmp_path: Path) -> None:
    board_text = (tmp_path / "board.toml").read_text(encoding="utf-8")
    known = board_text.replace('resistance = "24 ohm +/- 5 %"', 'rated_voltage = "24 V"\nrated_current = "1 A"')
    (tmp_path / "board.toml").write_text(known, encoding="utf-8")
    board = read_board(tmp_path / "board.toml")
    numbers = (
        Fitted("resistance", 26.123456, 0.02, "ohm", 24.0, "fitted"),
        Fitted("inductance", 20e-3, float("inf"), "H", 20e-3, "left", "it is not told"),
        Fitted("core_loss", 4800.0, float("inf"), "ohm", 4800.0, "left", "it is not told"),
    )
    fit = Fit(numbers, "the measured voltage", 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, True, np.zeros(1), np.zeros(1))
    text = record_of(board, board.channels[0], fit, "a\ntrace.csv")
    assert "rated_" not in text  # 24 V and 1 A contradict 26 ohm
    assert 'inductance = "20 mH"  # left as it was: it is not told' in text
    assert "# core_loss stays assumed" in text
    begin, rest = known.split("[coils.valve]\n")
    (tmp_path / "pasted.toml").write_text(f"{begin}{text}\n[channels{rest.split('[channels', 1)[1]}", encoding="utf-8")
    pasted = read_board(tmp_path / "pasted.toml").channels[0].coil
    assert pasted.resistance.typ == pytest.approx(26.123, rel=1e-4)
    assert pasted.inductance.typ == pytest.approx(20e-3)
    assert pasted.release is not None
