"""The warmest junction against the temperature that a run took semiconductors' figures at."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from boardsim.board.reader import Board, read_board
from boardsim.circuit.deck import PlacedRule
from boardsim.firing.pattern import Pattern, Pulse
from boardsim.firing.schedule import fire
from boardsim.parts.base import Corner
from boardsim.parts.heat import junction_heat
from boardsim.quantities import TEMPERATURE, THERMAL_RESISTANCE, parse
from boardsim.verdict.bench import Bench
from boardsim.verdict.findings import Finding
from boardsim.verdict.heat import judge_heat, judge_warmth
from boardsim.verdict.readings import Readings

FRUIT_SORTER = Path(__file__).parents[2] / "netlists" / "fruit-sorter" / "board.toml"
# Without its own junction_rise: 45 degC of warmest air and the 20 K that are assumed.
TEXT = "".join(
    line for line in FRUIT_SORTER.read_text(encoding="utf-8").splitlines(keepends=True) if "junction_rise" not in line
)


def bench(board: Board) -> Bench:
    return Bench(board, "supply low, coils hot", ())


def given(folder: Path, rise: str = "") -> Board:
    path = folder / "board.toml"
    said = f'junction_rise = "{rise}"\n' if rise else ""
    path.write_text(said + TEXT, encoding="utf-8")
    return read_board(path)


def heated(celsius: float) -> Finding:
    return Finding(
        "overheating", "junction of the clamp Zener", "24v-5w", 3, "lane 3", celsius + 273.15, 448.15, "K", 0.5, None,
        "destroy", "pass", "lane 3: ...",
    )  # fmt: skip


def test_a_junction_below_what_the_run_took_is_no_matter(tmp_path: Path) -> None:
    (found,) = judge_warmth([heated(50.0), heated(64.0)], bench(given(tmp_path)))
    assert (found.verdict, found.value, found.limit) == ("pass", pytest.approx(337.15), pytest.approx(338.15))


def test_above_a_rise_that_was_assumed_the_rest_is_a_missing_number(tmp_path: Path) -> None:
    (found,) = judge_warmth([heated(96.0)], bench(given(tmp_path)))
    assert (found.verdict, found.limit) == ("limit-missing", None)
    assert "taken up to 65 degC (junction_rise of 20.0 K, assumed)" in found.sentence
    assert 'set junction_rise = "51 K"' in found.sentence


def test_above_a_rise_that_was_given_the_run_proves_nothing(tmp_path: Path) -> None:
    (found,) = judge_warmth([heated(96.0)], bench(given(tmp_path, "30 K")))
    assert (found.verdict, found.margin) == ("unproven", pytest.approx(-21 / 30))
    (found,) = judge_warmth([heated(96.0)], bench(given(tmp_path, "51 K")))
    assert found.verdict == "pass"


def test_without_an_ambient_or_thermal_data_nothing_is_claimed() -> None:
    board = read_board(FRUIT_SORTER)
    assert not list(judge_warmth([heated(96.0)], bench(replace(board, around=None))))
    assert not list(judge_warmth([replace(heated(96.0), unit="W", limit=None)], bench(board)))


@pytest.mark.parametrize(("growth", "verdict"), [(0.0, "pass"), (0.01, "fail")])
def test_a_junction_that_runs_away_fails_by_name(growth: float, verdict: str) -> None:
    """45 degC, 62 K/W, 0.9 W: 101 degC if the power stays; at 1 %/K there is no temperature at which it settles."""
    board = read_board(FRUIT_SORTER)
    rule = junction_heat(
        "n-logic-60v", "switch", (("v_ds", "i_d"),), parse("62 K/W", THERMAL_RESISTANCE), parse("175 degC", TEMPERATURE),
        318.15, "less heat", growth=growth,
    )  # fmt: skip
    means: dict[tuple[int | None, tuple[str, ...]], float] = {(3, ("v_ds", "i_d")): 0.9}
    readings = Readings({}, {}, means, (), (0.0, None), {}, {}, {}, {}, (), (), 0, {})
    firing = fire(board, Pattern(Path("one.toml"), "one", None, (Pulse(3, 0.0, 0.01),)))
    found = judge_heat(
        rule, PlacedRule(rule, 3, "n-logic-60v", "lane 3"), readings, firing, Corner("hot"), bench(board)
    )
    assert found.verdict == verdict
    assert ("ever hotter" in found.sentence) == (growth > 0)


def test_a_package_of_which_one_output_is_used_is_told_so() -> None:
    board = read_board(FRUIT_SORTER)
    rule = junction_heat(
        "array", "package", (("v_ds", "i_d"),), parse("62 K/W", THERMAL_RESISTANCE), parse("175 degC", TEMPERATURE), 318.15, "less heat"
    )  # fmt: skip
    firing = fire(board, Pattern(Path("one.toml"), "one", None, (Pulse(3, 0.0, 0.01),)))
    for channels, said in (((3,), "900 mW of its one channel on"), ((3, 4), "1.80 W of its 2 channels on")):
        whole = replace(rule, channels=channels)
        means: dict[tuple[int | None, tuple[str, ...]], float] = {(c, ("v_ds", "i_d")): 0.9 for c in channels}
        readings = Readings({}, {}, means, (), (0.0, None), {}, {}, {}, {}, (), (), 0, {})
        placed = PlacedRule(whole, None, "array", "array 1")
        assert said in judge_heat(whole, placed, readings, firing, Corner("hot"), bench(board)).sentence


@pytest.mark.parametrize(("square", "verdict"), [(0.1, "pass"), (0.9, "fail"), (9.0, "fail")])
def test_only_what_the_on_resistance_takes_grows_with_it(square: float, verdict: str) -> None:
    """0.9 W in all at 62 K/W: with 0.1 A^2 in 1 ohm it settles at 45 + 62 (0.8 + 0.1 x 1.01^(T - 25)) degC, with 0.9 A^2 nowhere."""
    board = read_board(FRUIT_SORTER)
    rule = junction_heat(
        "n-logic-60v", "switch", (("v_ds", "i_d"),), parse("62 K/W", THERMAL_RESISTANCE), parse("175 degC", TEMPERATURE),
        318.15, "less heat", growth=0.01, growing=("i_d", "i_d"), factor=1.0,
    )  # fmt: skip
    means: dict[tuple[int | None, tuple[str, ...]], float] = {(3, ("v_ds", "i_d")): 0.9, (3, ("i_d", "i_d")): square}
    readings = Readings({}, {}, means, (), (0.0, None), {}, {}, {}, {}, (), (), 0, {})
    firing = fire(board, Pattern(Path("one.toml"), "one", None, (Pulse(3, 0.0, 0.01),)))
    placed = PlacedRule(rule, 3, "n-logic-60v", "lane 3")
    found = judge_heat(rule, placed, readings, firing, Corner("cool"), bench(board))
    assert found.verdict == verdict
    if verdict == "pass":
        t = found.value - 273.15
        assert t == pytest.approx(45 + 62 * (0.8 + 0.1 * 1.01 ** (t - 25)), abs=1e-3)
