"""Parts at other temperatures than 25 degC, on ngspice, against what datasheets print of their temperature.

Each test circuit runs in a deck at the junction's temperature, so that whatever ngspice itself does with it is in it too.
"""

from __future__ import annotations

import pytest
from reference_boards import run_plain
from test_reference_models import card

from boardsim.board.reader import library_part
from boardsim.engine.run import Engine
from boardsim.parts.base import Corner
from boardsim.parts.elements import Junction
from boardsim.parts.mosfet import NMosfet
from boardsim.parts.switches.npn import Npn
from boardsim.parts.zener import Zener

pytestmark = pytest.mark.engine

# IR IRLZ44N (8/25/97): V_(BR)DSS +0.070 V/K. IR PD-97390 (IRLB8721): V_GS(th) -7.0 mV/K, V_(BR)DSS +21 mV/K. The
# growth of R_DS(on), 0.4 %/K compounded: an Infineon note, quoted in the edaboard thread 339471.
DRIFTS = {
    "IRLZ44N": {"breakdown_drift": "0.070 V/K", "on_resistance_growth": "0.4 %/K"},
    "IRLB8721": {"breakdown_drift": "21 mV/K", "threshold_drift": "-7.0 mV/K", "on_resistance_growth": "0.4 %/K"},
}
TEMPERATURES = (-40.0, 25.0, 65.0, 125.0)  # [degC]


def made(name: str) -> NMosfet:
    part = library_part(name)
    return NMosfet.model_validate({**library_fields(part), **DRIFTS[name]})


def library_fields(part: object) -> dict[str, object]:
    """A record as a file has it, so that other numbers can stand beside it."""
    assert isinstance(part, NMosfet)
    return {k: v for k, v in part if v is not None and not k.endswith(("_drift", "_growth"))}


def plain(t: float, *lines: str) -> str:
    return "\n".join(["datasheet test circuit", *lines, f".options temp={t} tnom=25 reltol=1e-6", ".end"]) + "\n"


def mosfet(part: NMosfet, t: float) -> str:
    breakdown = part.breakdown.typ + part.drift_of_breakdown.typ * (t - 25.0)
    return card("VDMOS", part.at_temperature(breakdown, t + 273.15))


@pytest.mark.parametrize("t", TEMPERATURES)
@pytest.mark.parametrize(("name", "per_kelvin"), [("IRLZ44N", 0.070), ("IRLB8721", 0.021)])
def test_breakdown_moves_as_the_datasheet_says(engine: Engine, name: str, per_kelvin: float, t: float) -> None:
    part = made(name)
    text = plain(t, mosfet(part, t), "M1 d 0 0 part", "I1 0 d 0", ".dc I1 0 250u 10u")
    measured = run_plain(engine, text, 250e-6)["v(d)"][-1]
    # 1 %: what the model itself is from the printed voltage at 25 degC.
    assert measured == pytest.approx(part.breakdown.typ + per_kelvin * (t - 25.0), rel=1e-2)


@pytest.mark.parametrize("t", TEMPERATURES)
def test_threshold_moves_as_the_datasheet_says(engine: Engine, t: float) -> None:
    """IRLB8721, 25 uA: -7.0 mV/K."""
    part = made("IRLB8721")
    amperes = part.threshold_current.typ
    text = plain(t, mosfet(part, t), "M1 d d 0 part", "I1 0 d 0", f".dc I1 0 {amperes} {amperes / 10}")
    measured = run_plain(engine, text, amperes)["v(d)"][-1]
    # 30 mV: K_P moves as well, and with it by how much the printed threshold lies below V_TO.
    assert measured == pytest.approx(part.threshold.typ - 7.0e-3 * (t - 25.0), abs=0.03)


@pytest.mark.parametrize("t", TEMPERATURES)
@pytest.mark.parametrize("name", ["IRLZ44N", "IRLB8721"])
def test_on_resistance_at_the_highest_gate_voltage_grows_by_its_law(engine: Engine, name: str, t: float) -> None:
    part = made(name)
    point = max(part.on_resistance, key=lambda p: p.gate.typ)
    text = plain(t, mosfet(part, t), "M1 d g 0 part", f"VG g 0 {point.gate.typ}", "I1 0 d 0", ".dc I1 0 1 0.1")
    measured = run_plain(engine, text, 1.0)["v(d)"][-1] / 1.0
    # 2 %, as at 25 degC.
    assert measured == pytest.approx(point.value.typ * 1.004 ** (t - 25.0), rel=2e-2)


