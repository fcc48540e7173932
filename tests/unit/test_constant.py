"""Error constants, of errors C h^p (1 + c h + d h²) made by hand."""

import math
from dataclasses import replace
from itertools import pairwise, product

import numpy as np
import pytest

from sdebench.constant import error_constant, limiting_order
from sdebench.orders import Errors, Interval, Order, Trend, observed_order
from tests.tolerance import round_off

OCTAVE = (4, 8, 16, 32, 64)
TWO_OCTAVES = (4, 16, 64, 256, 1024)
Q = 2.0
C = 0.37


def made(p, c=0.0, d=0.0, steps=OCTAVE, power=1, relative=0.0, horizon=1.0, sign=1.0) -> Errors:
    h = horizon / np.array(steps, dtype=float)
    m = (sign * C * h**p * (1 + c * h + d * h * h)) ** power
    octaves = tuple(math.log2(b / a) for a, b in pairwise(steps))
    spread = np.diag((relative * m) ** 2)
    return Errors(steps, octaves, m, spread, 100, power, np.zeros(len(m)))


def constant(errors: Errors, p, counting=None, horizon=1.0, quantile=Q) -> Interval | None:
    rungs = range(len(errors.steps)) if counting is None else counting
    order = observed_order(errors, list(rungs), quantile)
    return error_constant(errors, order, p, horizon, quantile)


ROUND_OFF = round_off(C, 256)  # powers, and differences of numbers some times larger


@pytest.mark.parametrize("horizon", [1.0, 0.3, 5.0])
@pytest.mark.parametrize("c", [0.0, 0.8, -1.5])
@pytest.mark.parametrize("steps", [OCTAVE, TWO_OCTAVES], ids=["octaves", "two octaves"])
@pytest.mark.parametrize("p", [0.5, 1.0, 2.0])
def test_a_linear_correction_is_taken_off_to_round_off(p, steps, c, horizon):
    """The estimate is C itself; it would catch steps taken for step sizes, or a lost horizon."""
    found = constant(made(p, c, steps=steps, horizon=horizon), p, horizon=horizon)
    assert abs(found.estimate - C) <= ROUND_OFF
    assert found.high - found.low <= 2 * ROUND_OFF


@pytest.mark.parametrize(("steps", "factor"), [(OCTAVE, 2), (TWO_OCTAVES, 4)])
def test_what_is_left_is_the_quadratic_term_of_two_rungs(steps, factor):
    """A line through d h² at h and f h meets 0 at -f d h², the one before at f² times that.

    The bounds are as far away as these two are from one another; it would catch bounds that are a
    share of the estimate.
    """
    h, f = 1 / steps[-1], factor
    found = constant(made(1.0, 0.5, 0.7, steps=steps), 1.0)
    left = C * f * 0.7 * h * h
    assert abs(found.estimate - (C - left)) <= ROUND_OFF
    assert abs(found.high - found.estimate - left * (f * f - 1)) <= ROUND_OFF
    assert abs(found.estimate - found.low - left * (f * f - 1)) <= ROUND_OFF


@pytest.mark.parametrize("power", [1, 2], ids=["weak", "strong"])
@pytest.mark.parametrize("c", [0.0, 0.8, -1.5])
@pytest.mark.parametrize("d", [0.0, 0.9, -2.0])
@pytest.mark.parametrize("steps", [OCTAVE, TWO_OCTAVES], ids=["octaves", "two octaves"])
def test_bounds_hold_the_constant(steps, d, c, power):
    """For mean squares, whose correction is never linear, too."""
    found = constant(made(1.0, c, d, steps, power), 1.0)
    assert found.low - ROUND_OFF <= C <= found.high + ROUND_OFF
    assert found.low <= found.estimate <= found.high


@pytest.mark.parametrize("power", [1, 2], ids=["weak", "strong"])
def test_bounds_hold_the_constant_whatever_the_errors_are_within_their_intervals(power):
    """At all corners of the last three rungs' intervals, which are Q spreads wide."""
    relative = 1e-3
    errors = made(1.0, 0.8, power=power, relative=relative)
    for corner in product([-1, 1], repeat=3):
        moved = errors.measures.copy()
        moved[-3:] *= 1 + Q * relative * np.array(corner)
        found = constant(replace(errors, measures=moved), 1.0)
        assert found.low <= C <= found.high, corner


@pytest.mark.parametrize(("steps", "magnified"), [(OCTAVE, 3.0), (TWO_OCTAVES, 5 / 3)])
def test_spreads_are_magnified_as_the_extrapolation_does(steps, magnified):
    """(f s_fine + s_coarse)/(f - 1) of relative spreads, where the two lines agree.

    It would catch spreads without their quantile, and the spread of the finest rung alone.
    """
    relative = 1e-3
    found = constant(made(1.0, steps=steps, relative=relative), 1.0)
    width = magnified * Q * relative * C
    assert abs(found.high - found.estimate - width) <= ROUND_OFF
    assert abs(found.estimate - found.low - width) <= ROUND_OFF


def test_errors_of_either_sign_have_the_same_constant():
    assert constant(made(1.0, 0.8, sign=-1.0), 1.0) == constant(made(1.0, 0.8), 1.0)


def test_there_is_no_constant_with_fewer_than_three_rungs_that_count():
    errors = made(1.0)
    assert constant(errors, 1.0, [3, 4]) is None
    assert constant(errors, 1.0, [2, 3, 4]) is not None


def test_the_constant_is_that_of_the_three_finest_rungs_that_count():
    errors = made(1.0, 0.8)
    errors.measures[:2] = 77.0
    assert constant(errors, 1.0) == constant(made(1.0, 0.8), 1.0, [2, 3, 4])


def test_rungs_that_do_not_count_are_left_out():
    """The finest is in round-off: the three before it are two octaves apart in the middle."""
    errors = made(1.0, 0.8, steps=(4, 8, 32, 64, 128))
    errors.measures[3:] = 0.0
    found = constant(errors, 1.0, [0, 1, 2])
    assert abs(found.estimate - C) <= ROUND_OFF


def test_a_constant_is_never_negative():
    """Errors that fall faster than h^p extrapolate to less than nothing."""
    found = constant(made(2.0), 0.5)
    assert found.estimate == found.low == 0.0
    assert found.high >= 0.0


def order_of(local: float, extrapolated: float | None = None) -> Order:
    def interval(v):
        return Interval(v, v - 0.1, v + 0.1)

    trend = None
    if extrapolated is not None:
        trend = Trend(*map(interval, (local, local, extrapolated, 0.0)))
    return Order((0, 1, 2), interval(local), trend)


@pytest.mark.parametrize(
    ("estimate", "limit"),
    [
        (0.5, 0.5),
        (0.93, 1.0),
        (1.08, 1.0),
        (1.45, 1.5),
        (2.0, 2.0),
        (0.75, None),
        (0.85, None),
        (1.13, None),
        (0.05, None),
        (0.0, None),
        (-0.5, None),
    ],
)
def test_an_order_settles_at_a_multiple_of_one_half_that_is_near(estimate, limit):
    """Within a tenth, and above nothing."""
    assert limiting_order(order_of(0.7, estimate)) == limit
    assert limiting_order(order_of(estimate)) == limit


def test_where_an_order_leads_counts_more_than_where_it_is():
    assert limiting_order(order_of(0.8, 0.98)) == 1.0
    assert limiting_order(order_of(1.0, 1.25)) is None
