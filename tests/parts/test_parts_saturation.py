"""Iron that saturates: the curve meets what was measured, and its energies are what the integrals of it are."""

from __future__ import annotations

import math
from typing import Any

import pytest
from pydantic import ValidationError
from scipy.integrate import quad
from scipy.optimize import brentq

from boardsim.parts.base import NOMINAL, Corner
from boardsim.parts.coil import Coil
from boardsim.parts.moving_magnet import MovingMagnetCoil
from boardsim.parts.saturation import KNEE, Curve, Point

CURVES = [Curve(12e-3, 1e-3, 11e-3), Curve(12e-3, 0.1e-3, 11e-3, 0.1), Curve(12e-3, 1e-3, 11e-3, 3.0)]


def coil(**saturation: Any) -> Coil:
    return Coil.model_validate({"resistance": "16 ohm", "inductance": "12 mH", "saturation": saturation})


def curve(**saturation: Any) -> Curve:
    found = coil(**saturation).curve(NOMINAL)
    assert found is not None
    return found


def refusal(**saturation: Any) -> str:
    with pytest.raises(ValidationError) as found:
        coil(**saturation)
    return str(found.value)


def test_the_curve_passes_through_the_flux_that_was_measured() -> None:
    found = curve(current="1.5 A", flux_left="70 %", air_core="1 mH")
    assert found.flux_at(1.5) == pytest.approx(0.7 * 12e-3 * 1.5)
    assert found.flux_at(-1.5) == pytest.approx(-0.7 * 12e-3 * 1.5)
    # At small currents the whole inductance, far beyond the knee that without iron.
    assert found.flux_at(1e-6) == pytest.approx(12e-9, rel=1e-4)
    assert (found.flux_at(2e4) - found.flux_at(1e4)) / 1e4 == pytest.approx(1e-3, rel=1e-4)


def test_the_curve_has_the_inductance_for_small_changes_that_was_measured() -> None:
    found = curve(current="2 A", inductance_left="60 %", air_core="1 mH")
    step = 1e-4
    slope = (found.flux_at(2 + step) - found.flux_at(2 - step)) / (2 * step)
    assert slope == pytest.approx(0.6 * 12e-3, rel=1e-6)
    assert found.incremental(2.0) == pytest.approx(slope, rel=1e-6)


@pytest.mark.parametrize("knee", [0.05, 0.4, 1.0, 2.0])
@pytest.mark.parametrize("kind", ["flux_left", "inductance_left"])
def test_two_points_are_both_met_and_tell_how_sharp_the_knee_is(knee: float, kind: str) -> None:
    gaps = (1 - knee) / 12e-3
    made = Curve(12e-3, knee / (1 / 0.8e-3 - gaps), 12e-3, knee)  # without iron 0.8 mH
    left = {}
    for i in (1.5, 4.0):
        slope = (made.flux_at(i + 1e-5) - made.flux_at(i - 1e-5)) / 2e-5
        share = made.flux_at(i) / (12e-3 * i) if kind == "flux_left" else slope / 12e-3
        left[i] = f"{share * 100:.9f} %"
    found = curve(current="1.5 A", **{kind: left[1.5]}, farther={"current": "4 A", kind: left[4.0]}, air_core="0.8 mH")
    assert found.knee == pytest.approx(knee, rel=1e-3)
    assert found.flux == pytest.approx(12e-3, rel=1e-3)
    for i in (0.5, 1.5, 3.0, 4.0, 8.0):
        assert found.flux_at(i) == pytest.approx(made.flux_at(i), rel=1e-4)
    assert (found.flux_at(2e5) - found.flux_at(1e5)) / 1e5 == pytest.approx(0.8e-3, rel=1e-4)


@pytest.mark.parametrize("made", CURVES, ids=lambda c: f"knee {c.knee}")
@pytest.mark.parametrize("flux", [1e-6, 2e-3, 9e-3, 15e-3, 40e-3])
def test_current_and_flux_are_each_other_s_inverse(made: Curve, flux: float) -> None:
    # The law as it stands in the docstring, its iron's current found as a root by bisection.
    iron = made.henries - made.air
    j = brentq(lambda j: made.air * j + iron * j * made.flux / (made.flux + iron * j) - flux, 0.0, 1e3, xtol=1e-14)
    i = (1 - made.knee) * flux / made.henries + made.knee * j
    assert float(made.current(flux)) == pytest.approx(i, rel=1e-9)
    assert float(made.current(-flux)) == pytest.approx(-i, rel=1e-9)
    assert made.flux_at(i) == pytest.approx(flux, rel=1e-9)
    assert made.flux_at(-i) == pytest.approx(-flux, rel=1e-9)


