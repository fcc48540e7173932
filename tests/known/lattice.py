"""Expectations of a scheme, alone or beside the exact solution, on an equidistant lattice.

An independent computation, derived for these tests, of what has no closed form. Where X_t is a
function of t and W_t, the pair (X^h, W) is a Markov chain whose second part moves by √h Z. Z takes
multiples of a spacing δ (the trapezoidal rule, whose error for smooth functions vanishes faster
than any power of δ), so that W stays on the lattice √h δ k and needs no interpolation. X^h is told
by its place s, with Lagrange's polynomial through the ten nearest lattice points, whose error is
local: what happens at the edges, beyond which a value is that of the edge, stays there.

The errors of both fall so fast that a coarser lattice bounds those of a finer one.
"""

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy import sparse

POINTS = 10
REACH = 8.5  # standard deviations of Z and of W: beyond lies 2e-17 of the probability

Step = Callable[[np.ndarray, float, float], np.ndarray]  # step(x, h, dw)


@dataclass(frozen=True)
class Lattice:
    """`n` equidistant places on [low, high], the states there, and the spacing of Z.

    `place` and `state` map a state to its place and back.
    """

    low: float
    high: float
    n: int
    spacing: float
    place: Callable[[np.ndarray], np.ndarray] = lambda x: x
    state: Callable[[np.ndarray], np.ndarray] = lambda s: s

    @property
    def states(self) -> np.ndarray:
        return self.state(np.linspace(self.low, self.high, self.n))

    @property
    def normal(self) -> tuple[np.ndarray, np.ndarray]:
        """The values of Z and their weights."""
        half = int(REACH / self.spacing)
        z = self.spacing * np.arange(-half, half + 1)
        weights = np.exp(-z * z / 2)
        return z, weights / weights.sum()

    def at(self, x: np.ndarray) -> sparse.csr_array:
        """Return the weights of the lattice's values at the states `x`."""
        s = (self.place(x) - self.low) / (self.high - self.low) * (self.n - 1)
        s = np.clip(s, 0, self.n - 1)
        first = np.clip(np.floor(s).astype(int) - POINTS // 2 + 1, 0, self.n - POINTS)
        t, k = s - first, np.arange(POINTS)
        weights = np.ones((len(x), POINTS))
        for own in k:
            for other in k[k != own]:
                weights[:, own] *= (t - other) / (own - other)
        rows = np.arange(0, len(x) * POINTS + 1, POINTS)
        shape = (len(x), self.n)
        return sparse.csr_array((weights.ravel(), (first[:, None] + k).ravel(), rows), shape)

    def steps(self, step: Step, h: float) -> list[sparse.csr_array]:
        """Return, for each value of Z, the matrix that takes values to one step before."""
        return [self.at(step(self.states, h, math.sqrt(h) * z)) for z in self.normal[0]]

    def expectations(
        self, step: Step, h: float, n_steps: int, x0: float, values: np.ndarray
    ) -> np.ndarray:
        """Return E f(X^h) after so many steps, from values of each f on the states `(n, …)`."""
        weights, matrices = self.normal[1], self.steps(step, h)
        kernel = sum(w * matrix for w, matrix in zip(weights, matrices, strict=True))
        for _ in range(n_steps):
            values = kernel @ values
        return (self.at(np.array([x0])) @ values)[0]

    def mean_square(
        self, step: Step, h: float, n_steps: int, x0: float, end: Callable[[np.ndarray], np.ndarray]
    ) -> float:
        """Return E (X^h - X)² after so many steps, with X = end(W)."""
        half = int(REACH * math.sqrt(n_steps) / self.spacing)
        w = math.sqrt(h) * self.spacing * np.arange(-half, half + 1)
        value = (self.states[:, None] - end(w)) ** 2
        matrices, weights = self.steps(step, h), self.normal[1]
        middle, width = len(weights) // 2, len(w)
        for _ in range(n_steps):
            before = np.zeros_like(value)
            for j, (weight, matrix) in enumerate(zip(weights, matrices, strict=True)):
                shift = j - middle  # what is at w comes from w + shift, where that is within reach
                low, high = max(0, -shift), min(width, width - shift)
                before[:, low:high] += weight * (matrix @ value[:, low + shift : high + shift])
            value = before
        return float((self.at(np.array([x0])) @ value)[0, half])
