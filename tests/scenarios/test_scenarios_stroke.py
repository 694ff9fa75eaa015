"""`stroke` on the real engine and through the command: the rules of the trade, every pulse from rest, and what cannot be asked."""

from __future__ import annotations

import datetime
import json
import sys
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.integrate import solve_ivp

from boardsim import cli
from boardsim.board.reader import read_board
from boardsim.errors import InputError
from boardsim.scenarios.crew import Crew
from boardsim.scenarios.plan import read_scenarios
from boardsim.scenarios.stroke import check_width, chosen_channels, stroke
from boardsim.scenarios.stroke_sweep import Sweep, least_width
from boardsim.scenarios.verify import run_scenario
from boardsim.verdict.audit import SHARE
from boardsim.verdict.expectations import compare
from boardsim.verdict.findings import Result
from boardsim.verdict.strokes_study import StrokeRow, StrokeStudy

HERE = Path(__file__).resolve().parents[2]
PLANTER = HERE / "netlists" / "bean-planter" / "board.toml"
EJECTOR = HERE / "tests" / "boards" / "f17_late_actuation" / "repaired.toml"


def nominal(folder: Path, **changes: str) -> Path:
    """A fruit sorter's ejector with a plain diode and no tolerances: one corner."""
    text = EJECTOR.read_text(encoding="utf-8").replace("24 V +/- 5 %", "24 V")
    text = text.replace(
        'kind = "diode-zener", diode = "fast-2a", zener = "20v-5w"', 'kind = "diode", diode = "fast-2a"'
    )
    for old, new in changes.items():
        start = text.index(f"\n{old} = ") + 1
        text = text[:start] + f"{old} = {new}" + text[text.index("\n", start) :]
    (folder / "board.toml").write_text(text, encoding="utf-8")
    return folder / "board.toml"


def only_row(result: Result) -> StrokeRow:
    assert isinstance(result.study, StrokeStudy)
    (row,) = result.study.rows
    return row


def holds_the_rules(row: StrokeRow) -> None:
    """Common practice: while force still acts along the motion, a longer pulse never lowers the impact energy.

    A hundredth of the hardest blow is what two runs may differ by, and so may two pulses of different runs.
    """
    for corner, points in row.points.items():
        blows = [p.energy or 0.0 for p in points]
        assert all(b >= a - 2 * SHARE * max(blows) for a, b in pairwise(blows)), corner
        grown = [p.energy or 0.0 for p in points if p.flies is not None and p.width < p.flies]
        assert len(grown) >= 2, corner  # some pulses end before the blow: it is their width that sets it
        assert grown[-1] > 1.5 * grown[0]
        # Once the blow comes before the end of the pulse, the pulse cannot know of it.
        after = [p.energy for p in points if p.flies is not None and p.width > p.flies]
        assert after == [pytest.approx(after[-1], rel=0.03)] * len(after)


def blow(width: float) -> float:
    """Energy of the ejector's blow by SciPy, as its board file describes coil and plunger: no deck, no ngspice. [J]

    The plunger's own equations (Fitzgerald, Kingsley, Umans, Electric Machinery, chapter 3): i = flux g(x), F = -flux^2 / 2 dg/dx. The
    source has 24 V behind supply, cable (1 m of 18 AWG, out and back: 42 mohm) and switch (50 mohm); after the pulse the diode's 0.8 V
    take the current down.
    """
    ohms, loss, opened, closed, travel, mass = 24.0 + 0.05 + 0.042 + 0.05, 4800.0, 20e-3, 50e-3, 4e-3, 5e-3

    def law(t: float, y: NDArray[np.float64], volts: float) -> list[float]:
        flux, x, v = y
        i = max(flux, 0.0) * (1 / opened + (1 / closed - 1 / opened) * x / travel)
        across = (volts - ohms * i) * loss / (ohms + loss) if volts > 0 or flux > 0 else 0.0
        force = max(flux, 0.0) ** 2 / 2 * (1 / opened - 1 / closed) / travel - 0.6 - 50 * x - 0.1 * v
        force -= 0.02 * np.tanh(v / 2e-3)
        return [across, v, (force if x > 0 or force > 0 else 0.0) / mass]

    def arrives(t: float, y: NDArray[np.float64], volts: float) -> float:
        return float(y[1]) - travel

    arrives.terminal = True  # type: ignore[attr-defined]
    y = np.zeros(3)
    for end, volts in ((width, 24.0), (30e-3, -0.8)):
        found = solve_ivp(law, (0.0, end), y, args=(volts,), events=arrives, rtol=1e-8, atol=1e-12, max_step=20e-6)
        y = found.y[:, -1]
        if len(found.t_events[0]):
            return float(0.5 * mass * y[2] ** 2)
    return 0.0


