"""TOML files with the line of every key: tomllib gives the values, tree-sitter the places."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from boardsim.errors import InputError, Problem

if TYPE_CHECKING:
    from tree_sitter import Node

Keys = tuple[str | int, ...]

_TABLES = {"table", "table_array_element"}
_KEYS = {"bare_key", "quoted_key", "dotted_key"}
_DEEPEST = 32  # levels of tables and lists; a board has six
_ENDLESS_KEY = re.compile(r"""(?<![\w"'-])(?:[\w"'-]++[ \t]*+\.[ \t]*+){100}""")
LARGEST_FILE = 4 * 1024 * 1024  # [byte]; a board of a thousand channels needs a hundredth of it


@dataclass(frozen=True)
class TomlFile:
    """The contents of one file, and where its keys stand."""

    path: Path
    data: dict[str, Any]
    lines: dict[Keys, int]

    def line(self, keys: Keys) -> int | None:
        """The line of a key, or of the nearest table around it."""
        for end in range(len(keys), 0, -1):
            if keys[:end] in self.lines:
                return self.lines[keys[:end]]
        return None

    def problem(self, keys: Keys, text: str) -> Problem:
        """A mistake at a key; what the file holds is printed without its control characters."""
        return Problem(str(self.path), self.line(keys), _printable(text))

    def problem_at(self, keys: Keys, text: str) -> Problem:
        """A mistake at a key, with the path of keys before the text."""
        where = ".".join(_key_text(k) for k in keys)
        return self.problem(keys, f"{where}: {text}" if where else text)


def _key_text(key: str | int) -> str:
    if isinstance(key, int):
        return str(key)
    short = key if len(key) <= 60 else key[:60] + "..."
    return short if short.replace("_", "").replace("-", "a").isalnum() and not short[0].isdigit() else f'"{short}"'


def _printable(text: str) -> str:
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode() for c in text)


def read_toml(path: Path, what: str) -> TomlFile:
    """Read a TOML file.

    Raises
    ------
    InputError
        If it cannot be opened, is no text, is empty or is no TOML; says where.
    """

    def refuse(text: str, line: int | None = None) -> InputError:
        return InputError([Problem(str(path), line, text)])

    try:
        with path.open("rb") as handle:
            raw = handle.read(LARGEST_FILE + 1)
    except IsADirectoryError as err:
        raise refuse(f"is a folder; name the {what} file in it") from err
    except (OSError, ValueError) as err:  # a path with a zero byte in it is a ValueError
        said = getattr(err, "strerror", None) or err
        raise refuse(f"cannot be read: {said}; name an existing {what} file") from err
    if len(raw) > LARGEST_FILE:
        raise refuse(f"is larger than {LARGEST_FILE // 2**20} MiB, which no {what} file is")
    try:
        text = raw.decode("utf-8-sig")  # some editors put a byte order mark first
    except UnicodeDecodeError as err:
        line = raw[: err.start].count(b"\n") + 1
        raise refuse(f"is not UTF-8 text; a {what} file is TOML, saved as UTF-8", line) from err
    if _ENDLESS_KEY.search(text):  # tomllib would take minutes over it
        raise refuse(f"nests more than {_DEEPEST} levels deep, which no {what} file does")
    try:
        data = tomllib.loads(text)
    except RecursionError as err:
        raise refuse(f"nests more than {_DEEPEST} levels deep, which no {what} file does") from err
    except ValueError as err:  # what tomllib says, and what int() says of a number of thousands of digits
        raise refuse(*_not_toml(str(err), text)) from err
    if _depth(data) > _DEEPEST:
        raise refuse(f"nests more than {_DEEPEST} levels deep, which no {what} file does")
    if not data:
        raise refuse(f"is empty; a {what} file is expected (see the example that `boardsim begin` writes)")
    lines: dict[Keys, int] = {}
    for keys, line in _places(text):
        lines.setdefault(keys, line)
    file = TomlFile(path, data, lines)
    if beyond := [keys for keys, value in _leaves(data) if isinstance(value, int) and not -(2**63) <= value < 2**63]:
        raise InputError([file.problem_at(keys, "the number is larger than TOML allows") for keys in beyond])
    return file


_HINTS = {
    "Cannot overwrite a value": "the same key stands here twice, or is a value and a table",
    "Illegal character '\\n'": 'the text is not closed with " before the end of the line',
}


def _not_toml(said: str, text: str) -> tuple[str, int | None]:
    """What tomllib found, and on which line."""
    line: int | None = None
    if match := re.fullmatch(r"(.*) \(at line (\d+), column (\d+)\)", said, re.DOTALL):
        said, line = f"{match[1]} (column {match[3]})", int(match[2])
    elif said.endswith(" (at end of document)"):
        said, line = (
            said.removesuffix(" (at end of document)") + " (the file ends here)",
            text.count("\n") + 1,
        )
    elif said.startswith("Exceeds the limit"):  # int() of thousands of digits
        digits = re.search(r"[0-9_]{1000,}", text)
        line = text.count("\n", 0, digits.start()) + 1 if digits else None
        return "is not TOML: the number is larger than TOML allows", line
    hint = next((f"; {hint}" for start, hint in _HINTS.items() if said.startswith(start)), "")
    return f"is not TOML: {said}{hint}", line


def _depth(data: Any) -> int:
    """How deeply tables and lists nest; stops counting a little beyond what is allowed."""
    depth, level = 0, [data]
    while level and depth <= _DEEPEST:
        level = [v for table in level for v in _inside(table) if isinstance(v, dict | list)]
        depth += 1
    return depth


def _inside(table: Any) -> Iterator[Any]:
    yield from table.values() if isinstance(table, dict) else table


def _leaves(data: Any, keys: Keys = ()) -> Iterator[tuple[Keys, Any]]:
    if isinstance(data, dict | list):
        for key, value in data.items() if isinstance(data, dict) else enumerate(data):
            yield from _leaves(value, (*keys, key))
    else:
        yield keys, data


def _places(text: str) -> Iterator[tuple[Keys, int]]:
    import tree_sitter
    import tree_sitter_toml

    parser = tree_sitter.Parser(tree_sitter.Language(tree_sitter_toml.language()))
    root = parser.parse(text.encode()).root_node
    counts: dict[Keys, int] = {}
    around: list[tuple[Keys, int]] = []
    for node in root.named_children:
        if node.type == "pair":
            yield from _pair(node, ())
        elif node.type in _TABLES:
            name, *rest = node.named_children
            keys = _open(_key(name), counts)
            around += [(keys[:end], _line(name)) for end in range(1, len(keys))]
            if node.type == "table_array_element":
                index = counts.get(keys, -1) + 1
                counts[keys] = index
                yield keys, _line(name)
                keys = (*keys, index)
            yield keys, _line(name)
            for pair in rest:
                if pair.type == "pair":
                    yield from _pair(pair, keys)
    yield from around  # [a.b] also names a; a header of its own says so better, so these come last


def _open(keys: Keys, counts: dict[Keys, int]) -> Keys:
    """Insert the index of the last element where a table lies inside an array of tables."""
    out: Keys = ()
    for i, key in enumerate(keys):
        out = (*out, key)
        if out in counts and i < len(keys) - 1:
            out = (*out, counts[out])
    return out


def _pair(node: Node, prefix: Keys) -> Iterator[tuple[Keys, int]]:
    key, value = node.named_children[0], node.named_children[-1]
    keys = (*prefix, *_key(key))
    for end in range(len(prefix) + 1, len(keys) + 1):
        yield keys[:end], _line(key)
    yield from _value(value, keys)


def _value(node: Node, keys: Keys) -> Iterator[tuple[Keys, int]]:
    if node.type == "inline_table":
        for pair in node.named_children:
            if pair.type == "pair":
                yield from _pair(pair, keys)
    elif node.type == "array":
        items = [n for n in node.named_children if n.type != "comment"]
        for i, item in enumerate(items):
            yield (*keys, i), _line(item)
            yield from _value(item, (*keys, i))


def _key(node: Node) -> Keys:
    if node.type == "dotted_key":
        return tuple(k for child in node.named_children if child.type in _KEYS for k in _key(child))
    text = (node.text or b"").decode()
    if node.type == "quoted_key":
        return (next(iter(tomllib.loads(f"{text} = 0"))),)
    return (text,)


def _line(node: Node) -> int:
    return node.start_point[0] + 1
