"""The exact errors of Euler–Maruyama on ramped noise, and what the bench measures of them.

dX = (2X/(1+t) + b(1+t)²) dt + b(1+t)² dW is linear with additive noise: every end point is a
constant plus a weighted sum of increments. With P_j = Π_{k>j} (1 + 2h/(1+t_k)),

    X^h_N = P_{-1} x0 + Σ P_j b (1+t_j)² (h + ΔW_j)     X_T = (1+T)² (x0 + b Σ (h + ΔW_j))

(derived for these tests). Measured: 131072 paths, seed 6, a false alarm of 1e-6 a rung. It would
catch a step, or an exact flow, that is taken at the wrong time: by one step of 64, the mean moves
by some 200 uncertainties.
"""

import math

import numpy as np
import pytest

import sdebench as sb
from tests.known.gaussian_errors import EndPoints, ramped_noise_end_points
from tests.known.measured import mean_square, rows
from tests.tolerance import round_off

PROBLEMS = {
    "default": "ramped-noise",
    "from below zero": "ramped-noise:b=0.7,x0=-1.1",
    "short horizon": "ramped-noise:b=1.5,x0=0.3,horizon=0.4",
    "long horizon": "ramped-noise:b=0.05,x0=0.15,horizon=3",
}
on_each_problem = pytest.mark.parametrize("spec", PROBLEMS.values(), ids=PROBLEMS.keys())


def weighted_sums(steps: int, b: float, x0: float, horizon: float, late: int = 0) -> EndPoints:
    """The end points from their weights on the increments; `late` steps late in the drift."""
    h = horizon / steps
    t = h * np.arange(steps)
    growth = np.append(1 + 2 * h / (1 + t + late * h), 1.0)
    after = np.cumprod(growth[::-1])[::-1]  # Π of this step's growth and all later ones
    scheme = after[1:] * b * (1 + t) ** 2
    exact = np.full(steps, b * (1 + horizon) ** 2)
    weights = np.array([scheme, exact])
    start = np.array([after[0], (1 + horizon) ** 2]) * x0
    return EndPoints(start + h * weights.sum(axis=1), h * weights @ weights.T)


def exact(spec: str, steps: int) -> EndPoints:
    return ramped_noise_end_points(steps, **sb.problem(spec).params)


@on_each_problem
def test_the_recursion_and_the_weighted_sums_agree(spec):
    """Two routes to one answer; N steps of some ten operations on numbers of the size of X²."""
    p = sb.problem(spec).params
    for steps in (4, 64):
        one, other = exact(spec, steps), weighted_sums(steps, **p)
        size = (1 + p["horizon"]) ** 4 * (abs(p["x0"]) + p["b"] * (1 + p["horizon"])) ** 2
        allowed = round_off(size, 10 * steps)
        assert abs(one.mean_square - other.mean_square) <= allowed
        for name, error in one.weak.items():
            assert abs(error - other.weak[name]) <= allowed, name


@on_each_problem
def test_every_strong_rung_holds_the_exact_mean_square(spec):
    for rung in rows("euler-maruyama", spec)["strong"].rungs:
        value, half_width = mean_square(rung)
        assert abs(value - exact(spec, rung.steps).mean_square) <= half_width, rung.steps


@on_each_problem
def test_every_strong_rung_holds_the_exact_mean_absolute_error(spec):
    for rung in rows("euler-maruyama", spec)["strong"].rungs:
        gap = abs(rung.mean_absolute - exact(spec, rung.steps).mean_absolute)
        assert gap <= rung.mean_absolute_uncertainty, rung.steps


@pytest.mark.parametrize("functional", ["mean", "second-moment", "cos"])
@on_each_problem
def test_every_weak_rung_holds_the_exact_signed_error(spec, functional):
    for rung in rows("euler-maruyama", spec)[functional].rungs:
        assert abs(rung.error - exact(spec, rung.steps).weak[functional]) <= rung.uncertainty


@on_each_problem
def test_the_interval_of_the_mean_excludes_a_drift_taken_one_step_late(spec):
    """On the finest rung; so that the comparisons above could have failed."""
    rung = rows("euler-maruyama", spec)["mean"].rungs[-1]
    wrong = weighted_sums(rung.steps, **sb.problem(spec).params, late=1).weak["mean"]
    assert abs(rung.error - wrong) > rung.uncertainty


@on_each_problem
def test_the_bounds_on_the_strong_order_hold_the_exact_local_order(spec):
    row = rows("euler-maruyama", spec)["strong"]
    coarse, fine = (exact(spec, rung.steps).mean_square for rung in row.rungs[-2:])
    assert row.low <= math.log2(coarse / fine) / 2 <= row.high


@on_each_problem
def test_milstein_is_euler_maruyama_where_noise_is_additive(spec):
    """Its correction is a product with ∂b/∂x = 0, so that not a bit differs."""
    for name, row in rows("euler-maruyama", spec, looks=1).items():
        assert rows("milstein", spec, looks=1)[name].rungs == row.rungs
