"""A plunger's inductance over its way: from two numbers or from a table; what the deck is told is one law and its slope."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from pydantic import ValidationError
from scipy.interpolate import PchipInterpolator

from boardsim.parts.base import NOMINAL, Corner
from boardsim.parts.elements import CurrentLaw
from boardsim.parts.gap import Gap, straight, through
from boardsim.parts.plunger import PlungerCoil

MOTION = {"travel": "5 mm", "mass": "20 g", "spring_preload": "1 N"}
ROWS = [("0 mm", "12 mH"), ("1 mm", "13.5 mH"), ("3 mm", "18 mH"), ("5 mm", "30 mH")]
PLACES, HENRIES = [0.0, 1e-3, 3e-3, 5e-3], [12e-3, 13.5e-3, 18e-3, 30e-3]
IRON = {"current": "1 A", "flux_left": "60 %", "air_core": "2 mH"}


def table(*rows: tuple[str, str]) -> list[dict[str, str]]:
    return [{"position": x, "inductance": h} for x, h in rows]


def plunger(**fields: Any) -> PlungerCoil:
    given = {"kind": "plunger", "resistance": "16 ohm", "motion": MOTION, **fields}
    return PlungerCoil.model_validate(given)


def refusal(**fields: Any) -> str:
    with pytest.raises(ValidationError) as found:
        plunger(**fields)
    return str(found.value)


def value(text: str, x: float) -> float:
    """An expression of a deck with I = 1 and V(x) = x in mm, as ngspice reads it: its ternaries turned into Python's."""
    depth, mark = 0, -1
    for k, letter in enumerate(text):
        depth += (letter == "(") - (letter == ")")
        if depth == 0 and letter == "?" and mark < 0:
            mark = k
        if depth == 0 and letter == ":":
            return value(text[mark + 1 : k] if eval(text[:mark], {"X": x}) else text[k + 1 :], x)
    text = text.strip()
    while text.startswith("I*"):
        text = text[2:]
    if "?" in text:
        return value(text[1:-1], x)
    return float(eval(text, {"X": x, "I": 1.0}))


@pytest.mark.parametrize(
    "rows",
    [
        [12e-3, 13.5e-3, 18e-3, 30e-3],
        [12e-3, 12.01e-3, 12.1e-3, 300e-3],  # all of the growth in the last part
        [12e-3, 250e-3, 299e-3, 300e-3],  # nearly all in the first
    ],
)
def test_the_curve_passes_through_the_table_falls_all_the_way_and_has_no_step_in_its_slope(rows: list[float]) -> None:
    gap = through(PLACES, rows)
    assert 1 / gap.reciprocal(np.array(PLACES)) == pytest.approx(np.array(rows))
    x = np.linspace(-0.2e-3, 5.2e-3, 5401)
    g = gap.reciprocal(x)
    slope = np.diff(g) / np.diff(x)
    assert (slope < 0).all()  # the plunger is pulled everywhere, at its rest as well
    assert np.abs(np.diff(slope)).max() < 0.01 * np.abs(slope).max()
    # Inside the slopes at the rows are those of SciPy's own interpolant of Fritsch and Butland.
    theirs = PchipInterpolator(PLACES, 1 / np.array(rows)).derivative()
    for k in (1, 2):
        assert gap.pieces[k][1] == pytest.approx(float(theirs(PLACES[k])), rel=1e-9)


def test_a_straight_table_is_the_straight_line() -> None:
    g = np.linspace(1 / 12e-3, 1 / 30e-3, 4)
    gap, line = through([0.0, 1e-3, 2e-3, 3e-3], list(1 / g)), straight(12e-3, 30e-3, 3e-3)
    x = np.linspace(-1e-4, 3.1e-3, 100)
    assert gap.reciprocal(x) == pytest.approx(line.reciprocal(x), rel=1e-9)


@pytest.mark.parametrize("gap", [through(PLACES, HENRIES), straight(12e-3, 30e-3, 5e-3)], ids=["table", "straight"])
def test_the_deck_s_current_is_the_law_and_its_force_the_slope_of_the_energy(gap: Gap) -> None:
    # With 1 A through an inductor of 12 mH the flux linkage is 12 mWb, the current lambda/L, the field's energy lambda^2 / (2 L).
    if gap.straight:
        assert gap.force("I", "X") == f"{-(1 / 30e-3 - 1 / 12e-3) / 5e-3 / 2 / (1 / 12e-3) ** 2!r}*I*I"
        return
    for x in (-0.05e-3, 0.3e-3, 1e-3, 1.7e-3, 2.9e-3, 4.2e-3, 5e-3, 5.04e-3):
        more = value(gap.current("I", "X"), x * 1e3)
        assert 1 + more == pytest.approx(12e-3 * float(gap.reciprocal(np.array([x]))[0]), rel=1e-12)
        step = 1e-8
        low, high = gap.reciprocal(np.array([x - step, x + step]))
        force = -(12e-3**2) / 2 * (high - low) / (2 * step)
        assert value(gap.force("I", "X"), x * 1e3) == pytest.approx(float(force), rel=1e-4)


