"""The N-MOSFET's gate from what is printed, and the rule that its junction stays cool enough."""

from __future__ import annotations

import dataclasses
import math

import pytest
from pydantic import ValidationError
from scipy.integrate import quad
from scipy.optimize import brentq

from boardsim.board.reader import library_part
from boardsim.errors import QuantityError
from boardsim.parts.base import NOMINAL
from boardsim.parts.library import records
from boardsim.parts.mosfet import NMosfet
from boardsim.parts.mosfet_channel import mobility, overdrive_at
from boardsim.parts.mosfet_charge import GateFigures, gate_capacitances
from boardsim.parts.rules import HeatRule
from boardsim.parts.switches.n_mosfet import NMosfetStage

FIGURES = GateFigures(c_iss=900e-12, c_rss=65e-12, c_at=15.0, q_gd=3.75e-9, q_at=15.0, v_th=1.0, v_to=1.27)


def c_gd(p: dict[str, float], v_gd: float) -> float:
    """ngspice manual, VDMOS model: gate-drain capacitance. [F]"""
    s = (p["CGDMAX"] - p["CGDMIN"]) / (1 + math.pi / 2)
    return p["CGDMAX"] - s + s * (math.tanh(p["A"] * v_gd) if v_gd > 0 else math.atan(p["A"] * v_gd))


@pytest.mark.parametrize(("q_g", "v"), [(None, 4.5), (8e-9, 4.5), (10e-9, 4.5), (12e-9, 4.5), (20e-9, 10.0)])
def test_printed_capacitance_and_plateau_charge_are_met_whatever_the_total_charge(q_g: float | None, v: float) -> None:
    p = gate_capacitances(dataclasses.replace(FIGURES, q_g=q_g, q_gate=v))
    assert c_gd(p, -15.0) == pytest.approx(65e-12)
    plateau = quad(lambda x: c_gd(p, x), -(15.0 - 1.0), 1.27, epsabs=1e-18, points=[0.0])[0]
    assert plateau == pytest.approx(3.75e-9, rel=1e-6)
    assert p["CGDMIN"] > 0


def test_a_total_charge_within_reach_leaves_the_input_capacitance_alone() -> None:
    p = gate_capacitances(dataclasses.replace(FIGURES, q_g=11e-9, q_gate=4.5))
    assert p["CGS"] == pytest.approx(835e-12)
    total = p["CGS"] * 4.5 + quad(lambda x: c_gd(p, x), -15.0, 4.5, epsabs=1e-18, points=[0.0])[0]
    assert total == pytest.approx(11e-9, rel=0.01)


def test_the_input_capacitance_gives_way_to_a_total_charge_that_is_far_off() -> None:
    p = gate_capacitances(dataclasses.replace(FIGURES, q_g=8e-9, q_gate=4.5))
    total = p["CGS"] * 4.5 + quad(lambda x: c_gd(p, x), -15.0, 4.5, epsabs=1e-18, points=[0.0])[0]
    assert total == pytest.approx(8e-9, rel=0.0901)
    assert p["CGS"] < 835e-12


@pytest.mark.parametrize("changes", [{"q_gd": 0.9e-9}, {"q_g": 3e-9, "q_gate": 4.5}, {"c_rss": 1e-12, "c_at": 1.0}])
def test_figures_that_contradict_each_other_are_refused_by_name(changes: dict[str, float]) -> None:
    with pytest.raises(QuantityError, match=r"gate_drain_charge|gate_charge"):
        gate_capacitances(dataclasses.replace(FIGURES, **changes))


def heat_rule(part: NMosfet) -> HeatRule:
    stage = NMosfetStage.model_validate({"kind": "n-mosfet", "part": part, "gate": "100 ohm"})
    (rule,) = (
        r for r in stage.stamp("s", "pin", "d", dataclasses.replace(NOMINAL, ambient=318.15)).rules
        if isinstance(r, HeatRule)
    )  # fmt: skip
    return rule


