"""A board whose semiconductors come from a model file beside it: fired to a verdict, and the same with files that are not right."""

from __future__ import annotations

import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from boardsim.board.reader import read_board
from boardsim.circuit.assemble import assemble, windows
from boardsim.firing.pattern import read_pattern
from boardsim.firing.schedule import fire
from boardsim.parts.base import NOMINAL
from boardsim.parts.rules import LeastRule, PeakRule
from boardsim.scenarios.fire import fire_pattern
from boardsim.verdict.findings import Result

HERE = Path(__file__).parent / "vendor_model"


def copied(folder: Path, *changes: tuple[str, str], of: str = "models.lib") -> Path:
    """The board's folder, with changes in one of its files."""
    shutil.copytree(HERE, folder)
    text = (folder / of).read_text(encoding="utf-8")
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    (folder / of).write_text(text, encoding="utf-8")
    return folder


def fired(folder: Path, keep: Path) -> Result:
    board = read_board(folder / "board.toml")
    result = fire_pattern(board, read_pattern(folder / "pattern.toml", board), keep / "kept")
    assert result.proven
    return result


def model_checks(result: Result) -> dict[tuple[str, str], str]:
    """Verdicts of what is checked of the models themselves, by channel and what was read."""
    return {
        (f.label[-1], f.quantity.removeprefix("current that the vendor's model ")): f.verdict
        for f in result.findings
        if f.check == "model-breakdown"
    }


FREE = "of the clamp diode takes at its rated reverse voltage"
ZENER = "of the clamp Zener takes at the {} voltage of its band"
TVS = "of the clamp suppressor takes at the {} voltage of its band"


@pytest.mark.engine
def test_a_board_of_models_from_a_file_is_fired_to_a_verdict(tmp_path: Path) -> None:
    """MOSFET, NPN, diode, Zener and suppressor, each by its own file's text; what they must come to is worked out by hand."""
    result = fired(HERE, tmp_path)
    assert result.verdict in ("pass", "tight")
    assert {f.verdict for f in result.findings} <= {"pass", "tight"}
    checked = model_checks(result)
    assert {k for k, verdict in checked.items() if verdict == "pass"} >= {
        *((c, FREE) for c in "012"),
        *(("1", ZENER.format(end)) for end in ("least", "highest")),
        *(("2", TVS.format(end)) for end in ("least", "highest")),
    }
    assert len(checked) == 10  # and the three switches
    highest = {
        f.label[-1]: f.value for f in result.findings if f.check == "overvoltage" and "voltage of" not in f.quantity
    }
    # 24 V, less 50 mohm and the cable of the coils that still draw, and what the clamps hold at 0.2 A by their own equations:
    # 1.75 V_T ln(0.2 A / 2 nA) + 45 mohm 0.2 A = 0.84 V; 19.83 V + 2.6 ohm 0.2 A + V_T ln(0.2 / 0.065) = 20.38 V;
    # 28.1 V + 0.5 ohm 0.2 A + V_T ln(0.2 A / 1 mA) = 28.34 V.
    assert highest["1"] == pytest.approx(24 + 0.84 + 20.38, abs=0.15)
    assert highest["2"] == pytest.approx(24 + 0.84 + 28.34, abs=0.15)


@pytest.mark.engine
def test_models_that_break_down_outside_of_what_the_datasheet_says_are_findings_of_a_fire(tmp_path: Path) -> None:
    """The diode 20 V below its rating, the Zener below and the suppressor above its band."""
    changes = (("BV=130", "BV=80"), ("BV=19.83", "BV=18"), ("BV=28.1", "BV=31"))
    result = fired(copied(tmp_path / "board", *changes), tmp_path)
    failed = {k for k, verdict in model_checks(result).items() if verdict == "fail"}
    assert failed == {*((c, FREE) for c in "012"), ("1", ZENER.format("least")), ("2", TVS.format("highest"))}
    assert result.verdict == "fail"


