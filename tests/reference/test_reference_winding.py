"""Windings against published formulas, tables and exact solutions."""

from __future__ import annotations

import math

import pytest
from scipy.special import ellipe, ellipk

from boardsim.parts.coil import Coil
from boardsim.parts.copper import MU_0
from boardsim.parts.known_coil import inductance_of_rise
from boardsim.parts.winding import Winding, multilayer_inductance, one_layer_inductance, over_enamel


def current_sheet(turns: float, radius: float, length: float) -> float:
    """Exact inductance of a cylindrical current sheet. [H]

    L. Lorenz's formula of 1879 in elliptic integrals, as in F. W. Grover, Inductance Calculations (1946); from memory.
    """
    d = 2 * radius
    m = d**2 / (d**2 + length**2)
    k = math.sqrt(m)
    bracket = (2 * m - 1) / k**3 * ellipe(m) + (1 - m) / k**3 * ellipk(m) - 1
    return float(8 * MU_0 * turns**2 * radius**3 / (3 * length**2) * bracket)


@pytest.mark.parametrize("slenderness", [0.8, 1.0, 2.0, 5.0, 10.0])
def test_one_layer_against_the_exact_current_sheet(slenderness: float) -> None:
    # Wheeler 1928 promises 1 % from a length of 0.8 radii on.
    found = one_layer_inductance(100, 0.01, slenderness * 0.01)
    assert found == pytest.approx(current_sheet(100, 0.01, slenderness * 0.01), rel=0.01)


def test_a_long_coil_is_the_field_of_a_long_solenoid() -> None:
    # mu_0 n^2 A / l; a textbook's identity, ends ignored: 1 % at a length of 100 radii, to which Wheeler adds his own.
    assert one_layer_inductance(1000, 0.01, 1.0) == pytest.approx(MU_0 * 1000**2 * math.pi * 1e-4, rel=0.02)


def test_many_layers_against_brooks_coil() -> None:
    # The square section c whose mean radius is 1.5 c: L = 1.6994e-6 a n^2 H with a the mean radius in m.
    # H. B. Brooks, Design of standards of inductance, J. Res. NBS 7 (1931) 289; from memory. The three terms of Wheeler's
    # formula are 9, 9 and 10 there, alike: he promises 1 %.
    c, turns = 0.02, 500
    assert multilayer_inductance(turns, 1.5 * c, c, c) == pytest.approx(1.6994e-6 * 1.5 * c * turns**2, rel=0.01)


@pytest.mark.parametrize(("gauge", "per_km"), [(24, 84.2), (30, 338.6)])
def test_the_wire_has_the_resistance_of_the_gauge_table(gauge: int, per_km: float) -> None:
    # HyperPhysics wire table: 25.67 and 103.2 ohm per 1000 ft at 20 degC (ASTM B258).
    wound = Winding.model_validate(
        {"turns": 200, "wire": f"{gauge} AWG", "inner": "10 mm", "outer": "40 mm", "length": "20 mm"}
    ).wound()
    assert wound.resistance / wound.wire * 1e3 == pytest.approx(per_km, rel=1e-3)


def test_the_length_of_the_wire_is_that_of_its_turns_by_hand() -> None:
    # Two layers of 10 turns of wire 1.068 mm over its enamel on a core of 20 mm: middles at 21.068 and 23.204 mm.
    fields = {"turns": 20, "wire": "1 mm", "inner": "20 mm", "outer": "40 mm", "length": "11 mm"}
    wound = Winding.model_validate(fields).wound()
    assert (wound.layers, wound.per_layer) == (2, 10)
    assert wound.wire == pytest.approx(math.pi * 10 * (21.068e-3 + 23.204e-3), rel=1e-9)
    # 8.89 g/cm^3 (IEC 60028) times 0.7854 mm^2 times 1.3908 m
    assert wound.mass == pytest.approx(9.711e-3, rel=1e-3)


@pytest.mark.parametrize(
    ("bare", "grade", "over"),
    [(0.1e-3, 1, 0.117e-3), (0.2e-3, 1, 0.226e-3), (0.2e-3, 2, 0.239e-3), (0.5e-3, 2, 0.566e-3)],
)
def test_the_largest_diameter_over_the_enamel(bare: float, grade: int, over: float) -> None:
    # IEC 60317-0-1; 0.100 mm grade 1 from a maker's technical page (enameled-wires.com), the others from memory.
    assert over_enamel(bare, grade) == pytest.approx(over)


def test_the_inductance_of_a_measured_rise() -> None:
    # Flip-dot coil, 24 V, 0 to 350 mA in 50 us, 18.2 ohm (vagrearg.org "Flipdot test-setup"): the page's V t / I is 3.43 mH;
    # the exact rise needs 2.95 mH by hand: 18.2 ohm x 50 us / -ln(1 - 0.35 x 18.2 / 24).
    rise = {"voltage": "24 V", "time": "50 us", "current": "350 mA"}
    part = Coil.model_validate({"resistance": "18.2 ohm", "measured_rise": rise})
    assert part.inductance.typ == pytest.approx(2.95e-3, rel=1e-3)
    # Far from its end the rise is V t / L.
    assert inductance_of_rise(24.0, 50e-6, 3.5e-3, 18.2) == pytest.approx(24.0 * 50e-6 / 3.5e-3, rel=2e-3)


@pytest.mark.parametrize(
    ("volts", "ohms", "watts"),
    [(12, 220, 0.65), (24, 900, 0.65), (5, 38, 0.65)],
)
def test_a_nameplate_s_power_and_voltage_against_its_resistance(volts: float, ohms: float, watts: float) -> None:
    # Finder 40 series, DC standard coil of 0.65 W: 12 V 220 ohm, 24 V 900 ohm, 5 V 38 ohm (lebomb44/doc Finder_40.pdf, pp. 1-7).
    part = Coil.model_validate({"rated_voltage": f"{volts} V", "rated_power": f"{watts} W", "inductance": "1 H"})
    assert part.resistance.typ == pytest.approx(ohms, rel=0.02)
