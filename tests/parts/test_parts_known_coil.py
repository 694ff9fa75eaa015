"""A coil from what people know of it: what fits together, and what is refused."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from pydantic import ValidationError

from boardsim.parts.base import NOMINAL, Corner, Surroundings
from boardsim.parts.coil import Coil
from boardsim.parts.elements import Resistor

BOBBIN = {"inner": "8 mm", "outer": "18 mm", "length": "20 mm"}


def coil(**fields: Any) -> Coil:
    return Coil.model_validate({"inductance": "10 mH", **fields})


def refusal(**fields: Any) -> str:
    with pytest.raises(ValidationError) as found:
        Coil.model_validate(fields)
    return str(found.value)


@pytest.mark.parametrize(
    "known",
    [
        {"resistance": "16 ohm"},
        {"rated_voltage": "24 V", "rated_current": "1.5 A"},
        {"rated_voltage": "24 V", "rated_power": "36 W"},
        {"rated_current": "1.5 A", "rated_power": "36 W"},
        {"rated_voltage": "24 V", "rated_current": "1.5 A", "rated_power": "36 W", "resistance": "16 ohm"},
    ],
)
def test_any_two_of_a_nameplate_give_the_resistance(known: dict[str, str]) -> None:
    assert coil(**known).resistance.typ == pytest.approx(16.0)


def test_the_bands_of_two_ratings_make_the_band_of_the_resistance() -> None:
    found = coil(rated_voltage="24 V", rated_power="36 W +/- 10 %").resistance
    assert (found.min, found.max) == pytest.approx((576 / 39.6, 576 / 32.4))
    assert not found.assumed()
    assert "rated voltage and power" in str(found.origin)


def test_ratings_that_are_rounded_may_differ_a_little_and_no_more() -> None:
    # 12 V, 360 ohm, 33.3 mA: Hongfa JQX-115F, p. 1; 12 / 0.0333 is 360.4 ohm.
    printed = {"rated_voltage": "12 V", "resistance": "360 ohm +/- 10 %", "rated_current": "33.3 mA"}
    assert coil(**printed).resistance.max == pytest.approx(396.0)
    text = refusal(inductance="1 H", **{**printed, "rated_current": "36 mA"})
    assert "360 ohm" in text
    assert "333 ohm" in text
    assert "8% apart" in text


@pytest.mark.parametrize("one", ["rated_voltage", "rated_current", "rated_power"])
def test_one_rating_alone_is_too_little(one: str) -> None:
    value = {"rated_voltage": "24 V", "rated_current": "1 A", "rated_power": "5 W"}[one]
    assert "nothing tells its resistance" in refusal(inductance="10 mH", **{one: value})


def test_a_coil_without_inductance_is_refused() -> None:
    assert "nothing tells its inductance" in refusal(resistance="16 ohm")


def test_an_inductance_that_is_told_twice_is_refused() -> None:
    rise = {"voltage": "24 V", "time": "100 us", "current": "0.2 A"}
    assert "each tell the inductance" in refusal(resistance="16 ohm", inductance="12 mH", measured_rise=rise)


def test_a_measured_rise_near_its_end_tells_nothing() -> None:
    rise = {"voltage": "24 V", "time": "10 ms", "current": "1.49 A"}
    assert "99% of the 1.50 A" in refusal(resistance="16 ohm", measured_rise=rise)


def test_the_tolerance_of_the_resistance_is_in_the_inductance_of_a_rise() -> None:
    rise = {"voltage": "24 V", "time": "100 us", "current": "0.7 A"}
    found = Coil.model_validate({"resistance": "16 ohm +/- 10 %", "measured_rise": rise}).inductance
    assert found.min < found.typ < found.max


def test_a_band_of_inductance_is_run_at_both_ends() -> None:
    found = coil(resistance="16 ohm", inductance="8 to 14 mH")
    ends = [
        next(
            e.henries
            for e in found.stamp("c", "x", "a", "b", Corner("one", {"inductance": end}), None).elements
            if hasattr(e, "henries")
        )
        for end in ("min", "max")
    ]
    assert ends == pytest.approx([8e-3, 14e-3])


def test_a_winding_says_how_it_comes_out() -> None:
    winding = {"turns": 1000, "wire": "0.25 mm", "core_factor": 6.0, **BOBBIN}
    part = Coil.model_validate({"winding": winding})
    (said,) = (a for a in part.stamp("c", "pusher", "a", "b", NOMINAL, None).assumptions if a.quantity == "winding")
    # 71 turns of 0.281 mm on 20 mm, so 15 layers; 4.2 mm of the 5 mm there are.
    assert said.value.startswith("15 layers of up to 71 turns")
    assert part.inductance.typ == pytest.approx(6.0 * part.winding.wound().inductance)  # type: ignore[union-attr]


def test_the_resistance_of_a_winding_is_that_of_20_degc_whatever_it_is_given_at() -> None:
    winding = {"turns": 1000, "wire": "0.25 mm", "core_factor": 6.0, **BOBBIN}
    around = Surroundings(293.15, 343.15)
    cold = [
        Coil.model_validate({"winding": winding, **more}).ohms(Corner("cold", {}, "cold"), around)
        for more in ({}, {"at": "60 degC"})
    ]
    assert cold[0] == pytest.approx(cold[1], rel=1e-9)


def test_a_winding_that_does_not_fit_says_how_many_turns_do() -> None:
    text = refusal(winding={"turns": 2000, "wire": "0.25 mm", "core_factor": 6.0, **BOBBIN})
    assert "29 layers of 0.281 mm wire are 8.15 mm deep, and there are 5 mm" in text
    assert "at most 1207 turns" in text  # 17 layers of 71 turns
    fits = {"turns": 1207, "wire": "0.25 mm", "core_factor": 6.0, **BOBBIN}
    assert Coil.model_validate({"winding": fits}).resistance.typ > 0
    assert "do not fit" in refusal(winding={**fits, "turns": 1208})


def test_nested_layers_take_less_room() -> None:
    tight = {"turns": 1400, "wire": "0.25 mm", "core_factor": 6.0, **BOBBIN}
    assert "do not fit" in refusal(winding=tight)
    assert Coil.model_validate({"winding": {**tight, "nested": True}}).resistance.typ > 0


@pytest.mark.parametrize(
    ("change", "text"),
    [
        ({"wire": "5 mm"}, "the enamel of a wire of 5 mm is not known"),
        ({"wire": "32 G"}, "does not measure a length"),
        ({"wire": "x AWG"}, "not a wire gauge"),
        ({"wire": "1 mm", "length": "0.9 mm"}, "not one turn fits"),
        ({"outer": "7 mm"}, "outer must be larger than inner"),
        ({"over_enamel": "0.2 mm"}, "smaller than the bare wire"),
        ({"turns": 0}, "turns"),
        ({"core_factor": 0.5}, "core_factor"),
        ({"grade": 3}, "grade"),
    ],
)
def test_what_cannot_be_wound_is_refused(change: dict[str, Any], text: str) -> None:
    assert text in refusal(winding={"turns": 100, "wire": "0.25 mm", "core_factor": 1.0, **BOBBIN, **change})


def test_a_measured_resistance_may_differ_from_the_winding_by_what_thin_wire_varies() -> None:
    winding = {"turns": 1000, "wire": "0.25 mm", "core_factor": 6.0, **BOBBIN}
    wound = Coil.model_validate({"winding": winding}).resistance.typ
    assert coil_with(winding, wound * 1.1).resistance.typ == pytest.approx(wound * 1.1, rel=1e-3)
    with pytest.raises(ValidationError, match="more than thin wire varies"):
        coil_with(winding, wound * 1.3)


def coil_with(winding: dict[str, Any], ohms: float) -> Coil:
    return Coil.model_validate({"winding": winding, "resistance": f"{ohms:.5g} ohm"})


def quality(f: float, henries: float, ohms: float, loss: float) -> float:
    """Reactance over resistance of the coil, with complex numbers. [Hz], [H], [ohm], [ohm] -> [1]"""
    x = 2j * math.pi * f * henries
    z = ohms + x * loss / (x + loss)
    return z.imag / z.real


@pytest.mark.parametrize(("f", "loss"), [(1e3, 500.0), (1e3, 80.0), (100.0, 3200.0), (20e3, 3200.0)])
def test_a_measured_quality_gives_the_core_loss_back(f: float, loss: float) -> None:
    q = quality(f, 10e-3, 4.0, loss)
    part = coil(resistance="4 ohm", measured_loss={"frequency": f"{f:g} Hz", "q": q})
    assert part.loss.typ == pytest.approx(loss, rel=1e-6)
    assert not part.loss.assumed()
    stamp = part.stamp("c", "c", "a", "b", NOMINAL, None)
    assert [e.ohms for e in stamp.elements if isinstance(e, Resistor) and e.name == "c_core"] == [part.loss.typ]
    assert "core loss resistance" not in [a.quantity for a in stamp.assumptions]


@pytest.mark.parametrize(("farads", "loss"), [(1e-6, 1500.0), (0.1e-6, 3200.0)])
def test_a_ringing_gives_the_core_loss_back(farads: float, loss: float) -> None:
    # Coil and capacitor as a circuit of second order: eigenvalues of current and voltage, by NumPy.
    ohms, henries = 4.0, 10e-3
    # The winding's current w: v = -R w - u, w = i + u/R_p with u across the inductance, C dv/dt = w.
    share = loss / (ohms + loss)
    matrix = np.array([[-ohms * share / henries, share / henries], [-share / farads, -1 / (ohms + loss) / farads]])
    value = max(np.linalg.eigvals(matrix), key=lambda v: v.imag)
    f, left = value.imag / (2 * math.pi), math.exp(value.real * 3 * 2 * math.pi / value.imag)
    ringing = {"frequency": f"{f:.6f} Hz", "cycles": 3, "left": f"{left * 100:.9f} %"}
    found = coil(resistance="4 ohm", measured_loss=ringing)
    assert found.measured_loss is not None
    assert found.measured_loss.quality > 3
    # Quality is that of the circuit at its own frequency; it differs from the coil's by about 1/Q^2.
    assert found.loss.typ == pytest.approx(loss, rel=1.5 / found.measured_loss.quality**2)


@pytest.mark.parametrize(
    ("loss", "why"),
    [
        ({"frequency": "1 kHz"}, "needs q, or cycles and left"),
        ({"frequency": "1 kHz", "q": 5, "cycles": 3, "left": "20 %"}, "needs q, or cycles and left"),
        ({"frequency": "1 kHz", "cycles": 3}, "needs q, or cycles and left"),
        ({"frequency": "1 kHz", "cycles": 1, "left": "100 %"}, "less than 100 %"),
        ({"frequency": "1 kHz", "cycles": 1, "left": "5 %"}, "below 2 it says little"),
        ({"frequency": "1 kHz", "q": 20}, "is more than 15.7, which 4.00 ohm of winding leave of 10.0 mH"),
        ({"frequency": "1 kHz +/- 5 %", "q": 5}, "without tolerance"),
        ({"frequency": "1 kHz", "q": 0}, '"q" must be 0.1 or more; found 0'),
    ],
)
def test_a_loss_that_cannot_be_is_refused(loss: dict[str, Any], why: str) -> None:
    assert why in refusal(resistance="4 ohm", inductance="10 mH", measured_loss=loss)


def test_core_loss_is_told_once() -> None:
    given = {"resistance": "4 ohm", "inductance": "10 mH", "core_loss": "2 kohm"}
    assert "give one of them" in refusal(**given, measured_loss={"frequency": "1 kHz", "q": 5})
