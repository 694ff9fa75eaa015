"""A resistor and a diode across a coil as a part: what a file may say, what is stamped, and what is judged."""

from __future__ import annotations

import math

import pytest
from pydantic import ValidationError

from boardsim.parts.base import NOMINAL, Corner
from boardsim.parts.clamps.resistor_diode import ResistorDiodeClamp
from boardsim.parts.elements import Junction, Resistor
from boardsim.parts.kinds import kinds
from boardsim.parts.rules import MeanRule, PulseRule

DIODE = {"forward": [{"voltage": "0.9 V", "current": "1 A"}]}


def clamp(**fields: object) -> ResistorDiodeClamp:
    return ResistorDiodeClamp.model_validate({"diode": DIODE, "resistance": "47 ohm", **fields})


def test_the_diode_points_from_the_switch_to_the_rail_and_the_audit_sums_both() -> None:
    stamp = clamp().stamp("c", "drain", "rail", NOMINAL)
    (diode,) = (e for e in stamp.elements if isinstance(e, Junction))
    (resistor,) = (e for e in stamp.elements if isinstance(e, Resistor))
    assert (diode.anode, diode.cathode, resistor.a, resistor.b) == ("c_in", "c_k", "c_k", "rail")
    assert [p.part for p in stamp.ports] == ["clamp diode", "clamp resistor"]
    assert {q for port in stamp.ports for pair in port.pairs for q in pair} <= {p.quantity for p in stamp.probes}


def test_a_rating_of_the_resistor_that_was_not_given_stays_in_view() -> None:
    rules = [
        r for r in clamp().stamp("c", "drain", "rail", NOMINAL).rules if getattr(r, "part", "") == "clamp resistor"
    ]
    assert [(type(r), r.limit.value, r.consequence) for r in rules] == [  # type: ignore[union-attr]
        (MeanRule, None, "destroy"),
        (PulseRule, None, "destroy"),
    ]


def test_its_pulse_ratings_are_taken_in_order_and_below_them_what_it_stands_for_ever() -> None:
    pulse = [{"power": "20 W", "lasting": "10 ms"}, {"power": "90 W", "lasting": "1 ms"}]
    rules = clamp(power="2 W", pulse=pulse).stamp("c", "drain", "rail", NOMINAL).rules
    (surge,) = (r for r in rules if isinstance(r, PulseRule))
    assert surge.points == ((1e-3, 90.0), (10e-3, 20.0))
    assert (surge.lasting, surge.limit.value) == (2.0, 90.0)
    # Half of a decaying exponential's energy, as a rectangle of its peak: the time to 1/e of the power.
    assert surge.share == pytest.approx(math.exp(-1))


@pytest.mark.parametrize(
    "pulse",
    [
        [{"power": "20 W", "lasting": "1 ms"}, {"power": "90 W", "lasting": "10 ms"}],
        [{"power": "20 W", "lasting": "1 ms"}, {"power": "20 W", "lasting": "1 ms"}],
    ],
)
def test_pulse_ratings_that_rise_with_length_are_refused(pulse: list[dict[str, str]]) -> None:
    with pytest.raises(ValidationError, match="must fall in power"):
        clamp(pulse=pulse)


def test_its_resistance_is_varied_with_the_clamp_voltage_and_sets_how_finely_it_is_followed() -> None:
    wide = clamp(resistance="47 ohm +/- 10 %")
    for end, ohms in (("min", 42.3), ("max", 51.7)):
        stamp = wide.stamp("c", "drain", "rail", Corner("one", {"clamp_voltage": end}))  # type: ignore[dict-item]
        (found,) = (e for e in stamp.elements if isinstance(e, Resistor))
        assert found.ohms == pytest.approx(ohms)
    assert wide.in_the_way() == pytest.approx(51.7)


def test_without_a_diode_on_the_shelf_it_is_not_offered() -> None:
    coil = kinds("coil")["coil"].model_validate({"resistance": "16 ohm", "inductance": "12 mH"})
    assert ResistorDiodeClamp.candidates(lambda _: [], coil, 24.0) == ()  # type: ignore[arg-type]
