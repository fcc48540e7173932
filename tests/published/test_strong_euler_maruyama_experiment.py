"""The strong-convergence experiment for Euler–Maruyama of Higham (2001), SIAM Review 43, 525–546.

dX = 2 X dt + X dW, X_0 = 1, T = 1, steps 2^-9 … 2^-5, error = mean of |X_N - X(T)|. The paper has
1000 paths and fits an order of 0.5384 (from memory): the targets are the population values
instead. Mean absolute errors were simulated apart from this bench on 160000 paths, with their
standard errors; root mean squares are exact (the finite products of tests/known).
"""

import numpy as np
import pytest

import sdebench as sb
from sdebench import discovery
from tests.tolerance import FALSE_ALARM, as_printed, sampling

STEPS = (32, 64, 128, 256, 512)
MEAN_ABSOLUTE = {  # steps: value, standard error
    512: (0.18487, 0.00086),
    256: (0.2628, 0.0013),
    128: (0.3747, 0.0020),
    64: (0.5407, 0.0031),
    32: (0.7844, 0.0049),
}
ROOT_MEAN_SQUARE = {
    512: "0.394691450097",
    256: "0.576551570160",
    128: "0.862220061126",
    64: "1.329027032530",
    32: "2.101789756230",
}
MU, SIGMA = 2.0, 1.0


@pytest.fixture(scope="module")
def strong():
    """65536 paths, seed 1."""
    evidence = sb.measure(
        "euler-maruyama",
        route="sampled",
        on=sb.problem("gbm", mu=MU, sigma=SIGMA, x0=1.0),
        steps=STEPS,
        looks=2,
        threads=1,
        confidence=1 - FALSE_ALARM,
    )
    return next(row for row in evidence.results if row.kind == "strong")


def test_mean_absolute_errors_are_those_of_the_population(strong):
    """Two samples, each beyond its bound with probability 1e-6 a rung.

    It would catch a root mean square (twice as large) or paths of another horizon or volatility.
    """
    for rung in strong.rungs:
        value, error = MEAN_ABSOLUTE[rung.steps]
        allowed = rung.mean_absolute_uncertainty + sampling(error)
        assert abs(rung.mean_absolute - value) <= allowed, rung.steps


def test_the_bounds_exclude_the_neighbouring_rung(strong):
    """So that the comparison above could have failed: half or twice the step is told apart."""
    for rung in strong.rungs[1:]:
        value, error = MEAN_ABSOLUTE[rung.steps // 2]
        allowed = rung.mean_absolute_uncertainty + sampling(error)
        assert abs(rung.mean_absolute - value) > allowed, rung.steps


def test_the_root_mean_square_is_not_trusted_on_so_heavy_a_tail(strong):
    """One standard deviation of the squared error is about 13 times its mean (σ = 1)."""
    assert not strong.trusted


def tilted(steps: int, n_paths: int, seed: int) -> np.ndarray:
    """((X_N - X_T) / X_T)² E X_T² on paths drawn with the density X_T² / E X_T².

    By Girsanov's theorem (from memory) W then has the drift 2σ. The mean is the mean square error
    of the original paths, and the tail is light: the density takes the weight of large paths.
    """
    problem = sb.problem("gbm", mu=MU, sigma=SIGMA, x0=1.0)
    scheme, h = discovery.schemes()["euler-maruyama"], 1.0 / steps
    rng = np.random.default_rng(seed)
    x = exact = np.ones(n_paths)
    for n in range(steps):
        dw = np.sqrt(h) * rng.standard_normal(n_paths) + 2 * SIGMA * h
        x = scheme(problem.sde, n * h, x, h, sb.Noise(dw=dw))
        exact = problem.exact_step(n * h, exact, h, sb.Noise(dw=dw))
    return (x / exact - 1) ** 2 * np.exp(2 * MU + SIGMA**2)


@pytest.mark.parametrize("steps", STEPS)
def test_root_mean_square_errors_are_those_of_the_population(steps):
    """The registered step and flow on 8192 paths, seed 3, false alarm 1e-6.

    Known to some 8% of the mean square; it would catch a flow without the Itô correction -σ²/2,
    increments of the wrong variance, and a rung walked with a neighbour's step.
    """
    squares = tilted(steps, 8192, seed=3)
    error = squares.std(ddof=1) / np.sqrt(len(squares))
    text = ROOT_MEAN_SQUARE[steps]
    target = float(text) ** 2
    allowed = sampling(error, len(squares) - 1) + 2 * float(text) * as_printed(text)
    assert abs(squares.mean() - target) <= allowed
