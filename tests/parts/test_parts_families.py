"""Families and registers against printed tables; between printed supplies by the safe line, beyond them nothing."""

from __future__ import annotations

from pathlib import Path

import pytest

from boardsim.board.reader import library_part
from boardsim.board.shelves import read_shelves
from boardsim.errors import InputError
from boardsim.parts.family import LogicFamily, place_in
from boardsim.parts.register import EdgeTimes, Register


def register(name: str) -> Register:
    part = library_part(name)
    assert isinstance(part, Register)
    return part


def times(name: str, volts: float) -> EdgeTimes:
    found = register(name).timing(volts)
    assert found is not None
    return found


# NXP tables 5 and 6, pp. 7-8, which are the limits of JESD7A: V_IL max and V_IH min.
@pytest.mark.parametrize(("volts", "low", "high"), [(2.0, 0.5, 1.5), (4.5, 1.35, 3.15), (6.0, 1.8, 4.2)])
def test_hc_levels_are_those_of_the_data_sheet(volts: float, low: float, high: float) -> None:
    assert register("74HC595").input_levels(volts) == pytest.approx((low, high))


@pytest.mark.parametrize("volts", [4.5, 5.0, 5.5])
def test_hct_levels_are_those_of_ttl_at_any_of_its_supplies(volts: float) -> None:
    """NXP, pp. 8-9: V_IH 2.0 V, V_IL 0.8 V from 4.5 to 5.5 V."""
    assert register("74HCT595").input_levels(volts) == pytest.approx((0.8, 2.0))


@pytest.mark.parametrize("volts", [4.75, 5.0, 5.25])
def test_hc_levels_between_printed_supplies_are_the_shares_of_the_supply_that_jesd7a_means(volts: float) -> None:
    low, high = register("74HC595").input_levels(volts) or (0, 0)
    assert low == pytest.approx(0.3 * volts)
    assert high == pytest.approx(0.7 * volts)


@pytest.mark.parametrize(
    ("volts", "expected"),
    [  # NXP table 7, pp. 10-11, -40 to 85 degC: set-up, latch set-up, hold, pulse, SHCP to Q7S, STCP to Qn [ns]; clock [MHz]
        (2.0, (65, 95, 3, 95, 200, 220, 4.8)),
        (4.5, (13, 19, 3, 19, 40, 44, 24)),
        (6.0, (11, 16, 3, 16, 34, 37, 28)),
    ],
)
def test_hc_times_are_those_of_the_data_sheet(volts: float, expected: tuple[float, ...]) -> None:
    t = times("74HC595", volts)
    found = (t.setup, t.latch_setup, t.hold, t.clock_width, t.shift_delay, t.latch_delay)
    assert [x * 1e9 for x in found] == pytest.approx(expected[:6])
    assert t.alone_up_to == pytest.approx(expected[6] * 1e6)


def test_the_other_makers_times_at_4_5_v_are_those_of_its_data_sheet() -> None:
    """TI SCLS041I, sections 7.6 and 7.7, -40 to 85 degC."""
    t = times("SN74HC595", 4.5)
    found = (t.setup, t.latch_setup, t.hold, t.clock_width, t.shift_delay, t.latch_delay)
    assert [x * 1e9 for x in found] == pytest.approx((25, 19, 0, 20, 40, 37))
    assert t.alone_up_to == pytest.approx(25e6)


@pytest.mark.parametrize("name", ["74HC595", "SN74HC595", "74HCT595", "74AHC595", "74AHCT595", "74LV595"])
def test_beyond_the_printed_supplies_nothing_is_known(name: str) -> None:
    part = register(name)
    for lowest, highest in ((min(part.printed), max(part.printed)),):
        assert part.timing(lowest) is not None
        assert part.timing(highest) is not None
        assert part.timing(lowest * 0.99) is None
        assert part.timing(highest * 1.01) is None
    assert isinstance(part.family, LogicFamily)
    assert part.input_levels(max(part.family.printed) * 1.01) is None
    assert part.input_levels(min(part.family.printed) * 0.99) is None


def cmos_delay(volts: float, power: float) -> float:
    """The alpha-power law (Sakurai and Newton, IEEE J. Solid-State Circuits 25 (1990) 584), threshold 0.7 V, scaled."""
    return float(volts / (volts - 0.7) ** power)


