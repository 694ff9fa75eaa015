"""Copper against published values; the source stands beside each."""

import math

import pytest

from boardsim.parts.copper import ALPHA_20C, RESISTIVITY_20C, T_20C, awg_diameter, loop_resistance, resistance_at

FOOT = 0.3048  # [m], by definition


def test_annealed_copper_has_the_standards_resistivity_and_temperature_coefficient() -> None:
    # IEC 60028: 0.017241 ohm mm2/m at 20 degC (58 MS/m), alpha 0.00393 / K at 20 degC.
    assert pytest.approx(0.017241e-6, rel=1e-9) == RESISTIVITY_20C
    assert pytest.approx(1 / 58e6, rel=1e-4) == RESISTIVITY_20C
    assert ALPHA_20C == 0.00393
    assert resistance_at(1.0, T_20C, T_20C + 1) - 1 == pytest.approx(0.00393, rel=1e-9)


@pytest.mark.parametrize(
    ("gauge", "ohm_per_1000_ft"),
    [
        # HyperPhysics wire table, http://hyperphysics.phy-astr.gsu.edu/hbase/Tables/wirega.html, copper at 20 degC.
        (12, 1.588),
        (14, 2.525),
        (16, 4.016),
        (18, 6.385),
        (20, 10.15),
        (22, 16.14),
        (24, 25.67),
        (26, 40.81),
        (28, 64.9),
        (30, 103.2),
    ],
)
def test_wire_gauges_have_the_tables_resistance(gauge: int, ohm_per_1000_ft: float) -> None:
    area = math.pi * awg_diameter(gauge) ** 2 / 4
    one_way = loop_resistance(area, 1000 * FOOT, T_20C) / 2
    # 0.1 %: the table prints three to four digits.
    assert one_way == pytest.approx(ohm_per_1000_ft, rel=1e-3)


@pytest.mark.parametrize(
    ("gauge", "millimetres"),
    # ASTM B258: 36 AWG is 0.0050 in and 4/0 AWG is 0.4600 in, by definition; the steps between are geometric.
    [(36, 0.127), (-3, 11.684)],
)
def test_the_two_gauges_that_define_the_series_have_their_diameters(gauge: int, millimetres: float) -> None:
    assert awg_diameter(gauge) * 1e3 == pytest.approx(millimetres, rel=1e-12)


def test_a_winding_gets_warm_as_its_resistance_tells() -> None:
    # Leach relay application notes, section 17.1, http://www.leachintl2.com/english/english2/vol6/properties/00058.html:
    # T2 = (R2/R1)(T1 + 234.5) - 234.5; 320 ohm at 25 degC and 443.3 ohm warm give 125 degC.
    assert resistance_at(320.0, 298.15, 398.15) == pytest.approx(443.3, abs=0.05)  # printed to a tenth of an ohm
    # The rule's 234.5 degC follows from alpha = 0.00393 / K at 20 degC to 0.05 K.
    assert pytest.approx(234.5, abs=0.06) == 1 / ALPHA_20C - 20


# Kuphaldt, Lessons in Electric Circuits vol. I, chapter "Physics of conductors", works an example (14 V, 250 ohm load,
# 15 ohm per wire, 20 to 35 degC) with alpha 0.004041 / K. It is not used: the standard's copper is 0.00393 / K, and
# the two differ by more than the digits that the example prints.
