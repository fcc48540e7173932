"""Errors of a scheme without sampling: the pair (scheme, exact solution) is propagated.

On a scalar autonomous problem the pair is a Markov chain, so that any E g(X^h_T, X_T) is a power of
a transition matrix (`transition.py`) on nodes (`grid.py`). The choice of g is the choice of error:
(x^h - x)² for the mean square, f(x^h) - f(x) for a weak error, as a difference and so without
cancellation.
"""

import math
from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from functools import cached_property
from typing import Literal

import numpy as np

from sdebench.functional import Functional
from sdebench.grid import ErrorPolynomials, Focus, Grid, reach, to
from sdebench.integrator import Scheme
from sdebench.kinks import Numbers, split_expectation
from sdebench.problem import Problem
from sdebench.sde import Array
from sdebench.transition import Exact, Nodes, Pairs, after_steps, matrices, take_step
from sdebench.wiener import Noise, StepLaw, gauss_hermite, in_order, spaced_normal


@dataclass(frozen=True)
class Resolution:
    """How finely the pair is resolved.

    `nodes` over `width` standard deviations in u; polynomials of `degree` in the scaled error over
    `span` times its size, held (if at all) beyond `kept` times that; noise nodes for dw `spacing`
    standard deviations apart, on both sides of 0, and `n_rest` for each further functional.
    """

    nodes: int = 48
    width: float = 6.6
    degree: int = 4
    span: float = 4.0
    kept: float = math.inf
    spacing: float = 0.6
    n_rest: int = 5


BASE = Resolution()
MOST_NODES = 108


@dataclass(frozen=True)
class Goal:
    """What is averaged at the end: `value(x^h, x)`, which grows like x^`growth`.

    The mean square of x^h - x, a weak error f(x^h) - f(x), or f(x) to check the nodes by.
    """

    kind: Literal["mean square", "weak", "exact"]
    growth: float
    value: Callable[[Array, Array], Array] = field(compare=False)
    functional: Functional | None = None

    @property
    def kinks(self) -> tuple[float, ...]:
        """The states at which f bends or jumps."""
        return self.functional.kinks if self.functional is not None else ()


MEAN_SQUARE = Goal("mean square", 2.0, lambda y, x: (y - x) ** 2)


def weak_goal(f: Functional, growth: float) -> Goal:
    """Return the weak error of a functional."""
    return Goal("weak", growth, lambda y, x: f(y) - f(x), f)


def exact_goal(f: Functional, growth: float) -> Goal:
    """Return E f(X_T) itself."""
    return Goal("exact", growth, lambda y, x: f(x), f)


BETWEEN = 0.5  # the nodes of dw lie about 0: a step that takes its sign alone is told exactly
TYPICAL = 2.0  # standard deviations of the end's law in which states are typical
N_TYPICAL = 33
LEAST = 1e-12  # of these states' range: the scaled error of a scheme that is exact


