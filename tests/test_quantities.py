"""Numbers with units: what is read, what is refused and in which words."""

import math

import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from boardsim.errors import QuantityError
from boardsim.quantities import (
    AREA,
    CAPACITANCE,
    CHARGE,
    CURRENT,
    ENERGY,
    FREQUENCY,
    GIVEN,
    INDUCTANCE,
    LENGTH,
    POSITIVE_RESISTANCE,
    POWER,
    RESISTANCE,
    SHARE,
    TEMPERATURE,
    TEMPERATURE_RISE,
    TIME,
    VOLTAGE,
    Dimension,
    Origin,
    Quantity,
    assume,
    in_units,
    parse,
    read_quantity,
)

DIMENSIONS = [
    RESISTANCE,
    INDUCTANCE,
    CAPACITANCE,
    VOLTAGE,
    CURRENT,
    POWER,
    ENERGY,
    CHARGE,
    TIME,
    FREQUENCY,
    LENGTH,
    AREA,
    TEMPERATURE,
    TEMPERATURE_RISE,
    SHARE,
]


@pytest.mark.parametrize(
    ("text", "dimension", "value"),
    [
        ("1.8 m", LENGTH, 1.8),
        ("1.8m", LENGTH, 1.8),
        ("5m", LENGTH, 5.0),
        ("30 cm", LENGTH, 0.3),
        ("2.5 mm2", AREA, 2.5e-6),
        ("2.5 mm²", AREA, 2.5e-6),
        ("2.5 mm^2", AREA, 2.5e-6),
        ("3 K", TEMPERATURE_RISE, 3.0),
        ("500 mK", TEMPERATURE_RISE, 0.5),
        ("25 degC", TEMPERATURE, 298.15),
        ("25 °C", TEMPERATURE, 298.15),
        ("-40 degC", TEMPERATURE, 233.15),
        ("470u", CAPACITANCE, 470e-6),
        ("470 uF", CAPACITANCE, 470e-6),
        ("470 \u00b5F", CAPACITANCE, 470e-6),  # micro sign
        ("470 \u03bcF", CAPACITANCE, 470e-6),  # Greek small letter mu
        ("470\u00b5", CAPACITANCE, 470e-6),
        ("470\u03bc", CAPACITANCE, 470e-6),
        ("16 \u03a9", RESISTANCE, 16.0),  # Greek capital letter omega
        ("16 \u2126", RESISTANCE, 16.0),  # ohm sign
        ("4.7 k\u03a9", RESISTANCE, 4700.0),
        ("16 ohm", RESISTANCE, 16.0),
        ("0 ohm", RESISTANCE, 0.0),
        ("+16 ohm", RESISTANCE, 16.0),
        ("  16 ohm  ", RESISTANCE, 16.0),
        ("1.6e1 ohm", RESISTANCE, 16.0),
        (".5 ohm", RESISTANCE, 0.5),
        ("5.ohm", RESISTANCE, 5.0),
        ("20m", RESISTANCE, 0.02),
        ("10m", TIME, 0.01),
        ("4M", FREQUENCY, 4e6),
        ("4 MHz", FREQUENCY, 4e6),
        ("10 nC", CHARGE, 1e-8),
        ("80 %", SHARE, 0.8),
        ("0.5 W", POWER, 0.5),
        ("40 mJ", ENERGY, 0.04),
        ("250 uA", CURRENT, 250e-6),
        ("24 V", VOLTAGE, 24.0),
    ],
)
def test_reads_a_number_in_the_unit_that_its_field_declares(text: str, dimension: Dimension, value: float) -> None:
    quantity = parse(text, dimension)
    assert quantity.typ == pytest.approx(value, rel=1e-12)
    assert quantity.min == quantity.typ == quantity.max
    assert quantity.unit == dimension.unit
    assert not quantity.toleranced


@pytest.mark.parametrize(
    ("text", "dimension", "value"),
    [
        # IEC 60062:2016, clause 5, marking of values by a letter in place of the decimal point (examples from memory).
        ("R47", RESISTANCE, 0.47),
        ("p33", CAPACITANCE, 0.33e-12),
        ("4R7", RESISTANCE, 4.7),
        ("4k7", RESISTANCE, 4.7e3),
        ("4K7", RESISTANCE, 4.7e3),
        ("10K", RESISTANCE, 10e3),
        ("10R", RESISTANCE, 10.0),
        ("2M2", RESISTANCE, 2.2e6),
        ("3G32", RESISTANCE, 3.32e9),
        ("3p3", CAPACITANCE, 3.3e-12),
        ("4n7", CAPACITANCE, 4.7e-9),
        ("6\u00b58", CAPACITANCE, 6.8e-6),
        ("6u8", CAPACITANCE, 6.8e-6),
        ("2m2", CAPACITANCE, 2.2e-3),
    ],
)
def test_reads_letter_codes_where_the_field_fixes_the_unit(text: str, dimension: Dimension, value: float) -> None:
    assert parse(text, dimension).typ == pytest.approx(value, rel=1e-12)


