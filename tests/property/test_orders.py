"""Orders of convergence, for all power laws, sizes and noises."""

import math
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import assume, example, given, settings
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


# Ladders of octaves and of two octaves, long enough for an outlier: five rungs or more.
long_ladders = st.tuples(st.integers(1, 8), st.sampled_from([2, 4]), st.integers(5, 8)).map(
    lambda drawn: tuple(drawn[0] * drawn[1] ** k for k in range(drawn[2]))
)
powers = st.sampled_from([1, 2])
signed = st.floats(0.01, 100) | st.floats(-100, -0.01)


def summed(steps, terms, power) -> np.ndarray:
    """Return measures on the rungs: sums of terms (c, p) of c h^p, p of an error that is a root.

    Of a mean square, which is never negative, with the sign that it has on the finest rung.
    """
    h = 1 / np.array(steps, dtype=float)
    total = sum(c * h ** (p * power) for c, p in terms)
    return total if power == 1 or total[-1] > 0 else -total


def outlier_of(steps, measures, power, relative=0.0, quantile=3.0):
    made = errors(steps, measures, relative * np.abs(measures), power)
    found = observed_order(made, counting_rungs(made, quantile), quantile)
    return found and found.outlier


@settings(max_examples=150, deadline=None)
@given(
    long_ladders,
    exponents,
    exponents,
    st.floats(0.2, 8),
    st.floats(-9, 0),
    st.sampled_from([1.0, -1.0]),
    powers,
)
def test_two_powers_of_h_give_no_outlier_however_they_cancel(
    steps, p, q, zero, decades, side, power
):
    """c h^p - d h^q, whose zero is near any place of the ladder, or between its rungs.

    A rung at which they cancel makes the next one stand out from it. It would catch a rule that
    looks at the orders next to a rung alone.
    """
    assume(abs(p - q) > 0.01)
    place = zero / steps[len(steps) // 2]
    terms = [(1.0, p), (-(place ** ((p - q) * power)) * (1 + side * 10.0**decades), q)]
    assert outlier_of(steps, summed(steps, terms, power), power) is None


@settings(max_examples=150, deadline=None)
@given(
    long_ladders,
    st.lists(st.tuples(st.floats(0.01, 100), exponents), min_size=1, max_size=3),
    powers,
    st.sampled_from([0.0, 1e-6, 1e-2]),
)
def test_powers_of_h_of_one_sign_give_no_outlier(steps, terms, power, relative):
    """Their local order only falls as h does; errors known exactly, well, or to 1%."""
    assert outlier_of(steps, summed(steps, terms, power), power, relative) is None


@settings(max_examples=150, deadline=None, derandomize=True)
@given(
    long_ladders,
    st.lists(st.tuples(signed, exponents), min_size=3, max_size=3),
    powers,
    st.sampled_from([0.0, 1e-6, 1e-2]),
)
def test_three_powers_of_h_of_any_signs_give_no_outlier(steps, terms, power, relative):
    """After the last change of sign. Drawn without chance (derandomized), and not aimed: three
    powers that all but cancel at two places close together may leave a rung that stands out.

    It would catch a rule that does not ask what the order is beyond the rung.
    """
    assert outlier_of(steps, summed(steps, terms, power), power, relative) is None


@pytest.mark.parametrize(
    ("steps", "terms"),
    [
        ((4, 8, 16, 32, 64, 128, 256), [(1.0406, 0.5), (-23.1838, 1.5), (120.1972, 2.5)]),
        ((4, 8, 16, 32, 64), [(1.0, 1.5), (-55.0914, 3.0), (94.3667, 3.5)]),
        ((4, 8, 16, 32, 64), [(1.0, 1.0556), (-1.15862, 1.0963), (0.34644, 1.8557)]),
        ((4, 8, 16, 32, 64), [(1.0246, 1.5), (-10.3213, 2.5), (28.9827, 3.5)]),
    ],
    ids=["orders of halves", "order 1.5", "order 1", "hardly"],
)
def test_three_powers_of_h_that_all_but_cancel_twice_give_no_outlier(steps, terms):
    """An error that comes near to 0 without a change of sign, and rises again from there.

    It would catch a rule that takes the rise, or the plateau before it, for an error that is too
    large.
    """
    assert outlier_of(steps, summed(steps, terms, 1), 1) is None


@settings(max_examples=150, deadline=None)
@given(
    long_ladders,
    st.lists(st.tuples(st.floats(0.01, 100), exponents), min_size=1, max_size=3),
    powers,
    st.integers(0, 99),
)
@example(steps=(4, 16, 64, 256, 1024), terms=[(1.0, 3.0), (1e-3, 0.5)], power=1, place=0)
def test_an_error_that_is_ten_times_too_large_on_one_rung_is_found(steps, terms, power, place):
    """Of all rungs with two before them and one after; it would catch a rule that misses an end,
    or that asks for one order all over the ladder.
    """
    rung = 2 + place % (len(steps) - 3)
    measures = summed(steps, terms, power)
    measures[rung] *= 10.0**power
    assert outlier_of(steps, measures, power)[0] == rung


@settings(max_examples=100, deadline=None)
@given(long_ladders, exponents, sizes, powers, st.floats(3, 1e3), st.data())
def test_the_factor_of_an_outlier_is_that_by_which_its_error_is_too_large(
    steps, p, size, power, factor, data
):
    """Of the error and not of its square, from a power law, which tells what it should be.

    A factor of 3 changes the order between octaves by 1.6 and that between two octaves by 0.8, less
    than the least that stands out: there it is 5 or more. log2 of a ratio is off by a few ulp of
    its argument.
    """
    assume(factor >= 5 or steps[1] == 2 * steps[0])
    rung = data.draw(st.integers(2, len(steps) - 2))
    measures = summed(steps, [(size, p)], power)
    measures[rung] *= factor**power
    found = outlier_of(steps, measures, power)
    assert found[0] == rung
    assert abs(found[1] - factor) <= round_off(factor * (p * 20 + 60.0), 32)


@pytest.mark.parametrize("blunt", [0, 1, 2], ids=lambda r: f"rung {r}")
def test_an_outlier_beside_a_rung_that_is_known_too_roughly_is_not_called_one(blunt):
    """Four times too large on the third of five rungs; it, or one before it, is known to 90%.

    It would catch a fall of the order that is taken from estimates, without their bounds.
    """
    measures = 1 / np.array([4.0, 8.0, 4.0, 32.0, 64.0])
    made = errors((4, 8, 16, 32, 64), measures, 1e-6 * measures)
    assert observed_order(made, range(5), 3.0).outlier[0] == 2
    relative = np.where(np.arange(5) == blunt, 0.3, 1e-6)
    made = errors((4, 8, 16, 32, 64), measures, relative * measures)
    assert observed_order(made, range(5), 3.0).outlier is None


@settings(max_examples=200, deadline=None, derandomize=True)
@given(long_ladders, exponents, st.floats(1e-3, 0.3), powers, st.integers(0, 10**6))
def test_noise_on_a_power_law_is_no_outlier(steps, p, relative, power, seed):
    """Normal noise of a known size; each interval misses with probability 1e-6.

    Drawn without chance (derandomized). It would catch a rule that goes by estimates without their
    intervals, to which noise of 30% is an outlier every other time on octaves.
    """
    clean = summed(steps, [(1.0, p)], power)
    noisy = clean * (1 + relative * np.random.default_rng(seed).standard_normal(len(steps)))
    made = errors(steps, noisy, relative * clean, power)
    quantile = sampling(1.0, false_alarm=FALSE_ALARM)
    found = observed_order(made, counting_rungs(made, quantile), quantile)
    assert found is None or found.outlier is None


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
