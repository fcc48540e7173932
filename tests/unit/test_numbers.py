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


@pytest.mark.parametrize(("value", "text"), [(0.5, "0.5"), (1.0, "1"), (None, "")])
def test_a_claimed_order_is_short(value, text):
    assert numbers.claimed(value) == text