@pytest.mark.parametrize("made", CURVES, ids=lambda c: f"knee {c.knee}")
@pytest.mark.parametrize("flux", [1e-4, 2e-3, 9e-3, 15e-3, 40e-3])
def test_the_field_s_energy_is_the_integral_of_the_current_over_the_flux(made: Curve, flux: float) -> None:
    integral, _ = quad(lambda y: float(made.current(y)), 0.0, flux, epsabs=0, epsrel=1e-10, points=(min(flux, 11e-3),))
    assert float(made.energy(flux)) == pytest.approx(integral, rel=1e-7)
    assert float(made.energy(-flux)) == pytest.approx(integral, rel=1e-7)
    # Energy and co-energy make up the rectangle: W + W' = lambda i.
    i = float(made.current(flux))
    co_energy, _ = quad(made.flux_at, 0.0, i, epsabs=0, epsrel=1e-10)
    assert float(made.energy(flux)) + co_energy == pytest.approx(flux * i, rel=1e-8)


def test_a_saturated_coil_holds_less_than_half_l_i_squared() -> None:
    part = coil(current="1.5 A", flux_left="70 %", air_core="1 mH")
    found = curve(current="1.5 A", flux_left="70 %", air_core="1 mH")
    integral, _ = quad(lambda y: float(found.current(y)), 0.0, 0.7 * 12e-3 * 1.5)
    assert part.held(1.5, NOMINAL) == pytest.approx(integral, rel=1e-8)
    assert part.held(1.5, NOMINAL) < 0.7 * 0.5 * 12e-3 * 1.5**2


# Armco iron: flux density [T] and relative permeability, from its highest permeability on. "Saturation curves for soft
# magnetic materials", http://www.fieldp.com/magneticproperties.html, the rows from 0.9 T to 1.44 T.
ARMCO = [(0.9, 5420), (1.04, 5250), (1.16, 4800), (1.26, 4060), (1.36, 3100), (1.44, 2300)]


def test_annealed_pure_iron_is_met_between_and_beside_two_points_that_were_given() -> None:
    # A closed ring in which 1 A makes 1 A/m and 1 T is 1 Wb: its inductance is the highest permeability, beside it air. The bound is
    # what iron's own bend differs from this law by; the permeability falls to less than half meanwhile.
    mu_0 = 4e-7 * math.pi
    most = 5420 * mu_0
    points = [Point(b / (mu * mu_0), mu / 5420, of_flux=True) for b, mu in ARMCO]
    first, second = points[3], points[5]
    knee = brentq(lambda k: second.of(first.through(most, mu_0, k)) - second.left, 0.02, 10.0)
    made = first.through(most, mu_0, knee)
    for point, (b, _) in zip(points, ARMCO, strict=True):
        assert made.flux_at(point.current) == pytest.approx(b, rel=0.08)
    # One point alone, with the knee that is assumed then; Froehlich's curve by itself would be 28 % low.
    for point, (b, _) in zip(points, ARMCO, strict=True):
        assert second.through(most, mu_0, KNEE).flux_at(point.current) == pytest.approx(b, rel=0.12)


def test_the_deck_s_expression_is_the_curve() -> None:
    # As ngspice reads it: I is the current of an inductor of 5 mH, so that the flux linkage is 5 mH times I.
    for made in CURVES:
        text = made.expression("I", 5e-3)
        for i in (-6.0, -0.3, 0.0, 1e-3, 0.7, 2.2, 9.0):
            value = eval(text, {"I": i, "abs": abs, "sqrt": math.sqrt})  # our own text
            assert value == pytest.approx(float(made.excess(5e-3 * i)), rel=1e-9, abs=1e-12)


def test_what_is_left_without_iron_is_asked_for_or_listed_as_assumed() -> None:
    def assumed(**saturation: Any) -> list[str]:
        stamp = coil(**saturation).stamp("c", "c", "a", "b", NOMINAL, None)
        return [
            a.value
            for a in stamp.assumptions
            if a.quantity in ("inductance without iron", "share of the reluctance that saturates")
        ]

    knee = "10%"
    assert assumed(current="1.5 A", flux_left="70 %") == ["1.20 mH", knee]
    assert assumed(current="1.5 A", flux_left="70 %", air_core="1 mH") == [knee]
    farther = {"current": "4 A", "flux_left": "45 %"}
    assert assumed(current="1.5 A", flux_left="70 %", farther=farther, air_core="1 mH") == []


