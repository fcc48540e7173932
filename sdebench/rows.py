"""Where each averaged quantity of a sample stands, and how it is made from the end points.

Rows are made one by one, in their order, so that each is averaged while it is in a cache.

Measured rows (one value a path):
    squares    (X^h_T - X_T)²                  one a rung
    absolute   |X^h_T - X_T|                   one a rung
    grid       max over the rung's grid of (X^h - X)², on request, one a rung
    weak       f(X^h_T) - f(X_T)               one a functional and rung
    reference  f(X_T)                          one a functional
Control rows, of expectation zero for *every* scheme since they are made from the path alone. With
Z = W_T/√T and S = Σ (ΔW² - h) / √(2 T h) on a rung of N steps:
    He_1..He_4 (Z);  S;  S·Z;  S·He_2(Z) - √(2/N)
S is the leading weak-noise term of a scheme of strong order 1/2, Z carries the end point's size;
regressing on them narrows the interval of a weak error by one to two orders of magnitude.
"""

import math
from collections.abc import Callable, Iterator, Sequence

import numpy as np

from sdebench.sde import Array

N_HERMITE = 4
N_QUADRATIC = 3


class Rows:
    """The layout for a number of rungs and functionals."""

    def __init__(self, n_rungs: int, n_functionals: int, grid_maximum: bool) -> None:
        self.n_rungs = n_rungs
        self.n_functionals = n_functionals
        self.squares = range(n_rungs)
        self.absolute = range(n_rungs, 2 * n_rungs)
        self.grid = range(2 * n_rungs, (3 if grid_maximum else 2) * n_rungs)
        self._weak_first = self.grid.stop
        self.reference = range(
            self._weak_first + n_functionals * n_rungs,
            self._weak_first + n_functionals * (n_rungs + 1),
        )
        self.n_measured = self.reference.stop
        self.controls = range(self.n_measured, self.n_measured + N_HERMITE + N_QUADRATIC * n_rungs)
        self.count = self.controls.stop

    def weak(self, functional: int) -> range:
        """Return the rows of one functional, coarsest rung first."""
        first = self._weak_first + functional * self.n_rungs
        return range(first, first + self.n_rungs)

    def error_rows(
        self, states: Sequence[Array], worst: Sequence[Array], end: Array
    ) -> Iterator[Array]:
        """Yield squares, absolute and grid rows from the end points of scheme and solution."""
        errors = [x - end for x in states]
        for error in errors:
            yield error * error
        for error in errors:
            yield np.abs(error)
        for most in worst if self.grid else ():
            yield most * most

    def weak_rows(
        self, states: Sequence[Array], end: Array, functions: Sequence[Callable[[Array], Array]]
    ) -> Iterator[Array]:
        """Yield the paired differences of every functional, then their exact values."""
        exact = [f(end) for f in functions]
        for f, reference in zip(functions, exact, strict=True):
            for x in states:
                yield f(x) - reference
        yield from exact

    def control_rows(
        self, w: Array, quadratic: Sequence[Array], horizon: float, steps: Sequence[int]
    ) -> Iterator[Array]:
        """Yield the controls from W_T and the sum of squared increments on each rung."""
        z = w * (1 / math.sqrt(horizon))
        square = z * z
        two = square - 1.0
        yield from (z, two, z * (square - 3.0), square * (square - 6.0) + 3.0)
        for n, total in zip(steps, quadratic, strict=True):
            s = (total - horizon) * (math.sqrt(n / 2) / horizon)
            yield from (s, s * z, s * two - math.sqrt(2 / n))
