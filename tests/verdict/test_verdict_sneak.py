"""What others drive through a coil that is off: growth against its own decay."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from firing_boards import pattern
from matrix_boards import board

from boardsim.circuit.assemble import assemble, windows
from boardsim.errors import InputError
from boardsim.firing.schedule import fire
from boardsim.parts.base import NOMINAL
from boardsim.parts.rules import BreakdownRule, DriveRule, HeatRule, PeakRule, SneakRule
from boardsim.scenarios.release import release_channel
from boardsim.scenarios.volley import check_wanted
from boardsim.verdict.sneak import Growth

T = np.linspace(0.0, 10e-3, 1001)
ON = np.array([[1e-3, 3e-3]])


def growth(y: np.ndarray, blocks: int = 1) -> Growth:
    found = Growth(ON)
    for part in np.array_split(np.arange(len(T)), blocks):
        found.feed(T[part], y[part])
    return found


def own(t: np.ndarray) -> np.ndarray:
    """A pulse of 1 A that dies out with 1 ms."""
    return np.where((t >= 1e-3) & (t < 3e-3), 1.0, np.where(t >= 3e-3, np.exp(-(t - 3e-3) / 1e-3), 0.0))


@pytest.mark.parametrize("blocks", [1, 7, 100])
def test_what_a_coil_has_left_of_its_own_pulse_counts_for_nothing(blocks: int) -> None:
    assert growth(own(T), blocks).most == 0.0


@pytest.mark.parametrize("blocks", [1, 7, 100])
def test_what_is_driven_through_it_on_top_counts_from_where_it_had_come_down_to(blocks: int) -> None:
    y = np.where(T >= 6e-3, -0.3, own(T))  # backwards as well
    found = growth(y, blocks)
    assert found.most == pytest.approx(0.3 - np.exp(-2.99), rel=1e-3)
    assert found.at == pytest.approx(6e-3)


def test_what_flows_before_the_first_pulse_counts_too() -> None:
    assert growth(np.where(T < 0.5e-3, 200 * T, own(T))).most == pytest.approx(200 * 0.49e-3)


def test_many_small_steps_add_up() -> None:
    """A current that is pumped up over many pulses of others, each of which adds little."""
    assert growth(np.where(T >= 9e-3, 0.2, np.where(T > 5e-3, 50 * (T - 5e-3), own(T)))).most == pytest.approx(
        0.2 - 7e-3, rel=0.05
    )


def test_every_line_is_judged_once_and_every_coil_for_itself(tmp_path: Path) -> None:
    read = board(tmp_path)
    firing = fire(read, pattern((0, 1e-3, 2e-3)))
    deck = assemble(read, firing, NOMINAL, windows(read, firing)[0])
    where = {
        kind: sorted({p.label for p in deck.rules if isinstance(p.rule, kind)})
        for kind in (BreakdownRule, DriveRule, SneakRule)
    }
    assert where[BreakdownRule] == ["column 0", "column 1", "row 0", "row 1"]
    assert where[DriveRule] == ["row 0", "row 1"]
    assert where[SneakRule] == [f"needle {n}" for n in range(4)]
    assert set(deck.lines) == {line.number for line in read.lines}
    (package,) = (p for p in deck.rules if isinstance(p.rule, HeatRule) and p.label == "source-array-8 1")
    assert isinstance(package.rule, HeatRule)
    assert package.rule.channels == tuple(line.number for line in read.lines[:2])
    reverse = [
        p for p in deck.rules if isinstance(p.rule, PeakRule) and p.rule.what == "reverse voltage of the series diode"
    ]
    assert [p.channel for p in reverse] == [0, 1, 2, 3]


def test_a_volley_of_a_matrix_is_refused(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="two coils of different rows and columns turn on others as well"):
        check_wanted(board(tmp_path), None)


def test_other_clamps_are_not_tried_on_one_coil_of_a_matrix(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="needle 2 lies in a matrix"):
        release_channel(board(tmp_path), tmp_path, channel=2, every_clamp=True)


@pytest.mark.engine
def test_one_crossing_is_released_through_both_clamps(tmp_path: Path) -> None:
    result = release_channel(board(tmp_path), tmp_path / "kept", channel=2)
    assert result.proven
    (row,) = result.study.rows
    assert row.clamp == "row built-in and column diode: fast-2a"
    # The column is driven to the rail and a diode of about a volt above it, whatever the current.
    assert 12.0 < row.peak < 13.5
    # L/R ln((I + V/R) / (I_0 + V/R)): with 12 V and two diodes of a volt each against 164 mA.
    assert row.let_go == pytest.approx(20e-3 / 60 * np.log((0.164 + 14.0 / 60) / (0.02 + 14.0 / 60)), rel=0.05)
