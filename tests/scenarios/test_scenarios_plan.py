"""Scenario files: what they can say, and every mistake in them with its place."""

from __future__ import annotations

import datetime
from pathlib import Path

import pytest
from test_scenarios_fire import HERE, PULSES, SMALL

from boardsim.errors import InputError
from boardsim.scenarios.chosen import choose, folders_of
from boardsim.scenarios.plan import Scenario, find_files, read_scenarios
from boardsim.scenarios.starter import write_starter

GOOD = """\
strict = true

[scenarios.calm]
pattern = "pattern.toml"
expect = "tight"
conditions = { ambient = "10 to 30 degC", supply = "23 V +/- 2 %" }

[scenarios.clash]
pattern = "pattern.toml"
breaks = ["overlap", "rail-sag"]
strict = false
accepted = [{ check = "pull-in", channels = "0-1", reason = "old coils", until = 2027-06-30 }]

[scenarios.all]
question = "volley"
width = "8 ms"
at_least = 2

[scenarios.off]
question = "release"
channel = 1
"""


def written(folder: Path, text: str = GOOD, board: str = SMALL) -> Path:
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "board.toml").write_text(board)
    (folder / "pattern.toml").write_text(PULSES)
    path = folder / "scenarios.toml"
    path.write_text(text)
    return path


def read(folder: Path, text: str = GOOD, board: str = SMALL) -> dict[str, Scenario]:
    found, problems = read_scenarios(written(folder, text, board))
    assert problems == ()
    return {s.name: s for s in found}


def mistakes(folder: Path, text: str, board: str = SMALL) -> str:
    try:
        _, problems = read_scenarios(written(folder, text, board))
    except InputError as err:
        problems = err.problems
    assert problems
    return "\n".join(str(p) for p in problems)


def test_everything_that_a_scenario_file_can_say(tmp_path: Path) -> None:
    found = read(tmp_path)
    assert list(found) == ["calm", "clash", "all", "off"]
    calm, clash, volley, off = found.values()
    assert (calm.strict, clash.strict) == (True, False)
    assert calm.board.supply.voltage.min == pytest.approx(23 * 0.98)
    assert calm.board.around is not None
    assert (calm.board.around.ambient_low, calm.board.around.ambient_high) == (283.15, 303.15)
    assert clash.board.supply.voltage.typ == 24.0
    assert (clash.expectation.verdict, clash.expectation.breaks) == ("fail", ("overlap", "rail-sag"))
    assert (clash.known[0].channels, clash.known[0].until) == ((0, 1), datetime.date(2027, 6, 30))
    assert (volley.question, volley.width, volley.at_least) == ("volley", 8e-3, 2)
    assert (off.question, off.channel, off.pattern) == ("release", 1, None)


def test_an_ambient_that_a_condition_gives_is_no_longer_assumed(tmp_path: Path) -> None:
    found = read(tmp_path)
    assert any(a.quantity == "ambient" for a in found["clash"].board.assumptions)
    assert not any(a.quantity == "ambient" for a in found["calm"].board.assumptions)


def test_what_holds_for_the_file_holds_for_every_scenario(tmp_path: Path) -> None:
    accepted = 'accepted = [{ check = "overlap", reason = "known", until = "2027-01-31" }]\n'
    found = read(tmp_path, accepted + GOOD)
    assert [len(s.known) for s in found.values()] == [1, 2, 1, 1]


