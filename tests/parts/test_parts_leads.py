"""The leads of a coil as a part of the circuit, and a clamp at either end of them."""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from test_parts_clamps import board_text

from boardsim.board.reader import Board, read_board
from boardsim.circuit.assemble import assemble, windows
from boardsim.errors import InputError
from boardsim.firing.pattern import read_pattern
from boardsim.firing.schedule import fire
from boardsim.parts.base import NOMINAL, Corner, Surroundings
from boardsim.parts.elements import Inductor, Resistor
from boardsim.parts.leads import Leads
from boardsim.scenarios.clamps import clamp_in_words, other_clamps
from boardsim.scenarios.release import chosen_channels

LEADS = 'leads = { gauge = "24 AWG", length = "2 m" }'


def board_with(folder: Path, at: str, more: str = LEADS) -> Board:
    clamp = f'{{ kind = "diode", diode = "fast-2a", at = "{at}" }}'
    (folder / "board.toml").write_text(board_text(clamp, more), encoding="utf-8")
    return read_board(folder / "board.toml")


def netlist(folder: Path, board: Board) -> list[list[str]]:
    (folder / "pattern.toml").write_text(
        '[[pulses]]\nchannels = "0"\nstart = "1 ms"\nwidth = "1 ms"\n', encoding="utf-8"
    )
    firing = fire(board, read_pattern(folder / "pattern.toml", board))
    return [line.split() for line in assemble(board, firing, NOMINAL, windows(board, firing)[0]).netlist.splitlines()]


def element(lines: list[list[str]], name: str) -> list[str]:
    (found,) = (line for line in lines if line and line[0].lower() == name)
    return [word.lower() for word in found]


def test_leads_have_the_resistance_and_the_inductance_of_a_pair_out_and_back() -> None:
    """24 AWG: 0.5106 mm (ASTM B258), 0.2047 mm2; 2 m out and back; Grover's parallel wires, s = 2 d."""
    stamp = Leads.model_validate({"gauge": "24 AWG", "length": "2 m"}).stamp("w", "coil", "board", NOMINAL, None)
    ohms = next(e.ohms for e in stamp.elements if isinstance(e, Resistor) and e.name == "w_r")
    henries = next(e.henries for e in stamp.elements if isinstance(e, Inductor))
    # 0.1 %: printed to four digits.
    assert ohms == pytest.approx(0.017241 * 4 / 0.20476, rel=1e-3)
    # 1 %: the assumed spacing is written with three digits.
    assert henries == pytest.approx(4e-7 * 2 * (math.acosh(2.0) + 0.25), rel=1e-2)


def test_leads_are_as_warm_as_the_air() -> None:
    leads = Leads.model_validate({"area": "0.2 mm2", "length": "2 m"})
    around = Surroundings(278.15, 318.15)
    cold, hot = (leads.ohms(Corner(w, {}, w), around) for w in ("cold", "hot"))  # type: ignore[arg-type]
    assert hot / cold == pytest.approx((1 + 0.00393 * 25) / (1 - 0.00393 * 15))


def test_what_was_assumed_of_leads_is_listed() -> None:
    stamp = Leads.model_validate({"gauge": "24 AWG", "length": "2 m"}).stamp("w", "coil", "board", NOMINAL, None)
    assert {a.quantity for a in stamp.assumptions} == {"spacing", "loss resistance"}
    given = Leads.model_validate({"gauge": "24 AWG", "length": "2 m", "spacing": "1.5 mm", "loss": "2 kohm"})
    assert given.stamp("w", "coil", "board", NOMINAL, None).assumptions == ()


@pytest.mark.parametrize(("at", "node"), [("board", "c0_d"), ("coil", "c0_k")])
def test_the_clamp_sits_at_the_end_that_is_named(tmp_path: Path, at: str, node: str) -> None:
    lines = netlist(tmp_path, board_with(tmp_path, at))
    assert element(lines, "lc0_l")[2] == "c0_k"  # the coil ends where the leads begin
    assert element(lines, "rc0_lead_r")[1] == "c0_k"
    assert element(lines, "lc0_lead_l")[2] == "c0_d"
    assert element(lines, "vc0_c_a")[1] == node


def test_without_leads_the_coil_is_on_the_board(tmp_path: Path) -> None:
    lines = netlist(tmp_path, board_with(tmp_path, "board", more=""))
    assert element(lines, "lc0_l")[2] == "c0_d"
    assert not any(line and "lead" in line[0].lower() for line in lines)


@pytest.mark.parametrize(
    ("leads", "text"),
    [
        ('leads = { length = "2 m" }', "give either gauge"),
        ('leads = { gauge = "24", length = "2 m" }', "is not a wire gauge"),
        ('leads = { gauge = "24 AWG" }', '"length" is missing'),
        ('leads = { gauge = "24 AWG", length = "2 m", loss = "0 ohm" }', "'0 ohm' is zero"),
        ('leads = "2 m"', '"leads" must be a table'),
        ('leads = { gauge = "24 AWG", length = "2 m", lenght = "2 m" }', 'did you mean "length"?'),
    ],
)
def test_a_mistake_in_leads_is_named(tmp_path: Path, leads: str, text: str) -> None:
    with pytest.raises(InputError) as caught:
        board_with(tmp_path, "coil", leads)
    assert text in str(caught.value)


def test_other_clamps_are_tried_where_the_boards_own_sits(tmp_path: Path) -> None:
    board = board_with(tmp_path, "coil")
    words = [clamp_in_words(c) for c in other_clamps(board, board.channels[0], 0.2)[0]]
    assert "diode: at the coil, rectifier-1a" in words
    assert "zener: SMBJ24A" in words  # from drain to ground, which is on the board
    assert all("at the coil" in w for w in words if w.startswith(("diode", "led", "resistor")))


def test_channels_that_differ_in_their_leads_are_different_builds(tmp_path: Path) -> None:
    text = board_text('{ kind = "diode", diode = "fast-2a" }', LEADS)
    text += text[text.index("[channels") :].replace('"0-1"', '"2"').replace('"2 m"', '"5 m"')
    (tmp_path / "board.toml").write_text(text, encoding="utf-8")
    assert [c.number for c in chosen_channels(read_board(tmp_path / "board.toml"), None, False)] == [0, 2]
