"""A coil's record with fitted numbers, as text for a board file."""

from __future__ import annotations

import json
import re
from collections.abc import Mapping
from typing import Any

from boardsim.board.reader import Board, Channel
from boardsim.board.shelves import read_shelves
from boardsim.board.toml_file import read_toml
from boardsim.quantities import in_units
from boardsim.verdict.fit import Fit, Fitted, words

# What a resistance or an inductance may follow from: it contradicts numbers that were measured, or repeats them.
_SOURCES = ("winding", "measured_rise", "rated_voltage", "rated_current", "rated_power")
_DIGITS = 5


def record_of(board: Board, channel: Channel, fit: Fit, trace: str) -> str:
    """The coil's table with the fitted numbers in place of its own.

    Parameters
    ----------
    board : Board
    channel : Channel
    fit : Fit
    trace : str
        Name of the trace, for a comment.

    Raises
    ------
    InputError
        If the board file can no longer be read.

    Notes
    -----
    A standard error is no tolerance: it says how well one coil was measured and not how coils differ, and so stands in a comment. What the
    trace does not tell stays as it was; a number that was assumed stays out, so that it stays assumed.
    """
    found = dict(_body(board, channel))
    fitted = {n.name: n for n in fit.numbers}
    had = dict(found)
    for name in _SOURCES:
        found.pop(name, None)
    warning = "# The fitted coil does not follow the trace: do not take these numbers over."
    lines = [
        *([] if fit.follows else [warning]),
        f"[coils.{_key(channel.coil_name)}]  # fitted to {_comment(trace)}, driven by {fit.driven_by}",
    ]
    order = [*dict.fromkeys(["kind", *(n for n in fitted if n != "core_loss"), *found, "core_loss"])]
    for name in order:
        if name in fitted and (line := _line(fitted[name], had.get(name))):
            lines.append(line)
        elif name not in fitted and name in found:
            lines.append(f"{_key(name)} = {_toml(found[name])}")
        if name == "resistance":
            lines.append(
                f'at = "{channel.coil.at.typ - 273.15:.4g} degC"  # put in the temperature that the winding had'
            )
            found.pop("at", None)
    return "\n".join(lines) + "\n"


def _line(number: Fitted, had: Any) -> str | None:
    if number.told == "left" and had is not None:
        return f"{number.name} = {_toml(had)}  # left as it was: {number.why}"
    if number.told == "left" and number.name == "core_loss":
        return f"# core_loss stays assumed: {number.why}"
    return f'{number.name} = "{in_units(number.value, number.unit, _DIGITS)}"  # {words(number)}'


def _body(board: Board, channel: Channel) -> Mapping[str, Any]:
    """What the coil's own file says of it."""
    coils = read_toml(board.path, "board").data.get("coils", {})
    if channel.coil_name in coils:
        found: Mapping[str, Any] = coils[channel.coil_name]
        return found
    shelves = read_shelves(board.libraries, board.path)
    return shelves[channel.coil_name].body if channel.coil_name in shelves else {}


def _comment(text: str) -> str:
    return " ".join("".join(c for c in text if c.isprintable()).split())


def _key(name: str) -> str:
    return name if re.fullmatch(r"[A-Za-z0-9_-]+", name) else json.dumps(name, ensure_ascii=False)


def _toml(value: Any) -> str:
    """JSON writes text, numbers and truth values as TOML does."""
    if isinstance(value, Mapping):
        return "{ " + ", ".join(f"{_key(k)} = {_toml(v)}" for k, v in value.items()) + " }"
    if isinstance(value, list):
        return "[" + ", ".join(map(_toml, value)) + "]"
    return json.dumps(value, ensure_ascii=False)