def test_both_ends_of_the_table_are_the_open_and_the_closed_coil() -> None:
    part = plunger(over_travel=table(*ROWS))
    assert (part.inductance.typ, part.closed_inductance.typ) == (12e-3, 30e-3)
    assert part.inductances == (12e-3, 30e-3)
    spread = plunger(
        over_travel=table(("0 mm", "12 mH +/- 10 %"), ("2 mm", "16 mH +/- 10 %"), ("5 mm", "30 mH +/- 10 %"))
    )
    assert 1 / spread.gap(Corner("c", {"inductance": "max"})).rest == pytest.approx(13.2e-3)


def test_with_two_numbers_and_no_saturation_the_deck_is_what_it_was() -> None:
    part = plunger(inductance="12 mH", closed_inductance="30 mH")
    elements, _ = part.field("c", "a", "b", NOMINAL)
    slope = (1 / 30e-3 - 1 / 12e-3) / 5e-3
    law = next(e for e in elements if isinstance(e, CurrentLaw) and e.name == "c_l")
    assert law.expression == f"{slope * 12e-3 / 1e3!r}*I(Lc_l)*(V(c_x)+5.0)"


@pytest.mark.parametrize(
    "fields", [{"inductance": "12 mH", "closed_inductance": "30 mH"}, {"over_travel": table(*ROWS)}]
)
def test_what_the_field_can_hold_at_a_current_is_the_most_over_the_plunger_s_way(fields: dict[str, Any]) -> None:
    plain, iron = plunger(**fields), plunger(**fields, saturation=IRON)
    curve = iron.curve(NOMINAL)
    assert curve is not None
    assert plain.held(1.5, NOMINAL) == pytest.approx(0.5 * 30e-3 * 1.5**2)
    most = 0.0
    for g in iron.gap(NOMINAL).reciprocal(np.linspace(0, 5e-3, 60)):
        low, high = 0.0, 1.5 / g  # the flux linkage at which lambda g + e(lambda) = 1.5 A, by halving
        for _ in range(60):
            middle = (low + high) / 2
            low, high = (middle, high) if middle * g + float(curve.excess(middle)) < 1.5 else (low, middle)
        most = max(most, low**2 * g / 2 + float(curve.excess_energy(low)))
    assert iron.held(1.5, NOMINAL) == pytest.approx(most, rel=0.01)
    assert iron.held(0.0, NOMINAL) == 0.0


def test_the_saturation_of_a_plunger_is_that_with_it_all_the_way_in() -> None:
    part = plunger(inductance="12 mH", closed_inductance="30 mH", saturation=IRON)
    curve = part.curve(NOMINAL)
    assert curve is not None
    assert curve.flux_at(1.0) == pytest.approx(0.6 * 30e-3)
    # In series with the gap that the closed coil does not have.
    gap = 1 / 12e-3 - 1 / 30e-3
    assert part.least_inductance(24.0) == pytest.approx(1 / (gap + 1.5 / curve.flux_at(1.5)))


@pytest.mark.parametrize(
    ("fields", "why"),
    [
        ({"inductance": "12 mH"}, "closed_inductance is missing"),
        ({"closed_inductance": "12 mH"}, "nothing tells its inductance"),
        ({"inductance": "12 mH", "over_travel": table(*ROWS)}, "leave out inductance"),
        ({"closed_inductance": "30 mH", "over_travel": table(*ROWS)}, "leave out closed_inductance"),
        ({"over_travel": table(ROWS[0], ROWS[3])}, "has 2 rows; give three or more"),
        ({"over_travel": []}, "has 0 rows"),
        ({"over_travel": table(*ROWS[:3])}, "from 0 m to 3.00 mm"),
        ({"over_travel": table(*ROWS[1:])}, "it must run from 0 mm"),
        ({"over_travel": table(ROWS[0], ROWS[2], ROWS[1], ROWS[3])}, "positions must grow"),
        ({"over_travel": table(ROWS[0], ROWS[1], ("3 mm", "13 mH"), ROWS[3])}, "inductance must grow from row to row"),
        ({"over_travel": table(ROWS[0], ("1 mm", "13 mH +/- 20 %"), ROWS[3])}, "inductance must grow from row to row"),
        ({"over_travel": table(ROWS[0], ("1 mm +/- 5 %", "13 mH"), ROWS[3])}, "without tolerance"),
        ({"over_travel": [{"position": "0 mm"}]}, '"inductance" is missing'),
        ({"inductance": "30 mH", "closed_inductance": "12 mH"}, "must be larger than inductance"),
    ],
)
def test_what_cannot_be_is_refused(fields: dict[str, Any], why: str) -> None:
    assert why in refusal(**fields)
