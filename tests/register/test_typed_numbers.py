"""Numbers as people type them and as spreadsheets hold them."""

from __future__ import annotations

import math
from decimal import Decimal

import pytest
from hypothesis import given
from hypothesis import strategies as st

from register.engineering.typed import (
    LARGEST,
    SMALLEST,
    NumberError,
    decimals_of,
    format_number,
    format_significant,
    parse_number,
    shortest,
)
from register.engineering.units import UNITS, to_si

finite = st.floats(min_value=-1e12, max_value=1e12, allow_nan=False).filter(
    lambda value: not value or abs(value) >= SMALLEST
)


@pytest.mark.parametrize(
    ("text", "value", "decimals"),
    [
        ("12.5", 12.5, 1),
        ("12,5", 12.5, 1),
        (" −0,25 ", -0.25, 2),
        ("–3", -3.0, 0),
        ("- 5", -5.0, 0),
        ("+3.10", 3.1, 2),
        ("1 234,5", 1234.5, 1),
        ("1\u202f234\u202f567", 1234567.0, 0),
        ("12.004", 12.004, 3),
        ("0,250", 0.25, 3),
        ("1234,567", 1234.567, 3),
        (".5", 0.5, 1),
        ("5.", 5.0, 0),
        ("1e-3", 0.001, 3),
        ("1.20E+01", 12.0, 1),
        ("0012", 12.0, 0),
    ],
)
def test_what_people_type_is_read(text: str, value: float, decimals: int) -> None:
    assert parse_number(text) == value
    assert decimals_of(text) == decimals


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "Nothing is typed"),
        ("   ", "Nothing is typed"),
        ("nan", "“nan” is not a number"),
        ("inf", "“inf” is not a number"),
        ("-Infinity", "is not a number"),
        ("12 mA", "without the unit"),
        ("twelve", "such as 12.5"),
        ("1_000", "is not a number"),
        ("٣", "is not a number"),
        ("--3", "is not a number"),
        ("−", "is not a number"),
        ("1 2", "space in an odd place"),
        ("12 34.5", "space in an odd place"),
        ("1,234.5", "2 decimal marks or thousands marks"),
        ("1.234.567", "2 decimal marks or thousands marks"),
        ("1e999", "too large"),
        ("1e305", "“1e305” is too large to be a measured value"),
        ("-2e30", "too large"),
        ("1" + "0" * 31, "too large"),
        ("1e-305", "“1e-305” is too small to be a measured value"),
        ("-1e-9999", "too small"),
        ("0.00" + "0" * 30 + "1", "too small"),
        ("0x10", "is not a number"),
    ],
)
def test_what_is_no_number_is_refused_in_words(text: str, words: str) -> None:
    with pytest.raises(NumberError, match=words):
        parse_number(text)


def test_a_comma_that_may_part_thousands_is_not_guessed() -> None:
    with pytest.raises(NumberError, match=r"“1,234” can be read as 1.234 or as 1234"):
        parse_number("1,234")
    assert parse_number("1,234", decimal_comma=True) == 1.234


def test_where_commas_are_decimal_a_point_that_may_part_thousands_is_not_guessed() -> None:
    with pytest.raises(NumberError, match="can be read as 1,234 or as 1234"):
        parse_number("1.234", decimal_comma=True)
    assert parse_number("1.23", decimal_comma=True) == 1.23


def test_the_place_settles_which_reading_is_meant() -> None:
    assert parse_number("12,004", plausible=(0.0, 25.0)) == 12.004
    assert parse_number("2,500", plausible=(1000.0, 5000.0)) == 2500.0
    with pytest.raises(NumberError, match="can be read as"):
        parse_number("2,500", plausible=(0.0, 5000.0))
    with pytest.raises(NumberError, match="can be read as"):
        parse_number("2,500", plausible=(100.0, 200.0))


def test_zero_has_no_sign_after_reading() -> None:
    assert math.copysign(1.0, parse_number("-0.0")) == 1.0


@pytest.mark.parametrize(
    ("value", "decimals", "text"),
    [
        (12.0, 3, "12.000"),
        (-1.25, 1, "−1.3"),
        (2.675, 2, "2.68"),
        (0.5, 0, "1"),
        (-0.001, 1, "0.0"),
        (1e6, 2, "1000000.00"),
        (1e-9, 3, "0.000"),
    ],
)
def test_numbers_are_shown_with_fixed_decimals_and_a_true_minus(value: float, decimals: int, text: str) -> None:
    assert format_number(value, decimals) == text