@pytest.mark.parametrize("power", [1.0, 1.3, 2.0])
@pytest.mark.parametrize("volts", [2.2, 2.8, 3.3, 4.0, 4.75, 5.0, 5.25, 5.9])
def test_between_printed_supplies_longest_times_err_upwards_and_the_shortest_downwards(
    volts: float, power: float
) -> None:
    """Against a law of physics that goes exactly through the printed longest delays at both neighbours."""
    t, part = times("74HC595", volts), register("74HC595")
    at = place_in(part.printed, volts)
    assert at is not None
    below, above = part.printed[at.lower], part.printed[at.upper]
    ends = [times("74HC595", v) for v in (below, above)]
    for name in ("shift_delay", "latch_delay"):
        a, b = (getattr(end, name) for end in ends)
        x, y = cmos_delay(below, power), cmos_delay(above, power)
        law = b + (a - b) * (cmos_delay(volts, power) - y) / (x - y)
        assert law <= getattr(t, name) * (1 + 1e-12)
    assert t.shift_delay_least <= min(end.shift_delay_least for end in ends)
    period = 1 / ends[1].alone_up_to + (1 / ends[0].alone_up_to - 1 / ends[1].alone_up_to) * (
        cmos_delay(volts, power) - cmos_delay(above, power)
    ) / (cmos_delay(below, power) - cmos_delay(above, power))
    assert t.alone_up_to <= 1 / period * (1 + 1e-12)


def test_what_the_data_sheet_does_not_print_is_listed_as_an_assumption() -> None:
    (only,) = (a for a in register("74HC595").assumed() if "shortest delay" in a.quantity)
    assert "10 ns at 4.50 V" in only.value
    assert "memory" in only.why
    assert not [a for a in register("74AHC595").assumed() if "shortest delay" in a.quantity]


def in_library(folder: Path, text: str) -> None:
    (folder / "mine.toml").write_text(text, encoding="utf-8")
    read_shelves([folder])


FAMILY = '[mine]\nkind = "logic-family"\nhigh_drop = "0.1 V"\nlow_output = "0.1 V"\ninput_capacitance = "5 pF"\n'


@pytest.mark.parametrize(
    ("text", "said"),
    [
        (FAMILY + 'inputs = [{ supply = "5 V", low = "2 V", high = "1 V" }]', "low must be below high"),
        (
            FAMILY + 'inputs = [{ supply = "5 V", low = "1 V", high = "3 V" }, { supply = "3 V", low = "1 V", high = "2 V" }]',
            "list each supply once, the lowest first",
        ),
        (FAMILY + "inputs = []", '"inputs" is empty'),
        (FAMILY + 'inputs = [{ supply = "5 V", low = "1 V", high = "3 V" }]\nabove_supply = "0.5 V"\ninput_rating = "5 V"', "not both"),
        (
            '[mine]\nkind = "shift-register"\noutputs = 8\noutput_resistance = "30 ohm"\npropagation = "40 ns"\noutput_edge = "9 ns"\n'
            'supply_low = "2 V"\nsupply_high = "6 V"\nfamily = "HCX"',
            'logic-family "HCX" is not in the library (did you mean "HC"?); known: AHC, AHCT, HC, HCT, LV',
        ),
    ],
)  # fmt: skip
def test_a_wrong_record_is_refused_with_its_place(tmp_path: Path, text: str, said: str) -> None:
    with pytest.raises(InputError) as caught:
        in_library(tmp_path, text)
    assert said in str(caught.value)
    assert "mine.toml:" in str(caught.value)


def test_a_register_of_a_users_library_may_name_a_family_of_a_later_file(tmp_path: Path) -> None:
    (tmp_path / "a.toml").write_text(
        '[r9]\nkind = "shift-register"\noutputs = 8\noutput_resistance = "30 ohm"\npropagation = "40 ns"\noutput_edge = "9 ns"\n'
        'supply_low = "2 V"\nsupply_high = "6 V"\nfamily = "mine"\n',
        encoding="utf-8",
    )
    (tmp_path / "b.toml").write_text(
        FAMILY + 'inputs = [{ supply = "5 V", low = "1 V", high = "3 V" }]\n', encoding="utf-8"
    )
    part = read_shelves([tmp_path])["r9"].part("r9")
    assert isinstance(part, Register)
    assert part.input_levels(5.0) == (1.0, 3.0)
