"""A power shift register whose own clamps take too much, and the same board with clamps beside it."""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from test_boards_clamps import broken, fired

pytestmark = pytest.mark.engine
FOLDER = "f09_power_register_all_off"


def clamp_energy(v_cl: float, r_on: float) -> float:
    """Of a coil of 200 ohm at 20 degC and 2.5 H, cold, after 40 ms at 25.2 V. [V], [ohm] -> [J]"""
    v_s, r, l_coil = 25.2, 200 * (1 - 0.00393 * 5), 2.5
    i = v_s / (r + r_on) * (1 - math.exp(-40e-3 * (r + r_on) / l_coil))
    return v_cl * l_coil / r * (i - (v_cl - v_s) / r * math.log1p(r * i / (v_cl - v_s)))


def test_clamps_inside_the_package_break_by_energy_and_by_average_power(tmp_path: Path) -> None:
    """Energy of one clamp: V_CL (L / R) [I - (V_CL - V_S) / R ln(1 + R I / (V_CL - V_S))], Infineon TLE8108EM rev 1.0, p. 12 eq. (1)."""
    result = fired(FOLDER, "bad", tmp_path)
    found = broken(result)
    assert set(found) == {("overvoltage", "avalanche energy"), ("overheating", "junction of the package")}
    energy = found["overvoltage", "avalanche energy"].value
    assert found["overvoltage", "avalanche energy"].corner == "supply high, coils cold, clamps high and hot"
    # At 75 degC: the clamp at its highest with 50 mV/K more; (3.7 + 5.2 I) ohm times 8 / 5.5 and 1.0048 per kelvin.
    expected = clamp_energy(57.5 + 50 * 0.05, 4.3 * 8 / 5.5 * 1.0048**50)
    # 4 %: what the core loses while the current falls, 60 V across 200 times the winding's resistance for some 7 ms, is 0.6 mJ of 21.
    assert energy == pytest.approx(expected, rel=0.04)
    # What all clamps of the package stand together no data sheet of the class says: in view, and no pass.
    package = next(f for f in result.findings if f.quantity == "clamp energy of the package")
    assert package.verdict == "limit-missing"
    assert package.corner == "supply high, coils cold, clamps low and cold"  # where it is most, at 15 degC
    assert package.value == pytest.approx(4 * clamp_energy(50.0 - 10 * 0.05, 4.3 * 1.0048**-10), rel=0.04)


def test_clamps_beside_the_package_keep_every_limit(tmp_path: Path) -> None:
    result = fired(FOLDER, "repaired", tmp_path)
    assert broken(result) == {}
    assert {f.verdict for f in result.findings} <= {"tight", "pass"}
