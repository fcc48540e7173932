"""One step of the pair (scheme, exact solution) from every node, and its transition matrix.

With g a function of the pair that grows like x^k where the state spreads out, the value

    v(u, r) = ω(u) (du/dx)^k E[g(X^h_T, X_T) | u, r]

is tame, and one step back in time is a linear map of its values on the nodes, the
Chapman–Kolmogorov equation, with u', r' at the end of the step:

    E[ω(u)/ω(u') ((du/dx)/(du/dx)')^k v(u', r') | u, r]
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from sdebench.blame import blamed
from sdebench.grid import ErrorPolynomials, Grid, to
from sdebench.integrator import Scheme
from sdebench.problem import Problem
from sdebench.sde import Array
from sdebench.wiener import Noise, Rule, Stack, StepLaw, in_order


class NotFinite(Exception):
    """A step that gives NaN or infinity from a node; told by where, in a sentence of its own."""


@dataclass(frozen=True)
class Nodes:
    """Quadrature nodes of the functionals over a step, `(q,)` each, and weights that sum to 1."""

    noise: Stack
    weights: Array

    @classmethod
    def of(cls, scheme: Scheme, problem: Problem, h: float, first: Rule, n_rest: int) -> "Nodes":
        """Return nodes of every functional that the scheme or the flow takes."""
        names = in_order((*scheme.noise, *problem.flow_noise))
        return cls(*StepLaw(names, h, problem.decay_rate).nodes(first, n_rest))


@dataclass(frozen=True)
class Pairs:
    """The nodes of the pair: u with x, and r with x^h; shapes `(n,)` and `(n, m)`."""

    grid: Grid
    errors: ErrorPolynomials
    x: Array
    slope: Array
    y: Array

    @classmethod
    def of(cls, problem: Problem, grid: Grid, errors: ErrorPolynomials) -> "Pairs":
        """Return the pairs of a grid and a polynomial in the error."""
        x = problem.coordinate.back(grid.u)
        slope = problem.coordinate.slope(x)
        return cls(grid, errors, x, slope, x[:, None] + errors.nodes / slope[:, None])

    def scale(self, growth: float) -> Array:
        """Return what turns an expectation into a value, shape `(n, 1)`."""
        scale: Array = (self.grid.window(self.grid.u) * self.slope**growth)[:, None]
        return scale

    def row(self, problem: Problem, growth: float) -> Array:
        """Return the row that takes values on the nodes to the expectation at the start."""
        start = np.array([problem.start])
        u = to(problem, start)
        at_u = self.grid.interpolation(u)[0]
        at_u /= self.grid.window(u) * problem.coordinate.slope(start) ** growth
        at_r = self.errors.interpolation(np.zeros(1))[:, 0]
        row: Array = np.outer(at_u, at_r).ravel()
        return row


@dataclass(frozen=True)
class Exact:
    """One step of the exact solution from the nodes in u at all noise nodes.

    `end` is where it ends, `slope` the coordinate's derivative there (on the grid's edge, if it
    ends beyond), `windows` the window at the start over that at the end, all `(n, q)`; `to_nodes`
    the weights of the nodes' values at the end, `(n, q, n)`.
    """

    end: Array
    slope: Array
    windows: Array
    to_nodes: Array

    @classmethod
    def of(cls, problem: Problem, grid: Grid, h: float, noise: Stack) -> "Exact":
        """Return one step of length h."""
        n, q = grid.n, len(noise["dw"])
        whole = {name: np.tile(values, n) for name, values in noise.items()}
        x = problem.coordinate.back(grid.u)
        end = problem.exact_step(0.0, np.repeat(x, q), h, Noise(**whole)).reshape(n, q)
        u = to(problem, end)
        kept = np.clip(u, grid.low, grid.high)
        slope = problem.coordinate.slope(np.where(u == kept, end, problem.coordinate.back(kept)))
        windows = grid.window(grid.u)[:, None] / grid.window(kept)
        return cls(end, slope, windows, grid.interpolation(kept))


def take_step(
    scheme: Scheme, problem: Problem, h: float, pairs: Pairs, noise: Stack, exact: Exact
) -> Array:
    """Return the scaled error r after one step of length h from all pairs: `(n, m, q)`.

    Raises `NotFinite`.
    """
    n, m, q = *pairs.y.shape, len(noise["dw"])
    own = {name: np.tile(noise[name], n * m) for name in scheme.noise}
    sde = problem.sde.in_calculus(scheme.calculus)
    with blamed(f"Scheme '{scheme.label}'", scheme.step, "while its errors were propagated"):
        ended = scheme.step(sde, 0.0, np.repeat(pairs.y.ravel(), q), h, Noise(**own))
    ended = np.reshape(ended, (n, m, q))
    if not np.all(np.isfinite(ended)):
        i, j, _ = np.argwhere(~np.isfinite(ended))[0]
        raise NotFinite(f"the step gives NaN or infinity from x={pairs.y[i, j]:.4g}")
    error: Array = (ended - exact.end[:, None, :]) * exact.slope[:, None, :]
    return error


def matrices(
    pairs: Pairs, error: Array, exact: Exact, weights: Array, growths: Sequence[float]
) -> dict[float, Array]:
    """Return the transition matrix for each growth k, shape `(n m, n m)`."""
    n, m = pairs.y.shape
    of_error = pairs.errors.interpolation(error).transpose(1, 2, 0, 3)  # (n, m, m, q)
    of_error = np.ascontiguousarray(of_error).reshape(n, m * m, -1)
    found = {}
    for growth in growths:
        factor = exact.windows * weights
        if growth:
            factor = factor * (pairs.slope[:, None] / exact.slope) ** growth
        product = of_error @ (exact.to_nodes * factor[..., None])  # (n, m m, n)
        blocks = product.reshape(n, m, m, n).transpose(0, 1, 3, 2)
        found[growth] = np.ascontiguousarray(blocks).reshape(n * m, n * m)
    return found


FEW = 16  # steps that are taken one by one, as products of a row and a matrix


def after_steps(row: Array, matrix: Array, n_steps: int) -> Array:
    """Return row · matrix^n_steps: matrices are squared until few steps are left."""
    while n_steps > FEW:
        if n_steps % 2:
            row = row @ matrix
        matrix = matrix @ matrix
        n_steps //= 2
    for _ in range(n_steps):
        row = row @ matrix
    return row
