"""Outputs that channels share: who is on, which ghosts that makes, and what is sent for it."""

from __future__ import annotations

import functools
import tempfile
from pathlib import Path

import numpy as np
import pytest
from bus_writer import CAPTURE, BusWriter
from firing_boards import pattern
from hypothesis import given
from hypothesis import strategies as st
from matrix_boards import board
from second_reader import levels_in

from boardsim.board.reader import Board
from boardsim.firing.schedule import Firing, fire
from boardsim.firing.sources import read_source
from boardsim.scenarios.edges import write_edges
from boardsim.verdict.chain_loads import steady_currents, together_at_most
from boardsim.verdict.switching import judge_switching

MS = 1e-3
LATCH = 17e-6 + 44e-9  # 16 bits at 1 MHz, 1 us of latch time, the register's propagation


@functools.cache
def selector(columns: int = 2) -> Board:
    with tempfile.TemporaryDirectory() as folder:
        return board(Path(folder), channels=f"0-{2 * columns - 1}", columns=f"8-{7 + columns}")


def on(found: Firing, channel: int) -> list[tuple[float, float]]:
    return [(pytest.approx(a), pytest.approx(b)) for a, b in found.on[channel].tolist()]


def test_a_pulse_turns_its_row_and_its_column_on_and_nothing_else() -> None:
    found = fire(selector(), pattern((1, 1 * MS, 2 * MS)))
    assert [image for _, image in found.sent] == [1 << 0 | 1 << 9, 0]
    assert on(found, 1) == [(1 * MS + LATCH, 3 * MS + LATCH)]
    assert all(len(found.on[c]) == 0 for c in (0, 2, 3))
    assert found.wrong == ()


def test_an_output_stays_on_as_long_as_one_of_its_channels_is_wanted() -> None:
    found = fire(selector(), pattern((0, 1 * MS, 2 * MS), (1, 2 * MS, 2 * MS)))
    assert [image for _, image in found.sent] == [0x101, 0x301, 0x201, 0]
    assert found.wrong == ()
    assert [len(found.on[c]) for c in range(4)] == [1, 1, 0, 0]


def test_two_crossings_on_a_diagonal_turn_on_the_two_others() -> None:
    found = fire(selector(), pattern((0, 1 * MS, 4 * MS), (3, 2 * MS, 1 * MS)))
    ghosts = {w.channel: w for w in found.wrong}
    assert set(ghosts) == {1, 2}
    assert {w.by for w in found.wrong} == {(0, 3)}
    assert all(not w.commanded and w.at == pytest.approx(2 * MS + LATCH) for w in found.wrong)
    assert on(found, 1) == [(2 * MS + LATCH, 3 * MS + LATCH)]


def test_a_ghost_is_told_in_one_sentence_with_who_makes_it_and_since_when() -> None:
    wanted = pattern((0, 1 * MS, 4 * MS), (3, 2 * MS, 1 * MS))
    found = [f for f in judge_switching(selector(), fire(selector(), wanted)) if f.check == "wrong-output"]
    assert [f.channel for f in found] == [2, 1] or [f.channel for f in found] == [1, 2]
    (said,) = (f.sentence for f in found if f.channel == 2)
    assert said == (
        "needle 2: is on from 2.017 ms although nothing commands it: needles 0, 3 are on together, and row 1 of one and "
        "column 0 of the other cross at its coil; try: one row after the other, or only channels along one line at once"
    )


def test_a_scan_of_one_row_after_the_other_makes_no_ghosts() -> None:
    rows = [(c, r * 4 * MS + 1 * MS, 3 * MS) for r in range(2) for c in (2 * r, 2 * r + 1)]
    assert fire(selector(), pattern(*rows)).wrong == ()


