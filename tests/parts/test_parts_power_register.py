"""Power shift registers: limits as printed, boards that fit them, and refusals that name what does not."""

from __future__ import annotations

import math
from pathlib import Path

import pytest
from pydantic import ValidationError

from boardsim.board.reader import Board, library_part, read_board
from boardsim.errors import InputError
from boardsim.parts.base import NOMINAL, Corner
from boardsim.parts.power_register import PowerRegister
from boardsim.parts.power_switching import gate_shape
from boardsim.parts.rules import BreakdownRule, MeanRule, PulseRule
from boardsim.parts.switches.power_output import PowerOutputStage
from boardsim.verdict.chain import judge_chain
from boardsim.verdict.surges import rated_for

BOARD = Path(__file__).parents[2] / "netlists" / "bean-planter" / "board.toml"


def register(name: str = "TPIC6B595") -> PowerRegister:
    part = library_part(name)
    assert isinstance(part, PowerRegister)
    return part


def changed(tmp_path: Path, *swaps: tuple[str, str]) -> Board:
    text = BOARD.read_text(encoding="utf-8")
    for old, new in swaps:
        assert old in text
        text = text.replace(old, new)
    path = tmp_path / "board.toml"
    path.write_text(text, encoding="utf-8")
    return read_board(path)


def test_limits_are_those_of_the_data_sheet() -> None:
    """TI SLIS032A pp. 3-5: 0.85 and 0.15 V_CC; 20, 20, 40 ns; 150 mA and 500 mA; factor 1.62 of the on-resistance at 125 degC."""
    part = register()
    for volts in (4.5, 5.0, 5.5):
        assert part.input_levels(volts) == pytest.approx((0.15 * volts, 0.85 * volts))
    times = part.timing(5.0)
    assert times is not None
    assert (times.setup, times.hold, times.clock_width) == pytest.approx((20e-9, 20e-9, 40e-9))
    assert part.output_current is not None
    assert part.pulse_current is not None
    assert (part.output_current.typ, part.pulse_current.typ) == pytest.approx((0.15, 0.5))
    assert (1 + part.growth.typ) ** 100 == pytest.approx(1.62, rel=1e-3)


def test_a_clamp_energy_that_is_rated_from_beyond_the_highest_junction_is_refused() -> None:
    """Nothing is left between the two to derate over: the whole energy would be allowed at any temperature."""
    part = register()
    known = {k: getattr(part, k) for k in part.model_fields_set}
    for start in ("150 degC", "160 degC"):
        with pytest.raises(ValidationError, match=r"150 degC is not above avalanche_from"):
            PowerRegister.model_validate({**known, "junction_rating": "150 degC", "avalanche_from": start})
    PowerRegister.model_validate({**known, "junction_rating": "150 degC", "avalanche_from": "100 degC"})


@pytest.mark.parametrize(
    ("name", "amperes", "lasting", "allowed"),
    [
        ("TPIC6B595", 3.9, 50e-6, True),  # eight times 500 mA, pulses up to 100 us
        ("TPIC6B595", 4.1, 50e-6, False),
        ("TPIC6B595", 1.1, 1.0, True),  # eight times 150 mA, however long
        ("TPIC6B595", 1.3, 10e-3, False),
        ("TPIC6595", 2.1, 50e-6, False),  # nothing is printed for pulses of all outputs: the continuous current holds
    ],
)
def test_all_outputs_together_are_held_against_what_lasts_and_what_does_not(
    name: str, amperes: float, lasting: float, allowed: bool
) -> None:
    """TI SLIS032A p. 3: continuous 150 mA and pulsed 500 mA of each output with all outputs on."""
    stage = PowerOutputStage.model_validate({"part": register(name)}, context={})
    pulse, mean = (t.rule for t in stage.stamp("x", "p", "l", NOMINAL).totals[:2])
    assert isinstance(pulse, PulseRule)
    assert isinstance(mean, MeanRule)
    assert mean.limit.value == pulse.lasting
    assert (rated_for(pulse.points, lasting, pulse.lasting)[0] >= amperes) is allowed


def test_without_a_current_of_all_outputs_their_limit_is_missing_and_not_made_up() -> None:
    part = register().model_copy(update={"total_current": None, "total_pulse_current": None})
    stage = PowerOutputStage.model_validate({"part": part}, context={})
    pulse, mean = (t.rule for t in stage.stamp("x", "p", "l", NOMINAL).totals[:2])
    assert isinstance(pulse, PulseRule)
    assert isinstance(mean, MeanRule)
    assert (pulse.limit.value, pulse.points, mean.limit.value) == (None, (), None)


