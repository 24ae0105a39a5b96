"""Numbers for people: as many digits as the error carries."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from driftline import numerals
from driftline.inference.intervals import Interval


@pytest.mark.parametrize(
    ("value", "error", "text"),
    [
        (16.52834, 0.1234, "16.53(12)"),
        (16.5, 0.0996, "16.50(10)"),  # the error rounds up to 0.10, and its two digits decide
        (12.34, 1.4, "12.3(1.4)"),  # not 12.3(14), which could be read as 14
        (250.0, 31.0, "250(31)"),
        (123456.0, 1234.0, "123500(1200)"),
        (3.2e-9, 4.1e-11, "3.200(41)e-09"),
        (5.23e20, 1e18, "5.230(10)e+20"),
        (-0.001, 0.1, "0.00(10)"),  # no minus zero
        (0.0, 0.001, "0.0000(10)"),
        (1.2, 3500.0, "0(3500)"),
        (1e-12, 1.2e-4, "0.00000(12)"),  # nothing, seen from its error
        (2.5, 0.0, "2.5"),
        (math.nan, 1.0, "-"),
        (1.0, math.inf, "1"),
    ],
)
def test_value_with_error(value, error, text):
    """The bracket holds two significant digits of the error in units of the last digits, worked out by hand."""
    assert numerals.plus_minus(value, error) == text


@given(
    st.floats(-1e12, 1e12, allow_subnormal=False).filter(lambda x: x == 0 or abs(x) > 1e-12),
    st.floats(1e-12, 1e12),
)
def test_rounding_is_far_below_the_error(value, error):
    """What is printed differs from the value by at most 5 % of the error."""
    # two significant digits: the last digit is at most a tenth of the error, so rounding moves it by a
    # twentieth; beyond fifteen digits of the value the limit is the double itself
    assert abs(float(numerals.rounded(value, error)) - value) <= 0.0501 * error + 1e-14 * abs(value)


def test_brackets_and_gaps():
    """Limits are rounded alike, and what is missing is a dash."""
    interval = Interval(16.53, 16.41, 16.65, 16.31, 16.78)
    assert numerals.bracket(interval) == "[16.31, 16.78]"
    assert numerals.bracket(interval, 68) == "[16.41, 16.65]"
    assert numerals.short(interval) == "16.53(12)"
    assert (numerals.bracket(None), numerals.short(None), numerals.fixed(None, 2)) == ("-", "-", "-")
    assert (numerals.significant(None), numerals.probability(None), numerals.probability(math.nan)) == ("-", "-", "-")


def test_probabilities_are_never_rounded_to_certainty():
    """Zero and one are printed only where they are exact."""
    assert [numerals.probability(p) for p in (0.0, 1e-9, 0.994, 0.9999, 1.0)] == [
        "0.00",
        "<0.01",
        ">0.99",
        ">0.99",
        "1.00",
    ]


@pytest.mark.parametrize(
    ("median", "down", "up", "text"),
    [
        (16.53, 0.12, 0.12, "16.53(12)"),
        (16.53, 0.12, 0.149, "16.53(13)"),  # 1.24 is within the scatter of the quantiles
        (1.47, 0.26, 0.36, "1.47(+36-26)"),
        (12.34, 1.04, 1.56, "12.3(+1.6-1.0)"),  # not 12.3(+16-10)
        (0.63, 0.062, 0.31, "0.630(+310-62)"),
        (0.63, 0.0062, 0.31, "0.630(+310-6)"),  # three digits of the larger at most
        (250.0, 50.0, 150.0, "250(+150-50)"),
        (3.2e-9, 1e-10, 3e-10, "3.20(+30-10)e-09"),
        (0.5, 0.0, 0.0, "0.5"),
    ],
)
def test_value_with_two_errors(median, down, up, text):
    """Upper and lower error are both given where they differ by more than chance, worked out by hand."""
    interval = Interval(median, median - down, median + up, median - 2 * down, median + 2 * up)
    assert numerals.up_down(interval).text == text


def test_statistical_and_systematic_error():
    """Both are in units of the last digit, which the statistical one decides."""
    assert numerals.quoted(16.52834, 0.1234, 0.05) == numerals.Quoted("16.53", ("12", "5"))
    assert numerals.quoted(16.52834, 0.1234, 0.0) == numerals.Quoted("16.53", ("12", "0"))
    assert numerals.quoted(16.52834, 0.1234, 2.5) == numerals.Quoted("16.53", ("0.12", "2.50"))
    assert numerals.quoted(math.nan, 0.1, 0.1) == numerals.Quoted("-")
