"""Numbers as people read them."""

from __future__ import annotations

from math import inf, nan

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rules.figures import figure, percent, places_of, plus_minus, rounded, several, span


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0, "0"),
        (0.99412, "0.994"),
        (61.04, "61.0"),
        (-61.04, "-61.0"),
        (1234567.0, "1234567"),
        (0.0000123, "0.0000123"),
        (1.5e-12, "1.50e-12"),
        (nan, "no number"),
        (inf, "no number"),
    ],
)
def test_figures_have_three_digits_and_no_exponent_where_that_stays_short(value, text):
    """Three significant digits, whole numbers in full, exponents only far below one; never nan or inf."""
    assert figure(value) == text


@pytest.mark.parametrize(
    ("value", "text"), [(61.4, "61 %"), (9.94, "9.9 %"), (9.96, "10 %"), (-3.25, "-3.2 %"), (0, "0.0 %")]
)
def test_percentages_are_whole_from_ten_up(value, text):
    """Whole from ten, one decimal below."""
    assert percent(value) == text


@pytest.mark.parametrize(
    ("value", "expanded", "text"),
    [
        (17.2605, 1.92246, "17.3 ± 1.9"),
        (12.2612, 0.165, "12.26 ± 0.17"),
        (0.24126, 0.00656, "0.2413 ± 0.0066"),
        (1234.5, 256.0, "1230 ± 260"),
        (7.0, 0.0996, "7.00 ± 0.10"),
        (99.96, 0.95, "99.96 ± 0.95"),
        (0.004, 9.96, "0 ± 10"),
        (-0.0001, 1.2, "0.0 ± 1.2"),
    ],
)
def test_value_and_uncertainty_share_the_second_digit_of_u(value, expanded, text):
    """Both are rounded to the second significant digit of U, also where rounding carries into the next power of ten."""
    assert plus_minus(value, expanded) == text


@given(st.floats(1e-9, 1e9))
def test_two_significant_digits_of_u_are_shown(u):
    """The shown U differs from U by at most 5 % and shows two digits."""
    shown = rounded(u, places_of(u))

    assert float(shown) == pytest.approx(u, rel=0.0501)
    assert len(shown.replace(".", "").strip("0")) <= 2


def test_an_interval_is_written_with_its_ends():
    """Value, low and high with the decimals of the half-width."""
    assert span(3.0, 1.96, 6.43) == "3.0 (2.0 to 6.4)"


def test_long_lists_are_cut_and_counted():
    """Up to the given number all are named, then the rest is counted."""
    assert several(["a", "b"], most=2) == "a, b"
    assert several(["a", "b", "c", "d"], most=2) == "a, b and 2 more"
    assert several([]) == ""