def test_a_letter_code_may_carry_a_tolerance() -> None:
    quantity = parse("4k7 +/- 5 %", RESISTANCE)
    assert (quantity.min, quantity.max) == pytest.approx((4465.0, 4935.0))


def test_a_letter_code_for_a_length_is_refused_since_m_could_mean_two_things() -> None:
    with pytest.raises(QuantityError, match="1m8"):
        parse("1m8", LENGTH)


@pytest.mark.parametrize(
    ("text", "dimension", "low", "typ", "high"),
    [
        ("12 mH +/- 10 %", INDUCTANCE, 10.8e-3, 12e-3, 13.2e-3),
        ("12 mH +/-10%", INDUCTANCE, 10.8e-3, 12e-3, 13.2e-3),
        ("12 mH ± 10 %", INDUCTANCE, 10.8e-3, 12e-3, 13.2e-3),
        ("12 mH +/- 500 uH", INDUCTANCE, 11.5e-3, 12e-3, 12.5e-3),
        ("4700 uF -20/+50 %", CAPACITANCE, 3760e-6, 4700e-6, 7050e-6),
        ("4700 uF -20 %/+50 %", CAPACITANCE, 3760e-6, 4700e-6, 7050e-6),
        ("24 V -1/+2 V", VOLTAGE, 23.0, 24.0, 26.0),
        ("5 to 45 degC", TEMPERATURE, 278.15, 298.15, 318.15),
        ("-10 degC to 40 degC", TEMPERATURE, 263.15, 288.15, 313.15),
        ("20 degC +/- 3 K", TEMPERATURE, 290.15, 293.15, 296.15),
        ("22 to 26 V", VOLTAGE, 22.0, 24.0, 26.0),
        ("0 to 5 ohm", RESISTANCE, 0.0, 2.5, 5.0),
        ("900 mV to 1.1 V", VOLTAGE, 0.9, 1.0, 1.1),
    ],
)
def test_reads_tolerances_and_bands(text: str, dimension: Dimension, low: float, typ: float, high: float) -> None:
    quantity = parse(text, dimension)
    assert (quantity.min, quantity.typ, quantity.max) == pytest.approx((low, typ, high), rel=1e-12)
    assert quantity.toleranced