def test_errors_are_shown_with_their_sign_and_zero_without() -> None:
    assert format_number(0.1, 2, signed=True) == "+0.10"
    assert format_number(-0.1, 2, signed=True) == "−0.10"
    assert format_number(-0.0, 2, signed=True) == "0.00"


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (260.0000000001, "260"),
        (-0.000123456789, "−0.000123457"),
        (1234567.8, "1234570"),
        (0.0, "0"),
        (999999.95, "1000000"),
    ],
)
def test_significant_digits_are_shown_without_exponent(value: float, text: str) -> None:
    assert format_significant(value) == text


@pytest.mark.parametrize(
    ("value", "text"),
    [(12.0, "12"), (0.1, "0.1"), (0.1 + 0.2, "0.3"), (-1.5, "-1.5"), (3, "3"), (-0.0, "0"), (1e20, "1" + "0" * 20)],
)
def test_spreadsheet_numbers_take_the_form_the_sheet_shows(value: float, text: str) -> None:
    assert shortest(value) == text


@pytest.mark.parametrize("value", [math.nan, math.inf, True])
def test_spreadsheet_cells_that_are_no_numbers_are_refused(value: float) -> None:
    with pytest.raises(NumberError):
        shortest(value)


@given(finite)
def test_the_spreadsheet_form_reads_back_to_fifteen_digits(value: float) -> None:
    # Three decimals after a point may look like thousands only where commas are decimal.
    assert parse_number(shortest(value)) == pytest.approx(value, rel=1e-14)


@given(finite, st.integers(0, 8), st.booleans())
def test_what_is_shown_reads_back_within_half_of_its_last_digit(value: float, decimals: int, signed: bool) -> None:
    text = format_number(value, decimals, signed=signed)
    assert decimals_of(text) == decimals
    shown = Decimal(text.replace("−", "-"))
    assert abs(shown - Decimal(repr(value))) <= Decimal(5).scaleb(-decimals - 1)
    assert parse_number(text) == float(shown)


@given(st.integers(-(10**9), 10**9), st.integers(0, 6))
def test_comma_and_point_mean_the_same_where_neither_can_part_thousands(digits: int, decimals: int) -> None:
    text = f"{Decimal(digits).scaleb(-decimals):.{decimals}f}"
    if decimals == 3 and len(text.lstrip("-").partition(".")[0]) <= 3 and not text.lstrip("-").startswith("0"):
        with pytest.raises(NumberError):
            parse_number(text.replace(".", ","))
    else:
        assert parse_number(text.replace(".", ",")) == parse_number(text)


@pytest.mark.parametrize("text", ["1e30", "-1e30", "1e-30", "0", "-0", "0.000", "0e99", "0," + "0" * 36])
def test_what_any_arithmetic_can_bear_is_read(text: str) -> None:
    assert parse_number(text) == float(text.replace(",", "."))


@given(
    st.floats(-LARGEST, LARGEST).filter(lambda value: not value or abs(value) >= SMALLEST),
    st.sampled_from(sorted(UNITS)),
)
def test_no_number_that_is_read_becomes_endless_in_si(value: float, unit: str) -> None:
    assert math.isfinite(to_si(parse_number(repr(value)), unit) ** 2)


@pytest.mark.parametrize(
    ("value", "signed", "text"),
    [(math.inf, False, "∞"), (-math.inf, True, "−∞"), (math.inf, True, "+∞"), (math.nan, True, "?")],
)
def test_what_has_run_out_of_the_floats_is_still_shown(value: float, signed: bool, text: str) -> None:
    assert format_number(value, 2, signed=signed) == text
    assert format_significant(value) == text.removeprefix("+")


@given(st.text(max_size=12))
def test_any_text_is_either_a_finite_number_or_refused(text: str) -> None:
    try:
        value = parse_number(text)
    except NumberError as refused:
        assert str(refused)
    else:
        assert math.isfinite(value)
        assert decimals_of(text) >= 0


@pytest.mark.parametrize("value", [5e-324, 1.7976931348623157e308, -2.5e200])
def test_the_smallest_and_the_greatest_float_can_be_written(value: float) -> None:
    assert float(format_number(value, 340).replace("−", "-")) == pytest.approx(value, rel=1e-12)
