"""A coil that carries current with its channel off, whether or not it is ever fired."""

from __future__ import annotations

from pathlib import Path

import pytest

from boardsim.board.reader import read_board
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.scenarios.fire import fire_pattern
from boardsim.verdict.findings import Finding

pytestmark = pytest.mark.engine

BOARD = """\
name = "tray gates"
supply = {{ voltage = "24 V", resistance = "20 mohm", current_ceiling = "5 A" }}
cable = {{ gauge = "18 AWG", length = "1 m", spacing = "2 mm" }}
bulk = {{ capacitance = "2200 uF", esr = "50 mohm", esl = "20 nH", rated = "35 V" }}
logic = {{ voltage = "5 V" }}
[chain]
register = "74HC595"
count = 1
clock = "1 MHz"
[coils.gate]
resistance = "48 ohm"
inductance = "100 mH"
{release}
[channels."0-1"]
label = "gate {{n}}"
coil = "gate"
switch = {{ part = "n-logic-60v", gate = "100 ohm", pulldown = "100 kohm" }}
clamp = {{ kind = "zener", zener = "{zener}" }}
[parts.across-12v]
kind = "zener"
voltage = "12 V"
test_current = "0.25 A"
impedance = "2 ohm"
[parts.across-36v]
kind = "zener"
voltage = "36 V"
test_current = "0.25 A"
impedance = "2 ohm"
"""


def idle(folder: Path, zener: str, release: str = 'release = "50 mA"') -> dict[int | None, Finding]:
    (folder / "board.toml").write_text(BOARD.format(zener=zener, release=release), encoding="utf-8")
    board = read_board(folder / "board.toml")
    result = fire_pattern(
        board, Pattern(folder / "p.toml", "one gate", None, (Pulse(0, 0.01, 0.025),)), folder / "kept"
    )
    assert result.proven
    return {f.channel: f for f in result.findings if f.check == "uncommanded"}


def test_a_clamp_that_conducts_at_the_rail_is_found_on_every_channel(tmp_path: Path) -> None:
    """Ohm's law: (24 V - 12 V) / (48 ohm + 0.02 ohm + cable) = 0.25 A, also in the gate that is never fired."""
    found = idle(tmp_path, "across-12v")
    assert set(found) == {0, 1}
    for f in found.values():
        assert (f.verdict, f.limit) == ("fail", pytest.approx(0.05))
        assert f.value == pytest.approx(0.25, rel=0.01)  # 1 %: the Zener holds 12 V at 0.25 A, and 2 ohm beyond
        assert "with its channel off" in f.sentence


def test_a_clamp_that_blocks_leaves_its_leakage_alone(tmp_path: Path) -> None:
    found = idle(tmp_path, "across-36v")
    assert {f.verdict for f in found.values()} == {"pass"}
    assert max(f.value for f in found.values()) < 10e-6


def test_without_a_release_current_a_tenth_of_the_settled_one_counts(tmp_path: Path) -> None:
    """24 V / 48.02 ohm / 10 = 50 mA."""
    (f, _) = idle(tmp_path, "across-12v", "").values()
    assert (f.verdict, f.limit) == ("fail", pytest.approx(0.05, rel=1e-3))
    assert "for want of a release current" in f.sentence
    assert f.source.startswith("assumed")
