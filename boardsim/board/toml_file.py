"""TOML files with the line of every key: tomllib gives the values, tree-sitter the places."""

from __future__ import annotations

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
        """A mistake at a key."""
        return Problem(str(self.path), self.line(keys), text)


def read_toml(path: Path, what: str) -> TomlFile:
    """Read a TOML file.

    Raises
    ------
    InputError
        If it cannot be opened, is no text, is empty or is no TOML; says where.
    """

    def refuse(text: str, line: int | None = None) -> InputError:
        return InputError([Problem(str(path), line, text)])

    if path.is_dir():
        raise refuse(f"is a folder; name the {what} file in it")
    try:
        with path.open("rb") as handle:
            raw = handle.read(LARGEST_FILE + 1)
    except OSError as err:
        raise refuse(f"cannot be read: {err.strerror or err}; name an existing {what} file") from err
    if len(raw) > LARGEST_FILE:
        raise refuse(f"is larger than {LARGEST_FILE // 2**20} MiB, which no {what} file is")
    try:
        text = raw.decode("utf-8")
    except UnicodeDecodeError as err:
        line = raw[: err.start].count(b"\n") + 1
        raise refuse(f"is not UTF-8 text; a {what} file is TOML", line) from err
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError as err:
        raise refuse(f"is not TOML: {err}") from err
    except RecursionError as err:
        raise refuse("nests too deeply") from err
    if not data:
        raise refuse(f"is empty; a {what} file is expected (see the example that `boardsim begin` writes)")
    lines: dict[Keys, int] = {}
    for keys, line in _places(text):
        lines.setdefault(keys, line)
    return TomlFile(path, data, lines)


def _places(text: str) -> Iterator[tuple[Keys, int]]:
    import tree_sitter
    import tree_sitter_toml

    parser = tree_sitter.Parser(tree_sitter.Language(tree_sitter_toml.language()))
    root = parser.parse(text.encode()).root_node
    counts: dict[Keys, int] = {}
    for node in root.named_children:
        if node.type == "pair":
            yield from _pair(node, ())
        elif node.type in _TABLES:
            name, *rest = node.named_children
            keys = _open(_key(name), counts)
            if node.type == "table_array_element":
                index = counts.get(keys, -1) + 1
                counts[keys] = index
                yield keys, _line(name)
                keys = (*keys, index)
            yield keys, _line(name)
            for pair in rest:
                if pair.type == "pair":
                    yield from _pair(pair, keys)


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
