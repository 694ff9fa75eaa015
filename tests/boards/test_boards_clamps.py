"""Boards that fail for one reason of their clamps, and the same boards repaired."""

from __future__ import annotations

from pathlib import Path

import pytest

from boardsim.board.reader import read_board
from boardsim.firing.pattern import read_pattern
from boardsim.scenarios.fire import fire_pattern
from boardsim.verdict.findings import Finding, Result

pytestmark = pytest.mark.engine

HERE = Path(__file__).parent


def fired(folder: str, board: str, keep: Path, pattern: str = "pattern") -> Result:
    read = read_board(HERE / folder / f"{board}.toml")
    result = fire_pattern(read, read_pattern(HERE / folder / f"{pattern}.toml", read), keep / "kept")
    assert result.proven
    return result


def broken(result: Result) -> dict[tuple[str, str], Finding]:
    return {(f.check, f.quantity): f for f in result.findings if f.verdict == "fail"}


CASES = {
    "f08_slow_release": {("overlap", "coil current when fired again")},
    "f09_clamp_overstressed": {
        ("overpower", "average power of the clamp Zener"),
        ("overheating", "junction of the clamp Zener"),
    },
    "f09_common_zener": {
        ("overcurrent", "peak current of the common Zener"),
        ("surge", "energy of a pulse in the common Zener"),
    },
    "f20_led": {
        ("overvoltage", "reverse voltage of the LED"),
        ("overcurrent", "peak current of the LED"),
        ("surge", "surge of the LED"),
    },
}


@pytest.mark.parametrize("folder", CASES)
def test_the_bad_board_fails_for_its_reason_and_no_other(tmp_path: Path, folder: str) -> None:
    result = fired(folder, "bad", tmp_path)
    assert set(broken(result)) == CASES[folder]
    assert {f.verdict for f in result.findings} <= {"fail", "tight", "pass"}


@pytest.mark.parametrize("folder", CASES)
def test_the_repaired_board_keeps_every_limit(tmp_path: Path, folder: str) -> None:
    result = fired(folder, "repaired", tmp_path)
    assert broken(result) == {}
    assert result.verdict in ("pass", "tight")
    assert {f.verdict for f in result.findings} <= {"tight", "pass"}


def test_an_led_across_a_coil_sees_the_rail_backwards_and_the_coils_current_forwards(tmp_path: Path) -> None:
    """25.2 V of the highest rail; 25.2 V / (95 ohm at 20 degC, 1 - 0.00393 x 5 at 15 degC) = 270.6 mA."""
    found = broken(fired("f20_led", "bad", tmp_path))
    # 1 %: the cable, the supply and the switch take 0.15 ohm of 93; 10 ms are twelve time constants.
    assert found["overvoltage", "reverse voltage of the LED"].value == pytest.approx(25.2, rel=1e-2)
    amperes = 25.2 / (95.0 * (1 - 0.00393 * 5))
    assert found["overcurrent", "peak current of the LED"].value == pytest.approx(amperes, rel=1e-2)


def test_a_common_zener_that_fails_with_a_whole_row_stands_one_output(tmp_path: Path) -> None:
    """Seven currents of 12.6 V / (57 ohm at 20 degC, 1 - 0.00393 x 5 at 15 degC) less 0.9 V of the output, against one of them."""
    one = fired("f09_common_zener", "bad", tmp_path, "one")
    assert broken(one) == {}
    single, row = (
        next(f for f in result.findings if f.quantity == "peak current of the common Zener")
        for result in (one, fired("f09_common_zener", "bad", tmp_path))
    )
    assert (row.channel, row.label, row.part) == (None, "sink-array-8 1", "common")
    amperes = (12.6 - 0.9) / (57.0 * (1 - 0.00393 * 5))
    # 3 %: the output drops 0.8 to 1.0 V; the transistors turn off in a microsecond or two.
    assert single.value == pytest.approx(amperes, rel=3e-2)
    assert row.value == pytest.approx(7 * amperes, rel=3e-2)