CALM = '[scenarios.calm]\npattern = "pattern.toml"\n'


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("x = 1\n" + CALM, 'scenarios.toml:1: x: "x" is not known here'),
        ("strict = true\n", 'scenarios.toml: "scenarios" is missing'),
        ("[scenarios]\n", '"scenarios" is empty'),
        (CALM + "patern = 1\n", '(did you mean "pattern"?)'),
        (CALM + 'question = "salvo"\n', "'salvo' is not allowed for \"question\""),
        ("[scenarios.calm]\n", 'scenarios.toml:1: scenarios.calm: needs a "pattern"'),
        (
            CALM + "channel = 1\n",
            'scenarios.toml:3: scenarios.calm.channel: belongs to question = "release" or "stroke"',
        ),
        (CALM + 'width = "2 ms"\n', 'belongs to question = "volley" or "stroke"'),
        (CALM + "every_clamp = false\n", 'belongs to question = "release"'),
        (CALM + 'expect = "pass"\nbreaks = ["overlap"]\n', 'but expect is "pass"'),
        (CALM + 'expect = "unproven"\n', "'unproven' is not allowed for \"expect\""),
        ('[scenarios.off]\nquestion = "release"\nchannel = 7\n', "channel 7 is not on the board, which has 0, 1"),
        ('[scenarios.all]\nquestion = "volley"\nat_least = 3\n', "3 channels at once are more than the board's 2"),
        ('[scenarios.all]\nquestion = "volley"\nwidth = "2 V"\n', "scenarios.all.width"),
        ('[scenarios.all]\nquestion = "volley"\nwidth = "2 ms +/- 1 ms"\n', "has no tolerance"),
        (CALM + 'conditions = { supply = "17 V" }\n', "not above the board's brown-out level"),
        (CALM + 'conditions = { humidity = "80 %" }\n', '"humidity" is not known here; known: ambient, supply'),
        (CALM + 'accepted = [{ check = "overlap", reason = "x", until = "soon" }]\n', "'soon' is not a day"),
        (CALM + 'accepted = [{ check = "overlap", until = 2027-01-31 }]\n', '"reason" is missing'),
        (CALM + 'accepted = [{ check = "overlap", reason = " ", until = 2027-01-31 }]\n', '"reason" is empty; say why'),
        (CALM + 'strict = "false"\n', "strict"),
        (CALM + 'board = "a\\u0000b"\n', "cannot be read: embedded null byte"),
        (CALM + 'accepted = [{ check = "overlap", reason = "x" }]\n', '"until" is missing'),
        (
            CALM + 'accepted = [{ check = "overlap", channels = "0-9", reason = "x", until = 2027-01-31 }]\n',
            "channels 2-9 not on the board, which has 0, 1",
        ),
        ('[scenarios.calm]\npattern = "nothing.toml"\n', "nothing.toml: cannot be read"),
        (CALM + 'board = "nothing.toml"\n', "nothing.toml: cannot be read"),
        ('board = "pattern.toml"\n' + CALM, "pattern.toml: is a pattern"),
        ('[scenarios."a\\nb"]\npattern = "pattern.toml"\n', "cannot be a name"),
        ("[scenarios.calm\n", "is not TOML"),
        ("", "is empty"),
        (SMALL, "is a board"),
    ],
)
def test_a_mistake_is_named_with_its_place(tmp_path: Path, text: str, said: str) -> None:
    assert said in mistakes(tmp_path, text)


def test_one_wrong_scenario_leaves_the_others(tmp_path: Path) -> None:
    found, problems = read_scenarios(written(tmp_path, GOOD + "[scenarios.bad]\n"))
    assert len(found) == 4
    assert len(problems) == 1


def test_a_mistake_in_a_board_that_all_share_is_named_once(tmp_path: Path) -> None:
    found, problems = read_scenarios(written(tmp_path, GOOD, SMALL.replace("esr", "ers")))
    assert found == ()
    assert len(problems) == 2  # the key that is unknown, and the one that is missing


def test_files_are_found_at_and_below_each_path_once(tmp_path: Path) -> None:
    first, second = written(tmp_path / "sorter"), written(tmp_path / "deep" / "planter")
    written(tmp_path / ".hidden")
    assert find_files([tmp_path, first, tmp_path / "sorter"]) == (second, first)
    with pytest.raises(InputError, match="no such file or folder"):
        find_files([tmp_path / "nowhere"])
    (tmp_path / "none").mkdir()
    with pytest.raises(InputError, match=r"no scenarios\.toml at or below it"):
        find_files([tmp_path / "none"])


def test_folders_mirror_where_the_files_lie_and_never_clash(tmp_path: Path) -> None:
    text = GOOD + '[scenarios."Calm"]\npattern = "pattern.toml"\n'
    one = list(read(tmp_path / "sorter", text).values())
    assert [str(f) for f in folders_of(one)] == [f"sorter/{n}" for n in ("calm", "clash", "all", "off", "calm-2")]
    two = [*one[:1], *list(read(tmp_path / "deep" / "planter").values())[:1]]
    assert [str(f) for f in folders_of(two)] == ["sorter/calm", "deep/planter/calm"]


