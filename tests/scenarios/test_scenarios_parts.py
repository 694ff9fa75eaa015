"""`boardsim parts`: what is listed, shown, copied and proven, through the real command."""

from __future__ import annotations

import json
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

from boardsim import cli
from boardsim.board.reader import library_part, read_board
from boardsim.board.shelves import read_shelves
from boardsim.errors import InputError
from boardsim.parts.library import records
from boardsim.scenarios.chosen import choose
from boardsim.scenarios.parts import copy_part, list_parts

Run = Callable[..., tuple[int, str, str]]
FRUIT_SORTER = Path(__file__).parents[2] / "netlists" / "fruit-sorter" / "board.toml"


@pytest.fixture
def run(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Run:
    monkeypatch.chdir(tmp_path)

    def call(*arguments: str) -> tuple[int, str, str]:
        monkeypatch.setattr(sys, "argv", ["boardsim", "parts", *arguments])
        with pytest.raises(SystemExit) as caught:
            cli.main()
        printed = capsys.readouterr()
        status = caught.value.code
        return status if isinstance(status, int) else 0, printed.out, printed.err

    return call


def refused(outcome: tuple[int, str, str], text: str) -> None:
    status, out, err = outcome
    assert (status, out) == (2, ""), outcome
    assert text in err
    assert "Traceback" not in err


# ------------------------------------------------------------------------------------------------- list and show


def test_every_part_of_the_library_is_listed_by_kind() -> None:
    found = list_parts()
    assert {p.name for p in found} == set(records())
    kinds = [p.kind for p in found]
    assert kinds == sorted(kinds)


@pytest.mark.parametrize(
    ("model", "said"),
    [
        ('subcircuit = "dd", pins = { anode = "1", cathode = "2" }', "anode is 1, cathode is 2"),
        ('model = "dm"', None),
    ],
)
def test_the_pins_of_a_models_subcircuit_are_shown_in_words(
    tmp_path: Path, run: Run, model: str, said: str | None
) -> None:
    record = f'[mine]\nkind = "diode"\nforward = [{{ voltage = "0.8 V", current = "1 A" }}]\nmodel = {{ file = "d.lib", {model} }}\n'
    (tmp_path / "shelf").mkdir()
    (tmp_path / "shelf" / "parts.toml").write_text(f'{record}source = "made up"\n', encoding="utf-8")
    text = ".model dm D(IS=1n)\n.subckt dd 1 2\nD1 1 2 dm\n.ends\n"
    (tmp_path / "shelf" / "d.lib").write_text(text, encoding="utf-8")
    status, out, _ = run("show", "mine", "--library", "shelf")
    assert status == 0
    assert "{" not in out
    row = [line.split("pins")[1].strip() for line in out.splitlines() if line.startswith("model, pins")]
    assert row == ([] if said is None else [said])


def test_a_filter_keeps_what_is_rated_for_at_least_that_much() -> None:
    names = {p.name for p in list_parts(kind="n-mosfet", voltage="55 V")}
    assert names == {"n-logic-60v", "IRLZ44N"}
    assert {p.name for p in list_parts(kind="n-mosfet", current="5.5 A")} == {"AO3400A", "IRLB8721", "IRLZ44N"}
    assert list_parts(kind="n-mosfet", voltage="1 kV") == ()


def test_a_part_without_the_rating_is_left_out() -> None:
    assert "74HC595" not in {p.name for p in list_parts(current="1 nA")}


def test_a_test_condition_is_no_rating() -> None:
    (zener,) = (p for p in list_parts(kind="zener") if p.name == "24v-5w")
    assert {f: q.typ for f, q in zener.ratings.items()} == {"voltage": 24.0, "surge_current": 4.0, "power": 5.0}


def test_mistakes_of_a_list_are_told(run: Run) -> None:
    refused(run("list", "--kind", "n-mosfett"), 'did you mean "n-mosfet"?')
    refused(run("list", "--voltage", "40"), "--voltage: '40' has no unit")
    refused(run("list", "--current", "40 V"), "does not measure a current")
    refused(run("list", "--library", "nowhere"), "there is no such folder")


def test_show_prints_numbers_and_sources(run: Run) -> None:
    status, out, _ = run("show", "AO3400A")
    assert status == 0
    assert "up to 26.5 mohm" in out
    assert "library: Alpha & Omega AO3400A rev. 1 (May 2008), pp. 1-2" in out
    refused(run("show", "AO3400"), 'did you mean "AO3400A"?')


def test_show_names_what_was_assumed_and_why(run: Run, tmp_path: Path) -> None:
    folder = tmp_path / "mine"
    folder.mkdir()
    (folder / "z.toml").write_text(
        '[z-1]\nkind = "zener"\nvoltage = "12 V"\ntest_current = "50 mA"\nimpedance = "3 ohm"\nsource = "sheet 7"\n',
        encoding="utf-8",
    )
    status, out, _ = run("show", "z-1", "--library", str(folder))
    assert status == 0
    assert "library: mine/z.toml: sheet 7" in out
    assert "assumed: at three quarters of the Zener voltage, from memory" in out


# ------------------------------------------------------------------------------------------------- copy


@pytest.mark.parametrize("name", sorted(records()))
def test_a_copy_is_the_same_part_in_a_library_folder(tmp_path: Path, name: str) -> None:
    (tmp_path / "copy.toml").write_text(copy_part(name), encoding="utf-8")
    part = read_shelves([tmp_path])[name].part(name)
    original = library_part(name)
    assert part is not None
    for field in type(original).model_fields:
        assert str(getattr(part, field)).split("origin")[0] == str(getattr(original, field)).split("origin")[0], field


def test_a_copy_is_read_in_a_board_file_before_the_built_in_part(tmp_path: Path) -> None:
    board = tmp_path / "board.toml"
    text = copy_part("n-logic-60v").replace('breakdown = "60 V"', 'breakdown = "61 V"')
    board.write_text(FRUIT_SORTER.read_text(encoding="utf-8") + "\n" + text, encoding="utf-8")
    part = read_board(board).channels[0].switch.part
    assert part.breakdown.typ == 61.0
    assert part.breakdown.origin.kind == "given"


def test_a_copy_carries_sources_as_comments(run: Run) -> None:
    _, out, _ = run("copy", "rectifier-1a")
    assert "# Source: ON Semiconductor 1N4001/D rev. 7 (Mar 2001)" in out
    assert 'capacitance = "15 pF"  # Vishay 88503 (29 Apr 2020)' in out


def test_a_copy_never_overwrites(run: Run, tmp_path: Path) -> None:
    assert run("copy", "fast-2a", "--to", "library/mine.toml")[0] == 0
    before = (tmp_path / "library" / "mine.toml").read_bytes()
    refused(run("copy", "24v-5w", "--to", "library/mine.toml"), "is not overwritten")
    assert (tmp_path / "library" / "mine.toml").read_bytes() == before


# ------------------------------------------------------------------------------------------------- prove

WRONG = copy_part("n-logic-60v").replace("n-logic-60v", "off-60v")


def off_part(tmp_path: Path) -> str:
    """A MOSFET whose middle on-resistance no one-term channel reaches: 3 times too high at 6 V."""
    folder = tmp_path / "mine"
    folder.mkdir()
    points = '{ value = "150 mohm", gate = "6 V" }, { value = "45 mohm"'
    (folder / "off.toml").write_text(WRONG.replace('{ value = "45 mohm"', points), encoding="utf-8")
    return str(folder)


def test_what_to_prove_must_be_named(run: Run) -> None:
    refused(run("prove"), "name parts to prove, or --all")
    refused(run("prove", "--all", "AO3400A"), "not both")
    refused(run("prove", "AO3400"), 'did you mean "AO3400A"?')


@pytest.mark.engine
def test_a_good_part_is_proven_with_status_0(run: Run, tmp_path: Path) -> None:
    status, out, err = run("prove", "n-logic-30v", "--json", "proofs.json")
    assert status == 0, out + err
    values = json.loads((tmp_path / "proofs.json").read_text(encoding="utf-8"))
    assert values["status"] == 0
    assert {p["verdict"] for p in values["parts"][0]["proofs"]} == {"pass"}
    assert values["engine"].startswith("ngspice ")
    assert not (tmp_path / "out").exists()


@pytest.mark.engine
def test_a_part_whose_model_misses_a_printed_value_ends_with_status_1(run: Run, tmp_path: Path) -> None:
    status, out, _ = run("prove", "off-60v", "--library", off_part(tmp_path))
    assert status == 1
    assert "fail: on-resistance at V_GS 6.00 V" in out


@pytest.mark.engine
def test_a_part_without_anything_to_prove_is_unproven(run: Run) -> None:
    status, out, _ = run("prove", "74HC595")
    assert status == 3
    assert "nothing to prove" in out


@pytest.mark.engine
def test_json_that_cannot_be_written_is_refused(run: Run, tmp_path: Path) -> None:
    (tmp_path / "taken").mkdir()
    status, _, err = run("prove", "74HC595", "--json", "taken")
    assert status == 2
    assert "cannot be written" in err
    assert list((tmp_path / "taken").iterdir()) == []


# ------------------------------------------------------------------------------------------------- libraries elsewhere


@pytest.fixture
def shared(tmp_path: Path) -> Path:
    """A folder of parts that no board lies beside, and a board that names a part of it."""
    home, folder = tmp_path / "sorter", tmp_path / "shared"
    home.mkdir()
    folder.mkdir()
    board = FRUIT_SORTER.read_text(encoding="utf-8").replace('"n-logic-60v"', '"my-switch"')
    (home / "board.toml").write_text(board, encoding="utf-8")
    (home / "rush.toml").write_bytes((FRUIT_SORTER.parent / "patterns" / "rush.toml").read_bytes())
    (home / "scenarios.toml").write_text('[scenarios.rush]\npattern = "rush.toml"\n', encoding="utf-8")
    text = (
        copy_part("n-logic-60v")
        .replace("n-logic-60v", "my-switch")
        .replace('breakdown = "60 V"', 'breakdown = "61.5 V"')
    )
    (folder / "switches.toml").write_text(text, encoding="utf-8")
    return folder


@pytest.mark.parametrize("command", [("fire", "rush.toml"), ("deck", "rush.toml"), ("release",), ("volley",)])
def test_every_question_takes_libraries(
    shared: Path, command: tuple[str, ...], monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    home = shared.parent / "sorter"
    monkeypatch.chdir(home)
    asked = [command[0], "board.toml", *command[1:]]
    monkeypatch.setattr(sys, "argv", ["boardsim", *asked])
    with pytest.raises(SystemExit) as caught:
        cli.main()
    assert caught.value.code == 2
    assert '"my-switch" is neither in this file nor in the library' in capsys.readouterr().err
    seen: list[float] = []

    def look(path: Path, libraries: object = ()) -> object:
        seen.append(read_board(path, libraries).channels[0].switch.part.breakdown.typ)  # type: ignore[arg-type]
        raise InputError("seen")

    monkeypatch.setattr("boardsim.board.reader.read_board", look)
    monkeypatch.setattr(sys, "argv", ["boardsim", *asked, "--library", "../shared"])
    with pytest.raises(SystemExit):
        cli.main()
    assert seen == [61.5]


def test_scenarios_take_libraries(shared: Path) -> None:
    home = shared.parent / "sorter"
    without = choose([home], None, False, None)
    assert not without.scenarios
    assert "neither in this file nor in the library" in str(without.problems[0])
    (scenario,) = choose([home], None, False, None, [shared]).scenarios
    part = scenario.board.channels[0].switch.part
    assert part.breakdown.typ == 61.5
    assert str(part.breakdown.origin) == "library: shared/switches.toml"
