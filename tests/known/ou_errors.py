"""The exact errors of Euler–Maruyama on the Ornstein–Uhlenbeck problem, to many digits.

dX = θ (m - X) dt + σ dW. With Y = X - m, a = 1 - θh and b = e^(-θh), for N steps of length h:

    E Y^h_N = a^N y0                E Y_T = b^N y0
    Var Y^h_N = σ² h (1 - a^2N) / (1 - a²)
    Var Y_T   = σ² (1 - b^2N) / (2θ)
    Cov(Y^h_N, Y_T) = σ² (1 - b)/θ (1 - (ab)^N) / (1 - ab)

(derived for these tests; the last from Cov(ΔW, ∫ e^(-θ(h-s)) dW_s) = (1 - b)/θ over one step).
Milstein's errors are the same: its correction vanishes where the noise is additive. Decimals of 80
digits: at 4096 steps the squares cancel to some 10^-8 of their size, and a² is close to 1.
"""

from decimal import Decimal, localcontext
from math import cos, exp, expm1, sin
from typing import NamedTuple

DIGITS = 80


class OUErrors(NamedTuple):
    """Mean-square error, and errors of the mean and the second moment, scheme minus exact.

    With E X_T², and with the mean and variance of X^h_T and of X_T, which are normal.
    """

    mean_square: Decimal
    mean: Decimal
    second_moment: Decimal
    exact_second_moment: Decimal
    scheme_law: tuple[Decimal, Decimal]
    exact_law: tuple[Decimal, Decimal]

    @property
    def cosine(self) -> float:
        """E cos X^h_T - E cos X_T, to some 10^-15 of the larger of its two parts.

        E cos X = cos(m) e^(-v/2) for a normal X with mean m and variance v. With the scheme's m, v
        and the exact n, w: -2 sin((m+n)/2) sin((m-n)/2) e^(-v/2) + cos(n) e^(-w/2) expm1(-(v-w)/2).
        """
        (m, v), (n, w) = self.scheme_law, self.exact_law
        moved = -2 * sin(float(m + n) / 2) * sin(float(m - n) / 2) * exp(-float(v) / 2)
        spread = cos(float(n)) * exp(-float(w) / 2) * expm1(-float(v - w) / 2)
        return moved + spread


def ou_errors(
    steps: int, theta: float, mean: float, sigma: float, x0: float, horizon: float = 1.0
) -> OUErrors:
    """Return the errors of Euler–Maruyama after so many steps."""
    with localcontext() as context:
        context.prec = DIGITS
        pull, level, s, start, end = (Decimal(p) for p in (theta, mean, sigma, x0, horizon))
        h, y = end / steps, start - level
        a, b = 1 - pull * h, (-pull * h).exp()
        p, q = a**steps, b**steps
        own = s**2 * h * (1 - p * p) / (1 - a * a)
        exact = s**2 * (1 - q * q) / (2 * pull)
        both = s**2 * (1 - b) / pull * (1 - p * q) / (1 - a * b)
        m, n = level + p * y, level + q * y
        return OUErrors(
            mean_square=(m - n) ** 2 + own - 2 * both + exact,
            mean=m - n,
            second_moment=m * m + own - n * n - exact,
            exact_second_moment=n * n + exact,
            scheme_law=(m, own),
            exact_law=(n, exact),
        )
