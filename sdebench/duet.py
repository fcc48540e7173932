"""Two schemes on the same paths: their errors with the covariance between them.

Both plans draw the functionals that either scheme steps by, so that the paths are the same.
"""

from concurrent.futures import ThreadPoolExecutor
from dataclasses import replace

import numpy as np

from sdebench.moments import Moments
from sdebench.sample import BATCH, Plan, Walk
from sdebench.sde import Array


class Duet:
    """A growing sample of two plans that differ in the scheme alone."""

    def __init__(self, old: Plan, new: Plan) -> None:
        names = (*old.scheme.noise, *new.scheme.noise)
        self.plans = tuple(replace(plan, drawn_for=names) for plan in (old, new))
        self.moments: Moments | None = None
        self.n_blocks = 0

    def extend(self, n_blocks: int, threads: int) -> None:
        """Draw `n_blocks` more blocks on `threads` threads and add them up in block order."""
        blocks = range(self.n_blocks, self.n_blocks + n_blocks)
        with ThreadPoolExecutor(threads) as pool:
            for moments in pool.map(self._block, blocks):
                self.moments = moments if self.moments is None else self.moments + moments
        self.n_blocks += n_blocks

    def _block(self, index: int) -> Moments:
        with np.errstate(all="ignore"):
            both = [Walk(plan).gathered(index).batches for plan in self.plans]
        return Moments.of(np.concatenate(both) / BATCH)

    def mean_squares(self) -> tuple[Array, Array, int]:
        """Return the mean squares of the old and then the new scheme, rung by rung.

        Shape `(2 rungs,)`, with their covariance, `(2 rungs, 2 rungs)`, and degrees of freedom.
        """
        assert self.moments is not None
        found = self.moments.estimate(self._both(list(self.plans[0].rows.squares)))
        return found.means, found.covariance, found.dof

    def weak_errors(self, functional: int) -> tuple[Array, Array, int]:
        """Return the weak errors of a functional likewise, adjusted by controls."""
        assert self.moments is not None
        rows = self.plans[0].rows
        own = self._both(list(rows.weak(functional)))
        found = self.moments.adjusted(own, list(rows.controls))
        return found.means, found.covariance, found.dof

    def _both(self, rows: list[int]) -> list[int]:
        count = self.plans[0].rows.count
        return rows + [count + row for row in rows]