@pytest.mark.engine
@pytest.mark.slow
def test_the_other_ends_are_held_as_well(tmp_path: Path) -> None:
    """The Zener above and the suppressor below its band, and an NPN with a junction that breaks down at half its rating."""
    npn = ".subckt NPN40 c b e\nQ1 c b e q\n.model q NPN(IS=4e-14 BF=90 BR=4 RC=0.25 RB=1 TNOM=25)\nD1 e c d\n.model d D(IS=1f BV=60 IBV=1m TNOM=25)\n.ends\n"
    changes = (("BV=19.83", "BV=21.5"), ("BV=28.1", "BV=26"), (".model QGATE", f"{npn}.model QGATE"))
    folder = copied(tmp_path / "board", *changes)
    text = (folder / "board.toml").read_text(encoding="utf-8")
    pins = 'subcircuit = "NPN40", pins = { collector = "c", base = "b", emitter = "e" }'
    (folder / "board.toml").write_text(text.replace('model = "QGATE"', pins), encoding="utf-8")
    result = fired(folder, tmp_path)
    failed = {k for k, verdict in model_checks(result).items() if verdict == "fail"}
    assert {("1", ZENER.format("highest")), ("2", TVS.format("least"))} < failed
    assert len(failed) == 3
    assert any(f.part == "gate-npn" for f in result.findings if f.check == "model-breakdown" and f.verdict == "fail")


@pytest.mark.engine
@pytest.mark.slow
@pytest.mark.parametrize(("law", "verdict"), [("TBV1=0.8m", "pass"), ("TBV1=0", "fail")])
def test_a_zener_that_does_not_move_with_its_junction_lies_outside_of_its_band_when_hot(
    tmp_path: Path, law: str, verdict: str
) -> None:
    """16 mV/K by the record: 90 K take the band from 19 V ... 21 V to 20.4 V ... 22.4 V, and the model stays at 20 V."""
    folder = copied(tmp_path / "board", ("TBV1=0.8m", law))
    text = (folder / "board.toml").read_text(encoding="utf-8")
    hot = 'ambient = "25 to 55 degC"\njunction_rise = "60 K"\n'
    (folder / "board.toml").write_text(text.replace("\nsupply", f"{hot}\nsupply", 1), encoding="utf-8")
    checked = model_checks(fired(folder, tmp_path))
    assert checked["1", ZENER.format("least")] == verdict


def test_a_zener_that_a_package_has_once_is_held_at_its_band_once(tmp_path: Path) -> None:
    """One Zener behind the common pin of seven outputs: two limits of the board, and not fourteen of its channels."""
    shutil.copytree(HERE.parent / "f09_common_zener", tmp_path / "board")
    path = tmp_path / "board" / "repaired.toml"
    shutil.copy(HERE / "models.lib", path.parent)
    text = path.read_text(encoding="utf-8")
    model = 'kind = "zener"\nmodel = { file = "models.lib", model = "Z20" }'
    assert text.count('kind = "zener"') == 1
    path.write_text(text.replace('kind = "zener"', model), encoding="utf-8")
    board = read_board(path)
    firing = fire(board, read_pattern(path.parent / "pattern.toml", board))
    deck = assemble(board, firing, NOMINAL, windows(board, firing)[0])
    placed = [p for p in deck.rules if p.rule.check == "model-breakdown"]
    assert [type(p.rule) for p in placed] == [PeakRule, LeastRule]
    for p in placed:
        assert isinstance(p.rule, PeakRule | LeastRule)
        assert p.channel is None
        assert (None, p.rule.quantity) in deck.signals


HOSTILE = {
    "control": (".control\nshell touch trace\n.endc\n", "models.lib:27: '.control' is not allowed"),
    "shell": ("shell touch trace\n", "models.lib:27: 'shell touch trace' is not allowed"),
    "include": (".include ../../etc/x\n", "x lies outside the folder board"),
    "comment": ("*# shell touch trace\n", "models.lib:27: begins with *#"),
}


@pytest.mark.parametrize(
    "what", ["control", *(pytest.param(w, marks=pytest.mark.slow) for w in HOSTILE if w != "control")]
)
def test_a_hostile_line_in_the_boards_own_file_ends_the_command_with_status_2_and_no_trace(
    tmp_path: Path, what: str
) -> None:
    line, said = HOSTILE[what]
    folder = copied(tmp_path / "board")
    with (folder / "models.lib").open("a", encoding="utf-8") as handle:
        handle.write(line)
    before = sorted(tmp_path.rglob("*"))
    run = subprocess.run(
        [sys.executable, "-m", "boardsim.cli", "fire", "board.toml", "pattern.toml", "--out", "results"],
        capture_output=True,
        text=True,
        cwd=folder,
        check=False,
    )
    assert run.returncode == 2
    assert run.stdout == ""
    assert "Traceback" not in run.stderr
    assert said in " ".join(run.stderr.split())
    assert sorted(tmp_path.rglob("*")) == before
