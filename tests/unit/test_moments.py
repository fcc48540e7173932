"""Means of many rows, against NumPy and textbook regression."""

import math

import numpy as np
import pytest
from scipy import stats

from sdebench.moments import Moments
from tests.tolerance import binomial_band, round_off, sampling

N = 60


@pytest.fixture
def batches() -> np.ndarray:
    """Correlated batch means, shape (rows, batches), from seed 3."""
    rng = np.random.default_rng(3)
    mix = rng.standard_normal((4, 4))
    return mix @ rng.standard_normal((4, N)) + np.array([[1.0], [-2.0], [0.0], [5.0]])


def close(found, expected, operations: int = 8 * N) -> bool:
    scale = float(np.abs(expected).max())
    return float(np.abs(found - expected).max()) <= round_off(scale, operations)


@pytest.mark.parametrize("cuts", [(30,), (1, 2, 3), (7, 40), range(1, N)], ids=str)
def test_merging_gives_the_mean_of_all_batches(batches, cuts):
    parts = [Moments.of(part) for part in np.split(batches, cuts, axis=1)]
    merged = sum(parts[1:], parts[0])
    assert merged.count == N
    assert close(merged.mean, batches.mean(axis=1))


@pytest.mark.parametrize("cuts", [(30,), (1, 2, 3), (7, 40), range(1, N)], ids=str)
def test_merging_gives_the_scatter_of_all_batches(batches, cuts):
    parts = [Moments.of(part) for part in np.split(batches, cuts, axis=1)]
    merged = sum(parts[1:], parts[0])
    assert close(merged.scatter, np.cov(batches) * (N - 1))


def test_no_digits_are_lost_where_a_mean_is_large_against_its_spread(batches):
    """A difference of sums of squares would be wrong by 1e16 ulp, which is more than the spread."""
    shift = 2.0**27
    parts = [Moments.of(part) for part in np.split(batches + shift, 6, axis=1)]
    merged = sum(parts[1:], parts[0])
    kept = np.cov(batches) * (N - 1)
    spread = float(np.abs(batches - batches.mean(axis=1, keepdims=True)).max())
    # Each centred value is off by a few ulp of the shift, times the spread, summed over N.
    assert np.abs(merged.scatter - kept).max() <= round_off(shift * spread, 8 * N)


def test_the_estimate_is_the_mean_with_its_covariance(batches):
    found = Moments.of(batches).estimate([2, 0])
    chosen = batches[[2, 0]]
    assert close(found.means, chosen.mean(axis=1))
    assert close(found.covariance, np.cov(chosen) / N)
    assert found.dof == N - 1


def regression(y: np.ndarray, controls: np.ndarray):
    """Return intercepts, their covariance and the design's condition: ordinary least squares."""
    design = np.vstack([np.ones(y.shape[1]), controls]).T
    slopes, *_ = np.linalg.lstsq(design, y.T, rcond=None)
    residual = y.T - design @ slopes
    dof = design.shape[0] - design.shape[1]
    leverage = np.linalg.inv(design.T @ design)[0, 0]
    return slopes[0], residual.T @ residual / dof * leverage, dof, np.linalg.cond(design)


def test_adjusted_means_are_the_intercepts_of_least_squares(batches):
    intercepts, _, _, condition = regression(batches[:2], batches[2:])
    found = Moments.of(batches).adjusted([0, 1], [2, 3])
    # Normal equations lose the square of the condition number.
    assert close(found.means, intercepts, int(8 * N * condition**2))


def test_adjusted_means_have_the_textbook_covariance_of_intercepts(batches):
    _, covariance, dof, condition = regression(batches[:2], batches[2:])
    found = Moments.of(batches).adjusted([0, 1], [2, 3])
    assert found.dof == dof
    assert close(found.covariance, covariance, int(8 * N * condition**2))