@pytest.mark.engine
def test_the_blow_grows_with_the_pulse_until_it_comes_before_its_end(tmp_path: Path) -> None:
    board = read_board(nominal(tmp_path))
    result = stroke(board, tmp_path / "kept")
    assert result.proven
    row = only_row(result)
    holds_the_rules(row)
    assert row.stretch is not None
    assert row.settled is not None
    first, last = row.stretch
    (points,) = row.points.values()
    assert last == row.widths[-1]
    # The last width that does not work lies a few hundredths below the first that does: the sweep was refined there.
    before = max(p.width for p in points if p.width < first)
    assert first - before < 0.03 * row.settled
    # Two hundredths of the hardest: the two runs may differ by one, and the resistances outside the coil are known to 0.1 ohm of 24.
    hardest = max(p.energy or 0.0 for p in points)
    for p in points[::4]:
        assert (p.energy or 0.0) == pytest.approx(blow(p.width), abs=0.02 * hardest), p.width
    # v^2 m / 2, with the 5 g of the board file.
    assert all(p.energy == pytest.approx(0.5 * 5e-3 * p.speed**2) for p in points if p.speed is not None)
    assert result.verdict in ("pass", "tight")
    assert any(f"the shortest pulse that works in every corner is {first * 1e3:.2f}" in note for note in result.notes)


@pytest.mark.engine
def test_a_pulse_that_does_not_begin_at_rest_makes_the_run_again_with_longer_pauses(tmp_path: Path) -> None:
    board = read_board(nominal(tmp_path))
    with Crew() as crew:
        sweep = Sweep(board, board.channels[0], tmp_path / "kept", crew)
        sweep.pause = 3e-3  # it takes 8 ms to come back
        sweep.try_widths([9e-3, 10e-3])
    assert sweep.pause == pytest.approx(12e-3)
    (points,) = sweep.points.values()
    assert len(points) == 2
    assert "unproven" not in {p.verdict for p in points.values()}
    assert len(sweep.results) == 1  # what was read in the runs that were too tight counts for nothing


@pytest.mark.engine
@pytest.mark.slow
def test_the_bean_planters_rods_in_all_corners(tmp_path: Path) -> None:
    result = stroke(read_board(PLANTER), tmp_path / "kept")
    assert (result.proven, result.verdict) == (True, "pass")
    row = only_row(result)
    assert len(row.points) == 6
    holds_the_rules(row)
    # Supply low and coils hot pull least: there it travels longest, and there the shortest pulse is decided.
    longest = {corner: points[-1].flies or 0.0 for corner, points in row.points.items()}
    assert max(longest, key=lambda c: longest[c]) == "supply low, coils hot"
    short = stroke(read_board(PLANTER), tmp_path / "kept", width=9e-3)
    assert short.verdict == "fail"
    assert "a pulse of 9.00 ms does not work" in short.findings[0].sentence


@pytest.mark.engine
@pytest.mark.slow
def test_the_command_draws_a_picture_and_writes_a_table(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    board, out = nominal(tmp_path, impact='"8 to 10 mJ"'), tmp_path / "out"
    monkeypatch.setattr(sys, "argv", ["boardsim", "stroke", str(board), "-o", str(out)])
    with pytest.raises(SystemExit) as caught:
        cli.main()
    assert caught.value.code == 1
    assert "no pulse up to" in " ".join(capsys.readouterr().out.split())
    found = json.loads((out / "findings.json").read_text(encoding="utf-8"))
    assert found["verdict"] == "fail"
    assert {f["check"] for f in found["findings"] if f["verdict"] == "fail"} == {"stroke-width"}
    assert len(found["table"]["rows"]) > 10
    assert (out / "stroke.png").stat().st_size > 10_000
    assert (out / "junit.xml").exists()


@pytest.mark.engine
@pytest.mark.slow
def test_a_scenario_asks_for_a_width(tmp_path: Path) -> None:
    nominal(tmp_path)
    text = '[scenarios.reach]\nquestion = "stroke"\nchannel = 0\nwidth = "5 ms"\nbreaks = ["stroke", "stroke-width"]\n'
    (tmp_path / "scenarios.toml").write_text(text, encoding="utf-8")
    ((scenario,), problems) = read_scenarios(tmp_path / "scenarios.toml")
    assert problems == ()
    assert (scenario.question, scenario.channel, scenario.width) == ("stroke", 0, 5e-3)
    with Crew() as crew:
        result = run_scenario(scenario, tmp_path / "kept", crew, lambda share: None, datetime.date(2027, 1, 1))
    assert compare(result, scenario.expectation) == (0, ())


def test_a_board_whose_coils_move_nothing_is_told_which_kinds_do() -> None:
    board = read_board(HERE / "netlists" / "fruit-sorter" / "board.toml")
    with pytest.raises(InputError, match='a coil of kind "moving-magnet" or "plunger" with its motion') as caught:
        chosen_channels(board, None)
    assert caught.value.exit_status == 2


def test_a_channel_that_is_not_there_is_refused() -> None:
    with pytest.raises(InputError, match=r"channel 12 is not on the board board\.toml; it has 0-11"):
        chosen_channels(read_board(PLANTER), 12)


def test_one_channel_of_every_build_is_asked() -> None:
    board = read_board(PLANTER)
    assert [c.number for c in chosen_channels(board, None)] == [0]
    assert [c.number for c in chosen_channels(board, 7)] == [7]


def test_a_pulse_that_the_chain_cannot_make_is_refused() -> None:
    board = read_board(PLANTER)
    # 16 bits at 2 MHz and 0.5 us of latch, and the pause of 20 us between frames.
    assert least_width(board) == pytest.approx(16 / 2e6 + 0.5e-6 + 20e-6)
    check_width(board, least_width(board))
    with pytest.raises(
        InputError, match=r"--width: a pulse of 20\.0 us is shorter than a register frame and the pause after it"
    ):
        check_width(board, 20e-6)
