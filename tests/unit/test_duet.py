"""Two schemes on the same paths: each as sampled alone, and what they share."""

from dataclasses import replace
from functools import cache

import numpy as np
import pytest

import sdebench as sb
from sdebench.duet import Duet
from sdebench.functional import STANDARD
from sdebench.ladder import Ladder
from sdebench.sample import BATCH, BLOCK, Plan, Sample
from tests.tolerance import round_off

LADDER = Ladder((2, 4, 8))
N_RUNGS = len(LADDER.steps)
N_BLOCKS = 3


@sb.scheme(strong=0.5)
def euler(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


@sb.scheme(strong=1.0)
def milstein(sde, t, x, h, noise):
    b = sde.diffusion(t, x)
    return euler.step(sde, t, x, h, noise) + b * sde.diffusion_dx(t, x) * (noise.dw**2 - h) / 2


@sb.scheme(strong=0.5, noise=("dw", "dz"))
def euler_that_also_reads_dz(sde, t, x, h, noise):
    return euler.step(sde, t, x, h, noise) + 0.0 * noise.dz


def plan(scheme: sb.Scheme = euler, on: str = "gbm") -> Plan:
    return Plan(scheme, sb.problem(on), LADDER, STANDARD, seed=3)


@cache
def duet(old: sb.Scheme, new: sb.Scheme, on: str = "gbm", threads: int = 1) -> Duet:
    made = Duet(plan(old, on), plan(new, on))
    made.extend(N_BLOCKS, threads)
    return made


@cache
def alone(scheme: sb.Scheme, on: str = "gbm", drawn_for: tuple[str, ...] = ()) -> Sample:
    sample = Sample(replace(plan(scheme, on), drawn_for=drawn_for))
    sample.extend(N_BLOCKS, 1)
    return sample


def halves(covariance: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return the blocks of the old scheme, of the new one, and between them."""
    n = N_RUNGS
    return covariance[:n, :n], covariance[n:, n:], covariance[:n, n:]


def raw_spread(functional: int) -> np.ndarray:
    """Return the variances of weak errors of Euler on GBM before they are adjusted."""
    sample = alone(euler)
    return np.diag(sample.tally.moments.estimate(sample.plan.rows.weak(functional)).covariance)


OPERATIONS = 64 * N_BLOCKS * BLOCK // BATCH  # sums of products of batch means, and a regression
TWINS = [
    pytest.param(euler, "gbm", id="itself on gbm"),
    pytest.param(euler, "ou", id="itself on ou"),
    pytest.param(euler_that_also_reads_dz, "gbm", id="with dz on gbm"),
    pytest.param(euler_that_also_reads_dz, "ou", id="with dz on ou"),
]
on_each_twin = pytest.mark.parametrize(("new", "on"), TWINS)


@on_each_twin
def test_a_scheme_beside_itself_has_the_same_errors_to_the_bit(new, on):
    """Their ratio is exactly 1; it would catch paths that depend on what the scheme steps by.

    So they do on OU unless dz is drawn for both: given dz, the decayed increment is made of it.
    """
    means, _, _ = duet(euler, new, on).mean_squares()
    assert np.array_equal(means[:N_RUNGS] / means[N_RUNGS:], np.ones(N_RUNGS))


@on_each_twin
def test_the_mean_squares_of_a_scheme_and_itself_differ_without_spread(new, on):
    """Var m + Var m' - 2 Cov(m, m') = 0; it would catch a covariance that is left out."""
    _, covariance, _ = duet(euler, new, on).mean_squares()
    old, new_, cross = map(np.diag, halves(covariance))
    assert np.all(np.abs(old + new_ - 2 * cross) <= round_off(1.0, OPERATIONS) * old)


@pytest.mark.parametrize("functional", range(len(STANDARD)), ids=[f.name for f in STANDARD])
def test_the_weak_errors_of_a_scheme_and_itself_differ_without_spread(functional):
    """To the round-off of what the controls explain, which is nearly all of the raw spread."""
    _, covariance, _ = duet(euler, euler_that_also_reads_dz).weak_errors(functional)
    old, new, cross = map(np.diag, halves(covariance))
    slack = round_off(1.0, OPERATIONS) * raw_spread(functional)
    assert np.all(np.abs(old + new - 2 * cross) <= slack)


@pytest.mark.parametrize("on", ["gbm", "ou"])
def test_the_errors_of_each_are_those_of_a_sample_of_its_own(on):
    """Of the same seed and blocks, with their covariance; the mean squares to the bit."""
    pair = (euler, euler_that_also_reads_dz) if on == "ou" else (euler, milstein)
    means, covariance, dof = duet(*pair, on).mean_squares()
    for k, scheme in enumerate(pair):
        sample = alone(scheme, on, ("dz",) if on == "ou" else ())
        expected = sample.tally.moments.estimate(list(sample.plan.rows.squares))
        own = halves(covariance)[k]
        assert np.array_equal(means[k * N_RUNGS : (k + 1) * N_RUNGS], expected.means)
        slack = round_off(float(np.diag(own).max()), OPERATIONS)
        assert np.abs(own - expected.covariance).max() <= slack
        assert dof == expected.dof


@pytest.mark.parametrize("functional", range(len(STANDARD)), ids=[f.name for f in STANDARD])
def test_the_weak_errors_of_each_are_those_of_a_sample_of_its_own(functional):
    """Adjusted by the same controls; it would catch the rows of another functional."""
    pair = (euler, milstein)
    means, covariance, dof = duet(*pair).weak_errors(functional)
    for k, scheme in enumerate(pair):
        sample = alone(scheme)
        rows = sample.plan.rows
        expected = sample.tally.moments.adjusted(list(rows.weak(functional)), list(rows.controls))
        raw = sample.tally.moments.estimate(list(rows.weak(functional)))
        gap = np.abs(means[k * N_RUNGS : (k + 1) * N_RUNGS] - expected.means)
        assert gap.max() <= round_off(float(np.abs(raw.means).max()), OPERATIONS)
        slack = round_off(float(np.diag(raw.covariance).max()), OPERATIONS)
        assert np.abs(halves(covariance)[k] - expected.covariance).max() <= slack
        assert dof == expected.dof


def batch_means_of_squares(scheme: sb.Scheme) -> np.ndarray:
    """Return batch means of squared errors on GBM, from the end of a step and the sum of all dw.

    Written down while the scheme is sampled, block by block on one thread: `(rungs, batches)`.
    """
    finest = LADDER.steps[-1]
    ends: dict[int, list] = {n: [] for n in LADDER.steps}
    increments: list[np.ndarray] = []

    @sb.scheme(strong=0.5)
    def recording(sde, t, x, h, noise):
        ended, n = scheme.step(sde, t, x, h, noise), round(sde.horizon / h)
        if n == finest:
            increments.append(noise.dw.copy())
        if round(t / h) == n - 1:
            ends[n].append(ended)
        return ended

    Sample(plan(recording)).extend(N_BLOCKS, 1)
    p = plan().problem.params
    w = np.reshape(increments, (N_BLOCKS, finest, BLOCK)).sum(axis=1)
    exact = p["x0"] * np.exp(p["mu"] - p["sigma"] ** 2 / 2 + p["sigma"] * w)
    squares = [(np.array(x) - exact) ** 2 for x in ends.values()]
    return np.array([each.reshape(-1, BATCH).mean(axis=1) for each in squares])


def test_the_covariance_between_them_is_that_of_errors_on_the_same_paths():
    """Of batch means by numpy.cov; it would catch other paths, or another pair of rungs."""
    both = np.vstack([batch_means_of_squares(euler), batch_means_of_squares(milstein)])
    n = both.shape[1]
    expected = np.cov(both) / n
    means, covariance, dof = duet(euler, milstein).mean_squares()
    assert dof == n - 1
    # An error is known to some ulp of X, over its root mean square, which is the least of them.
    lost = round_off(4.0 / float(np.sqrt(means.min())), OPERATIONS)
    assert np.all(np.abs(means - both.mean(axis=1)) <= lost * means)
    assert np.abs(covariance - expected).max() <= lost * float(np.diag(expected).max())


def test_the_noise_that_two_schemes_share_leaves_their_difference():
    """Euler and Milstein err alike on additive noise, to round-off, and not on GBM."""
    _, covariance, _ = duet(euler, milstein).mean_squares()
    old, new, cross = map(np.diag, halves(covariance))
    assert np.all(old + new - 2 * cross > 0)
    means, _, _ = duet(euler, milstein, "ou").mean_squares()
    assert np.array_equal(means[:N_RUNGS], means[N_RUNGS:])


def test_the_bits_do_not_depend_on_threads():
    one, two = (duet(euler, milstein, threads=n).moments for n in (1, 2))
    assert np.array_equal(one.mean, two.mean)
    assert np.array_equal(one.scatter, two.scatter)


def test_the_bits_do_not_depend_on_how_the_sample_grew():
    grown = Duet(plan(euler), plan(milstein))
    for n in (1, 2):
        grown.extend(n, 1)
    assert grown.n_blocks == N_BLOCKS
    whole = duet(euler, milstein)
    assert np.array_equal(grown.moments.mean, whole.moments.mean)
    assert np.array_equal(grown.moments.scatter, whole.moments.scatter)
