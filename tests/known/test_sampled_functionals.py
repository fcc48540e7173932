"""What is drawn has the law it should: covariances of a million samples.

The product of two centred normal variables u, v has the variance Var u Var v + Cov(u, v)², so that
the standard error of each sampled covariance is known beforehand. False alarm 1e-6 an entry,
2^20 paths, seed 21: a covariance wrong by some 0.7% of its scale is seen, such as a dz drawn
independently of dw, or a decayed increment drawn with θ/2.
"""

import numpy as np
import pytest

import sdebench as sb
from tests.tolerance import sampling

ALL = ("dw", "dz", "decayed")
N_PATHS = 2**20


def closed_form(theta: float, h: float) -> np.ndarray:
    """The covariances of `ALL` (see `test_step_covariances`)."""
    one, two = np.exp(-theta * h), np.exp(-2 * theta * h)
    wi, ii = (1 - one) / theta, (1 - two) / (2 * theta)
    zi = (1 - one * (1 + theta * h)) / theta**2
    return np.array([[h, h**2 / 2, wi], [h**2 / 2, h**3 / 3, zi], [wi, zi, ii]])


def draw(rng: np.random.Generator, theta: float, h: float) -> dict[str, np.ndarray]:
    normals = [rng.standard_normal(N_PATHS) for _ in ALL]
    return sb.StepLaw(ALL, h, theta).from_normals(normals)


def assert_sampled(drawn: dict[str, np.ndarray], expected: np.ndarray) -> None:
    stack = np.array([drawn[name] for name in ALL])
    found = stack @ stack.T / N_PATHS
    variances = np.diag(expected)
    errors = np.sqrt((np.outer(variances, variances) + expected**2) / N_PATHS)
    assert np.all(np.abs(found - expected) <= sampling(1.0) * errors)
    assert np.all(np.abs(stack.mean(axis=1)) <= sampling(1.0) * np.sqrt(variances / N_PATHS))


@pytest.mark.parametrize(
    "step", [(0.75, 0.25), (6.0, 1.0)], ids=lambda s: "theta={},h={}".format(*s)
)
def test_drawn_functionals_have_the_covariances_of_the_step(step):
    theta, h = step
    assert_sampled(draw(np.random.default_rng(21), theta, h), closed_form(theta, h))


def test_drawn_and_joined_functionals_have_the_covariances_of_the_whole():
    """Four uneven pieces; it would catch a dz joined without h2 w1, or the later piece decayed."""
    rng, theta = np.random.default_rng(22), 2.5
    pieces = (0.1, 0.4, 0.05, 0.2)
    joined = draw(rng, theta, pieces[0])
    for h in pieces[1:]:
        joined = sb.concatenate(joined, draw(rng, theta, h), h, theta)
    assert_sampled(joined, closed_form(theta, sum(pieces)))


def test_the_variance_of_what_decay_adds_to_the_increment_is_seen():
    """Var(I - (Cov(dw,I)/h) dw) at θh = 0.1, some 10^-3 of Var I: 0 if I were a multiple of dw."""
    theta, h = 1.0, 0.1
    drawn, expected = draw(np.random.default_rng(23), theta, h), closed_form(theta, h)
    rest = drawn["decayed"] - expected[0, 2] / h * drawn["dw"]
    exact = expected[2, 2] - expected[0, 2] ** 2 / h
    assert abs(np.mean(rest**2) - exact) <= sampling(exact * np.sqrt(2 / N_PATHS))
