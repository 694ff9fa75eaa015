"""The power-up picture, drawn from made-up waveforms."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from made_up_results import audit, finding

from boardsim.report.folder import draw_main
from boardsim.report.power_up_picture import power_up_figure
from boardsim.verdict.findings import Envelope, Result, Verdict
from boardsim.verdict.studies import BootRow, PowerUp


def result(count: int, stays: bool = True, *, waves: bool = True, reset: bool = False) -> Result:
    edges = np.linspace(0.0, 0.05, 401)
    middle = (edges[1:] + edges[:-1]) / 2
    shapes = {
        "v_rail": (24 * np.minimum(middle / 5e-3, 1), "V"),
        "v_logic": (5 * np.minimum(middle / 1e-3, 1), "V"),
        "v_enable": (5 * (middle < 0.04), "V"),
        "enabled": (1.0 * (middle > 0.04), "1"),
        "i_total": (count * 0.4 * (middle < 0.04) * np.minimum(middle / 0.01, 1), "A"),
    }
    drawn = {name: Envelope(name, unit, edges, y, y) for name, (y, unit) in shapes.items()} if waves else {}
    verdict: Verdict = "fail" if count else "pass"
    rows = (
        BootRow("storage all zeros", "00", 1e-6, "-", 0, 1e-12, False, "pass"),
        BootRow("storage all ones", "FF", 0.4 if count else 1e-6, "gate 3", count, 0.5, stays, verdict),
    )
    at = 0.01 if reset else None
    study = PowerUp(rows, 1, "supply high", 0.011 if reset else 0.0, 0.04, 0.0399, 6e-3, drawn, at)
    found = (finding(verdict, check="uncommanded"),)
    return Result("tray gates", "power-up", 0.05, verdict, found, (), audit(), (), None, "", study=study)


def words(of: Result) -> str:
    figure = power_up_figure(of)
    texts = [t.get_text() for t in figure.texts]
    for axes in figure.axes:
        texts += [axes.get_title(loc="left"), *(t.get_text() for t in axes.texts)]
    return "\n".join(texts)


def test_the_picture_answers_in_words_and_marks_the_first_enabled_frame() -> None:
    said = words(result(3))
    assert (
        "3 coils carry up to 400 mA (gate 3) without command and take 500 mJ together; only the first frame ends it."
        in said
    )
    assert "first enabled\nframe 40.00 ms" in said
    assert "counts from\n6.00 mA\nper coil" in said


@pytest.mark.parametrize("count", [0, 3])
def test_currents_begin_at_nothing_and_reach_what_counts(count: int) -> None:
    """An idle board's picture shows that it is below the line, not the last digits of nothing on either side of 0."""
    axes = next(a for a in power_up_figure(result(count)).axes if "All coils" in a.get_title(loc="left"))
    low, high = axes.get_ylim()
    assert high > max(6e-3, count * 0.4)
    assert -0.05 * high < low <= 0
    level = [np.asarray(line.get_ydata()) for line in axes.lines]
    assert any((y == 6e-3).all() for y in level)


def test_outputs_that_are_not_enabled_are_called_what_they_are() -> None:
    """An open-drain output without enable is off, and never floats (TI SLIS032A: outputs off while G is high)."""
    of = result(1)
    assert isinstance(of.study, PowerUp)
    for words_of, of_them in (("high impedance", of), ("off", replace(of, study=replace(of.study, disabled="off")))):
        legend = power_up_figure(of_them).axes[0].get_legend()
        assert legend is not None
        assert [t.get_text() for t in legend.get_texts()] == ["enabled", words_of]


@pytest.mark.parametrize(
    ("of", "expected"),
    [
        (
            result(1, stays=False),
            "1 coil carries up to 400 mA (gate 3) without command and takes 500 mJ; it ends by itself.",
        ),
        (result(0), "No coil carries a current that counts (6.00 mA) before the first frame is enabled."),
        (result(2, reset=True), "reset 10.0 ms"),
        (result(1, waves=False), "No waveforms: no run came to an end."),
    ],
)
def test_what_ends_by_itself_or_never_begins_is_said(of: Result, expected: str) -> None:
    assert expected in words(of)


def test_the_table_says_what_ends_each_current() -> None:
    study = result(2).study
    assert isinstance(study, PowerUp)
    assert [row[-2:] for row in study.table.rows] == [("-", "pass"), ("the first frame", "fail")]


def test_the_picture_is_written_under_its_own_name_and_refuses_other_results(tmp_path: Path) -> None:
    assert draw_main(result(1), tmp_path) == tmp_path / "power-up.png"
    assert (tmp_path / "power-up.png").stat().st_size > 10_000
    with pytest.raises(TypeError, match="from a power-up only"):
        power_up_figure(replace(result(1), study=None))
