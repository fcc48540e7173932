"""Errors of the default schemes in closed form: what an unlimited number of paths would give.

GBM: E X_N², E X_N X_T and E X_T² are products of one-step expectations. OU and ramped noise are
linear with additive noise: mean and covariance of the pair (scheme, exact solution) follow a
recursion. Euler–Maruyama and Milstein are the same scheme on additive noise.
"""

import math
from collections.abc import Sequence

import numpy as np

from sdebench.problem import Problem
from sdebench.wiener import StepLaw


def errors(scheme: str, problem: Problem, steps: Sequence[int]) -> dict[str, np.ndarray]:
    """Return the mean-square error and the weak errors of mean and second moment, rung by rung."""
    of_problem = {"gbm": _gbm, "ou": _ou, "ramped-noise": _ramped}[problem.name]
    rows = np.array([of_problem(scheme, problem, n) for n in steps])
    return dict(zip(("mean-square", "mean", "second-moment"), rows.T, strict=True))


def _gbm(scheme: str, problem: Problem, n: int) -> tuple[float, float, float]:
    p = problem.params
    mu, sigma, x0, horizon = p["mu"], p["sigma"], p["x0"], p["horizon"]
    h = horizon / n
    correction = sigma**4 * h**2 / 2 if scheme == "milstein" else 0.0
    square = (1 + mu * h) ** 2 + sigma**2 * h + correction
    cross = math.exp(mu * h) * (1 + mu * h + sigma**2 * h + correction)
    exact = math.exp((2 * mu + sigma**2) * horizon)
    mean = (1 + mu * h) ** n - math.exp(mu * horizon)
    second = square**n - exact
    return x0**2 * (square**n - 2 * cross**n + exact), x0 * mean, x0**2 * second


def _ou(scheme: str, problem: Problem, n: int) -> tuple[float, float, float]:
    p = problem.params
    theta, sigma = p["theta"], p["sigma"]
    h = p["horizon"] / n
    covariance = StepLaw(("dw", "decayed"), h, theta).covariance
    moves = [(1 - theta * h, math.exp(-theta * h), theta * p["mean"] * h)] * n
    shift = p["mean"] * (1 - math.exp(-theta * h))
    return _linear(p["x0"], [(a, b, c, shift) for a, b, c in moves], [sigma**2 * covariance] * n)


def _ramped(scheme: str, problem: Problem, n: int) -> tuple[float, float, float]:
    p = problem.params
    h, size = p["horizon"] / n, p["b"]
    moves, covariances = [], []
    for k in range(n):
        t = k * h
        here, there = size * (1 + t) ** 2, size * (1 + t + h) ** 2
        growth = ((1 + t + h) / (1 + t)) ** 2
        moves.append((1 + 2 * h / (1 + t), growth, here * h, there * h))
        covariances.append(h * np.array([[here**2, here * there], [here * there, there**2]]))
    return _linear(p["x0"], moves, covariances)


def _linear(
    x0: float, moves: Sequence[tuple[float, ...]], covariances: Sequence[np.ndarray]
) -> tuple[float, float, float]:
    """Carry mean and covariance of (scheme, exact) through X' = a X + c + noise."""
    mean, covariance = np.array([x0, x0]), np.zeros((2, 2))
    for (a, b, c, d), added in zip(moves, covariances, strict=True):
        factor = np.array([a, b])
        mean = factor * mean + np.array([c, d])
        covariance = covariance * np.multiply.outer(factor, factor) + added
    gap = mean[0] - mean[1]
    square = gap**2 + covariance[0, 0] - 2 * covariance[0, 1] + covariance[1, 1]
    second = mean[0] ** 2 + covariance[0, 0] - mean[1] ** 2 - covariance[1, 1]
    return square, gap, second