def test_controls_of_very_different_sizes_do_as_well(batches):
    scaled = batches * np.array([[1.0], [1.0], [2.0**-30], [2.0**30]])
    plain = Moments.of(batches).adjusted([0, 1], [2, 3])
    found = Moments.of(scaled).adjusted([0, 1], [2, 3])
    condition = regression(batches[:2], batches[2:])[3]
    assert close(found.means, plain.means, int(8 * N * condition**2))


def test_a_control_that_never_moves_is_left_out(batches):
    still = np.vstack([batches, np.zeros((1, N))])
    found = Moments.of(still).adjusted([0], [2, 3, 4])
    plain = Moments.of(batches).adjusted([0], [2, 3])
    assert found.dof == plain.dof
    assert close(found.means, plain.means)


def test_a_control_given_twice_changes_no_mean(batches):
    found = Moments.of(np.vstack([batches, batches[3:]])).adjusted([0], [2, 3, 4])
    plain = Moments.of(batches).adjusted([0], [2, 3])
    condition = regression(batches[:1], batches[2:])[3]
    assert close(found.means, plain.means, int(8 * N * condition**2))


def test_a_row_that_is_its_control_has_mean_zero_without_error(batches):
    centred = batches - batches.mean(axis=1, keepdims=True) + 0.25
    found = Moments.of(centred).adjusted([3], [3])
    scale = float(np.abs(centred[3]).max())
    assert abs(found.means[0]) <= round_off(scale, 8 * N)
    assert abs(found.covariance[0, 0]) <= round_off(scale**2, 8 * N)


@pytest.mark.parametrize("seed", range(8))
@pytest.mark.parametrize("size", [1e-12, 1.0, 1e12])
def test_a_row_that_its_controls_explain_whole_keeps_the_variance_of_its_round_off(seed, size):
    """Its residual is round-off of either sign: nothing, or less, would be an interval of width 0.

    The row's mean is then wrong by round-off, and must lie inside its own interval.
    """
    controls = np.random.default_rng(seed).standard_normal((3, N))
    row = size * (2.0 * controls[0] - 3.0 * controls[1] + 0.1 * controls[2])
    found = Moments.of(np.vstack([row, controls])).adjusted([0], [1, 2, 3])
    assert found.covariance[0, 0] > 0
    assert abs(found.means[0]) <= sampling(math.sqrt(found.covariance[0, 0]), found.dof)


def test_a_row_that_never_moves_has_no_variance(batches):
    found = Moments.of(np.vstack([batches, np.full((1, N), 0.75)])).adjusted([4], [2, 3])
    assert (found.means[0], found.covariance[0, 0]) == (0.75, 0.0)


def test_adjusted_intervals_cover_as_often_as_they_say():
    """95% Student intervals of the intercept cover zero in 1500 samples of 12 batches (seed 5).

    False alarm 1e-6 by the binomial band. Catches a normal quantile or a missing leverage, with
    which fewer than nine in ten cover.
    """
    rng = np.random.default_rng(5)
    n_samples, covered = 1500, 0
    for _ in range(n_samples):
        controls = rng.standard_normal((4, 12))
        y = controls.sum(axis=0) + rng.standard_normal(12)
        found = Moments.of(np.vstack([y, controls])).adjusted([0], [1, 2, 3, 4])
        width = stats.t.isf(0.025, found.dof) * math.sqrt(found.covariance[0, 0])
        covered += abs(found.means[0]) <= width
    low, high = binomial_band(n_samples, 0.95)
    assert low <= covered <= high


def test_slopes_are_those_of_the_regression(batches):
    """By NumPy's least squares, of rows 3 and 0 on rows 1 and 2; a constant control has none."""
    still = np.vstack([batches, np.ones(N)])
    found = Moments.of(still).slopes([3, 0], [1, 2, 4])
    centred = batches - batches.mean(axis=1, keepdims=True)
    expected, *_ = np.linalg.lstsq(centred[[1, 2]].T, centred[[3, 0]].T, rcond=None)
    assert close(found[:2], expected, 64 * N)
    assert np.all(found[2] == 0.0)
