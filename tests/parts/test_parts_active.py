"""The active clamp as a part, and what a switch says of its linear region: points, what they allow, what they are refused for."""

from __future__ import annotations

import itertools
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from pydantic import ValidationError
from scipy.integrate import quad
from scipy.special import dawsn

from boardsim.board.reader import library_part, read_board
from boardsim.circuit.assemble import assemble, windows
from boardsim.circuit.deck import Deck, PlacedRule
from boardsim.errors import InputError
from boardsim.firing.pattern import read_pattern
from boardsim.firing.schedule import fire
from boardsim.parts.base import NOMINAL, Corner
from boardsim.parts.clamps.active import ActiveClamp
from boardsim.parts.diode import Diode
from boardsim.parts.linear import ImpedancePoint, SafeAreaPoint, linear_rules
from boardsim.parts.mosfet import NMosfet
from boardsim.parts.rules import PeakRule, PulseRule
from boardsim.quantities import TEMPERATURE, THERMAL_RESISTANCE, parse
from boardsim.verdict.bench import Bench
from boardsim.verdict.pulses import OnePulse
from boardsim.verdict.surges import judge_pulses

BOARD = """
supply = {{ voltage = "24 V +/- 5 %" }}
cable = {{ gauge = "18 AWG", length = "1 m" }}
bulk = {{ capacitance = "1000 uF", esr = "50 mohm" }}
logic = {{ voltage = "5 V" }}
[chain]
register = "74HC595"
count = 1
clock = "1 MHz"
[coils.gate]
resistance = "120 ohm"
inductance = "30 mH"
[channels."0"]
coil = "gate"
switch = {switch}
clamp = {{ kind = "active", {clamp} }}
"""
FET = '{ part = "n-logic-60v", gate = "100 ohm", pulldown = "10 kohm" }'
PARTS = 'zener = "SMBJ24A", diode = "1N4148"'


def deck(folder: Path, clamp: str = PARTS, switch: str = FET) -> Deck:
    (folder / "board.toml").write_text(BOARD.format(clamp=clamp, switch=switch), encoding="utf-8")
    (folder / "pattern.toml").write_text(
        '[[pulses]]\nchannels = "0"\nstart = "1 ms"\nwidth = "1 ms"\n', encoding="utf-8"
    )
    read = read_board(folder / "board.toml")
    firing = fire(read, read_pattern(folder / "pattern.toml", read))
    return assemble(read, firing, NOMINAL, windows(read, firing)[0])


# ------------------------------------------------------------------------------------------------- the clamp


def test_it_leads_from_drain_to_gate_and_its_current_counts_into_the_gate(tmp_path: Path) -> None:
    made = deck(tmp_path)
    lines = {line.split()[0]: line.split()[1:3] for line in made.netlist.splitlines() if line[:1] in "VD"}
    assert lines["Vc0_c_a"] == ["c0_d", "c0_c_in"]
    assert lines["Dc0_c_z"] == ["c0_c_mid", "c0_c_in"]  # anode first: it blocks what comes from the drain
    assert lines["Dc0_c_d"] == ["c0_c_mid", "c0_s_g"]
    assert (1.0, "i(vc0_c_a)") in [(k, name.lower()) for k, name in made.signals[0, "i_g"]]


@pytest.mark.parametrize(
    ("clamp", "switch", "text"),
    [
        (PARTS, '{ part = "sink-array-8" }', "the darlington-array has none; choose another clamp or switch"),
        ('zener = "SMBJ24A"', FET, '"diode" is missing'),
        ('diode = "1N4148"', FET, '"zener" is missing'),
        ('zener = "1N4148", diode = "1N4148"', FET, '"1N4148" is a diode; a zener or tvs is needed here'),
        (f'{PARTS}, at = "coil"', FET, '"at" is not known here'),
    ],
)
def test_a_mistake_in_it_is_named(tmp_path: Path, clamp: str, switch: str, text: str) -> None:
    with pytest.raises(InputError) as caught:
        deck(tmp_path, clamp, switch)
    assert text in str(caught.value)
    assert "board.toml" in str(caught.value)


def test_it_blocks_below_its_lowest_voltage_and_meets_none_of_the_coils_current() -> None:
    clamp = ActiveClamp.model_validate({"zener": library_part("SMBJ24A"), "diode": library_part("1N4148")})
    assert clamp.blocks(25.2)
    assert not clamp.blocks(26.7)
    assert clamp.takes_over(5.0) == 0.0
    assert clamp.tolerances()["clamp_voltage"].min == 26.7


