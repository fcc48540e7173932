"""The exact errors of Euler–Maruyama and Milstein on geometric Brownian motion.

One step of either multiplies X by a polynomial g in ΔW, one step of the exact solution by
f = exp((μ - σ²/2) h + σ ΔW). With the coefficients g_k of g in the Hermite chaos,
g = Σ g_k h^(k/2) He_k(ΔW/√h) / k!, and σ^k e^(μh) those of f,

    E g = g_0        s = E g² = Σ g_k² h^k / k!        E g f = e^(μh) c,  c = Σ g_k σ^k h^k / k!

    Euler–Maruyama   g_0 = 1 + μh, g_1 = σ             Milstein   g_2 = σ² as well

and since steps are independent, moments over N steps are N-th powers (derived for these tests).
Decimals of 80 digits: the squares cancel to the order of the error.
"""

from decimal import Decimal, localcontext
from math import factorial
from typing import NamedTuple

DIGITS = 80
CHAOS = {
    "euler-maruyama": lambda mu, sigma, h: (1 + mu * h, sigma),
    "milstein": lambda mu, sigma, h: (1 + mu * h, sigma, sigma**2),
}


class GBMErrors(NamedTuple):
    """Mean-square, mean and second-moment error, scheme minus exact, and E X_T²."""

    mean_square: Decimal
    mean: Decimal
    second_moment: Decimal
    exact_second_moment: Decimal


def gbm_errors(
    scheme: str, steps: int, mu: float, sigma: float, x0: float = 1.0, horizon: float = 1.0
) -> GBMErrors:
    """Return the errors of a scheme after so many steps."""
    with localcontext() as context:
        context.prec = DIGITS
        m, v, start, end = (Decimal(p) for p in (mu, sigma, x0, horizon))
        h = end / steps
        g = CHAOS[scheme](m, v, h)
        s = sum(each**2 * h**k / factorial(k) for k, each in enumerate(g))
        c = sum(each * v**k * h**k / factorial(k) for k, each in enumerate(g))
        exact = start**2 * ((2 * m + v**2) * end).exp()
        return GBMErrors(
            start**2 * s**steps - 2 * start**2 * ((m * h).exp() * c) ** steps + exact,
            start * (g[0] ** steps - (m * end).exp()),
            start**2 * s**steps - exact,
            exact,
        )