def test_a_wrong_bit_order_is_still_told_as_such(tmp_path: Path) -> None:
    read = board(tmp_path, matrix='row_bits = "7,6"')
    (wrong, *_) = fire(read, pattern((0, 1 * MS, 1 * MS))).wrong
    assert (wrong.channel, wrong.commanded, wrong.by) == (0, True, ())
    said = [
        f.sentence for f in judge_switching(read, fire(read, pattern((0, 1 * MS, 1 * MS)))) if f.check == "wrong-output"
    ]
    assert "needle 0 (outputs 0 and 8): stays off although it is commanded on" in said[0]


PULSES = st.lists(
    st.tuples(st.integers(0, 5), st.integers(0, 20), st.integers(1, 8)),
    min_size=1,
    max_size=8,
    unique_by=lambda p: p[:2],
)


TICK = 2.0**-10  # [s], in which sums are exact: pulses that abut do so to the last bit


@given(PULSES)
def test_who_is_on_is_what_rows_and_columns_of_the_wanted_make(pulses: list[tuple[int, int, int]]) -> None:
    """Against a plain count at the middle of every tick: rows of wanted channels times columns of wanted channels."""
    found = fire(selector(3), pattern(*((c, s * TICK, w * TICK) for c, s, w in pulses)))
    for k in range(30):
        t = (k + 0.5) * TICK
        wanted = {c for c, s, w in pulses if s * TICK < t < (s + w) * TICK}
        crossing = {3 * r + c for r in {n // 3 for n in wanted} for c in {n % 3 for n in wanted}}
        assert set(found.channels_on(t)) == crossing
    seen = {w.channel for w in found.wrong}
    ghosts = set().union(
        *(set(found.channels_on((k + 0.5) * TICK)) - {c for c, s, w in pulses if s <= k < s + w} for k in range(30))
    )
    assert seen == ghosts


def test_a_line_carries_current_whenever_a_channel_along_it_is_on() -> None:
    found = fire(selector(), pattern((0, 1 * MS, 2 * MS), (1, 2 * MS, 2 * MS)))
    row, other, left, right = (found.spans(line.number) for line in selector().lines)
    assert len(row) == 2
    assert len(other) == 0
    np.testing.assert_allclose(left, found.on[0])
    np.testing.assert_allclose(right, found.on[1])


def test_a_capture_decodes_to_the_same_on_times(tmp_path: Path) -> None:
    """The bus is written by another writer, bit by bit; two columns of one row after each other."""
    bus = BusWriter(16, 500, 1000)
    for at, outputs in ((1_000_000, {0, 8}), (3_000_000, {0, 9}), (5_000_000, set())):
        bus.frame(at, outputs)
    (tmp_path / "bus.vcd").write_text(bus.text(6_000_000), encoding="utf-8")
    (tmp_path / "capture.toml").write_text(CAPTURE, encoding="utf-8")
    found = read_source(tmp_path / "capture.toml", selector()).recorded
    assert found is not None
    direct = fire(selector(), pattern((0, 1 * MS, 2 * MS), (1, 3 * MS, 2 * MS)))
    for channel in range(4):
        np.testing.assert_allclose(found.on[channel], direct.on[channel], atol=2e-6)
    assert set(found.lines) == set(direct.lines)


def test_the_edge_dump_has_one_signal_per_line(tmp_path: Path) -> None:
    write_edges(selector(), pattern((1, 1 * MS, 2 * MS)), tmp_path / "edges.vcd")
    _, levels = levels_in((tmp_path / "edges.vcd").read_text(encoding="utf-8"))
    changes = {name.rpartition(".")[2]: len(rows) for name, rows in levels.items()}
    assert changes == {"row_0": 3, "row_1": 1, "column_0": 1, "column_1": 3}


def test_an_output_that_two_channels_share_gives_its_current_once() -> None:
    found = fire(selector(), pattern((0, 1 * MS, 2 * MS), (1, 1 * MS, 2 * MS)))
    each = steady_currents(selector(), 5.0)
    assert set(each) == {0, 1, 8, 9}
    assert together_at_most(selector(), found, each) == pytest.approx(each[0] + each[8] + each[9])
