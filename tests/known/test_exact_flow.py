"""The exact flow: two pieces make the whole, its mean is the law's, and old noise fades.

Chapman & Kolmogorov on a single path: for all x, t and pieces h1, h2 of one path,
flow(t + h1, flow(t, x, h1, first), h2, second) = flow(t, x, h1 + h2, first and second joined).
"""

import math

import numpy as np
import pytest

import sdebench as sb
from sdebench import discovery
from sdebench.wiener import gauss_hermite
from tests.tolerance import round_off

PROBLEMS = (
    "gbm",
    "gbm:mu=1.5,sigma=0.5,x0=1",
    "ou",
    "ou:theta=5,mean=-2,sigma=0.3,x0=4",
    "ramped-noise",
    "ramped-noise:b=0.7,x0=-1.1",
)
PIECES = {"halves": (0.0, 0.5, 0.5), "uneven, later": (0.6, 0.013, 0.38), "long": (1.3, 2.0, 0.7)}
N_PATHS = 500


def joined_noise(problem: sb.Problem, h1: float, h2: float) -> list[dict[str, np.ndarray]]:
    """Two pieces of the same paths, and both joined; seed 11."""
    rng = np.random.default_rng(11)
    pieces = [
        sb.StepLaw(problem.functionals, h, problem.decay_rate).from_normals(
            [rng.standard_normal(N_PATHS) for _ in problem.functionals]
        )
        for h in (h1, h2)
    ]
    return [*pieces, sb.concatenate(*pieces, h2, problem.decay_rate)]


@pytest.mark.parametrize("pieces", PIECES.values(), ids=PIECES.keys())
@pytest.mark.parametrize("spec", PROBLEMS)
def test_two_steps_of_the_flow_are_one_step_on_the_joined_noise(spec, pieces):
    """To the round-off of some twenty operations, an exponential's argument below 10 among them."""
    problem = sb.problem(spec)
    t, h1, h2 = pieces
    first, second, both = joined_noise(problem, h1, h2)
    x = np.linspace(-2, 2, N_PATHS) * problem.start
    middle = problem.exact_step(t, x, h1, sb.Noise(**first))
    twice = problem.exact_step(t + h1, middle, h2, sb.Noise(**second))
    once = problem.exact_step(t, x, h1 + h2, sb.Noise(**both))
    size = np.abs(once).max() + np.abs(middle).max() + np.abs(twice).max()
    assert np.abs(twice - once).max() <= round_off(size, 20 + 10)


@pytest.mark.parametrize("spec", PROBLEMS)
def test_the_flow_over_the_horizon_has_the_mean_and_second_moment_of_the_law(spec):
    """By Gauss–Hermite quadrature, 60 nodes a functional, exact far below round-off here."""
    problem = sb.problem(spec)
    law = sb.StepLaw(problem.flow_noise, problem.horizon, problem.decay_rate)
    noise, weights = law.nodes(gauss_hermite(60), 60 if len(law.names) == 2 else 1)
    start = np.full(len(weights), problem.start)
    end = problem.exact_step(0.0, start, problem.horizon, sb.Noise(**noise))
    for power in (1, 2):
        exact, doubt = problem.law(problem.params).expectation(lambda x, k=power: x**k)
        size = float(weights @ np.abs(end) ** power)
        assert abs(weights @ end**power - exact) <= doubt + round_off(size, 20 * len(weights))


@pytest.mark.parametrize("steps", [1, 7, 64])
def test_the_exact_transition_follows_the_flow_on_every_path(steps):
    """Step by step, on the same decayed increments; some ten operations a step."""
    problem = sb.problem("ou", theta=2.0, sigma=0.5, horizon=3.0)
    scheme = discovery.schemes()["exact-ou"]
    h = problem.horizon / steps
    rng = np.random.default_rng(12)
    whole, x = None, np.full(N_PATHS, problem.start)
    for n in range(steps):
        normals = [rng.standard_normal(N_PATHS) for _ in range(2)]
        noise = sb.StepLaw(("decayed",), h, problem.decay_rate).from_normals(normals)
        x = scheme(problem.sde, n * h, x, h, sb.Noise(decayed=noise["decayed"]))
        whole = noise if whole is None else sb.concatenate(whole, noise, h, problem.decay_rate)
    start = np.full(N_PATHS, problem.start)
    once = problem.exact_step(0.0, start, problem.horizon, sb.Noise(**whole))
    assert np.abs(x - once).max() <= round_off(np.abs(once).max() + problem.start, 10 * steps)


@pytest.mark.parametrize("age", [0, 1, 5, 20])
def test_noise_of_some_age_is_forgotten_as_the_decay_says(age):
    """Common practice: an increment at time s moves X_t by e^(-θ(t-s)) times its size."""
    problem = sb.problem("ou", theta=1.7)
    scheme, h, kick = discovery.schemes()["exact-ou"], 0.125, 0.25
    ends = []
    for size in (0.0, kick):
        x = np.array([problem.start])
        for n in range(age + 1):
            noise = sb.Noise(decayed=np.array([size if n == 0 else 0.0]))
            x = scheme(problem.sde, n * h, x, h, noise)
        ends.append(x[0])
    moved = problem.params["sigma"] * kick * math.exp(-1.7 * h * age)
    assert abs(ends[1] - ends[0] - moved) <= round_off(problem.start, 10 * (age + 1))


def test_the_start_is_forgotten_as_the_decay_says():
    """Common practice: two starts on one path approach each other as e^(-θt)."""
    problem = sb.problem("ou", theta=1.7)
    first, second, _ = joined_noise(problem, 0.5, 1.0)
    near, far = np.full(N_PATHS, 1.0), np.full(N_PATHS, 3.0)
    for t, h, noise in ((0.0, 0.5, first), (0.5, 1.0, second)):
        near, far = (problem.exact_step(t, x, h, sb.Noise(**noise)) for x in (near, far))
    gap = np.abs(far - near - 2.0 * math.exp(-1.7 * 1.5))
    assert gap.max() <= round_off(np.abs(far).max() + 3.0, 20)


def test_started_at_its_mean_the_mean_stays_there():
    """Common practice; of the law, and of Euler–Maruyama and the exact transition without noise."""
    problem = sb.problem("ou", x0=1.2, mean=1.2, horizon=5.0)
    mean, doubt = problem.law(problem.params).expectation(lambda x: x)
    assert abs(mean - 1.2) <= doubt + round_off(1.2, 12 * 4000)
    still = sb.Noise(dw=np.zeros(1), decayed=np.zeros(1))
    for name in ("euler-maruyama", "exact-ou"):
        assert discovery.schemes()[name](problem.sde, 0.0, np.array([1.2]), 0.25, still) == 1.2
