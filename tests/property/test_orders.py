"""Orders of convergence, for all power laws, sizes and noises."""

import math
from itertools import pairwise

import numpy as np
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from sdebench.expansion import limit, rate
from sdebench.orders import Errors, counting_rungs, local_order, observed_order, ratio_interval
from tests.tolerance import FALSE_ALARM, round_off, sampling

exponents = st.floats(0.25, 4.0)
sizes = st.floats(1e-6, 1e6)
ladders = st.tuples(st.integers(1, 8), st.lists(st.integers(2, 4), min_size=2, max_size=5)).map(
    lambda drawn: tuple(int(n) for n in np.cumprod([drawn[0], *drawn[1]]))
)


def errors(steps, measures, standard_errors, power=1) -> Errors:
    octaves = tuple(math.log2(b / a) for a, b in pairwise(steps))
    covariance = np.diag(np.asarray(standard_errors, dtype=float) ** 2)
    return Errors(
        steps, octaves, np.asarray(measures), covariance, 1000, power, np.zeros(len(steps))
    )


@settings(max_examples=150, deadline=None)
@given(ladders, exponents, sizes, st.sampled_from([1, 2]))
def test_a_power_law_gives_back_its_exponent_on_any_ladder(steps, p, size, power):
    measures = np.array([size * float(n) ** -p for n in steps]) ** power
    made = errors(steps, measures, 0 * measures, power)
    found = observed_order(made, counting_rungs(made, 1.0), 1.0)
    # log2 of a ratio is off by a few ulp of its argument, divided by the octaves (one or more).
    assert abs(found.local.estimate - p) <= round_off(p + 40.0, 32)


@settings(max_examples=200, deadline=None, derandomize=True)
@given(exponents, sizes, st.floats(1e-4, 0.2), st.integers(0, 10**6))
def test_a_noisy_power_law_has_its_exponent_inside_the_interval(p, size, relative, seed):
    """Normal noise of a known size on every rung; false alarm 1e-6 an example.

    Fieller's interval is exact where the standard errors are known; 200 examples drawn without
    chance (derandomized), so that the test gives the same answer always. Catches an interval that
    forgets the noise of one of the two rungs.
    """
    clean = np.array([size * n**-p for n in (8.0, 16.0, 32.0)])
    spread = relative * clean
    noisy = clean + spread * np.random.default_rng(seed).standard_normal(3)
    made = errors((8, 16, 32), noisy, spread)
    found = local_order(made, 1, 2, sampling(1.0, false_alarm=FALSE_ALARM))
    assert found.low <= p <= found.high


@settings(max_examples=100, deadline=None)
@given(
    st.lists(st.floats(0.1, 10.0), min_size=5, max_size=5),
    st.lists(st.floats(1e-4, 0.3), min_size=5, max_size=5),
    st.integers(-60, 60),
    st.sampled_from([1, 2]),
)
def test_orders_do_not_change_when_errors_are_scaled(measures, relative, octaves, power):
    """By a power of two, which is exact: the same order to the bit, whatever the units."""
    steps = (4, 8, 16, 32, 64)
    m, s = np.array(measures), np.array(measures) * np.array(relative)
    factor = 2.0**octaves
    plain = errors(steps, m, s, power)
    scaled = errors(steps, factor * m, factor * s, power)
    assert observed_order(plain, range(5), 3.0) == observed_order(scaled, range(5), 3.0)


@settings(max_examples=100, deadline=None)
@given(st.lists(st.floats(0.1, 10.0), min_size=4, max_size=4), st.floats(1e-4, 0.3))
def test_orders_do_not_depend_on_the_sign_of_weak_errors(measures, relative):
    m = np.array(measures)
    made = errors((4, 8, 16, 32), m, relative * m)
    turned = errors((4, 8, 16, 32), -m, relative * m)
    assert observed_order(made, range(4), 3.0) == observed_order(turned, range(4), 3.0)


@settings(max_examples=150, deadline=None)
@given(
    st.lists(st.floats(0.1, 10.0), min_size=3, max_size=5),
    st.floats(1e-6, 0.5),
    st.sampled_from([1, 2]),
)
def test_no_continuation_of_a_trend_narrows_what_is_known_of_the_order(measures, relative, power):
    """The lower end that supports is never above q's own, nor the upper one that refutes below."""
    steps = tuple(4 * 2**k for k in range(len(measures)))
    made = errors(steps, measures, relative * np.array(measures), power)
    found = observed_order(made, range(len(steps)), 3.0)
    assert found.trend.curbed.low <= found.local.low
    assert found.trend.curbed.estimate <= found.local.estimate
    assert found.trend.lifted.high >= found.local.high
    assert found.trend.lifted.estimate >= found.local.estimate


@settings(max_examples=200, deadline=None)
@given(
    st.floats(-5, 5),
    st.floats(-5, 5),
    st.floats(0.01, 2),
    st.floats(0.01, 2),
    st.floats(-1, 1),
    st.floats(0.5, 8),
)
def test_the_interval_of_a_ratio_holds_the_ratio(top, bottom, sd_top, sd_bottom, rho, quantile):
    assume(bottom != 0)
    cross = 0.99 * rho * sd_top * sd_bottom
    covariance = np.array([[sd_top**2, cross], [cross, sd_bottom**2]])
    low, high = ratio_interval(top, bottom, covariance, quantile)
    assert 0 <= low <= high
    assert low <= abs(top / bottom) <= high


@settings(max_examples=200, deadline=None)
@given(
    st.floats(-5, 5),
    st.floats(-5, 5),
    st.floats(0.01, 2),
    st.floats(0.01, 2),
    st.floats(0.5, 4),
    st.floats(1.01, 2),
)
def test_more_confidence_takes_a_wider_interval(top, bottom, sd_top, sd_bottom, quantile, more):
    assume(bottom != 0)
    covariance = np.diag([sd_top**2, sd_bottom**2])
    low, high = ratio_interval(top, bottom, covariance, quantile)
    lower, higher = ratio_interval(top, bottom, covariance, quantile * more)
    assert lower <= low
    assert higher >= high


@settings(max_examples=150, deadline=None)
@given(
    st.lists(st.floats(-3, 3), min_size=1, max_size=9), st.floats(1e-15, 1e-8), st.integers(0, 99)
)
def test_the_limit_of_any_short_series_in_roots_of_h_is_within_its_uncertainty(
    coefficients, floor, seed
):
    """c_0 + c_1 √h + … of up to nine terms, with round-off of either sign put in."""
    h = 2.0 ** -np.arange(4.0, 17.0)
    clean = sum(c * h ** (k / 2) for k, c in enumerate(coefficients))
    noisy = clean + floor * np.random.default_rng(seed).uniform(-1, 1, len(h))
    size = sum(map(abs, coefficients))
    floors = np.full(len(h), floor + round_off(size, 16))
    found, doubt = limit(noisy[:, None], floors[:, None])
    assert abs(found[0] - coefficients[0]) <= doubt[0]


@settings(max_examples=100, deadline=None)
@given(exponents, sizes)
def test_local_errors_that_follow_a_power_law_vanish_at_its_rate(p, size):
    h = 2.0 ** -np.arange(4.0, 17.0)
    found = rate((size * h**p)[:, None], np.zeros((len(h), 1)))[0]
    assert abs(found - p) <= round_off(p + 40.0, 32)