@pytest.mark.parametrize(
    ("text", "dimension", "message"),
    [
        ("12 mF", INDUCTANCE, "'12 mF' is in 'mF', which does not measure an inductance; write it such as '12 mH"),
        ("25 C", TEMPERATURE, "'25 C' is in 'C', which does not measure a temperature; write it such as '25 degC'"),
        ("40 degC", TEMPERATURE_RISE, "'40 degC' is in 'degC', which does not measure a temperature rise"),
        ("3 k", RESISTANCE, "'3 k' is in 'k', which does not measure a resistance"),
        ("470u", TEMPERATURE, "does not measure a temperature"),
        ("1000 rpm", FREQUENCY, "'1000 rpm' is in 'rpm', which does not measure a frequency; write it such as '4 MHz'"),
        ("0.5 rad", SHARE, "'0.5 rad' is in 'rad', which does not measure a share; write it such as '80 %'"),
        ("3 dB", SHARE, "which does not measure a share"),
        ("10 dBm", POWER, "which does not measure a power"),
        ("16", RESISTANCE, "'16' has no unit; write a resistance such as '16 ohm +/- 10 %'"),
        ("24 volz", VOLTAGE, "unit 'volz' is not known; write a voltage such as '24 V +/- 5 %'"),
        ("1,8 m", LENGTH, "'1,8 m' has a comma in its number; write a point, such as '1.8 m'"),
        ("-16 ohm", RESISTANCE, "'-16 ohm' is negative; a resistance must be 0 or more"),
        ("-16 ohm", POSITIVE_RESISTANCE, "'-16 ohm' is negative; a resistance must be positive"),
        ("-5 V", VOLTAGE, "'-5 V' is negative; a voltage must be positive"),
        ("0 V", VOLTAGE, "'0 V' is zero; a voltage must be positive here"),
        ("12 MH", INDUCTANCE, "'12 MH' is out of range, 12.0 MH; an inductance is expected between 100 pH and 1.00 kH"),
        ("120 %", SHARE, "'120 %' is out of range, 120 %; a share is expected between 0.0001 % and 100 %"),
        ("1e999 V", VOLTAGE, "out of range, inf V"),
        ("-300 degC", TEMPERATURE, "a temperature is expected between 200 K and 800 K"),
        ("many ohms", RESISTANCE, "'many ohms' is not a number with a unit; write it such as '16 ohm +/- 10 %'"),
        ("", RESISTANCE, "'' is not a number with a unit"),
        ("nan ohm", RESISTANCE, "is not a number with a unit"),
        ("inf ohm", RESISTANCE, "is not a number with a unit"),
        ("16 ohm +/- 200 %", RESISTANCE, "'16 ohm +/- 200 %': the tolerance reaches below zero"),
        ("16 ohm +/- 20 ohm", RESISTANCE, "the tolerance reaches below zero"),
        ("16 V -20/+1 V", VOLTAGE, "the tolerance reaches below zero"),
        ("24 V +/- 100 %", VOLTAGE, "'24 V +/- 100 %' reaches down to zero; a voltage must be positive here"),
        ("0 to 5 V", VOLTAGE, "'0 to 5 V' reaches down to zero; a voltage must be positive here"),
        ("0 ohm +/- 1e999 %", RESISTANCE, "reaches to nan ohm"),
        (
            "9 kV +/- 50 %",
            VOLTAGE,
            "'9 kV +/- 50 %' reaches to 13.5 kV; a voltage is expected between 1.00 mV and 10.0 kV",
        ),
        ("16 ohm +/- -10 %", RESISTANCE, "'+/- -10 %' in '16 ohm +/- -10 %' is not a tolerance"),
        (
            "16 ohm +/- 10",
            RESISTANCE,
            "'+/- 10' in '16 ohm +/- 10' is not a tolerance; write '+/- 10 %' or '-20/+50 %'",
        ),
        ("16 ohm 10 %", RESISTANCE, "'10 %' in '16 ohm 10 %' is not a tolerance"),
        ("16 ohm +/- 10 V", RESISTANCE, "the tolerance in '16 ohm +/- 10 V' is in 'V'; use % or the unit of the value"),
        ("16 ohm +/- 10 foo", RESISTANCE, "unit 'foo' is not known"),
        ("20 degC +/- 10 %", TEMPERATURE, "a temperature has no tolerance in %; write a band such as '5 to 45 degC'"),
        ("45 to 5 degC", TEMPERATURE, "'45 to 5 degC' runs downwards; write the lower end first"),
        ("5 to 45 V", TEMPERATURE, "which does not measure a temperature"),
        ("9" * 200 + " V", VOLTAGE, "'99999999999999999999'... is too long for a number with a unit"),
    ],
)
def test_refuses_with_what_was_found_and_what_is_allowed(text: str, dimension: Dimension, message: str) -> None:
    with pytest.raises(QuantityError) as caught:
        parse(text, dimension)
    assert message in str(caught.value)


@pytest.mark.parametrize(
    ("value", "message"),
    [
        (16, "16 has no unit; write a resistance in quotes, such as '16 ohm +/- 10 %'"),
        (1.5, "1.5 has no unit; write a resistance in quotes"),
        (True, "expected a resistance in quotes, such as '16 ohm +/- 10 %'"),
        (None, "expected a resistance in quotes"),
        (["16 ohm"], "expected a resistance in quotes"),
        ({"value": "16 ohm"}, "expected a resistance in quotes"),
    ],
)
def test_a_file_must_give_a_quantity_as_text(value: object, message: str) -> None:
    with pytest.raises(QuantityError) as caught:
        read_quantity(value, RESISTANCE)
    assert message in str(caught.value)


def test_a_finished_quantity_passes_through_unchanged() -> None:
    quantity = parse("16 ohm", RESISTANCE)
    assert read_quantity(quantity, RESISTANCE) is quantity


