"""The nodes on which the pair (scheme, exact solution) is propagated, and interpolation on them.

The exact solution is told by its coordinate u, on Chebyshev points of an interval that holds it up
to many standard deviations; the scheme by the scaled error r = (x^h - x) du/dx, as a polynomial of
low degree on [-c, c]. Near a kink of a functional, and where the coordinate bends, the points are
drawn together by a map of the interval that is analytic, so that interpolation keeps its accuracy
(the idea of Tee & Trefethen 2006, SIAM J. Sci. Comput. 28, 1798, with a map of our own):

    s(u) ∝ w + Σ asinh((u - κ) / δ) / asinh(half / δ),    w the place in the interval, ±1

Values are carried under a window exp(-14 w⁴), which keeps what happens at the edge from polluting
the middle.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np

from sdebench.problem import Problem
from sdebench.sde import Array

WINDOW = 14.0  # e^-14 at the edge: below the accuracy asked for, above round-off


def chebyshev_points(n: int) -> tuple[Array, Array]:
    """Return the `n` Chebyshev points of the first kind and their barycentric weights.

    Berrut & Trefethen (2004), SIAM Review 46, 501, equation 5.3.
    """
    angle = np.pi / n * (np.arange(n, dtype=np.float64) + 0.5)
    return np.cos(angle), np.where(np.arange(n) % 2, -1.0, 1.0) * np.sin(angle)


@dataclass(frozen=True)
class Focus:
    """A place in u about which nodes are drawn together, and the length within which they are."""

    place: float
    length: float


@dataclass(frozen=True)
class Grid:
    """`n` nodes over [low, high] in u, drawn together about each focus."""

    n: int
    low: float
    high: float
    focuses: tuple[Focus, ...] = ()

    @classmethod
    def of(cls, problem: Problem, n: int, width: float, kinks: Sequence[Focus] = ()) -> "Grid":
        """Return the grid that holds X_t on [0, T] up to `width` standard deviations of its end."""
        low, start, high = reach(problem, width)
        spread = (high - low) / 2
        low, high = min(low, start - spread), max(high, start + spread)
        bend = problem.coordinate.bend
        places = [*kinks, *([Focus(*bend)] if bend is not None else [])]
        return cls(n, low, high, tuple(f for f in places if low < f.place < high))

    @cached_property
    def points(self) -> tuple[Array, Array]:
        """Chebyshev points and weights in the mapped place s."""
        return chebyshev_points(self.n)

    @property
    def u(self) -> Array:
        """The nodes, shape `(n,)`."""
        return _nodes(self)

    @property
    def half(self) -> float:
        """Half the length of the interval."""
        return (self.high - self.low) / 2

    def mapped(self, u: Array) -> Array:
        """Return the place s of u in [-1, 1] on which the nodes are Chebyshev points."""
        if not self.focuses:
            return self.place(u)
        ends = self._stretched(np.array([self.low, self.high]))
        s: Array = (2 * self._stretched(u) - ends.sum()) / (ends[1] - ends[0])
        return s

    def _stretched(self, u: Array) -> Array:
        s = self.place(u)
        for f in self.focuses:
            s = s + np.arcsinh((u - f.place) / f.length) / np.arcsinh(self.half / f.length)
        return s

    def place(self, u: Array) -> Array:
        """Return where u lies in the interval, from -1 to 1."""
        return (u - (self.low + self.high) / 2) / self.half

    def window(self, u: Array) -> Array:
        """Return the window at u."""
        values: Array = np.exp(-WINDOW * self.place(u) ** 4)
        return values

    def interpolation(self, u: Array) -> Array:
        """Return the weights of the nodes' values at `u` inside the interval: shape `(…, n)`."""
        s, weights = self.points
        distance = self.mapped(u)[..., None] - s
        distance[distance == 0] = np.finfo(float).tiny  # then this node's term is all of the sum
        terms: Array = np.divide(weights, distance, out=distance)
        terms /= terms.sum(axis=-1, keepdims=True)
        return terms

    def spacing_near(self, u: float) -> float:
        """Return the largest distance between neighbouring nodes about a place in u."""
        nodes = np.sort(self.u)
        after = int(np.clip(np.searchsorted(nodes, u), 2, self.n - 2))
        return float(np.diff(nodes[after - 2 : after + 2]).max())


@lru_cache(maxsize=64)
def _nodes(grid: Grid) -> Array:
    s = grid.points[0]
    below: Array = np.full(grid.n, grid.low)
    above: Array = np.full(grid.n, grid.high)
    if not grid.focuses:
        return (below + above) / 2 + s * (above - below) / 2
    for _ in range(60):  # bisection: the map increases
        middle = (below + above) / 2
        right = grid.mapped(middle) > s
        above, below = np.where(right, middle, above), np.where(right, below, middle)
    return (below + above) / 2


@dataclass(frozen=True)
class ErrorPolynomials:
    """Polynomials of `degree` in the scaled error r, told by their values on nodes in [-c, c].

    Errors beyond `kept` times c are taken as that large: a polynomial grows there as the value it
    stands for does not, unless scheme and problem are linear.
    """

    degree: int
    c: float
    kept: float = math.inf

    @cached_property
    def nodes(self) -> Array:
        """The nodes, shape `(degree + 1,)`."""
        return self.c * chebyshev_points(self.degree + 1)[0]

    def interpolation(self, r: Array) -> Array:
        """Return the weights of the nodes' values at `r`, as Lagrange's products: `(nodes, …)`."""
        held = self.kept * self.c
        r = np.clip(r, -held, held)
        distances = [r - node for node in self.nodes]
        weights = np.empty((len(self.nodes), *r.shape))
        for k, own in enumerate(self.nodes):
            others = [d for j, d in enumerate(distances) if j != k]
            scale = 1.0 / np.prod([own - node for j, node in enumerate(self.nodes) if j != k])
            np.multiply(others[0], scale, out=weights[k])
            for distance in others[1:]:
                weights[k] *= distance
        return weights


def reach(problem: Problem, width: float) -> tuple[float, float, float]:
    """Return u at the end, `width` standard deviations down and up, with that at the start."""
    law = problem.law(problem.params)
    ends = law.transform(law.mean + np.array([-width, width]) * law.sd)
    low, high = to(problem, ends)
    return float(low), float(to(problem, np.array([problem.start]))[0]), float(high)


def to(problem: Problem, x: Array) -> Array:
    """Return the problem's coordinate of x, with what is outside of its domain at an edge."""
    with np.errstate(all="ignore"):
        u = problem.coordinate.to(x)
        return np.where(np.isnan(u), -np.inf, u)
