"""Board files for tests: the fruit sorter, and what a changed copy of it is refused for."""

from __future__ import annotations

from pathlib import Path

from boardsim.board.reader import read_board
from boardsim.errors import InputError, Problem

NETLISTS = Path(__file__).parents[2] / "netlists"
FRUIT_SORTER = NETLISTS / "fruit-sorter" / "board.toml"
TEXT = FRUIT_SORTER.read_text(encoding="utf-8")
CLAMP = 'clamp = { kind = "diode-zener", to = "rail", diode = "fast-2a", zener = "20v-5w" }'
MORE_CHANNELS = """[channels."{}"]
{}
coil = "ejector"
switch = {{ part = "n-logic-60v", gate = "100 ohm" }}
clamp = {{ kind = "none" }}
"""
ZENER = 'kind = "zener"\nvoltage = "12 V"\ntest_current = "50 mA"\nimpedance = "3 ohm"\n'
MOSFET = """kind = "n-mosfet"
breakdown = "60 V"
threshold = "1.7 V"
on_resistance = [{}]
input_capacitance = "560 pF"
output_capacitance = "95 pF"
reverse_capacitance = "35 pF"
gate_drain_charge = "3 nC"
charge_voltage = "30 V"
"""


def changed(old: str, new: str) -> str:
    """The fruit sorter's file with one passage replaced."""
    assert old in TEXT, old
    return TEXT.replace(old, new, 1)


def with_part(body: str) -> str:
    """The fruit sorter's file with a part of its own, on line 29 and after."""
    return changed("[limits]", f"[parts.mine]\n{body}\n[limits]")


def with_table(text: str) -> str:
    """The fruit sorter's file with a table before [limits], on line 29 and after."""
    return changed("[limits]", f"{text}\n[limits]")


def problems(folder: Path, content: str | bytes) -> tuple[Problem, ...]:
    """What is wrong with a board file; nothing where it is valid."""
    path = folder / "board.toml"
    path.write_bytes(content if isinstance(content, bytes) else content.encode("utf-8"))
    try:
        read_board(path)
    except InputError as err:
        found = err
    else:
        return ()
    assert found.problems, f"without a place: {found}"
    assert str(found) == "\n".join(str(p) for p in found.problems)
    return found.problems


def said(folder: Path, content: str | bytes) -> list[str]:
    """The same as lines "LINE: TEXT"."""
    return [f"{p.line or '-'}: {p.text}" for p in problems(folder, content)]