def test_it_is_offered_with_the_smallest_diode_and_every_zener_and_suppressor() -> None:
    shelves: dict[type, list[Any]] = {Diode: [library_part("fast-2a"), library_part("1N4148")]}
    offered = ActiveClamp.candidates(
        lambda cls: shelves.get(cls, [library_part("24v-5w")][: cls.__name__ == "Zener"]), None, 24.0
    )  # type: ignore[arg-type]
    assert [(c.zener.title, c.diode.title) for c in offered] == [("24v-5w", "1N4148")]


# ------------------------------------------------------------------------------------------ the linear region

RATING = parse("150 degC", TEMPERATURE)
TO_AMBIENT = parse("50 K/W", THERMAL_RESISTANCE)
HOT = Corner("hot", ambient=318.15, junction=338.15)  # 45 and 65 degC
# IRLB3034, International Rectifier PD-97363, figure 13: a Foster ladder of (K/W, s).
FOSTER = ((0.02477, 25e-6), (0.08004, 77e-6), (0.19057, 1.656e-3), (0.10481, 8.408e-3))


def z_th(t: float) -> float:
    return sum(r * -math.expm1(-t / tau) for r, tau in FOSTER)


def impedance(*points: tuple[str, str]) -> tuple[ImpedancePoint, ...]:
    return tuple(ImpedancePoint.model_validate({"value": z, "lasting": t}) for z, t in points)


def area(*points: tuple[str, str, str]) -> tuple[SafeAreaPoint, ...]:
    return tuple(SafeAreaPoint.model_validate({"voltage": v, "current": i, "lasting": t}) for v, i, t in points)


def test_without_points_the_limit_is_missing_and_nothing_passes(tmp_path: Path) -> None:
    found = [p for p in deck(tmp_path).rules if p.rule.check == "linear-region"]
    ((rule, channel),) = ((p.rule, p.channel) for p in found)
    assert isinstance(rule, PulseRule)
    assert (rule.limit.value, rule.points, rule.consequence, channel) == (None, (), "destroy", 0)


def test_a_switch_that_is_not_its_own_clamp_is_not_asked_for_a_safe_area(tmp_path: Path) -> None:
    text = BOARD.format(clamp=PARTS, switch=FET).replace(
        f'kind = "active", {PARTS}', 'kind = "diode", diode = "fast-2a"'
    )
    (tmp_path / "board.toml").write_text(text, encoding="utf-8")
    (tmp_path / "p.toml").write_text('[[pulses]]\nchannels = "0"\nstart = "1 ms"\nwidth = "1 ms"\n', encoding="utf-8")
    read = read_board(tmp_path / "board.toml")
    firing = fire(read, read_pattern(tmp_path / "p.toml", read))
    made = assemble(read, firing, NOMINAL, windows(read, firing)[0])
    assert not [p for p in made.rules if p.rule.check == "linear-region"]


def test_a_thermal_impedance_allows_what_heats_a_warm_junction_to_its_rating() -> None:
    """(150 - 65) K / 0.203 K/W = 419 W for 1 ms; for ever 85 K / 50 K/W = 1.7 W."""
    (rule,) = linear_rules((), impedance(("0.368 K/W", "10 ms"), ("0.203 K/W", "1 ms")), RATING, TO_AMBIENT, HOT)
    assert isinstance(rule, PulseRule)
    assert rule.points == ((1e-3, pytest.approx(85 / 0.203)), (10e-3, pytest.approx(85 / 0.368)))
    assert rule.lasting == pytest.approx(85 / 50)


def test_a_safe_area_for_a_case_of_25_degc_shrinks_with_what_is_left_to_the_rating() -> None:
    """50 V, 2 A: 100 W at 25 degC, of which (150 - 65) / (150 - 25) are left; beyond 50 V the point says nothing."""
    pulse, within = linear_rules(area(("50 V", "2 A", "1 ms")), (), RATING, None, HOT)
    assert isinstance(pulse, PulseRule)
    assert isinstance(within, PeakRule)
    assert pulse.points == ((1e-3, pytest.approx(100 * 85 / 125)),)
    assert pulse.lasting == 0.0
    assert (within.quantity, within.limit.value, within.consequence) == ("v_ds", 50.0, "destroy")


def test_in_cold_corners_pulses_still_begin_at_the_warmest_air() -> None:
    cold = Corner("cold", ambient=318.15, junction=278.15)
    (rule,) = linear_rules((), impedance(("1 K/W", "1 ms")), RATING, None, cold)
    assert isinstance(rule, PulseRule)
    assert rule.points[0][1] == pytest.approx(150 - 45)


def test_both_sorts_of_points_are_judged_and_told_apart() -> None:
    found = linear_rules(area(("50 V", "2 A", "1 ms")), impedance(("1 K/W", "1 ms")), RATING, None, HOT)
    assert len({r.what for r in found}) == len(found) == 3  # type: ignore[union-attr]