def test_near_the_threshold_the_resistance_grows_less(engine: Engine) -> None:
    """On real parts the falling threshold works against the falling mobility (textbooks; from memory)."""
    part = made("IRLZ44N")
    ratios = []
    for gate in (4.0, 10.0):
        r = [
            run_plain(
                engine, plain(t, mosfet(part, t), "M1 d g 0 part", f"VG g 0 {gate}", "I1 0 d 0", ".dc I1 0 1 0.1"), 1.0
            )["v(d)"][-1]
            for t in (25.0, 125.0)
        ]
        ratios.append(r[1] / r[0])
    assert 1.0 < ratios[0] < ratios[1]


@pytest.mark.parametrize("t", TEMPERATURES)
def test_a_24_volt_zener_moves_inside_the_printed_band(engine: Engine, t: float) -> None:
    """0.04 to 0.12 %/K at 24 V. Reference: Yongerjia, BZX84C series, TK_VZ of 24 V."""
    part = library_part("24v-5w")
    assert isinstance(part, Zener)
    elements = part.stamp("x", "Zener", "a", "0", (), Corner("test", junction=t + 273.15)).elements
    model = next(e for e in elements if isinstance(e, Junction)).model
    amperes = part.test_current.typ
    text = plain(t, card("D", model.parameters), "D1 0 a part", "I1 0 a 0", f".dc I1 0 {amperes} {amperes / 100}")
    moved = run_plain(engine, text, amperes)["v(a)"][-1] - part.voltage.typ
    band = sorted(share * 24.0 * (t - 25.0) for share in (0.04e-2, 0.12e-2))
    assert band[0] - 0.02 <= moved <= band[1] + 0.02  # 20 mV: rounding of kT/q


@pytest.mark.parametrize("t", TEMPERATURES)
def test_a_rectifiers_forward_voltage_falls_by_two_millivolts_per_kelvin(engine: Engine, t: float) -> None:
    """-2 mV/K of a silicon junction is common practice; 1N4001: 0.93 V at 1 A, 25 degC (ON Semiconductor 1N4001/D rev. 7)."""
    part = library_part("1N4001").model_copy(update={"forward_drift": None})
    elements = part.stamp("x", "diode", "a", "0", (), Corner("test", junction=t + 273.15)).elements  # type: ignore[attr-defined]
    model = next(e for e in elements if isinstance(e, Junction)).model
    text = plain(t, card("D", model.parameters), "D1 a 0 part", "I1 0 a 0", ".dc I1 0 1 0.1")
    measured = run_plain(engine, text, 1.0)["v(a)"][-1]
    assert measured == pytest.approx(0.93 - 2e-3 * (t - 25.0), abs=2e-3)


@pytest.mark.parametrize("t", TEMPERATURES)
def test_a_transistors_base_voltage_falls_and_its_gain_grows(engine: Engine, t: float) -> None:
    """V_BE of silicon falls by 1.5 to 2.5 mV/K, gains grow by 0.3 to 1 %/K (common practice), at about a milliampere."""
    part = library_part("npn-small")
    assert isinstance(part, Npn)
    model = card("NPN", part.parameters())

    def read(at: float) -> tuple[float, float]:
        text = plain(at, model, "Q1 c b 0 part", "VC c 0 5", "VB drive 0 0", "IB 0 b 0", ".dc IB 0 5u 0.5u")
        waves = run_plain(engine, text, 5e-6)
        return float(waves["v(b)"][-1]), float(-waves["i(vc)"][-1]) / 5e-6

    (cold, gain_25), (volts, gain) = read(25.0), read(t)
    low, high = sorted(slope * (t - 25.0) for slope in (-2.5e-3, -1.5e-3))
    assert low <= volts - cold <= high
    low, high = sorted((1 + share) ** (t - 25.0) for share in (0.003, 0.010))
    assert low <= gain / gain_25 <= high
