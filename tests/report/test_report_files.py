"""Output files appear whole or not at all."""

from pathlib import Path

import pytest

from boardsim.errors import InputError
from boardsim.report.files import write_text, write_whole


def test_a_file_appears_with_its_folder_and_nothing_beside_it(tmp_path: Path) -> None:
    write_text(tmp_path / "out" / "rush" / "note.txt", "24 lanes, 19 µs")
    assert (tmp_path / "out" / "rush" / "note.txt").read_text("utf-8") == "24 lanes, 19 µs"
    assert [p.name for p in (tmp_path / "out" / "rush").iterdir()] == ["note.txt"]


@pytest.mark.parametrize("interruption", [KeyboardInterrupt, RuntimeError])
def test_an_interrupted_writer_leaves_the_old_file_as_it_was(tmp_path: Path, interruption: type[BaseException]) -> None:
    place = tmp_path / "findings.json"
    place.write_text("the last run")

    def half(path: Path) -> None:
        path.write_text("half of the ne")
        raise interruption

    with pytest.raises(interruption):
        write_whole(place, half)
    assert place.read_text() == "the last run"
    assert list(tmp_path.iterdir()) == [place]


def test_the_old_file_is_never_written_into(tmp_path: Path) -> None:
    place, kept = tmp_path / "junit.xml", tmp_path / "kept.xml"
    place.write_text("the last run")
    kept.hardlink_to(place)  # what a reader sees that has opened the old file
    write_text(place, "this run")
    assert (place.read_text(), kept.read_text()) == ("this run", "the last run")


def test_a_folder_that_is_a_file_is_a_wrong_call_that_says_what_to_do(tmp_path: Path) -> None:
    (tmp_path / "out").write_text("")
    with pytest.raises(InputError, match=r"out/note\.txt: .*cannot be written.*choose another place"):
        write_text(tmp_path / "out" / "note.txt", "x")


def test_a_full_disk_names_the_place_and_the_cause(tmp_path: Path) -> None:
    def write(path: Path) -> None:
        raise OSError(28, "No space left on device")

    with pytest.raises(InputError, match=r"overview\.png: .*No space left on device"):
        write_whole(tmp_path / "overview.png", write)
    assert list(tmp_path.iterdir()) == []


def test_names_that_are_no_text_do_not_stop_a_report(tmp_path: Path) -> None:
    # What Python makes of a file name that is not UTF-8.
    write_text(tmp_path / "a.txt", b"r\xfcsh".decode("utf-8", "surrogateescape"))
    assert (tmp_path / "a.txt").read_text("utf-8") == "r?sh"
