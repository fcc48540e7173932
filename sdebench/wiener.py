"""Wiener functionals: what a scheme or a flow takes from the driving path over one step.

    dw       W_h - W_0                         the increment
    dz       ∫_0^h (W_s - W_0) ds              the time integral
    decayed  ∫_0^h exp(-θ (h - s)) dW_s        the decayed increment

They are jointly Gaussian. `StepLaw` holds their law over a step of length h as the lower
triangular factor L of the covariance, in the order above: functionals = L · standard normals.
Each row is a conditional law (dz given dw, decayed given both), so that nothing cancels when
θh is small and θ → 0 is the Brownian limit. `concatenate` joins two adjacent pieces of one
path; it is the only coarsening there is.

Covariances: Kloeden & Platen (1992), section 10.4, for dz; Gillespie (1996), Phys. Rev. E 54,
2084, for the decayed increment.
"""

import math
from collections.abc import Mapping, Sequence
from functools import lru_cache
from types import SimpleNamespace

import numpy as np

from sdebench.errors import UndeclaredFunctional
from sdebench.sde import Array

FUNCTIONALS = ("dw", "dz", "decayed")
Stack = Mapping[str, Array]
Rule = tuple[Array, Array]  # nodes and weights, which sum to 1


class Noise(SimpleNamespace):
    """The functionals over one step, read as attributes `dw`, `dz`, `decayed`.

    Each is an array of shape `(paths,)`. Reading one that was not asked for raises
    `UndeclaredFunctional`.
    """

    dw: Array
    dz: Array
    decayed: Array

    def __getattr__(self, name: str) -> Array:
        if name not in FUNCTIONALS:
            raise AttributeError(f"noise has no functional '{name}'; there are {FUNCTIONALS}")
        raise UndeclaredFunctional(name, list(vars(self)))


def in_order(names: Sequence[str]) -> tuple[str, ...]:
    """Return `names` without repeats, in sampling order, with dw always among them."""
    return tuple(n for n in FUNCTIONALS if n in names or n == "dw")


class StepLaw:
    """The joint law of some functionals over a step of length `h`.

    `names` are functionals (dw is always added), `decay` is θ of the decayed increment, in 1/time
    (ignored unless it is among them).
    """

    def __init__(self, names: Sequence[str], h: float, decay: float = 0.0) -> None:
        self.names = in_order(names)
        self.h = h
        self.factor = _factor(self.names, h, decay)

    @property
    def covariance(self) -> Array:
        """The covariance matrix, shape `(n, n)` in the order of `names`."""
        return self.factor @ self.factor.T

    def from_normals(self, normals: Sequence[Array]) -> dict[str, Array]:
        """Turn independent standard normals, one array per name, into the functionals.

        Works in place: the arrays of `normals` are overwritten and returned under their names.
        """
        for row in reversed(range(len(self.names))):
            value = np.multiply(normals[row], self.factor[row, row], out=normals[row])
            for column in range(row):
                if self.factor[row, column] != 0.0:
                    value += self.factor[row, column] * normals[column]
        return dict(zip(self.names, normals, strict=True))

    def nodes(self, first: Rule, n_rest: int) -> tuple[dict[str, Array], Array]:
        """Return quadrature nodes of the functionals and their weights (which sum to 1).

        `first` is the rule for dw, `n_rest` the number of Gauss–Hermite nodes for each further
        functional given the ones before.
        """
        rules = [first] + [gauss_hermite(n_rest)] * (len(self.names) - 1)
        grids = np.meshgrid(*(x for x, _ in rules), indexing="ij")
        weights = np.ones(())
        for _, w in rules:
            weights = np.multiply.outer(weights, w)
        return self.from_normals([g.ravel().copy() for g in grids]), np.asarray(weights).ravel()


REACH = 9.0  # standard deviations that a trapezoidal rule spans: e^-40 is left out


@lru_cache(maxsize=16)
def spaced_normal(spacing: float, shift: float) -> Rule:
    """Return the trapezoidal rule of the standard normal law over ±9, moved by `shift` spacings.

    Its error for smooth functions is that of the normal density's Fourier transform at
    2π/`spacing`: below e^-35 for a spacing up to 3/4.
    """
    n = int(REACH / spacing)
    z: Array = (np.arange(-n, n + 1, dtype=np.float64) + shift) * spacing
    w: Array = np.exp(-z * z / 2)
    return z, w / w.sum()


def normal_trapezoid(shift: float) -> Rule:
    """Return the rule with a spacing of 1/8, moved by `shift` spacings.

    Exact to round-off for smooth functions of polynomial growth, and, unlike Gauss–Hermite
    nodes, without wide gaps for a kink or a jump to hide in.
    """
    return spaced_normal(1 / 8, shift)


