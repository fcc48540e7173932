"""Numbers as people read them."""

import math

import pytest
from sdebench.reports import numbers


@pytest.mark.parametrize(
    ("value", "half_width", "text"),
    [
        (0.0032148, 0.000041, "0.00321 ± 0.00004"),
        (0.0032148, 0.000011, "0.003215 ± 0.000011"),
        (1234.5678, 17.0, "1235 ± 17"),
        (1234.5678, 170.0, "1235 ± 170"),
        (-0.5, 0.03, "-0.50 ± 0.03"),
        (0.001, 0.5, "0.0 ± 0.5"),
        (3.2148e-7, 4.1e-9, "(3.21 ± 0.04)e-07"),
        (-3.2148e8, 4.1e6, "(-3.21 ± 0.04)e+08"),
        (0.0254267613, 1.95e-7, "0.0254268 ± 0.0000002"),
        (0.0254267613, 1.94e-7, "0.02542676 ± 0.00000019"),
        (0.0254267613, 2.1e-8, "0.02542676 ± 0.00000002"),
        (0.0254267613, 1.2e-8, "(2.5426761 ± 0.0000012)e-02"),
        (-0.0254267613, 4.1e-9, "(-2.5426761 ± 0.0000004)e-02"),
        (12.25, 3e-10, "(1.22500000000 ± 0.00000000003)e+01"),
        (0.25, 0.0, "0.25"),
        (0.25, None, "0.25"),
        (0.25, math.inf, "0.25"),
        (None, 0.1, "none"),
        (None, None, "none"),
        (0.0, 0.0, "0"),
    ],
    ids=str,
)
def test_a_number_is_cut_where_its_uncertainty_begins(value, half_width, text):
    assert numbers.with_uncertainty(value, half_width) == text


def test_the_smallest_numbers_are_shown_too():
    assert "e-310" in numbers.with_uncertainty(3e-310, 2e-311)


@pytest.mark.parametrize(("value", "text"), [(0.5307, "0.531"), (2, "2.000"), (None, "none")])
def test_an_order_has_three_decimals(value, text):
    assert numbers.order(value) == text


@pytest.mark.parametrize(
    ("value", "low", "high", "exact", "text"),
    [
        (0.531, 0.515, 0.546, False, "0.531 (0.515 to 0.546)"),
        (0.531, None, 0.546, False, "0.531 (any to 0.546)"),
        (0.531, 0.515, None, False, "0.531 (0.515 to any)"),
        (None, None, None, False, ""),
        (None, None, None, True, "exact"),
    ],
    ids=["both ends", "no lower end", "no upper end", "no order", "exact"],
)
def test_an_interval_stands_behind_its_order(value, low, high, exact, text):
    assert numbers.interval(value, low, high, exact) == text


@pytest.mark.parametrize(
    ("value", "low", "high", "text"),
    [
        (1.25, 1.05, 1.45, "1.250 (1.050 to 1.450)"),
        (1.00033, 1.00012, 1.00054, "1.00033 (1.00012 to 1.00054)"),
        (0.998123456, 0.998122456, 0.998124456, "0.99812"),
        (0.5, 0.5, 0.5, "0.500"),
        (0.998123456, 0.998122456, 1.25, "0.99812 (0.99812 to 1.25000)"),
        (0.998123456, None, 0.998124456, "0.99812 (any to 0.99812)"),
        (0.998, 0.998, 0.9988, "0.99800 (0.99800 to 0.99880)"),
    ],
    ids=[
        "wide: three digits",
        "narrow: two digits of the half-width",
        "narrower than five digits: the value alone",
        "no width: the value alone",
        "digits for the smaller half-width",
        "one end only",
        "one half-width is zero",
    ],
)
def test_an_interval_has_the_digits_of_its_smaller_half_width(value, low, high, text):
    assert numbers.interval(value, low, high, exact=False) == text


@pytest.mark.parametrize(
    ("seconds", "text"),
    [
        (2.74e-5, "27 µs"),
        (1.35e-6, "1.4 µs"),
        (9.96e-6, "10 µs"),
        (3.21e-9, "0.0032 µs"),
        (0.99e-3, "990 µs"),
        (1.2345e-1, "120000 µs"),
        (0.0, "0 µs"),
        (None, ""),
    ],
    ids=str,
)
def test_a_time_has_two_digits(seconds, text):
    assert numbers.microseconds(seconds) == text


@pytest.mark.parametrize(("value", "text"), [(0.5, "0.5"), (1.0, "1"), (None, "")])
def test_a_claimed_order_is_short(value, text):
    assert numbers.claimed(value) == text