@pytest.mark.parametrize(
    ("fields", "text"),
    [
        ({"safe_area": [("50 V", "2 A", "1 ms"), ("50 V", "3 A", "10 ms")]}, "must fall with the length"),
        ({"safe_area": [("50 V", "2 A", "1 ms"), ("50 V", "2 A", "1 ms")]}, "one point for each length"),
        ({"thermal_impedance": [("1 K/W", "1 ms"), ("0.5 K/W", "10 ms")]}, "must rise with the length"),
        ({"thermal_impedance": [("1 K/W", "1 ms")], "junction_rating": None}, "need junction_rating"),
        ({"thermal_impedance": [("1 K/W", "1 ms")], "junction_rating": "20 degC"}, "20 degC is not above 25 degC"),
        ({"safe_area": [("50 V", "2 A", "1 ms")], "junction_rating": "25 degC"}, "25 degC is not above 25 degC"),
    ],
)
def test_points_that_cannot_be_are_refused(fields: dict[str, Any], text: str) -> None:
    part = library_part("n-logic-60v").model_dump(exclude_none=True)
    keys = {"safe_area": ("voltage", "current", "lasting"), "thermal_impedance": ("value", "lasting")}
    for key, columns in keys.items():
        if key in fields:
            fields[key] = [dict(zip(columns, row, strict=True)) for row in fields[key]]
    known = {k: getattr(library_part("n-logic-60v"), k) for k in part}
    with pytest.raises(ValidationError, match=text):
        NMosfet.model_validate({**known, **fields})


@pytest.mark.parametrize("shape", ["triangle", "exponential"])
@pytest.mark.parametrize("length", [0.1e-3, 1e-3, 10e-3])
def test_a_pulse_that_is_just_allowed_keeps_the_junction_of_a_printed_ladder_below_its_rating(
    shape: str, length: float
) -> None:
    """T(t) = T_0 + integral of P(s) dZ/dt(t - s) ds with the printed ladder: SciPy's quadrature, not the rule's rectangle."""
    long = length * (1 - math.exp(-1)) if shape == "triangle" else length  # [s] to 1/e of the peak
    (rule,) = linear_rules((), impedance((f"{z_th(long)!r} K/W", f"{long!r} s")), RATING, None, HOT)
    assert isinstance(rule, PulseRule)
    assert math.exp(-1) == pytest.approx(rule.share)
    watts = rule.points[0][1]

    def power(s: float) -> float:
        return watts * (max(1 - s / length, 0.0) if shape == "triangle" else math.exp(-s / length))

    def rise(t: float) -> float:
        def heats(s: float) -> float:
            return power(t - s) * sum(r / tau * math.exp(-s / tau) for r, tau in FOSTER)

        # Breaks where the ladder is quick and where the triangle ends.
        marks = sorted({x for x in (1e-5, 1e-4, 1e-3, t - length) if 0 < x < t})
        edges = [0.0, *marks, t]
        return sum(quad(heats, a, b)[0] for a, b in itertools.pairwise(edges))

    hottest = max(rise(t) for t in np.geomspace(length / 50, 2 * length, 60))
    # Never above; and not so far below that a sound switch would be refused by a factor.
    assert 0.5 * 85 < hottest < 85


def test_the_two_shapes_heat_as_much_as_is_said_of_them_where_heat_diffuses() -> None:
    """Z ~ sqrt(t): a triangle from 1 to 0 over 1 heats by max(sqrt t - 2/3 t^1.5), an exponential by Dawson's integral."""
    t = np.linspace(0, 1, 2001)
    assert float(np.max(np.sqrt(t) - 2 / 3 * t**1.5)) == pytest.approx(0.471, abs=5e-4)
    assert float(np.max(dawsn(np.sqrt(np.linspace(0, 4, 4001))))) == pytest.approx(0.541, abs=5e-4)
    assert 0.471 / math.sqrt(1 - math.exp(-1)) == pytest.approx(0.6, abs=1e-2)


@pytest.mark.parametrize(("watts", "verdict"), [(300.0, "pass"), (400.0, "tight"), (450.0, "fail")])
def test_a_pulse_is_judged_by_the_rating_of_its_own_length(tmp_path: Path, watts: float, verdict: str) -> None:
    (rule,) = linear_rules((), impedance(("0.203 K/W", "1 ms")), RATING, None, HOT)
    assert isinstance(rule, PulseRule)
    (tmp_path / "board.toml").write_text(BOARD.format(clamp=PARTS, switch=FET), encoding="utf-8")
    bench = Bench(read_board(tmp_path / "board.toml"), "hot", ())
    pulse = OnePulse(0.0, 1e-5, watts, 0.8e-3, 0.1)
    found = judge_pulses(rule, PlacedRule(rule, 0, "mine", "gate 0"), [pulse], bench)
    assert (found.verdict, found.limit) == (verdict, pytest.approx(85 / 0.203))