@lru_cache(maxsize=32)
def gauss_hermite(n: int) -> Rule:
    """Return the `n` nodes and weights (sum 1) of the standard normal law."""
    x, w = np.polynomial.hermite_e.hermegauss(n)
    return x, w / w.sum()


def concatenate(
    first: Stack, second: Stack, h_second: float, decay: float = 0.0, out: Stack | None = None
) -> dict[str, Array]:
    """Return the functionals over two adjacent pieces of one path, from those over each.

        dw = w1 + w2        dz = z1 + z2 + h2 w1        decayed = exp(-θ h2) i1 + i2

    `h_second` is the length of the later piece; arrays may have any common shape; dz needs dw.
    `out` receives the result and may be `first` itself.
    """
    joined = {}
    into = out or {}
    if "decayed" in first:
        kept = np.multiply(first["decayed"], math.exp(-decay * h_second), out=into.get("decayed"))
        joined["decayed"] = np.add(kept, second["decayed"], out=kept)
    if "dz" in first:
        dz = np.add(first["dz"], second["dz"], out=into.get("dz"))
        joined["dz"] = np.add(dz, h_second * first["dw"], out=dz)
    joined["dw"] = np.add(first["dw"], second["dw"], out=into.get("dw"))
    return joined


def _factor(names: tuple[str, ...], h: float, decay: float) -> Array:
    root = math.sqrt(h)
    x = decay * h
    rows = {"dw": {"dw": root}, "dz": {"dw": h * root / 2, "dz": h * root / math.sqrt(12)}}
    if "decayed" in names:
        row = {"dw": root * _mean_decay(x)}
        var = h * _var_given_dw(x)
        if "dz" in names:
            row["dz"] = root * math.sqrt(12) * _cov_with_residual(x)
            var = h * _var_given_both(x)
        rows["decayed"] = row | {"decayed": math.sqrt(max(var, 0.0))}
    return np.array([[rows[n].get(m, 0.0) for m in names] for n in names])


# With x = θh, and r = dz - (h/2) dw the part of dz that is independent of dw (Var r = h³/12):
#   Cov(dw, I)/h = (1 - e^-x)/x                                  Σ (-x)^n / (n+1)!
#   Cov(r, I)/h² = (1 - e^-x (1+x))/x² - (1 - e^-x)/(2x)         Σ (-x)^n n / (2 (n+2) (n+1)!)
#   Var(I|dw)/h  = (1 - e^-2x)/(2x) - ((1 - e^-x)/x)²            Σ (-x)^n (2^n (n-2) + 2) / (n+2)!
#   Var(I|dw,dz)/h = Var(I|dw)/h - 12 (Cov(r, I)/h²)²
# The closed forms lose their digits as x → 0, the series converge fast for |x| ≤ 1.
_TERMS = 30  # 2^30/30! < 1e-23: the tail is below round-off of the leading term x²/12 for |x| ≤ 1


def _mean_decay(x: float) -> float:
    return -math.expm1(-x) / x if x else 1.0


def _cov_with_residual(x: float) -> float:
    if abs(x) > 1:
        return (1 - math.exp(-x) * (1 + x)) / x**2 - _mean_decay(x) / 2
    return _sum(_residual_terms(), x)


def _var_given_dw(x: float) -> float:
    if abs(x) > 1:
        return -math.expm1(-2 * x) / (2 * x) - _mean_decay(x) ** 2
    return _sum(_given_dw_terms(), x)


def _var_given_both(x: float) -> float:
    if abs(x) > 1:
        return _var_given_dw(x) - 12 * _cov_with_residual(x) ** 2
    return _sum(_given_both_terms(), x)


def _sum(coefficients: Sequence[float], x: float) -> float:
    total = 0.0
    for c in reversed(coefficients):
        total = total * -x + c
    return total


@lru_cache(maxsize=1)
def _residual_terms() -> list[float]:
    return [n / (2 * (n + 2) * math.factorial(n + 1)) for n in range(_TERMS)]


@lru_cache(maxsize=1)
def _given_dw_terms() -> list[float]:
    return [(2**n * (n - 2) + 2) / math.factorial(n + 2) for n in range(_TERMS)]


@lru_cache(maxsize=1)
def _given_both_terms() -> list[float]:
    # Exact fractions: the x² and x³ terms of the two parts cancel to zero.
    from fractions import Fraction

    r = [Fraction(n, 2 * (n + 2) * math.factorial(n + 1)) for n in range(_TERMS)]
    square = [sum((r[i] * r[n - i] for i in range(n + 1)), Fraction(0)) for n in range(_TERMS)]
    first = [Fraction(2**n * (n - 2) + 2, math.factorial(n + 2)) for n in range(_TERMS)]
    return [float(a - 12 * b) for a, b in zip(first, square, strict=True)]