def test_the_junction_is_judged_at_the_worst_thermal_resistance_in_the_corners_air() -> None:
    rule = heat_rule(library_part("AO3400A"))  # type: ignore[arg-type]
    assert rule.powers == (("v_ds", "i_d"), ("v_gs", "i_g"))
    assert rule.resistance.value == 125.0  # AO3400A rev. 1: 100 K/W typical, 125 K/W at most
    assert rule.limit.value == pytest.approx(423.15)
    assert rule.ambient == 318.15


def test_a_thermal_resistance_that_is_not_given_stays_a_missing_limit() -> None:
    part = library_part("AO3400A").model_copy(update={"thermal_resistance": None, "junction_rating": None})
    rule = heat_rule(part)  # type: ignore[arg-type]
    assert rule.resistance.value is None
    assert rule.limit.value is None


@pytest.mark.parametrize("g", [10.0, 20.0, 30.0])
def test_the_mobility_makes_the_transconductance_that_is_printed(g: float) -> None:
    """By the slope of I = K u^2 / (2 (1 + theta u)) at 20 A, solved and differentiated by SciPy and by differences."""
    k_p, current = 40.0, 20.0
    theta = mobility(k_p, 1.5, 0.1, g, current)

    def drain(u: float) -> float:
        return k_p * u**2 / (2 * (1 + theta * u))

    u = brentq(lambda x: drain(x) - current, 1e-3, 50.0)
    assert overdrive_at(k_p, theta, current) == pytest.approx(u)
    slope = (drain(u * 1.0001) - drain(u * 0.9999)) / (0.0002 * u)
    assert slope == pytest.approx(g, rel=1e-4) or theta == pytest.approx(0.95 / 1.5)


def test_a_transconductance_above_the_square_law_leaves_the_mobility_alone() -> None:
    assert mobility(40.0, 1.5, 0.1, 41.0, 20.0) == 0.0


FIELDS = {k: v for k, v in records()["AO3400A"].items() if k not in ("source", "sources")}


def mosfet(**changes: object) -> NMosfet:
    return NMosfet.model_validate(FIELDS | changes)


@pytest.mark.parametrize("name", ["transconductance_current", "transconductance_voltage", "source_drain_current"])
def test_a_figure_and_what_it_is_measured_at_go_together(name: str) -> None:
    with pytest.raises(ValidationError, match=name):
        mosfet(**{name: None})


def test_the_body_diode_follows_a_typical_forward_voltage_and_not_a_bound() -> None:
    usual = mosfet(source_drain=None, source_drain_current=None).parameters(30.0)["IS"]
    assert mosfet(source_drain="0.6 to 1.3 V").parameters(30.0)["IS"] == usual
    i_s = mosfet(source_drain="0.8 V", source_drain_current="2 A").parameters(30.0)["IS"]
    # Shockley's equation with 1.1 kT/q at 25 degC (25.69 mV, CODATA) and 5 mohm: 0.8 V at 2 A.
    assert 1.1 * 25.693e-3 * math.log(2 / i_s) + 0.01 == pytest.approx(0.8, abs=1e-4)


def test_an_on_resistance_is_met_at_its_own_current_not_only_at_a_small_one() -> None:
    """V_DS at 20 A from the triode equation I = K (u v - v^2 / 2), whose curvature a small current hides."""
    points = [
        {"value": "40 mohm", "gate": "4 V", "current": "20 A"},
        {"value": "25 mohm", "gate": "10 V", "current": "20 A"},
    ]
    plain = dict.fromkeys(("transconductance", "transconductance_current", "transconductance_voltage"))
    p = mosfet(on_resistance=points, **plain).parameters(30.0)
    for gate, ohms in ((4.0, 40e-3), (10.0, 25e-3)):
        u = gate - p["VTO"]
        v = u - math.sqrt(u**2 - 2 * 20.0 / p["KP"])
        assert p["RD"] + v / 20.0 == pytest.approx(ohms, rel=1e-3)
