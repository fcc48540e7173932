"""The exact law of (X^h_T, X_T) where scheme and solution are linear and the noise is additive.

Both end points are then jointly normal, and one step maps their mean and covariance exactly:

    X^h' = a X^h + α + β ΔW,   X' = g X + γ + J,   with Var(β ΔW), Cov(β ΔW, J) and Var J given,

so that N steps give every error of Euler–Maruyama (and of Milstein, whose correction vanishes)
without sampling: mean square, mean absolute, mean, second moment and cosine.
"""

from dataclasses import dataclass
from math import cos, erf, exp, pi, sqrt

import numpy as np


@dataclass(frozen=True)
class EndPoints:
    """Mean `(2,)` and covariance `(2, 2)` of (X^h_T, X_T), and the errors they imply."""

    mean: np.ndarray
    covariance: np.ndarray

    @property
    def error(self) -> tuple[float, float]:
        """Mean and variance of X^h_T - X_T."""
        c = self.covariance
        return self.mean[0] - self.mean[1], c[0, 0] - 2 * c[0, 1] + c[1, 1]

    @property
    def mean_square(self) -> float:
        mean, variance = self.error
        return mean**2 + variance

    @property
    def mean_absolute(self) -> float:
        """The mean of a folded normal variable."""
        mean, variance = self.error
        bulk = sqrt(2 * variance / pi) * exp(-(mean**2) / (2 * variance))
        return bulk + mean * erf(mean / sqrt(2 * variance))

    @property
    def weak(self) -> dict[str, float]:
        """E f(X^h_T) - E f(X_T) by the functional's name; E cos X = cos(mean) exp(-variance/2)."""
        (m, n), (v, w) = self.mean, np.diag(self.covariance)
        return {
            "mean": m - n,
            "second-moment": m**2 + v - n**2 - w,
            "cos": cos(m) * exp(-v / 2) - cos(n) * exp(-w / 2),
        }


def ou_end_points(steps, theta, mean, sigma, x0, horizon=1.0) -> EndPoints:
    """Return Euler–Maruyama beside the exact solution of dX = θ (m - X) dt + σ dW."""
    h = horizon / steps
    b = exp(-theta * h)
    growth = np.array([1 - theta * h, b])
    shift = mean * (1 - growth)
    both = (1 - b) / theta  # Cov(ΔW, ∫ e^(-θ(h-s)) dW_s)
    noise = sigma**2 * np.array([[h, both], [both, (1 - b**2) / (2 * theta)]])
    return _propagated(x0, [(growth, shift, noise)] * steps)


def ramped_noise_end_points(steps, b, x0, horizon=1.0) -> EndPoints:
    """Return Euler–Maruyama beside the solution of dX = (2X/(1+t) + b(1+t)²)dt + b(1+t)² dW."""
    h = horizon / steps
    maps = []
    for t in h * np.arange(steps):
        growth = np.array([1 + 2 * h / (1 + t), ((1 + t + h) / (1 + t)) ** 2])
        loading = b * np.array([(1 + t) ** 2, (1 + t + h) ** 2])
        maps.append((growth, loading * h, h * np.outer(loading, loading)))
    return _propagated(x0, maps)


def _propagated(x0, maps) -> EndPoints:
    mean, covariance = np.array([x0, x0]), np.zeros((2, 2))
    for growth, shift, noise in maps:
        mean = growth * mean + shift
        covariance = np.outer(growth, growth) * covariance + noise
    return EndPoints(mean, covariance)
