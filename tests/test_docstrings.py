"""Docstrings hold what they promise: parameters that exist, units for numbers, every error that a function raises."""

from __future__ import annotations

import ast
import re
from collections.abc import Iterator
from pathlib import Path

import pytest

HERE = Path(__file__).resolve().parents[1]
Function = ast.FunctionDef | ast.AsyncFunctionDef


def public_functions() -> Iterator[tuple[str, Function]]:
    for path in sorted((HERE / "boardsim").rglob("*.py")):
        if path.name == "cli.py":
            continue  # what is written there is printed by --help
        tree = ast.parse(path.read_text(encoding="utf-8"))
        for node in ast.walk(tree):
            if isinstance(node, Function) and not node.name.startswith("_") and ast.get_docstring(node):
                yield f"{path.relative_to(HERE)}:{node.lineno} {node.name}", node


FUNCTIONS = dict(public_functions())


def section(doc: str, title: str) -> str:
    match = re.search(rf"^{title}\n-+\n(.*?)(?=^\w[\w ]*\n-+\n|\Z)", doc, re.MULTILINE | re.DOTALL)
    return match[1] if match else ""


def documented(doc: str) -> list[str]:
    entries = re.findall(r"^([\w, ]+?) :", section(doc, "Parameters"), re.MULTILINE)
    return [name.strip() for entry in entries for name in entry.split(",")]


@pytest.mark.parametrize("place", [p for p, f in FUNCTIONS.items() if documented(ast.get_docstring(f) or "")])
def test_documented_parameters_exist(place: str) -> None:
    function = FUNCTIONS[place]
    arguments = {a.arg for a in (*function.args.posonlyargs, *function.args.args, *function.args.kwonlyargs)}
    assert set(documented(ast.get_docstring(function) or "")) <= arguments


@pytest.mark.parametrize("place", list(FUNCTIONS))
def test_float_parameters_carry_a_unit(place: str) -> None:
    """Where parameters are described one by one, a float has a [unit]."""
    function = FUNCTIONS[place]
    text = section(ast.get_docstring(function) or "", "Parameters")
    for entry in re.split(r"^(?=\w[\w, ]* :)", text, flags=re.MULTILINE):
        if re.match(r"[\w, ]+ : (float|\(\w+,\) array)", entry):
            assert re.search(r"\[[^\]]+\]", entry), entry


def raised(function: Function) -> set[str]:
    """Names of the project's errors that the function itself raises (not those of functions inside it)."""
    found: set[str] = set()
    waiting: list[ast.AST] = list(function.body)
    while waiting:
        node = waiting.pop()
        if isinstance(node, Function):
            continue
        waiting += ast.iter_child_nodes(node)
        if isinstance(node, ast.Raise) and isinstance(node.exc, ast.Call) and isinstance(node.exc.func, ast.Name):
            name = node.exc.func.id
            if name.endswith("Error") or name in {"NoConvergence", "EngineMissing", "EngineCrash", "DeckRejected"}:
                found.add(name)
    return found


@pytest.mark.parametrize("place", [p for p, f in FUNCTIONS.items() if raised(f)])
def test_errors_that_a_function_raises_are_documented(place: str) -> None:
    function = FUNCTIONS[place]
    listed = section(ast.get_docstring(function) or "", "Raises")
    missing = {name for name in raised(function) if name not in listed}
    assert not missing
