"""Quantities against the SI, decimal arithmetic of the standard library, and hand-written texts."""

import math
from decimal import Decimal

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from transim.errors import QuantityError
from transim.quantities import (
    UNITS,
    dbm_to_peak_volts,
    decibels,
    deck_number,
    format_quantity,
    format_range,
    parse_quantity,
)

# SI Brochure, 9th edition (2019), table 7: prefixes and their powers of ten (from memory).
SI_PREFIXES = {"f": -15, "p": -12, "n": -9, "u": -6, "µ": -6, "m": -3, "k": 3, "M": 6, "G": 9, "T": 12}
WITH_PREFIX = sorted(symbol for symbol, unit in UNITS.items() if unit.prefixed and symbol != "1")
WITHOUT_PREFIX = sorted(symbol for symbol, unit in UNITS.items() if not unit.prefixed)
decimals = st.decimals(min_value="-9999", max_value="9999", places=4, allow_nan=False, allow_infinity=False)
finite = st.floats(allow_nan=False, allow_infinity=False, allow_subnormal=False)


@given(decimals, st.sampled_from(sorted(SI_PREFIXES)), st.sampled_from(WITH_PREFIX))
def test_every_prefix_gives_its_power_of_ten_correctly_rounded(number, prefix, unit):
    expected = float(number * Decimal(10) ** SI_PREFIXES[prefix])
    assert parse_quantity(f"{number} {prefix}{unit}", unit) == expected
    assert parse_quantity(f" {number}{prefix}{unit} ", unit) == expected


@pytest.mark.parametrize(
    ("text", "unit", "value"),
    [
        ("22 pF", "F", 2.2e-11),
        ("4k7 ohm", "ohm", 4700.0),  # letter in place of the point: IEC 60062, from memory
        ("-2u2 A", "A", -2.2e-6),
        ("4.7 kΩ", "ohm", 4700.0),
        ("4.7 k\u2126", "ohm", 4700.0),
        ("2.2 μs", "s", 2.2e-6),
        ("1 MHz", "Hz", 1e6),
        ("1 mHz", "Hz", 1e-3),
        ("5 m", "m", 5.0),
        ("5 mm", "m", 5e-3),
        ("50 um", "m", 5e-5),
        ("2 F", "F", 2.0),
        ("2 fF", "F", 2e-15),
        ("16.5 pV s", "V s", 1.65e-11),
        ("0.18 m^2/Vs", "m^2/Vs", 0.18),
        ("1e-14 A", "A", 1e-14),
        ("1E3 V", "V", 1000.0),
        (".5 dB", "dB", 0.5),
        ("\u22124 dB", "dB", -4.0),
        ("-10 dBm", "dBm", -10.0),
        ("+25 degC", "degC", 25.0),
        ("-40 °C", "degC", -40.0),
        ("90 °", "deg", 90.0),
        ("1.5", "1", 1.5),
    ],
)
def test_quantity_is_read(text, unit, value):
    assert parse_quantity(text, unit) == value


@pytest.mark.parametrize(
    ("text", "unit", "value"),
    [("22p", "F", 2.2e-11), ("4k7", "ohm", 4700.0), ("50", "ohm", 50.0), ("5", "m", 5.0), ("2f", "F", 2e-15)],
)
def test_unit_may_be_left_out_only_where_the_caller_says_so(text, unit, value):
    assert parse_quantity(text, unit, require_unit=False) == value
    with pytest.raises(QuantityError, match="the unit is missing"):
        parse_quantity(text, unit)


@pytest.mark.parametrize(
    ("text", "unit", "message"),
    [
        ("22 ns", "F", "this is a time in s"),
        ("10 dBm", "dB", "this is a level in dBm"),
        ("1 meg", "Hz", "write M for mega"),
        ("1 MEGHz", "Hz", "write M for mega"),
        ("150 mhz", "Hz", "case-sensitive"),
        ("22 PF", "F", "case-sensitive"),
        ("4,7 kohm", "ohm", "decimal point"),
        ("nan V", "V", "not a voltage"),
        ("inf", "1", "not a plain number"),
        ("true", "1", "not a plain number"),
        ("", "V", "not a voltage"),
        ("V", "V", "not a voltage"),
        ("1e999 V", "V", "out of what can be computed"),
        ("1e-999 V", "V", "out of what can be computed"),
        ("1 mdB", "dB", "no unit of a ratio"),
        ("1 kdegC", "degC", "no unit of a temperature"),
        ("4k7 dB", "dB", "no unit of a ratio"),
        ("0x10 V", "V", "no unit of a voltage"),
        ("1_000 V", "V", "no unit of a voltage"),
        ("1 k V", "V", "no unit of a voltage"),
        ("1 V\n.control", "V", "one line"),
        ("\u0661 V", "V", "not a voltage"),
    ],
)
def test_what_is_no_quantity_is_refused_with_the_reason(text, unit, message):
    with pytest.raises(QuantityError, match=message) as caught:
        parse_quantity(text, unit)
    assert caught.value.expected == UNITS[unit].expected
    assert UNITS[unit].example in str(caught.value)