def test_resistance_is_a_straight_line_through_the_printed_points() -> None:
    r_0, r_1 = register().resistances
    assert r_0 + 0.1 * r_1 == pytest.approx(4.2)  # TI SLIS032A p. 4
    assert r_0 + 0.35 * r_1 == pytest.approx(5.5)
    amperes = register().conducts(2.0)
    assert (r_0 + r_1 * amperes) * amperes == pytest.approx(2.0)


def test_the_gate_gives_the_printed_delays_and_edges() -> None:
    """Conductances where the drain is at 10, 50 and 90 % of 24 V through 235 ohm, put back into the exponentials."""
    part = register()
    shape = gate_shape(part.switching, part.conducts)
    at = {}
    for k in (0.1, 0.5, 0.9):
        u = (1 - k) * 24 / 235 / part.conducts(k * 24)
        g = 1 / (1 + (1 / u - 1) / shape.shape)
        at[k] = (-shape.on * math.log(1 - g), -shape.off * math.log(g))
    assert at[0.1][0] - at[0.9][0] == pytest.approx(200e-9, rel=1e-6)
    assert at[0.9][1] - at[0.1][1] == pytest.approx(200e-9, rel=1e-6)
    assert shape.dead + at[0.5][0] == pytest.approx(90e-9, rel=1e-3)
    assert shape.dead + at[0.5][1] == pytest.approx(150e-9, rel=1e-3)


def test_a_warm_junction_stands_less_of_a_single_pulse() -> None:
    """30 mJ from 25 degC to 150 degC: two fifths of it are left from 100 degC; none for a repeated one without thermal data."""
    stage = PowerOutputStage(part=register())
    hot = Corner("hot", junction=373.15)
    (rule,) = [r for r in stage.stamp("s", "q", "d", hot).rules if isinstance(r, BreakdownRule)]
    assert rule.single.value == pytest.approx(0.4 * 30e-3)
    assert rule.repetitive.value == pytest.approx(0.4 * 30e-3)
    bare = PowerOutputStage(part=register().model_copy(update={"thermal_resistance": None}))
    (rule,) = [r for r in bare.stamp("s", "q", "d", hot).rules if isinstance(r, BreakdownRule)]
    assert rule.repetitive.value is None


def test_single_pulse_rating_is_that_of_the_definition() -> None:
    """I_AS 1 A and E_AS 75 mJ at V_(BR) 50 V: t_av = 2 E / (I V) = 3.0 ms (TI ZHCSXY6B, fig. 6-4)."""
    part = register("TPIC6595")
    assert part.avalanche_energy is not None
    assert part.avalanche_current is not None
    assert 2 * part.avalanche_energy.typ / (part.avalanche_current.typ * 50.0) == pytest.approx(3.0e-3)


def test_packages_follow_from_outputs_and_the_chain_knows_no_gate_loads() -> None:
    board = read_board(BOARD)
    packages = [c.package for c in board.channels]
    assert packages == ["TPIC6B595 1"] * 6 + ["TPIC6B595 2"] * 6
    assert all(c.switch.part is board.chain.register_ for c in board.channels)
    assert {f.verdict for f in judge_chain(board)} <= {"pass", "tight"}


def test_a_switch_of_another_register_is_refused(tmp_path: Path) -> None:
    with pytest.raises(
        InputError, match=r"the switch is an output of TPIC6595, and the registers of \[chain\] are TPIC6B595"
    ):
        changed(tmp_path, ('part = "TPIC6B595"', 'part = "TPIC6595"'))
    with pytest.raises(InputError, match=r"an output of TPIC6B595, and the registers of \[chain\] are 74HC595"):
        changed(tmp_path, ('register = "TPIC6B595"', 'register = "74HC595"'))


def test_an_open_drain_output_drives_no_other_switch(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"outputs of TPIC6B595 are open-drain switches and cannot drive an n-mosfet"):
        changed(tmp_path, ('switch = { part = "TPIC6B595" }', 'switch = { part = "n-logic-60v", gate = "100 ohm" }'))


def test_a_load_that_the_output_cannot_pull_down_is_named() -> None:
    part = register()
    heavy = part.switching.model_copy(update={"load": part.switching.load.__class__(5.0, 5.0, 5.0, "ohm")})
    with pytest.raises(ValueError, match="would not pull it down to a tenth"):
        gate_shape(heavy, part.conducts)
