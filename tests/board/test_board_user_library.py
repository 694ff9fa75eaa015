"""A user's folders of parts: where they are found, what wins over what, and where their mistakes are reported."""

from __future__ import annotations

from pathlib import Path

import pytest
from board_files import MOSFET, TEXT, ZENER, changed

from boardsim.board.reader import Board, read_board
from boardsim.errors import InputError

MY_ZENER = f'[my-zener]\n{ZENER}source = "the maker\'s sheet, page 3"\n'
LOW, HIGH = (f'{{ value = "55 mohm", gate = "{gate}" }}' for gate in ("1 V", "4.5 V"))
USES_MINE = changed('zener = "20v-5w"', 'zener = "my-zener"')


def put(folder: Path, board: str = USES_MINE, **files: str) -> Path:
    """A board file with library files beside it; the name of a file is FOLDER__FILE."""
    path = folder / "board.toml"
    path.write_text(board, encoding="utf-8")
    for name, text in files.items():
        at = folder / name.split("__")[0] / f"{name.split('__')[1]}.toml"
        at.parent.mkdir(exist_ok=True)
        at.write_text(text, encoding="utf-8")
    return path


def zener_of(board: Board) -> object:
    return board.channels[0].clamp.zener


def refusal(path: Path, *libraries: Path) -> str:
    with pytest.raises(InputError) as caught:
        read_board(path, libraries)
    return str(caught.value)


def test_the_folder_library_beside_a_board_is_found_by_itself(tmp_path: Path) -> None:
    zener = zener_of(read_board(put(tmp_path, library__mine=MY_ZENER)))
    assert zener.voltage.typ == 12.0
    assert zener.title == "my-zener"


def test_a_number_of_the_users_library_names_its_file_and_its_source(tmp_path: Path) -> None:
    zener = zener_of(read_board(put(tmp_path, library__mine=MY_ZENER)))
    assert str(zener.voltage.origin) == "library: library/mine.toml: the maker's sheet, page 3"


def test_a_single_number_has_the_source_given_for_it(tmp_path: Path) -> None:
    text = MY_ZENER + '[my-zener.sources]\nimpedance = "measured"\n'
    zener = zener_of(read_board(put(tmp_path, library__mine=text)))
    assert zener.impedance.origin.source == "library/mine.toml: measured"
    assert zener.voltage.origin.source.endswith("page 3")


def test_a_folder_elsewhere_is_used_when_it_is_named(tmp_path: Path) -> None:
    path = put(tmp_path, shared__mine=MY_ZENER)
    assert "neither in this file nor in the library" in refusal(path)
    assert zener_of(read_board(path, [tmp_path / "shared"])).voltage.typ == 12.0


def test_the_boards_own_part_wins_over_the_users_and_that_over_the_built_in_one(tmp_path: Path) -> None:
    mine = MY_ZENER.replace("[my-zener]", "[20v-5w]")
    assert zener_of(read_board(put(tmp_path, TEXT))).voltage.typ == 20.0
    assert zener_of(read_board(put(tmp_path, TEXT, library__mine=mine))).voltage.typ == 12.0
    own = changed("[limits]", "[parts.20v-5w]\n" + ZENER.replace("12 V", "18 V") + "[limits]")
    zener = zener_of(read_board(put(tmp_path, own, library__mine=mine)))
    assert zener.voltage.typ == 18.0
    assert zener.voltage.origin.kind == "given"


@pytest.mark.parametrize("second", ["library__other", "shared__other"])
def test_two_records_of_one_name_are_refused_with_both_places(tmp_path: Path, second: str) -> None:
    path = put(tmp_path, library__mine=MY_ZENER, **{second: "\n\n" + MY_ZENER})
    message = refusal(path, *([tmp_path / "shared"] if second.startswith("shared") else []))
    assert f"{tmp_path}/library/mine.toml:1" in message
    assert f"{tmp_path}/{second.split('__')[0]}/other.toml:3" in message
    assert "my-zener" in message


def test_one_folder_named_twice_is_no_conflict(tmp_path: Path) -> None:
    path = put(tmp_path, library__mine=MY_ZENER)
    folder = tmp_path / "library"
    assert zener_of(read_board(path, [folder, tmp_path / "." / "library"])).voltage.typ == 12.0


@pytest.mark.parametrize(
    ("text", "place", "said"),
    [
        (MY_ZENER.replace('"12 V"', '"12 A"'), "mine.toml:3", "does not measure a voltage"),
        (MY_ZENER.replace("test_current", "test_curent"), "mine.toml:4", 'did you mean "test_current"?'),
        (MY_ZENER.replace('"zener"', '"zenner"'), "mine.toml:2", 'did you mean "zener"?'),
        (MY_ZENER.replace('kind = "zener"\n', ""), "mine.toml:1", '"kind" is missing'),
        ('[my-zener]\nkind = 7\n', "mine.toml:2", "is not known"),
        ("my-zener = 3\n", "mine.toml:1", "must be a table of a part"),
        (MY_ZENER.replace('source = "the', 'sources = "the'), "mine.toml:6", "table of text"),
        (MY_ZENER + '[my-zener.sources]\nimpedence = "x"\n', "mine.toml:8", 'did you mean "impedance"?'),
        ("[my-zener\n", "mine.toml:1", "is not TOML"),
        ('["bad\\u0007name"]\n' + ZENER, "mine.toml:1", "cannot be a name"),
        (
            f"[parts.switch]\n{MOSFET.format(LOW)}",
            "mine.toml:1",
            "below the threshold",
        ),
    ],
    ids=lambda v: None if "\n" in v else v[:30],
)  # fmt: skip
def test_a_mistake_in_a_library_file_is_told_with_its_place(tmp_path: Path, text: str, place: str, said: str) -> None:
    message = refusal(put(tmp_path, library__mine=text))
    assert place in message
    assert said in message
    assert "\a" not in message


def test_every_mistake_of_every_library_file_is_told_at_once(tmp_path: Path) -> None:
    wrong = MY_ZENER.replace('"12 V"', '"12 A"')
    message = refusal(put(tmp_path, library__a=wrong, library__b=wrong.replace("my-", "your-")))
    assert "a.toml:3" in message
    assert "b.toml:3" in message


def test_a_folder_that_is_none_or_holds_no_parts_is_refused(tmp_path: Path) -> None:
    path = put(tmp_path, TEXT)
    (tmp_path / "empty").mkdir()
    assert "there is no such folder" in refusal(path, tmp_path / "nowhere")
    assert "is a file" in refusal(path, path)
    assert "holds no .toml file" in refusal(path, tmp_path / "empty")


def test_an_empty_folder_library_beside_a_board_changes_nothing(tmp_path: Path) -> None:
    path = put(tmp_path, TEXT)
    (tmp_path / "library").mkdir()
    assert zener_of(read_board(path)).voltage.typ == 20.0


def test_a_switch_stage_is_of_the_kind_of_a_transistor_in_the_users_library(tmp_path: Path) -> None:
    text = f"[my-switch]\n{MOSFET.format(HIGH)}"
    path = put(tmp_path, changed('"n-logic-60v"', '"my-switch"'), library__mine=text)
    assert read_board(path).channels[0].switch.part.title == "my-switch"