def test_value_that_is_no_text_is_refused():
    with pytest.raises(QuantityError, match="not a time"):
        parse_quantity(5.0, "s")


def test_unknown_unit_is_refused_in_both_directions():
    with pytest.raises(QuantityError, match="furlong"):
        parse_quantity("1 furlong", "furlong")
    with pytest.raises(QuantityError, match="furlong"):
        format_quantity(1.0, "furlong")


@pytest.mark.parametrize("unit", sorted(UNITS))
def test_example_of_every_unit_is_read(unit):
    assert math.isfinite(parse_quantity(UNITS[unit].example, unit))


@given(finite, st.sampled_from(sorted(UNITS)))
def test_quantity_written_in_full_reads_back_exactly(value, unit):
    assert parse_quantity(format_quantity(value, unit, 17), unit) == value


@given(st.floats(min_value=1e-15, max_value=9e14), st.integers(1, 6), st.sampled_from(WITH_PREFIX))
def test_number_before_a_prefix_is_at_least_1_and_below_1000(value, digits, unit):
    text = format_quantity(value, unit, digits)
    assert 1.0 <= float(text.split(" ")[0]) < 1000.0
    # Rounding to n digits errs by half a unit of the last of them, at most half of 10^(1-n).
    assert parse_quantity(text, unit) == pytest.approx(value, rel=0.5 * 10.0 ** (1 - digits) * (1 + 1e-9))


@pytest.mark.parametrize(
    ("value", "unit", "text"),
    [
        (4700.0, "ohm", "4.7 kohm"),
        (1.32402e-7, "s", "132.4 ns"),
        (999.96e-9, "s", "1 us"),
        (-999.96e-9, "s", "-1 us"),
        (-10, "dBm", "-10 dBm"),
        (0.25, "dB", "0.25 dB"),
        (25.0, "degC", "25 degC"),
        (0.0, "s", "0 s"),
        (-0.0, "s", "0 s"),
        (1e-16, "A", "1e-16 A"),
        (1.5, "1", "1.5"),
        (np.float64(2.2e-9), "F", "2.2 nF"),
        (math.inf, "s", "inf s"),
    ],
)
def test_quantity_is_written(value, unit, text):
    assert format_quantity(value, unit) == text


@pytest.mark.parametrize(
    ("arguments", "text"),
    [
        (("F", 0.0, 1e-9), "0 F .. 1 nF"),
        (("F", 0.0, 1e-9, True), "> 0 F .. 1 nF"),
        (("V", -math.inf, 5.0), "up to 5 V"),
        (("V", 5.0, math.inf), "5 V or more"),
        (("V", 5.0, math.inf, True), "above 5 V"),
        (("V", -math.inf, math.inf), "any"),
    ],
)
def test_range_is_written(arguments, text):
    assert format_range(*arguments) == text


@given(finite)
def test_deck_number_reads_back_exactly_and_has_no_suffix(value):
    text = deck_number(value)
    assert float(text) == value
    assert set(text) <= set("0123456789.e+-")


@pytest.mark.parametrize(
    ("value", "text"), [(50, "50"), (2.2e-9, "2.2e-09"), (-0.0, "0"), (np.float64(0.1), "0.1")]
)
def test_deck_number_is_plain(value, text):
    assert deck_number(value) == text


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf, True])
def test_deck_number_refuses_what_is_no_number(value):
    with pytest.raises(QuantityError, match="finite number"):
        deck_number(value)


def test_decibels_of_an_amplitude_ratio():
    # 10 % and 90 % of a voltage are -20 dB and -0.915 dB (definition 20 lg, common practice).
    assert decibels(0.1) == pytest.approx(-20.0, abs=1e-12)
    assert decibels(0.9) == pytest.approx(-0.91515, abs=1e-5)
    assert decibels(-3 + 4j) == pytest.approx(13.9794, abs=1e-4)
    assert decibels(0.0) == -math.inf


def test_level_in_dbm_as_peak_voltage():
    # 0 dBm is 1 mW, 223.607 mV rms in 50 ohm (common practice); 13 dBm in 50 ohm is close to 1 V rms.
    assert dbm_to_peak_volts(0.0, 50.0) == pytest.approx(0.223607 * math.sqrt(2.0), rel=1e-6)
    assert dbm_to_peak_volts(13.0103, 50.0) == pytest.approx(math.sqrt(2.0), rel=1e-6)
    with pytest.raises(QuantityError, match="above zero"):
        dbm_to_peak_volts(0.0, 0.0)
