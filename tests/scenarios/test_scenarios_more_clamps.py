"""The rules of the newer clamps from a board file to a verdict: missing, broken and kept."""

from __future__ import annotations

from pathlib import Path

import pytest

from boardsim.board.reader import read_board
from boardsim.scenarios.release import release_channel
from boardsim.verdict.findings import Finding

pytestmark = pytest.mark.engine

BOARD = """
supply = {{ voltage = "24 V", resistance = "20 mohm" }}
cable = {{ gauge = "18 AWG", length = "1 m" }}
bulk = {{ capacitance = "1000 uF", esr = "50 mohm" }}
logic = {{ voltage = "5 V" }}
[chain]
register = "74HC595"
count = 1
clock = "1 MHz"
[coils.gate]
resistance = "48 ohm"
inductance = "24 mH"
[channels."0"]
label = "tray gate"
coil = "gate"
switch = {{ part = "mine", gate = "220 ohm", pulldown = "10 kohm" }}
clamp = {clamp}
[parts.mine]
kind = "n-mosfet"
breakdown = "200 V"
threshold = "1.7 V"
on_resistance = [{{ value = "55 mohm", gate = "4.5 V" }}]
input_capacitance = "560 pF"
output_capacitance = "95 pF"
reverse_capacitance = "35 pF"
gate_drain_charge = "3 nC"
charge_voltage = "30 V"
junction_rating = "150 degC"
{more}
"""
ACTIVE = '{ kind = "active", zener = "SMBJ24A", diode = "1N4148" }'
SNUBBER = '{{ kind = "snubber", capacitance = "2.2 uF", resistance = "22 ohm"{} }}'


def found(folder: Path, clamp: str, more: str, *quantities: str) -> list[Finding]:
    (folder / "board.toml").write_text(BOARD.format(clamp=clamp, more=more), encoding="utf-8")
    result = release_channel(read_board(folder / "board.toml"), folder / "kept")
    assert result.proven
    return [next(f for f in result.findings if q in f.quantity) for q in quantities]


@pytest.mark.parametrize(
    ("more", "verdict"),
    [
        ("", "limit-missing"),
        ('thermal_impedance = [{ value = "20 K/W", lasting = "1 ms" }]', "fail"),  # 125 K / 20 K/W = 6.3 W
        ('thermal_impedance = [{ value = "2 K/W", lasting = "1 ms" }]', "pass"),  # 62 W
    ],
)
def test_an_active_clamps_switch_is_judged_by_what_it_stands_in_its_linear_region(
    tmp_path: Path, more: str, verdict: str
) -> None:
    (power,) = found(tmp_path, ACTIVE, more, "while it is its own clamp")
    assert (power.verdict, power.consequence, power.unit) == (verdict, "destroy", "W")
    # 28.1 V of the suppressor at 1 mA, 0.8 V of the diode, 2 V of the gate: about 31 V at 0.5 A.
    assert power.value == pytest.approx(31.0 * 0.5, rel=0.05)


def test_above_the_voltage_of_its_safe_area_points_an_active_clamps_switch_fails(tmp_path: Path) -> None:
    more = 'safe_area = [{{ voltage = "{}", current = "3 A", lasting = "10 ms" }}]'
    volts, power = "voltage of the switch while it is its own clamp", "power of the switch while it is its own clamp"
    low = found(tmp_path, ACTIVE, more.format("20 V"), volts, power)
    assert [f.verdict for f in low] == ["fail", "pass"]
    high = found(tmp_path, ACTIVE, more.format("60 V"), volts, power)
    assert [f.verdict for f in high] == ["pass", "pass"]


@pytest.mark.parametrize(
    ("ratings", "verdicts"),
    [
        ("", ["limit-missing"] * 4),
        (', rated = "20 V", pulse_current = "0.4 A", power = "20 mW", pulse = [{ power = "2 W", lasting = "10 us" }]', ["fail"] * 4),
        (', rated = "100 V", pulse_current = "5 A", power = "3 W", pulse = [{ power = "90 W", lasting = "1 ms" }]', ["pass"] * 4),
    ],
)  # fmt: skip
def test_each_rating_of_a_snubber_is_missing_broken_or_kept(tmp_path: Path, ratings: str, verdicts: list[str]) -> None:
    quantities = ("voltage of the snubber capacitor", "peak current of the snubber capacitor")
    quantities += ("average power of the snubber resistor", "pulse power of the snubber resistor")
    assert [f.verdict for f in found(tmp_path, SNUBBER.format(ratings), "", *quantities)] == verdicts
