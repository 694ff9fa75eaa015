"""The chain's picture can be read: fast and slow clocks, room and none, nothing known, in grey."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest
from made_up_results import result
from picture_text import collisions, words

from boardsim.board.reader import read_board
from boardsim.report import chain_picture
from boardsim.report.chain_picture import chain_figure, draw_chain
from boardsim.report.edges import write_edges
from boardsim.scenarios.chain import check_chain
from boardsim.verdict.findings import EdgeTimes, Result
from boardsim.verdict.studies import ChainRow, ChainStudy, LinkView

BOARDS = Path(__file__).parents[1] / "boards"


def checked(folder: str, name: str) -> Result:
    return check_chain(read_board(BOARDS / folder / f"{name}.toml"))


@pytest.mark.parametrize("folder", ["chain_clock", "f12_levels"])
@pytest.mark.parametrize("name", ["bad", "repaired"])
def test_no_words_collide_and_what_is_left_is_named(folder: str, name: str) -> None:
    of = checked(folder, name)
    figure = chain_figure(of)
    assert collisions(figure) == []
    said = words(figure)
    assert f"verdict: {of.verdict}" in said
    assert isinstance(of.study, ChainStudy)
    for view in of.study.views:
        assert view.name in said
    if (folder, name) == ("chain_clock", "bad"):
        assert "too late before the edge:" in said
    if (folder, name) == ("f12_levels", "bad"):
        assert "No times to draw" in said


@pytest.mark.parametrize("period", [20e-9, 250e-9, 1e-6, 1e-3])
@pytest.mark.parametrize("settled", [-0.9, -0.1, 0.02])
def test_any_clock_can_be_drawn(period: float, settled: float) -> None:
    view = LinkView(
        "register to register (63 links)",
        "clock",
        "serial out",
        (2e-9, 7e-9),
        settled * period,
        12e-9,
        13e-9,
        3e-9,
        ((-period, True), (-0.45 * period, False), (0.45 * period, False)),
        4.75,
    )
    latch = replace(view, name="last clock to latch", edge="latch", leaves=None, after=0.0, edges=((-period, True),))
    study = ChainStudy((ChainRow("register to register"),), (view, latch))
    figure = chain_figure(replace(result(), study=study, firing=("a", "b" * 300)))
    assert collisions(figure) == []


def test_another_study_is_refused() -> None:
    with pytest.raises(TypeError):
        chain_figure(result())


def test_tones_of_the_windows_stay_apart_in_grey() -> None:
    from matplotlib.colors import to_rgb

    def luminance(tone: str) -> float:
        r, g, b = to_rgb(tone)
        return 0.2126 * r + 0.7152 * g + 0.0722 * b

    tones = sorted(luminance(t) for t in (chain_picture.PALE, chain_picture.MIDDLE, chain_picture.DARK))
    assert tones[1] - tones[0] > 0.15
    assert tones[2] - tones[1] > 0.15


def test_the_file_is_whole(tmp_path: Path) -> None:
    draw_chain(checked("chain_clock", "repaired"), tmp_path / "chain.png")
    assert (tmp_path / "chain.png").read_bytes().startswith(b"\x89PNG")
    assert [p.name for p in tmp_path.iterdir()] == ["chain.png"]


def test_edges_of_a_pulse_that_shows_nowhere_are_left_empty(tmp_path: Path) -> None:
    rows = [
        EdgeTimes(0, "lane 0", (1e-3, 2e-3), (1e-3, 2e-3), (1.1e-3, 2.1e-3)),
        EdgeTimes(1, "lane, 1", (5e-3, 5.1e-3), (5e-3, 5e-3), None),
    ]
    write_edges(rows, tmp_path / "edges.csv")
    lines = (tmp_path / "edges.csv").read_text(encoding="utf-8").splitlines()
    assert (
        lines[0] == "channel,label,asked on [s],asked off [s],timer on [s],timer off [s],output on [s],output off [s]"
    )
    assert lines[1] == "0,lane 0,0.001000000,0.002000000,0.001000000,0.002000000,0.001100000,0.002100000"
    assert lines[2] == '1,"lane, 1",0.005000000,0.005100000,0.005000000,0.005000000,,'
