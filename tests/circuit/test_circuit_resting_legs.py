"""Legs that are never driven: the same circuit as with their drivers in full, and pivots for boards with many of them."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from boardsim.board.reader import read_board
from boardsim.circuit import bridge
from boardsim.circuit.assemble import assemble, windows
from boardsim.circuit.deck import Deck, Settings
from boardsim.engine.run import Engine
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.firing.schedule import fire
from boardsim.parts.base import NOMINAL
from boardsim.verdict.readings import SignalTable, our_name

ROOT = Path(__file__).parents[2]
ONE, TWENTY = ROOT / "tests/boards/f16_under_pulsed/repaired.toml", ROOT / "netlists/tray-gates/board.toml"
KEYS = ((0, "i_coil"), (4, "v_gs"), (4, "v_gs_low"), (4, "v_ds_low"), (None, "v_rail"))
SETTINGS = Settings("gear", 2e-5, 50e-6)


def deck(path: Path) -> Deck:
    board = read_board(path)
    firing = fire(board, Pattern(board.path, "p", None, (Pulse(0, 0.2e-3, 1e-3),)))
    return assemble(board, firing, NOMINAL, windows(board, firing)[0])


@pytest.mark.engine
def test_a_resting_leg_does_what_its_driver_in_full_would_make_it_do(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Coil current, the resting leg's middle and its gates; 0.1 %, ten times what the engine's tolerance of 2e-5 leaves of them."""
    found = []
    for full in (False, True):
        if full:
            monkeypatch.setattr(bridge, "_never_on", lambda driven: False)
        made = deck(ONE)
        assert ("Bc4_s_wl" in made.netlist) is full
        assert "Bc0_s_wl" in made.netlist  # the one that is fired has its driver in either case
        with Engine(tmp_path / str(full)) as engine, engine.run(made, SETTINGS) as waves:
            table = SignalTable(made, tuple(our_name(n) for n in waves.names), KEYS)
            rows = np.concatenate(list(waves.blocks()))
        times = np.linspace(0.0, 4e-3, 200)
        found.append([np.interp(times, rows[:, 0], y) for y in table.values(rows)])
    for short, full_length in zip(*found, strict=True):
        np.testing.assert_allclose(short, full_length, atol=1e-3 * max(1.0, float(np.abs(full_length).max())))


def test_only_boards_with_many_bridges_change_how_pivots_are_chosen() -> None:
    assert "pivrel" in deck(TWENTY).text(SETTINGS)
    assert "pivrel" not in deck(ONE).text(SETTINGS)
