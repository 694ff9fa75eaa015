"""Switch-on as a circuit: the RC at clear, and registers as flip-flops or as computed bits."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from boardsim.board.reader import Board, read_board
from boardsim.circuit.assemble import Detail
from boardsim.circuit.boot import Boot, boot_deck
from boardsim.circuit.deck import Settings
from boardsim.engine.run import Engine
from boardsim.parts.base import NOMINAL
from boardsim.scenarios.power_up import boots
from boardsim.verdict.power_up import BootReading, take_boot

pytestmark = pytest.mark.engine

BAD = Path(__file__).parents[1] / "boards" / "f03_all_fire_at_power_up" / "bad.toml"
FINE = Settings("gear", 2e-5, 50e-6)


def looked_at(of: Board, boot: Boot, detail: Detail, keep: Path) -> BootReading:
    deck = boot_deck(of, boot, NOMINAL, detail)
    with Engine(keep) as engine, engine.run(deck, FINE) as waves:
        return take_boot(waves, deck, of, boot)


def quick(text: str, **changes: str) -> str:
    for key, value in changes.items():
        old = next(line for line in text.splitlines() if line.startswith(f"{key} = "))
        text = text.replace(old, f'{key} = "{value}"')
    return text


def test_clear_ends_when_its_capacitor_is_charged(tmp_path: Path) -> None:
    """47 kohm and 100 nF after a step: 50 % at 3.26 ms, 0.7 V_CC at 5.66 ms (forum.arduino.cc 1269552 prints "3 ms";
    R C ln 2 and R C ln(1 / 0.3)).
    """
    text = quick(BAD.read_text(encoding="utf-8"), logic_rise="1 us")
    (tmp_path / "board.toml").write_text(text, encoding="utf-8")
    of = read_board(tmp_path / "board.toml")
    found = looked_at(of, next(boots(of, 1)), "clocked", tmp_path / "kept")
    # 3 %: the input's leakage of 1 uA takes 47 mV of the 5 V that the capacitor charges to, which makes it 2 % later.
    assert found.cleared_until == pytest.approx(5.66e-3, rel=3e-2)
    wave = found.waves["v_clear"]
    middle = (wave.edges[:-1] + wave.edges[1:]) / 2
    assert float(np.interp(2.5, wave.high, middle)) == pytest.approx(3.26e-3, rel=3e-2)


@pytest.mark.parametrize("which", [0, 2, -1])
def test_flip_flops_and_computed_bits_give_the_same_boot(tmp_path: Path, which: int) -> None:
    """Two ways to the same storage stage: what coils carry, and when, may not depend on it."""
    of = read_board(BAD)
    boot = list(boots(of, 1))[which]
    one = looked_at(of, boot, "clocked", tmp_path / "kept")
    other = looked_at(of, boot, "edges", tmp_path / "kept")
    for number, mine in one.channels.items():
        theirs = other.channels[number]
        assert mine.peak == pytest.approx(theirs.peak, rel=2e-3, abs=1e-5)
        assert mine.energy == pytest.approx(theirs.energy, rel=2e-3, abs=1e-9)
    for wave in ("i_total", "enabled"):
        assert one.waves[wave].high == pytest.approx(other.waves[wave].high, rel=5e-3, abs=2e-3)


def test_on_a_stiff_supply_equal_channels_carry_the_same_alone_as_together(tmp_path: Path) -> None:
    """By symmetry, and since nothing couples the two but the rail's 0.2 ohm."""
    of = read_board(BAD)
    boot = next(boots(of, 1))
    together = looked_at(of, boot, "clocked", tmp_path / "kept").channels
    alone = looked_at(replace(of, channels=of.channels[:1]), boot, "clocked", tmp_path / "kept").channels
    assert together[0].peak == pytest.approx(together[1].peak, rel=1e-6)
    assert together[0].peak == pytest.approx(alone[0].peak, rel=5e-3)
