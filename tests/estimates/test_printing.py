"""The printed form: two digits of error, nothing misleading at the edges."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from quarterturn.estimates.estimate import UNRESOLVED, Estimate, withheld
from quarterturn.estimates.printing import format_value_error


@pytest.mark.parametrize(
    ("value", "error", "text"),
    [
        (0.30581, 0.00123, "0.3058(12)"),
        (0.3058, 0.00996, "0.306(10)"),  # the error gains a digit by rounding
        (0.3, 0.995, "0.3(1.0)"),
        (12.34, 4.56, "12.3(4.6)"),
        (-3.14159, 0.0271, "-3.142(27)"),
        (123456.0, 1234.0, "123500(1200)"),
        (99.5, 9.96, "100(10)"),
        (1.2345e-7, 5.6e-9, "1.234(56)e-07"),
        (1234567.891, 0.0123, "1.234567891(12)e+06"),
        (0.1, 2.3, "0.1(2.3)"),  # an error above the value
        (1e-9, 2.3e-7, "0.0(2.3)e-07"),
        (0.0, 1e-7, "0.0(1.0)e-07"),
        (-0.0001, 0.1, "0.00(10)"),  # no negative zero
        (1e308, 1e306, "1.000(10)e+308"),
        (5e-324, 1e-323, "0.5(1.0)e-323"),
        (1.0, 0.0, "1(0)"),
        (1.5, None, "1.5"),
        (1.0, math.nan, "1(nan)"),
        (1.0, math.inf, "1(inf)"),
        (math.nan, 1.0, "nan"),
        (-math.inf, 1.0, "-inf"),
        (None, None, "nan"),
    ],
)
def test_the_printed_form(value, error, text):
    assert format_value_error(value, error) == text


@given(
    value=st.floats(-1e200, 1e200),
    relative=st.floats(1e-12, 1e3),
)
def test_what_is_printed_is_the_number_within_half_a_digit(value, relative):
    error = abs(value) * relative
    if error < 1e-200:
        return
    text = format_value_error(value, error)
    head, rest = text.split("(")
    bracket, exponent = rest.split(")")
    scale = float("1" + exponent) if exponent else 1.0
    decimals = len(head.split(".")[1]) if "." in head else 0
    last_digit = scale * 10.0**-decimals
    shown_error = float(bracket) * (scale if "." in bracket or not decimals else last_digit)
    assert shown_error == pytest.approx(error, rel=0.051)  # two digits
    assert float(head) * scale == pytest.approx(value, rel=1e-12, abs=0.051 * error)


def test_an_unresolved_error_is_never_printed_as_a_number():
    shown = str(Estimate(0.30581, 0.0001, state=UNRESOLVED))
    assert shown == "0.3058(unresolved)"


def test_a_withheld_number_is_not_printed_at_all():
    lost = withheld("no signal")
    assert str(lost) == "withheld" and math.isnan(float(lost)) and lost.pull is None


def test_the_pull_needs_an_exact_value_and_a_good_error():
    e = Estimate(1.2, 0.1, exact=1.0)
    assert e.pull == pytest.approx(2.0)
    assert Estimate(1.2, 0.1).pull is None
    assert Estimate(1.2, 0.1, exact=1.0, state=UNRESOLVED).pull is None
    assert Estimate(1.2, 0.0, exact=1.0).pull is None