def test_a_quantity_remembers_where_it_comes_from() -> None:
    assert parse("16 ohm", RESISTANCE).origin == GIVEN
    library = Origin("library", "sheet 3")
    assert str(parse("16 ohm", RESISTANCE, library).origin) == "library: sheet 3"
    assumed = assume("20 nH", INDUCTANCE, "radial part, from memory")
    assert assumed.assumed()
    assert assumed.origin.source == "radial part, from memory"
    assert not parse("16 ohm", RESISTANCE).assumed()


def test_the_ends_of_a_band_are_taken_by_name() -> None:
    quantity = parse("24 V -1/+2 V", VOLTAGE)
    assert (quantity.at("min"), quantity.at("typ"), quantity.at("max")) == pytest.approx((23.0, 24.0, 26.0))


@pytest.mark.parametrize(
    ("text", "dimension", "written"),
    [
        ("24 V +/- 5 %", VOLTAGE, "24.0 V (22.8 V to 25.2 V)"),
        ("4700 uF", CAPACITANCE, "4700 uF"),
        ("10 %", SHARE, "10 %"),
        ("2.5 mm2", AREA, "2.5e-06 m^2"),
    ],
)
def test_a_quantity_is_written_for_people(text: str, dimension: Dimension, written: str) -> None:
    assert str(parse(text, dimension)) == written


@pytest.mark.parametrize(
    ("value", "unit", "written"),
    [
        (0.0, "V", "0 V"),
        (-0.0123, "A", "-12.3 mA"),
        (0.9996, "s", "1.00 s"),
        (999.4, "Hz", "999 Hz"),
        (1e-18, "F", "0.00100 fF"),
        (1e15, "ohm", "1000000 Gohm"),
        (4.7e-3, "F", "4700 uF"),
        (4.2e-31, "V", "4.20e-31 V"),
        (-3.0e200, "A", "-3.00e+200 A"),
        (1500.0, "m", "1500 m"),
        (math.inf, "V", "inf V"),
        (math.nan, "V", "nan V"),
    ],
)
def test_si_values_get_an_engineering_prefix(value: float, unit: str, written: str) -> None:
    assert in_units(value, unit) == written


@settings(deadline=None)  # pint's first import takes longer than hypothesis allows one example
@given(data=st.data())
def test_what_is_written_for_people_reads_back_as_nearly_the_same(data: st.DataObject) -> None:
    dimension = data.draw(st.sampled_from([d for d in DIMENSIONS if d is not SHARE]))
    value = data.draw(st.floats(dimension.low * 1.01, dimension.high * 0.99))
    assert parse(in_units(value, dimension.unit), dimension).typ == pytest.approx(value, rel=6e-3)


@settings(deadline=None)
@given(share=st.floats(0.01, 1.0))
def test_a_share_reads_back_from_its_text(share: float) -> None:
    text = str(Quantity(share, share, share, "1"))
    assert parse(text, SHARE).typ == pytest.approx(share, rel=1e-5)


@settings(deadline=None)
@given(value=st.floats(0.5, 1e3), percent=st.floats(0, 99))
def test_a_tolerance_encloses_its_value(value: float, percent: float) -> None:
    quantity = parse(f"{value!r} V +/- {percent!r} %", VOLTAGE)
    assert quantity.min <= quantity.typ <= quantity.max
    assert quantity.max - quantity.typ == pytest.approx(quantity.typ - quantity.min, abs=1e-9 * value)


_SIGNS = [*"0123/+-±%,.e()[]*=!²aKb \n\t\0\u03a9\u2126\u00b5\u03bc"]
_WORDS = """1e400 4.7 +/- to ohm mH uF degC °C °F dB dBm m2 m^2 V/s pH in inch delta_degC Np rad count and not or if lambda
None self **"""
_FRAGMENTS = st.sampled_from([*_SIGNS, *_WORDS.split()])


@settings(deadline=None)
@given(
    text=st.one_of(
        st.text(max_size=40),
        st.lists(_FRAGMENTS, max_size=6).map(" ".join),
        st.lists(_FRAGMENTS, max_size=6).map("".join),
    )
)
@example(text="1 °")
@example(text="1 %/%")
@example(text="1 degC/degC")
@example(text="1 V/2")
@example(text="\u0663 V")  # a digit, but not of the alphabet that files are written in
def test_reading_arbitrary_text_gives_an_ordered_band_or_a_quantity_error(text: str) -> None:
    for dimension in DIMENSIONS:
        try:
            quantity = parse(text, dimension)
        except QuantityError:
            continue
        assert quantity.min <= quantity.typ <= quantity.max
        assert math.isfinite(quantity.min)
        assert math.isfinite(quantity.max)
