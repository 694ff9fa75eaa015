"""Wrong input through the real command: status 2, the message on standard error, and nothing else anywhere."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

from boardsim import cli

NETLISTS = Path(__file__).parents[1] / "netlists" / "fruit-sorter"
BOARD = (NETLISTS / "board.toml").read_text(encoding="utf-8")
PATTERN = (NETLISTS / "patterns" / "rush.toml").read_text(encoding="utf-8")

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

    (tmp_path / "board.toml").write_text(BOARD, encoding="utf-8")
    (tmp_path / "pattern.toml").write_text(PATTERN, encoding="utf-8")
    return call


def refused(outcome: tuple[int, str, str], *texts: str) -> None:
    status, out, err = outcome
    assert status == 2, outcome
    assert out == ""
    assert "Traceback" not in err
    for text in texts:
        assert text in err


BAD_BOARDS: dict[str, tuple[bytes, str]] = {
    "misspelt key": (BOARD.replace("esr", "ers").encode(), 'board.toml:7: bulk.ers: "ers" is not known here (did you mean "esr"?)'),
    "bare number": (BOARD.replace('"1.8 m"', "1.8").encode(), "board.toml:6: cable.length: 1.8 has no unit"),
    "unknown part": (BOARD.replace("20v-5w", "20v5w").encode(), '(did you mean "20v-5w"?)'),
    "wrong kind": (BOARD.replace("20v-5w", "fast-2a").encode(), '"fast-2a" is a diode; a zener or tvs is needed here'),
    "command in a label": (BOARD.replace("lane {n}", "a\\n.control").encode(), "cannot be a name"),
    "command in a coil": (BOARD.replace("[coils.ejector]", '[coils."a\\n.control"]').encode(), "cannot be a name"),
    "channels outside": (BOARD.replace("count = 3", "count = 2").encode(), "outputs 16-23 are outside the chain: 2 registers have outputs 0-15"),
    "key twice": (BOARD.replace("count = 3", "count = 3\ncount = 3").encode(), "board.toml:13: is not TOML: Cannot overwrite a value"),
    "no sections": (b'name = "x"', '"supply" is missing'),
    "empty": (b"", "is empty; a board file is expected"),
    "binary": (bytes(range(256)), "is not UTF-8 text"),
    "Latin-1": (BOARD.replace("fruit", "frücht").encode("latin-1"), "board.toml:2: is not UTF-8 text"),
    "huge": (b"#" * 5_000_000, "is larger than 4 MiB"),
    "deep": (b"a = " + b"[" * 100_000 + b"]" * 100_000, "nests more than 32 levels deep"),
    "dotted": (b".".join([b"a"] * 20_000) + b" = 1", "nests more than 32 levels deep"),
    "digits": (b"a = " + b"9" * 100_000, "the number is larger than TOML allows"),
    "no resistance": (BOARD.replace("16 ohm +/- 10 %", "0 ohm").encode(), "'0 ohm' is zero"),
}  # fmt: skip


@pytest.mark.parametrize("what", BAD_BOARDS)
@pytest.mark.parametrize("command", ["fire", "deck"])
def test_a_wrong_board_is_refused_before_anything_is_written(run: Run, tmp_path: Path, command: str, what: str) -> None:
    content, text = BAD_BOARDS[what]
    (tmp_path / "board.toml").write_bytes(content)
    before = sorted(tmp_path.rglob("*"))
    options = ["--out", "results"] if command == "fire" else ["--to", "rush.cir"]
    refused(run(command, "board.toml", "pattern.toml", *options), text)
    assert sorted(tmp_path.rglob("*")) == before


@pytest.mark.parametrize(
    ("content", "text"),
    [
        (
            PATTERN.replace('"3"', '"30"'),
            "pattern.toml:10: pulses.1.channels: channel 30 is not on the board board.toml",
        ),
        (PATTERN.replace("every", "evry"), '(did you mean "every"?)'),
        (PATTERN.replace('"25 ms"', "25"), "25 has no unit; write a time in quotes, such as '10 ms'"),
        ("", "is empty; a pattern file is expected"),
        ("pulses = 1", 'pattern.toml:1: pulses: "pulses" must be a list in [ ]; found 1'),
        (BOARD, "is a board; name the board first, then the pattern"),
    ],
)
def test_a_wrong_pattern_is_refused_before_anything_is_written(
    run: Run, tmp_path: Path, content: str, text: str
) -> None:
    (tmp_path / "pattern.toml").write_text(content, encoding="utf-8")
    before = sorted(tmp_path.rglob("*"))
    refused(run("fire", "board.toml", "pattern.toml", "--out", "results"), text)
    assert sorted(tmp_path.rglob("*")) == before


def test_every_problem_of_a_file_has_a_line_of_its_own(run: Run, tmp_path: Path) -> None:
    (tmp_path / "board.toml").write_text(BOARD.replace("esr", "ers").replace('"1.8 m"', "1.8"), encoding="utf-8")
    _, _, err = run("fire", "board.toml", "pattern.toml")
    assert [line.split(" ")[0] for line in err.splitlines()] == ["board.toml:6:", "board.toml:7:", "board.toml:7:"]


@pytest.mark.parametrize(
    "board", ["gone.toml", ".", "x" * 300 + ".toml", "pattern.toml/board.toml", "/dev/null", "/dev/zero"]
)
def test_what_is_no_file_is_refused(run: Run, tmp_path: Path, board: str) -> None:
    before = sorted(tmp_path.rglob("*"))
    refused(run("fire", board, "pattern.toml"), board)
    assert sorted(tmp_path.rglob("*")) == before


def test_a_board_and_a_pattern_that_changed_places_are_refused(run: Run) -> None:
    refused(run("fire", "pattern.toml", "board.toml"), "is a pattern; name the board first, then the pattern")


def test_results_cannot_go_where_a_file_stands(run: Run, tmp_path: Path) -> None:
    refused(run("fire", "board.toml", "pattern.toml", "--out", "board.toml"), "cannot be used as a folder for results")
    refused(run("fire", "board.toml", "pattern.toml", "--out", "board.toml/in"), "cannot be used as a folder")
    assert (tmp_path / "board.toml").read_text(encoding="utf-8") == BOARD


@pytest.mark.parametrize(
    "arguments",
    [
        ("fire",),
        ("fire", "board.toml"),
        ("fire", "board.toml", "pattern.toml", "--no-such-option"),
        ("fire", "board.toml", "pattern.toml", "--time-limit", "0"),
        ("fire", "board.toml", "pattern.toml", "--time-limit", "soon"),
        ("deck", "board.toml", "pattern.toml", "--corner", "0"),
        ("no-such-command",),
    ],
)
def test_a_wrong_call_is_refused(run: Run, arguments: tuple[str, ...]) -> None:
    refused(run(*arguments))


def test_a_corner_that_the_board_has_not_is_refused_with_those_that_it_has(run: Run) -> None:
    refused(run("deck", "board.toml", "pattern.toml", "--corner", "9"), "--corner 9: this board has 5: 1 supply high")


def test_a_list_that_a_toml_file_names_is_neither_overwritten_nor_buried_under_results(
    run: Run, tmp_path: Path
) -> None:
    (tmp_path / "shots").mkdir()
    (tmp_path / "shots" / "edges.csv").write_text("channel,start,width\n0,1 ms,1 ms\n")
    (tmp_path / "one.toml").write_text('events = "shots/edges.csv"\nduration = "1 s"\n')
    refused(run("fire", "board.toml", "one.toml", "--edges", "shots/edges.csv"), "is one of the files to read")
    refused(run("fire", "board.toml", "one.toml", "--out", "shots"), "shots: holds edges.csv")
    assert (tmp_path / "shots" / "edges.csv").read_text().startswith("channel")


def test_a_folder_that_a_deck_makes_is_said(run: Run, tmp_path: Path) -> None:
    status, _, err = run("deck", "board.toml", "pattern.toml", "--to", "nwe/rush.cir")
    assert status == 0
    assert "nwe: did not exist; made for rush.cir" in err
    assert (tmp_path / "nwe" / "rush.cir").is_file()
    assert "did not exist" not in run("deck", "board.toml", "pattern.toml", "--to", "nwe/rush.cir")[2]


def test_schema_prints_json_and_knows_five_kinds_of_file(run: Run) -> None:
    for arguments in (
        ("schema",),
        *(("schema", kind) for kind in ("board", "pattern", "capture", "events", "scenarios")),
    ):
        status, out, err = run(*arguments)
        assert (status, err) == (0, "")
        assert json.loads(out)["$schema"]
    refused(run("schema", "deck"), '"deck" is not a kind of file; say board, pattern, capture, events or scenarios')


def test_begin_writes_files_once_and_never_over_others(run: Run, tmp_path: Path) -> None:
    status, out, _ = run("begin", "tray")
    assert status == 0
    assert "now try: boardsim fire tray/board.toml tray/patterns/first.toml" in out
    written = (tmp_path / "tray" / "board.toml").read_bytes()
    refused(run("begin", "tray"), "exists already and is left as it is; name a new folder")
    assert (tmp_path / "tray" / "board.toml").read_bytes() == written
    refused(run("begin", "board.toml"), "board.toml")


def test_the_starter_files_make_a_deck(run: Run) -> None:
    run("begin", "tray")
    status, out, err = run("deck", "tray/board.toml", "tray/patterns/first.toml")
    assert (status, err) == (0, "")
    assert out.rstrip().endswith(".end")


@pytest.mark.parametrize("folder", [".include x", "a\n.control", "*"])
def test_names_of_folders_and_files_cannot_bring_commands_into_a_deck(run: Run, tmp_path: Path, folder: str) -> None:
    place = tmp_path / folder
    place.mkdir()
    (place / "board.toml").write_text(BOARD.replace('name = "fruit sorter"', ""), encoding="utf-8")
    (place / ".shell ls\n.end.toml").write_text(PATTERN.replace('name = "rush"', ""), encoding="utf-8")
    status, out, _ = run("deck", f"{folder}/board.toml", f"{folder}/.shell ls\n.end.toml")
    assert status == 0
    _, plain, _ = run("deck", "board.toml", "pattern.toml")
    commands = [line.split()[0] for line in out.splitlines() if line.startswith((".", "shell"))]
    assert commands == [line.split()[0] for line in plain.splitlines() if line.startswith((".", "shell"))]


def test_the_installed_program_itself_refuses_on_standard_error_with_status_2(tmp_path: Path) -> None:
    (tmp_path / "board.toml").write_text(BOARD.replace("esr", "ers"), encoding="utf-8")
    done = subprocess.run(
        [sys.executable, "-W", "error", "-m", "boardsim.cli", "fire", "board.toml", "pattern.toml"],
        cwd=tmp_path,
        env={**os.environ, "PYTHONUTF8": "1"},
        capture_output=True,
        text=True,
        check=False,
    )
    refused((done.returncode, done.stdout, done.stderr), 'board.toml:7: bulk: "esr" is missing')
    assert [p.name for p in tmp_path.iterdir()] == ["board.toml"]


def test_results_never_lie_beside_the_files_that_were_read(run: Run, tmp_path: Path) -> None:
    (tmp_path / "report.txt").write_text("mine", encoding="utf-8")
    for call in (("fire", "board.toml", "pattern.toml"), ("release", "board.toml"), ("volley", "board.toml")):
        refused(run(*call, "--out", "."), "results must not lie beside")
    assert (tmp_path / "report.txt").read_text(encoding="utf-8") == "mine"


def test_a_deck_is_never_written_over_what_it_was_made_from(run: Run, tmp_path: Path) -> None:
    for target in ("board.toml", "pattern.toml"):
        refused(run("deck", "board.toml", "pattern.toml", "--to", target), "is one of the files to read")
    assert (tmp_path / "board.toml").read_text(encoding="utf-8") == BOARD


def test_a_path_that_no_file_system_takes_is_refused(run: Run) -> None:
    refused(run("verify", "a" * 300), "cannot be read: File name too long")