def test_of_a_winding_that_is_described_it_is_that_of_the_winding() -> None:
    given = {
        "inductance": "40 mH",
        "winding": {"turns": 600, "wire": "0.3 mm", "inner": "8 mm", "outer": "18 mm", "length": "20 mm"},
        "saturation": {"current": "1 A", "flux_left": "70 %"},
    }
    part = Coil.model_validate(given)
    assert part.winding is not None
    assert part.air_core.typ == part.winding.wound().inductance
    assert not part.air_core.assumed()


def test_a_fast_coil_is_followed_with_what_is_left_of_its_inductance() -> None:
    part = coil(current="1.5 A", flux_left="70 %", air_core="1 mH")
    assert part.least_inductance(24.0) == pytest.approx(0.7 * 12e-3)
    plain = Coil.model_validate({"resistance": "16 ohm", "inductance": "12 mH +/- 20 %"})
    assert plain.least_inductance(24.0) == pytest.approx(9.6e-3)


def test_without_saturation_nothing_changes() -> None:
    part = Coil.model_validate({"resistance": "16 ohm", "inductance": "12 mH"})
    stamp = part.stamp("c", "c", "a", "b", NOMINAL, None)
    assert [type(e).__name__ for e in stamp.elements] == ["Resistor", "Inductor", "Resistor"]
    assert stamp.ports[0].store == ("i_l", 12e-3)
    assert stamp.ports[0].energy is None


def test_each_end_of_the_inductance_s_band_has_the_curve_through_the_same_share() -> None:
    part = Coil.model_validate(
        {
            "resistance": "16 ohm",
            "inductance": "12 mH +/- 20 %",
            "saturation": {"current": "1.5 A", "flux_left": "70 %", "air_core": "1 mH"},
        }
    )
    for end, henries in (("min", 9.6e-3), ("max", 14.4e-3)):
        found = part.curve(Corner("c", {"inductance": end}))  # type: ignore[dict-item]
        assert found is not None
        assert found.flux_at(1.5) == pytest.approx(0.7 * henries * 1.5)


@pytest.mark.parametrize(
    ("saturation", "why"),
    [
        ({"current": "1 A"}, "needs one of flux_left"),
        ({"current": "1 A", "flux_left": "70 %", "inductance_left": "50 %"}, "needs one of flux_left"),
        ({"current": "1 A +/- 5 %", "flux_left": "70 %"}, "without tolerance"),
        ({"current": "1 A", "flux_left": "100 %"}, "nothing is missing"),
        ({"current": "1 A", "flux_left": "9 %"}, "left without iron, which must be less"),
        ({"current": "1 A", "flux_left": "70 %", "air_core": "12 mH"}, "left without iron, which must be less"),
        ({"current": "1 A", "flux_left": "70 %", "farther": {"current": "1 A", "flux_left": "50 %"}}, "larger current"),
        ({"current": "1 A", "flux_left": "70 %", "farther": {"current": "2 A", "flux_left": "80 %"}}, "can be 4"),
        # The flux cannot be less than it was at the first point: 90 % of 1 A is 45 % of 2 A.
        ({"current": "1 A", "flux_left": "90 %", "farther": {"current": "2 A", "flux_left": "45 %"}}, "can be 5"),
        ({"current": "1 A", "flux_left": "70 %", "air_core": "1 mH +/- 5 %"}, "air_core is one number"),
        ({"current": "1 A", "flux_left": "70 %", "farther": {"current": "2 A"}}, "needs one of flux_left"),
    ],
)
def test_what_cannot_be_is_refused(saturation: dict[str, Any], why: str) -> None:
    assert why in refusal(**saturation)


def test_a_kind_whose_field_leaves_it_out_does_not_take_it() -> None:
    given = {
        "kind": "moving-magnet",
        "resistance": "16 ohm",
        "inductance": "12 mH",
        "force_constant": "2.4 N/A",
        "motion": {"travel": "5 mm", "mass": "20 g", "spring_preload": "1 N"},
        "saturation": {"current": "1 A", "flux_left": "70 %"},
    }
    with pytest.raises(ValidationError, match="not part of the model of a coil of kind"):
        MovingMagnetCoil.model_validate(given)
