"""The law of X_T: its expectations against closed forms.

GBM: E X_T^k = x0^k exp((kμ + k(k-1)σ²/2) T). OU and ramped noise are normal, with E cos X_T =
cos(mean) exp(-variance/2); textbook formulas, from memory, checked by the moments' own ODEs below.
"""

import math

import numpy as np
import pytest
from scipy.integrate import solve_ivp

import sdebench as sb
from tests.tolerance import round_off

GBM = ("gbm", "gbm:mu=1.5,sigma=0.5,x0=1", "gbm:mu=2,sigma=1", "gbm:mu=-3,sigma=0.1,horizon=2.5")
NORMAL = {
    "ou": "ou",
    "ou, fast and far": "ou:theta=5,mean=-2,sigma=0.3,x0=4,horizon=0.3",
    "ou, at its mean": "ou:mean=0.7,x0=0.7,theta=1.5,sigma=0.5",
    "ou, hardly pulled": "ou:theta=1e-9,sigma=0.5",
    "ramped noise": "ramped-noise",
    "ramped noise, long": "ramped-noise:b=0.7,x0=-1.1,horizon=3",
}
NODES = 4000  # of the law's quadrature, each with a dozen operations


def expectation(spec: str, f) -> tuple[float, float]:
    problem = sb.problem(spec)
    return problem.law(problem.params).expectation(f)


def mean_and_variance(spec: str) -> tuple[float, float]:
    p = sb.problem(spec).params
    end = p["horizon"]
    if spec.startswith("ou"):
        theta = p["theta"]
        mean = p["mean"] + (p["x0"] - p["mean"]) * math.exp(-theta * end)
        return mean, -(p["sigma"] ** 2) * math.expm1(-2 * theta * end) / (2 * theta)
    return (1 + end) ** 2 * (p["x0"] + p["b"] * end), (1 + end) ** 4 * p["b"] ** 2 * end


@pytest.mark.parametrize("power", [1, 2])
@pytest.mark.parametrize("spec", GBM)
def test_gbm_has_the_moments_of_the_log_normal_law(spec, power):
    p = sb.problem(spec).params
    rate = power * p["mu"] + power * (power - 1) / 2 * p["sigma"] ** 2
    exact = p["x0"] ** power * math.exp(rate * p["horizon"])
    found, doubt = expectation(spec, lambda x: x**power)
    assert abs(found - exact) <= doubt + round_off(exact, 12 * NODES)


@pytest.mark.parametrize("sigma", [3.0, 4.0])
def test_the_second_moment_is_right_where_its_weight_lies_far_out(sigma):
    """x² moves the weight to 2σ√T standard deviations: to 6 and 8 of the 12."""
    p = sb.problem("gbm", sigma=sigma).params
    exact = p["x0"] ** 2 * math.exp(2 * p["mu"] + sigma**2)
    found, doubt = expectation(f"gbm:sigma={sigma}", np.square)
    assert abs(found - exact) <= doubt + round_off(exact, 12 * NODES)


@pytest.mark.parametrize("spec", NORMAL.values(), ids=NORMAL.keys())
def test_linear_problems_have_the_moments_of_their_normal_law(spec):
    mean, variance = mean_and_variance(spec)
    exact = {
        "x": (lambda x: x, mean),
        "x²": (np.square, mean**2 + variance),
        "cos x": (np.cos, math.cos(mean) * math.exp(-variance / 2)),
    }
    for name, (f, value) in exact.items():
        found, doubt = expectation(spec, f)
        size = 1 + mean**2 + variance
        assert abs(found - value) <= doubt + round_off(size, 12 * NODES), name


@pytest.mark.parametrize("spec", [*GBM[:2], "ou", "ramped-noise", NORMAL["ramped noise, long"]])
def test_the_first_two_moments_solve_the_equations_that_the_coefficients_give(spec):
    """dE X = E a dt and dE X² = E(2 X a + b²) dt, closed since a and b are linear in x.

    Itô's formula; the coefficients are the problem's own, so that a law and a drift of different
    problems are seen. Tolerance: three times what a solver a hundred times more exact changes.
    """
    sde = sb.problem(spec).sde
    x = np.array([0.0, 1.0])

    def rates(t, m):
        a0, a1 = sde.drift(t, x)
        b0, b1 = sde.diffusion(t, x)
        first, second = m
        a1, b1 = a1 - a0, b1 - b0
        drift = 2 * (a0 * first + a1 * second)
        return [a0 + a1 * first, drift + b0**2 + 2 * b0 * b1 * first + b1**2 * second]

    start = [sde.start, sde.start**2]
    loose, tight = (
        solve_ivp(rates, (0, sde.horizon), start, method="DOP853", rtol=r, atol=r).y[:, -1]
        for r in (1e-9, 1e-11)
    )
    for power, (one, other) in enumerate(zip(loose, tight, strict=True), start=1):
        found, doubt = expectation(spec, lambda x, k=power: x**k)
        allowed = doubt + 3 * abs(one - other) + round_off(other, 12 * NODES)
        assert abs(found - other) <= allowed, power
