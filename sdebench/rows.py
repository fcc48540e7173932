"""Where each averaged quantity of a sample stands, and how it is made from the end points.

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
from collections.abc import Callable, Sequence

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

    def fill_errors(
        self, values: Array, states: Sequence[Array], worst: Sequence[Array], end: Array
    ) -> None:
        """Fill squares, absolute and grid from the end points of scheme and exact solution."""
        absolute = values[self.absolute.start : self.absolute.stop]
        for rung, x in enumerate(states):
            np.subtract(x, end, out=absolute[rung])
        np.abs(absolute, out=absolute)
        np.square(absolute, out=values[self.squares.start : self.squares.stop])
        if self.grid:
            for rung, most in enumerate(worst):
                np.square(most, out=values[self.grid[rung]])

    def fill_weak(
        self,
        values: Array,
        states: Sequence[Array],
        end: Array,
        functions: Sequence[Callable[[Array], Array]],
    ) -> None:
        """Fill the paired differences of every functional, and its exact value."""
        for i, f in enumerate(functions):
            exact = values[self.reference[i]]
            exact[:] = f(end)
            for row, x in zip(self.weak(i), states, strict=True):
                np.subtract(f(x), exact, out=values[row])

    def fill_controls(
        self,
        values: Array,
        w: Array,
        quadratic: Sequence[Array],
        horizon: float,
        steps: Sequence[int],
    ) -> None:
        """Fill the controls from W_T and the sum of squared increments on each rung."""
        z, two, three, four, *products = values[self.controls.start : self.controls.stop]
        np.multiply(w, 1 / math.sqrt(horizon), out=z)
        square = z * z
        np.subtract(square, 1.0, out=two)
        np.multiply(z, square - 3.0, out=three)
        np.multiply(square, square - 6.0, out=four)
        four += 3.0
        for rung, (n, total) in enumerate(zip(steps, quadratic, strict=True)):
            s, sz, s2 = products[N_QUADRATIC * rung : N_QUADRATIC * (rung + 1)]
            np.subtract(total, horizon, out=s)
            s *= math.sqrt(n / 2) / horizon
            np.multiply(s, z, out=sz)
            np.multiply(s, two, out=s2)
            s2 -= math.sqrt(2 / n)
