"""TOML files: the line of every key, and files that are no board at all."""

from pathlib import Path

import pytest

from boardsim.board.toml_file import LARGEST_FILE, Keys, TomlFile, read_toml
from boardsim.errors import InputError

SHAPES = """\
# a comment
top = 1
"quoted key" = 2
dotted.inner.deep = 3
'literal' = 4
1979-05-27 = 5
3.14 = "a key of two digits parts"
"\\u0041" = 6

[table]
long = \"\"\"
two
lines\"\"\"
list = [ 1, # one
  # nothing
  { a = 1 } ]
after = true

[table.sub."x.y"]
key = { one = 1, two = { three = 3 } }

[[rows]]
n = 0
[rows.cell]
m = 1
[[rows]]
n = 1
[[rows.inner]]
k = 7
[[rows.inner]]
k = 8
[implied.table.inner]
x = 1
[implied.table]
y = 1
"""


def read(folder: Path, content: str | bytes) -> TomlFile:
    path = folder / "file.toml"
    path.write_bytes(content if isinstance(content, bytes) else content.encode("utf-8"))
    return read_toml(path, "board")


def refusal(folder: Path, content: str | bytes) -> str:
    with pytest.raises(InputError) as caught:
        read(folder, content)
    assert len(caught.value.problems) == 1
    return str(caught.value).removeprefix(str(folder / "file.toml"))


@pytest.mark.parametrize(
    ("keys", "line"),
    [
        (("top",), 2),
        (("quoted key",), 3),
        (("dotted",), 4),
        (("dotted", "inner", "deep"), 4),
        (("literal",), 5),
        (("1979-05-27",), 6),
        (("3", "14"), 7),
        (("A",), 8),
        (("table",), 10),
        (("table", "long"), 11),
        (("table", "list"), 14),
        (("table", "list", 0), 14),
        (("table", "list", 1), 16),
        (("table", "list", 1, "a"), 16),
        (("table", "after"), 17),
        (("table", "sub"), 19),
        (("table", "sub", "x.y"), 19),
        (("table", "sub", "x.y", "key", "two", "three"), 20),
        (("rows",), 22),
        (("rows", 0), 22),
        (("rows", 0, "n"), 23),
        (("rows", 0, "cell", "m"), 25),
        (("rows", 1), 26),
        (("rows", 1, "n"), 27),
        (("rows", 1, "inner"), 28),
        (("implied",), 32),
        (("implied", "table"), 34),
        (("implied", "table", "inner"), 32),
        (("rows", 1, "inner", 0, "k"), 29),
        (("rows", 1, "inner", 1, "k"), 31),
        # what is not there stands at the nearest table around it
        (("table", "sub", "x.y", "gone"), 19),
        (("rows", 0, "cell", "gone", "deeper"), 24),
        (("gone",), None),
    ],
)
@pytest.mark.parametrize("ending", ["\n", "\r\n"])
def test_every_key_has_the_line_on_which_it_stands(tmp_path: Path, keys: Keys, line: int | None, ending: str) -> None:
    assert read(tmp_path, SHAPES.replace("\n", ending)).line(keys) == line


def test_a_byte_order_mark_does_no_harm(tmp_path: Path) -> None:
    file = read(tmp_path, b"\xef\xbb\xbfname = 1\nother = 2\n")
    assert file.data == {"name": 1, "other": 2}
    assert (file.line(("name",)), file.line(("other",))) == (1, 2)


@pytest.mark.parametrize(
    ("content", "message"),
    [
        ("", ": is empty; a board file is expected (see the example that `boardsim begin` writes)"),
        ("# nothing\n", ": is empty; a board file is expected"),
        (bytes(range(256)), ":2: is not UTF-8 text; a board file is TOML, saved as UTF-8"),
        ('a = 1\nb = "\xfc"\n'.encode("latin-1"), ":2: is not UTF-8 text"),
        ("a = 1\n".encode("utf-16"), ":1: is not UTF-8 text"),
        (b"\x7fELF\x02\x01\x01" + bytes(100), ":1: is not TOML: "),
        ("a = 1\nb 2\n", ":2: is not TOML: Expected '=' after a key in a key/value pair (column 3)"),
        ('a = "x\nb = 1\n', ":1: is not TOML: Illegal character '\\n' (column 7); the text is not closed with \" before the end of the line"),
        ("a = 1\nb = [1,", ":2: is not TOML: "),
        ("a = 1\nb = 2\na = 3\n", ":3: is not TOML: Cannot overwrite a value (column 6); the same key stands here twice, or is a value and a table"),
        ("[a]\nx = 1\n[a]\ny = 1\n", ":3: is not TOML: Cannot declare ('a',) twice (column 3)"),
        ("a = 1\0\n", ":1: is not TOML: "),
        ("#" * (LARGEST_FILE + 1), ": is larger than 4 MiB, which no board file is"),
        ("a = " + "[" * 40 + "]" * 40, ": nests more than 32 levels deep, which no board file does"),
        ("a = " + "[" * 5000 + "]" * 5000, ": nests more than 32 levels deep"),
        ("a = " + "{a=" * 5000 + "1" + "}" * 5000, ": nests more than 32 levels deep"),
        (".".join("a" * 3000) + " = 1", ": nests more than 32 levels deep"),
        ("[" + ".".join("a" * 3000) + "]", ": nests more than 32 levels deep"),
        ("a = 1\nb = " + "9" * 5000, ":2: is not TOML: the number is larger than TOML allows"),
        ("a = 1\nb = 0x" + "f" * 5000, ":2: b: the number is larger than TOML allows"),
        ("a = 1\nb = [1, 9223372036854775808]", ":2: b.1: the number is larger than TOML allows"),
    ],
)  # fmt: skip
def test_what_is_no_toml_file_of_ours_is_refused_with_its_line(
    tmp_path: Path, content: str | bytes, message: str
) -> None:
    assert refusal(tmp_path, content).startswith(message)


def test_a_file_that_is_not_there_is_refused(tmp_path: Path) -> None:
    for name in ("gone.toml", "gone/board.toml", "x" * 300, "\n"):
        with pytest.raises(InputError, match=r"cannot be read: .*; name an existing board file"):
            read_toml(tmp_path / name, "board")


def test_a_folder_is_refused(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="is a folder; name the pattern file in it"):
        read_toml(tmp_path, "pattern")


def test_a_file_without_permission_is_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "board.toml"
    path.write_text("a = 1")

    def denied(*_: object, **__: object) -> None:  # root may read everything, so the system cannot be asked to refuse
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(Path, "open", denied)
    with pytest.raises(InputError, match="cannot be read"):
        read_toml(path, "board")


def test_control_characters_of_a_file_are_printed_as_escapes(tmp_path: Path) -> None:
    file = read(tmp_path, 'a = 1\n"x\\n\\u001b[31m" = 2\n')
    problem = file.problem_at(("x\n\x1b[31m",), "is wrong: \x07")
    assert (problem.line, problem.text) == (2, '"x\\n\\x1b[31m": is wrong: \\x07')


def test_a_path_of_keys_is_written_as_toml_writes_it(tmp_path: Path) -> None:
    file = read(tmp_path, "a = 1\n")
    assert (
        file.problem_at(("channels", "0-7", "my-part", "b_c", 2), "text").text == 'channels."0-7".my-part.b_c.2: text'
    )
