"""What clear reaches in registers that empty their storage stage with it, and what an open-drain output is driven by."""

from __future__ import annotations

import pytest

from boardsim.board.reader import library_part
from boardsim.parts.clocked import Contents, Leaning, Nets, flip_flops, output_pin
from boardsim.parts.elements import FlipFlop
from boardsim.parts.register import Register

NETS = Nets("rail", "data", "clock", "latch", "lost", "clear")


def stored(name: str) -> dict[str, tuple[str, str]]:
    """What sets and resets the storage stage of outputs 0 (wakes up as one) and 1 (as zero)."""
    part = library_part(name)
    assert isinstance(part, Register)
    found = flip_flops(part, 1, NETS, Contents(0, 1))
    return {e.name: (e.set, e.reset) for e in found if isinstance(e, FlipFlop) and e.name in ("store0", "store1")}


def test_clear_leaves_the_storage_stage_alone_unless_the_register_says_so() -> None:
    """NXP 74HC595 rev. 6, table 3: shift stage only. TI SLIS010C, section 7.3.2: all registers in the device."""
    assert stored("74HC595") == {"store0": ("lost", ""), "store1": ("", "lost")}
    assert stored("TPIC6595") == {"store0": ("chain_set", "clear"), "store1": ("", "chain_reset")}


@pytest.mark.parametrize("enabled", ["", "enabled"])
def test_an_open_drain_output_neither_floats_nor_loads_the_rail(enabled: str) -> None:
    part = library_part("TPIC6B595")
    assert isinstance(part, Register)
    found = output_pin(part, "q", "q", 0, "rail", enabled, Leaning(True, 1e-5, "V(rail)"), loads_rail=True)
    ends = {end for e in found for end in (getattr(e, "plus", ""), getattr(e, "minus", ""))}
    assert "rail" not in ends  # nothing flows out of it
    laws = " ".join(getattr(e, "expression", "") for e in found)
    assert ("V(enabled)" in laws) == bool(enabled)
    assert "tanh((V(rail)-1.0)" in laws  # without a logic rail it is off
    assert "1e-05" not in laws  # no leakage into a gate