def test_what_is_run_can_be_chosen_by_name(tmp_path: Path) -> None:
    written(tmp_path / "sorter")
    chosen = choose([tmp_path], "calm", True, "2027-01-31")
    assert [s.name for s in chosen.scenarios] == ["calm"]
    assert chosen.today == datetime.date(2027, 1, 31)
    assert choose([tmp_path], "clash", True, None).scenarios[0].strict
    with pytest.raises(InputError, match="there are: sorter/calm, sorter/clash"):
        choose([tmp_path], "rush", False, None)
    with pytest.raises(InputError, match="write it such as 2027-01-31"):
        choose([tmp_path], None, False, "tomorrow")


def test_files_of_which_nothing_can_be_run_are_refused_with_every_mistake(tmp_path: Path) -> None:
    written(tmp_path / "a", "x = 1\n")
    written(tmp_path / "b", "[scenarios.calm]\n")
    chosen = choose([tmp_path], None, False, None)
    assert chosen.scenarios == ()
    assert {Path(p.file).parent.name for p in chosen.problems} == {"a", "b"}


def test_a_choice_by_name_does_not_hide_the_mistake_in_what_is_meant(tmp_path: Path) -> None:
    written(tmp_path, GOOD + '[scenarios."cold morning"]\npattern = "nothing.toml"\n')
    with pytest.raises(InputError, match=r"nothing\.toml: cannot be read"):
        choose([tmp_path], "cold morning", False, None)


def test_a_name_is_known_as_written_and_as_a_folder(tmp_path: Path) -> None:
    written(tmp_path, CALM.replace("calm", '"cold morning"'))
    for spelling in ("cold morning", "cold-morning"):
        assert len(choose([tmp_path], spelling, False, None).scenarios) == 1


def test_no_two_scenarios_share_a_folder(tmp_path: Path) -> None:
    names = ("a b", "a-b", "a-b-2", "a_b", "A B")
    text = "".join(CALM.replace("calm", f'"{name}"') for name in names)
    found = [f.as_posix() for f in folders_of(list(read(tmp_path / "sorter", text).values()))]
    assert len(set(found)) == len(names)
    assert found[2] == "sorter/a-b-2"


def test_one_file_linked_into_two_folders_is_asked_of_both_boards(tmp_path: Path) -> None:
    shared = written(tmp_path / "common")
    for name in ("a", "b"):
        written(tmp_path / "boards" / name)
        (tmp_path / "boards" / name / "scenarios.toml").unlink()
        (tmp_path / "boards" / name / "scenarios.toml").symlink_to(shared)
    chosen = choose([tmp_path / "boards"], "calm", False, None)
    assert [f.as_posix() for f in chosen.folders] == ["a/calm", "b/calm"]


def test_linked_folders_are_searched_and_loops_end(tmp_path: Path) -> None:
    written(tmp_path / "elsewhere" / "b")
    (tmp_path / "boards").mkdir()
    (tmp_path / "boards" / "b").symlink_to(tmp_path / "elsewhere" / "b")
    (tmp_path / "elsewhere" / "b" / "again").symlink_to(tmp_path / "boards")
    assert len(find_files([tmp_path / "boards"])) == 1


def test_the_starter_and_the_demonstrations_can_be_run(tmp_path: Path) -> None:
    written_now = write_starter(tmp_path / "tray")
    for path in (written_now[2], *sorted((HERE / "netlists").glob("*/scenarios.toml"))):
        found, problems = read_scenarios(path)
        assert found
        assert problems == ()


def test_power_up_is_a_question_with_a_random_number_of_its_own(tmp_path: Path) -> None:
    found = read(tmp_path, '[scenarios.on]\nquestion = "power-up"\nrandom = 7\n')["on"]
    assert (found.question, found.random) == ("power-up", 7)
    assert 'belongs to question = "power-up"' in mistakes(tmp_path, '[scenarios.on]\nquestion = "volley"\nrandom = 7\n')
