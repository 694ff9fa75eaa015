"""Output edges as a value change dump: a library that shares nothing with the writer reads the same edges."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from firing_boards import board, pattern
from hypothesis import given
from hypothesis import strategies as st
from second_reader import levels_in

from boardsim.errors import InputError
from boardsim.firing.pattern import Pattern
from boardsim.firing.schedule import fire
from boardsim.report.edge_dump import safe_names
from boardsim.scenarios.edges import check_place, write_edges


def test_another_library_reads_every_edge_of_every_channel(tmp_path: Path) -> None:
    the_board = board(tmp_path, columns='label = "needle-{n} (left)"')
    the_pattern = pattern((0, 0.0, 1e-3), (3, 0.01, 0.002), (3, 0.02, 1e-3), (15, 0.0200005, 1e-3))
    path = tmp_path / "edges.vcd"
    write_edges(the_board, the_pattern, path)
    step, signals = levels_in(path.read_text())
    assert step == 1e-12
    firing = fire(the_board, the_pattern)
    assert list(signals) == [f"needle_selector.needle_{n}_left" for n in range(16)]
    for channel in range(16):
        theirs = signals[f"needle_selector.needle_{channel}_left"]
        ours = firing.levels[channel]
        assert [int(value) for _, value in theirs] == [int(level) for _, level in ours]
        # Times in picoseconds: no edge moves by more than half of one.
        assert [t * step for t, _ in theirs] == pytest.approx([t for t, _ in ours], abs=0.51e-12)


def test_edges_are_not_written_over_what_was_read(tmp_path: Path) -> None:
    the_board = board(tmp_path)
    the_pattern = pattern((3, 0.01, 0.002))
    with pytest.raises(InputError, match="is one of the files to read; name another"):
        check_place(the_board.path, (the_board.path,), the_pattern)
    with pytest.raises(InputError, match="is a folder; name a file in it"):
        check_place(tmp_path, (the_board.path,), the_pattern)
    check_place(tmp_path / "new.vcd", (the_board.path, Path("nowhere.toml")), the_pattern)


def test_edges_of_a_capture_are_not_written_over_the_capture(tmp_path: Path) -> None:
    from bus_writer import CAPTURE, BusWriter

    from boardsim.firing.sources import read_source

    bus = BusWriter(16, 500, 1000)
    bus.frame(1_000_000, {3})
    bus.frame(2_000_000, ())
    (tmp_path / "bus.vcd").write_text(bus.text(3_000_000))
    (tmp_path / "capture.toml").write_text(CAPTURE)
    the_pattern: Pattern = read_source(tmp_path / "capture.toml", board(tmp_path))
    with pytest.raises(InputError, match="is one of the files to read"):
        check_place(tmp_path / "bus.vcd", (), the_pattern)


@given(labels=st.lists(st.text(max_size=12), max_size=12))
def test_names_are_plain_words_and_all_different(labels: list[str]) -> None:
    found = safe_names(labels)
    assert len(set(found)) == len(labels)
    assert all(re.fullmatch(r"[A-Za-z][A-Za-z0-9_]*", name) for name in found)
