"""Quadrature that is split where the end of a step crosses a kink, against closed forms.

Ends are a + b Z or exp(a + b Z) for a standard normal Z, or polynomials in Z; the expectations of
payoffs are those of Bachelier (1900) and Black & Scholes (1973), from memory, or derived for these
tests, by `scipy.stats.norm`. Ten Gauss–Legendre nodes on panels of half a standard deviation
integrate a normal density times what is smooth to 1e-25 (error term: Abramowitz & Stegun 1964,
25.4.30), and 1e-18 of the law lies beyond nine standard deviations: round-off is all there is.
"""

import math

import numpy as np
import pytest
from scipy.stats import norm

from sdebench.kinks import EDGES, density, split_expectation
from tests.tolerance import round_off

OPERATIONS = 2 * 360  # a sum over 36 panels of ten nodes, each with a density and an end


def of_affine(a, b):
    """Return ends a + b Z, one row for each a and b."""
    a, b = np.atleast_1d(a).astype(float), np.atleast_1d(b).astype(float)
    return lambda rows, z: a[rows] + b[rows] * z


def of_exponential(a, b):
    affine = of_affine(a, b)
    return lambda rows, z: np.exp(affine(rows, z))


def normal_call(a, b, strike):
    """E max(a + b Z - K, 0)."""
    d = (a - strike) / b
    return (a - strike) * norm.cdf(d) + b * norm.pdf(d)


def lognormal_call(a, b, strike):
    """E max(exp(a + b Z) - K, 0)."""
    d = (a - math.log(strike)) / b
    return math.exp(a + b * b / 2) * norm.cdf(d + b) - strike * norm.cdf(d)


def call(strike):
    return lambda x: np.maximum(x - strike, 0.0)


A = np.array([0.3, -1.0, 0.0, 2.5])
B = np.array([0.2, 1.0, 0.05, 0.7])


@pytest.mark.parametrize("strike", [0.4, -1.7, 0.0, 2.2, 9.0])
def test_a_call_on_a_normal_end(strike):
    """For four rows at once; it would catch rows that are mixed up, and a kink left whole."""
    found = split_expectation(of_affine(A, B), 4, call(strike), [strike])
    for row, (a, b) in enumerate(zip(A, B, strict=True)):
        slack = round_off(abs(a) + b + abs(strike), OPERATIONS)
        assert abs(found[row] - normal_call(a, b, strike)) <= slack, row


@pytest.mark.parametrize("strike", [0.4, 1.0, 1.35, 3.0, 12.0])
def test_a_call_on_a_lognormal_end(strike):
    found = split_expectation(of_exponential(A, B), 4, call(strike), [strike])
    for row, (a, b) in enumerate(zip(A, B, strict=True)):
        slack = round_off(math.exp(a + b * b / 2) + strike, OPERATIONS)
        assert abs(found[row] - lognormal_call(a, b, strike)) <= slack, row


@pytest.mark.parametrize("strike", [0.4, 1.0, 1.35, 3.0, 12.0])
def test_a_digital_on_a_lognormal_end(strike):
    """A jump: a panel that is not cut errs by some hundredth of the density there."""
    found = split_expectation(
        of_exponential(A, B), 4, lambda x: np.where(x > strike, 1.0, 0.0), [strike]
    )
    expected = norm.cdf((A - math.log(strike)) / B)
    # The root is known to an ulp of Y, over its slope b K in Z.
    assert np.abs(found - expected).max() <= round_off(1.0, OPERATIONS) + round_off(1 / B.min(), 16)


@pytest.mark.parametrize("edge", [-8.5, -0.5, 0.0, 0.5, 3.0])
def test_a_kink_at_the_edge_of_a_panel(edge):
    """It would catch a crossing that is counted in both panels, or in neither."""
    assert edge in EDGES
    end = of_affine(0.0, 1.0)
    found = split_expectation(end, 1, lambda x: np.where(x > edge, 1.0, 0.0), [edge])
    assert abs(found[0] - norm.sf(edge)) <= round_off(1.0, OPERATIONS)


