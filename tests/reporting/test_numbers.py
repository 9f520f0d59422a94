"""Numbers are printed to the digits that their error supports, and the printed pair holds by itself."""

from __future__ import annotations

import re
from decimal import Decimal

import pytest
from hypothesis import given
from hypothesis import strategies as st

from outspread.reporting.numbers import (
    brief,
    error_text,
    exact,
    figure,
    grouped,
    number_latex,
    rounded,
    unit_latex,
    unit_text,
    value_text,
)

SUPERSCRIPTS = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻−", "0123456789--")


def parse(text):
    """The number that a reader takes from printed text."""
    plain = text.translate(SUPERSCRIPTS)
    match = re.fullmatch(r"(-?[\d.]+)(?: × 10(-?\d+))?|(-?)10(-?\d+)", plain)
    assert match, text
    if match[4] is not None:
        return Decimal(f"{match[3]}1e{match[4]}")
    return Decimal(match[1]).scaleb(int(match[2] or 0))


@given(
    st.floats(-1e12, 1e12, allow_nan=False).filter(lambda v: v == 0 or abs(v) > 1e-290),
    st.floats(1e-280, 1e9, allow_nan=False),
)
def test_the_printed_error_covers_the_error_and_the_rounding(value, error):
    """|printed - true| <= printed error for the worst true value inside the stated error."""
    shown, bound = parse(value_text(value, error)), parse(error_text(value, error))
    assert abs(shown - Decimal(value)) + Decimal(error) <= bound * (1 + Decimal("1e-15"))


@given(st.floats(1e-3, 1e3), st.floats(1e-12, 1e-4))
def test_no_digit_stands_beyond_the_error(value, error):
    """The last printed digit of the value is not finer than the one digit of its error."""
    shown, bound = value_text(value, error), parse(error_text(value, error))
    decimals = len(shown.partition(".")[2].partition(" ")[0])
    if "×" not in shown and shown != "0":
        assert Decimal(1).scaleb(-decimals) >= Decimal(1).scaleb(bound.adjusted())


@pytest.mark.parametrize(
    ("value", "error", "text"),
    [
        (1.23456789, 3e-7, "1.2345679 ± 5 × 10⁻⁷"),
        (-3.5, 0.0, "−3.5"),
        (1.2345e-15, 1e-22, "1.2345000 × 10⁻¹⁵ ± 2 × 10⁻²²"),
        (1e-12, 3e-9, "0 ± 5 × 10⁻⁹"),
        (0.0, 0.0, "0"),
        (float("inf"), 0.0, "∞"),
    ],
)
def test_figures_as_a_reader_sees_them(value, error, text):
    assert figure(value, error) == text


def test_units_follow_their_number_as_people_write_them():
    assert figure(2.0, 0.0, "mm^2") == "2\N{NO-BREAK SPACE}mm²"
    assert figure(2.0, 0.0, "deg") == "2°"  # ISO 80000-1: no space before the signs of the plane angle
    assert figure(2.0, 0.0, "1") == "2"


@pytest.mark.parametrize(
    ("unit", "text"),
    [
        ("mm^2", "mm²"), ("kg*m/s**2", "kg·m/s²"), ("m s^-2", "m·s⁻²"), ("W/(m^2*K)", "W/(m²·K)"),
        ("degC", "°C"), ("1/K", "1/K"), ("um", "µm"), ("", ""),
    ],
)  # fmt: skip
def test_units(unit, text):
    assert unit_text(unit) == text


def test_a_unit_cannot_break_out_of_a_formula():
    assert unit_latex(r"m}\frac{") == r"\text{mfrac}"


def test_a_probability_stays_on_its_side_of_the_limit():
    """0.998997 must not be shown as 0.999 beside a limit of 0.999."""
    assert brief(0.99899999, 1e-9, 0.999) == "0.99899999"
    assert brief(0.99873, 1e-9, 0.999) == "0.9987"


def test_exact_numbers_are_written_in_full_and_short():
    assert exact(41.985) == "41.985"
    assert exact(3e8) == "3 × 10⁸"
    assert exact(1e-6) == "10⁻⁶"
    assert exact(1 / 3) == "0.3333333333333333"
    assert number_latex(-2.5e-9) == r"-2.5 \times 10^{-9}"


def test_measured_differences_have_three_digits():
    assert rounded(0.00222519) == "0.00223"
    assert rounded(4.1e-13) == "4.10 × 10⁻¹³"
    assert rounded(2.1e-12, 1, upwards=True) == "3 × 10⁻¹²"


def test_groups_of_digits_add_no_character():
    markup = grouped("0.123456789 ± 10⁻¹²")
    assert re.sub(r"<[^>]+>", "", markup) == "0.123456789 ± 10−12"