@dataclass(frozen=True)
class Chain:
    """So many steps of a scheme on a problem."""

    scheme: Scheme
    problem: Problem
    steps: int
    _kept: dict[object, tuple[Nodes, Exact]] = field(default_factory=dict, compare=False)

    @property
    def h(self) -> float:
        """The step size."""
        return self.problem.horizon / self.steps

    @cached_property
    def error_size(self) -> float:
        """Return the size of the scaled error at the end, from that of one step.

        Independent errors add up as a root of sums of squares, means as a sum; the largest of
        states within two standard deviations of the end's law; raises `NotFinite`.
        """
        low, high = reach(self.problem, TYPICAL)[::2]
        grid = Grid.of(self.problem, N_TYPICAL, BASE.width)
        typical = (grid.u >= low) & (grid.u <= high)
        pairs = Pairs.of(self.problem, grid, ErrorPolynomials(2, LEAST))
        nodes = Nodes.of(self.scheme, self.problem, self.h, spaced_normal(0.5, BETWEEN), 4)
        within = np.abs(nodes.noise["dw"]) < 2 * TYPICAL * self.h**0.5
        with np.errstate(all="ignore"):
            exact = Exact.of(self.problem, grid, self.h, nodes.noise)
            error = take_step(self.scheme, self.problem, self.h, pairs, nodes.noise, exact)
        r = error[typical, 1][:, within]
        weights = nodes.weights[within]
        squares = self.steps * (r * r @ weights) + (self.steps * (r @ weights)) ** 2
        return float(np.sqrt(squares.max())) + LEAST * (high - low)

    def expectations(self, goals: Iterable[Goal], resolution: Resolution) -> dict[Goal, float]:
        """Return E g(X^h_T, X_T) of each goal; raises `NotFinite`."""
        found: dict[Goal, float] = {}
        wanted = list(goals)
        with np.errstate(all="ignore"):
            for kinks in dict.fromkeys(goal.kinks for goal in wanted):
                own = [goal for goal in wanted if goal.kinks == kinks]
                found |= self._on_one_grid(own, kinks, resolution)
        return found

    def grid(self, kinks: tuple[float, ...], resolution: Resolution) -> Grid:
        """Return the nodes in u, drawn together to the length of a step near kinks."""
        return Grid.of(self.problem, resolution.nodes, resolution.width, self.focuses(kinks))

    def focuses(self, kinks: tuple[float, ...]) -> list[Focus]:
        """Return kinks as places in u, with the standard deviation of a step from each."""
        x = np.array(kinks, dtype=float)
        slope = self.problem.coordinate.slope(x)
        lengths = np.abs(self.problem.sde.diffusion(0.0, x)) * slope * self.h**0.5
        places = to(self.problem, x)
        return [Focus(float(u), float(d)) for u, d in zip(places, lengths, strict=True)]

    def _on_one_grid(
        self, goals: list[Goal], kinks: tuple[float, ...], resolution: Resolution
    ) -> dict[Goal, float]:
        errors = ErrorPolynomials(
            resolution.degree, resolution.span * self.error_size, resolution.kept
        )
        pairs = Pairs.of(self.problem, self.grid(kinks, resolution), errors)
        nodes, exact = self._exact(pairs.grid, resolution)
        error = take_step(self.scheme, self.problem, self.h, pairs, nodes.noise, exact)
        growths = dict.fromkeys(goal.growth for goal in goals)
        found = {}
        for growth, matrix in matrices(pairs, error, exact, nodes.weights, [*growths]).items():
            row = after_steps(pairs.row(self.problem, growth), matrix, self.steps - bool(kinks))
            scale = pairs.scale(growth)
            for goal in goals:
                if goal.growth == growth:
                    last = self._last_step(goal, pairs, resolution) if kinks else _end(goal, pairs)
                    found[goal] = float(row @ (scale * last).ravel())
        return found

    def _exact(self, grid: Grid, resolution: Resolution) -> tuple[Nodes, Exact]:
        """Return the exact solution's step on a grid; the last one is kept."""
        key = (grid, resolution.spacing, resolution.n_rest)
        if key not in self._kept:
            self._kept.clear()
            rule = spaced_normal(resolution.spacing, BETWEEN)
            nodes = Nodes.of(self.scheme, self.problem, self.h, rule, resolution.n_rest)
            self._kept[key] = nodes, Exact.of(self.problem, grid, self.h, nodes.noise)
        return self._kept[key]

    def _last_step(self, goal: Goal, pairs: Pairs, resolution: Resolution) -> Array:
        """Return E g one step before the end, on all pairs, by quadrature split at kinks."""
        assert goal.functional is not None
        f, n, m = goal.functional, *pairs.y.shape
        exact = self._split(f, lambda x, noise: self._flow(x, noise), pairs.x, resolution)
        if goal.kind == "exact":
            return np.repeat(exact[:, None], m, axis=1)
        own = self._split(f, lambda y, noise: self._step(y, noise), pairs.y.ravel(), resolution)
        return own.reshape(n, m) - exact[:, None]

    def _split(
        self,
        f: Functional,
        end: Callable[[Array, dict[str, Array]], Array],
        x: Array,
        resolution: Resolution,
    ) -> Array:
        """Return E f of the end of a step from each x, over dw and all further functionals."""
        names = in_order((*self.scheme.noise, *self.problem.flow_noise))
        law = StepLaw(names, self.h, self.problem.decay_rate)
        z, weights = gauss_hermite(resolution.n_rest)
        grids = np.meshgrid(*[np.arange(len(z))] * (len(names) - 1), indexing="ij")
        which = [g.ravel() for g in grids]
        n_rest = len(z) ** len(which)

        def ends(rows: Numbers, first: Array) -> Array:
            rest = [z[index[rows % n_rest]] for index in which]
            return end(x[rows // n_rest], law.from_normals([first.copy(), *rest]))

        values = split_expectation(ends, len(x) * n_rest, f, f.kinks).reshape(len(x), n_rest)
        product = np.prod([weights[index] for index in which], axis=0) if which else np.ones(1)
        expected: Array = values @ product
        return expected

    def _flow(self, x: Array, noise: dict[str, Array]) -> Array:
        return self.problem.exact_step(0.0, x, self.h, Noise(**noise))

    def _step(self, y: Array, noise: dict[str, Array]) -> Array:
        sde = self.problem.sde.in_calculus(self.scheme.calculus)
        own = Noise(**{name: noise[name] for name in self.scheme.noise})
        return self.scheme.step(sde, 0.0, y, self.h, own)


def _end(goal: Goal, pairs: Pairs) -> Array:
    x = np.broadcast_to(pairs.x[:, None], pairs.y.shape)
    return goal.value(pairs.y.ravel(), x.ravel()).reshape(pairs.y.shape)