@pytest.mark.parametrize("gap", [2.0, 0.4, 0.11], ids=["far", "near", "within a panel"])
def test_several_kinks(gap):
    """A butterfly: three kinks, which is a call bought, two sold and one bought."""
    low, middle, high = 0.1, 0.1 + gap, 0.1 + 2 * gap

    def butterfly(x):
        return np.maximum(gap - np.abs(x - middle), 0.0)

    expected = (
        normal_call(0.3, 0.9, low) - 2 * normal_call(0.3, 0.9, middle) + normal_call(0.3, 0.9, high)
    )
    for kinks in ([low, middle, high], [high, low, middle]):
        found = split_expectation(of_affine(0.3, 0.9), 1, butterfly, kinks)
        assert abs(found[0] - expected) <= round_off(1.0 + high, 2 * OPERATIONS), kinks


def test_several_rows_with_several_kinks():
    """A band that pays 1 between two barriers, which some rows all but miss."""
    found = split_expectation(
        of_affine(A, B), 4, lambda x: np.where((x > 0.2) & (x < 1.1), 1.0, 0.0), [0.2, 1.1]
    )
    expected = norm.cdf((1.1 - A) / B) - norm.cdf((0.2 - A) / B)
    assert np.abs(found - expected).max() <= round_off(1.0, OPERATIONS) + round_off(
        2.0 / B.min(), 16
    )


def test_a_kink_that_is_not_crossed_changes_nothing():
    """To the bit, beside no kinks that are crossed either; E exp(a + b Z) for the value."""
    end = of_exponential(0.3, 0.2)
    far = split_expectation(end, 1, lambda x: x, [1e6])
    farther = split_expectation(end, 1, lambda x: x, [-1.0, 1e9])
    assert np.array_equal(far, farther)
    expected = math.exp(0.3 + 0.02)
    assert abs(far[0] - expected) <= round_off(expected, OPERATIONS)


def test_a_kink_of_a_function_that_is_smooth_there_does_no_harm():
    found = split_expectation(of_exponential(0.3, 0.2), 1, lambda x: x * x, [1.0, 1.3, 1.31])
    expected = math.exp(0.6 + 0.08)
    assert abs(found[0] - expected) <= round_off(expected, 2 * OPERATIONS)


def test_an_end_that_turns_back_crosses_a_kink_twice():
    """P(Z² > 1) = 2 Φ(-1); it would catch a search for one crossing only."""
    found = split_expectation(
        lambda rows, z: z * z, 1, lambda x: np.where(x > 1.0, 1.0, 0.0), [1.0]
    )
    assert abs(found[0] - 2 * norm.sf(1.0)) <= round_off(1.0, OPERATIONS)


def test_a_crossing_without_slope_is_found():
    """P((Z - 0.3)³ > 0) = Φ(-0.3): Newton's method would be lost here, a bisection is not."""
    found = split_expectation(
        lambda rows, z: (z - 0.3) ** 3, 1, lambda x: np.where(x > 0.0, 1.0, 0.0), [0.0]
    )
    assert abs(found[0] - norm.sf(0.3)) <= round_off(1.0, OPERATIONS)


def test_an_end_that_touches_a_kink_and_turns_back_is_no_crossing():
    """E max((Z - 0.3)², 0) = 1 + 0.09."""
    found = split_expectation(lambda rows, z: (z - 0.3) ** 2, 1, call(0.0), [0.0])
    assert abs(found[0] - 1.09) <= round_off(1.09, 2 * OPERATIONS)


def test_an_end_that_does_not_depend_on_the_noise_is_valued_where_it_is():
    found = split_expectation(of_affine([0.3, 0.5], [0.0, 0.0]), 2, call(0.4), [0.4])
    assert np.abs(found - [0.0, 0.1]).max() <= round_off(1.0, OPERATIONS)


def test_the_density_is_that_of_the_standard_normal_law():
    z = np.linspace(-9, 9, 37)
    expected = norm.pdf(z)
    assert np.all(np.abs(density(z) - expected) <= [round_off(e, 8 + 81) for e in expected])
