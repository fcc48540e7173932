"""Means of many rows at once, with the covariance between them, from batch means.

Each row is a quantity averaged over paths. Paths are grouped in batches of fixed size; the batch
means are independent and nearly normal, so that their spread gives every mean its uncertainty
and every pair of means its covariance. Merging follows Chan, Golub & LeVeque (1983), The American
Statistician 37, 242, equation 2.1: no digits are lost when a mean is large against its spread.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from sdebench.sde import Array

ROUND_OFF = 8 * float(np.finfo(float).eps)  # of a scatter, relative, for each control subtracted


@dataclass(frozen=True)
class Estimate:
    """Means, shape `(n,)`, the covariance of these means, `(n, n)`, and its degrees of freedom."""

    means: Array
    covariance: Array
    dof: int


@dataclass(frozen=True)
class Moments:
    """Count, mean `(rows,)` and scatter `(rows, rows)` of batch means; merging is addition."""

    count: int
    mean: Array
    scatter: Array

    @classmethod
    def of(cls, batches: Array) -> "Moments":
        """Return the moments of batch means, shape `(rows, batches)`."""
        mean = batches.mean(axis=1)
        centred = batches - mean[:, None]
        return cls(batches.shape[1], mean, centred @ centred.T)

    def __add__(self, other: "Moments") -> "Moments":
        count = self.count + other.count
        gap = other.mean - self.mean
        weight = self.count * other.count / count
        return Moments(
            count,
            self.mean + gap * (other.count / count),
            self.scatter + other.scatter + weight * np.multiply.outer(gap, gap),
        )

    def estimate(self, rows: Sequence[int]) -> Estimate:
        """Return the means of `rows` with their covariance."""
        index = np.asarray(rows)
        dof = self.count - 1
        covariance = self.scatter[np.ix_(index, index)] / (dof * self.count)
        return Estimate(self.mean[index], covariance, dof)

    def adjusted(self, rows: Sequence[int], controls: Sequence[int]) -> Estimate:
        """Return the means of `rows`, adjusted by control rows whose expectation is zero.

        The intercepts of the least-squares regression of the rows' batch means on the controls':
        unbiased for normal batch means, with Student's t for their intervals (Lavenberg & Welch
        1981, Management Science 27, 322).
        """
        y = np.asarray(rows)
        c, scale, inverse = self._controls(controls)
        cross = self.scatter[np.ix_(c, y)] / scale[:, None]
        slopes = inverse @ cross
        offset = self.mean[c] / scale
        scatter_yy = self.scatter[np.ix_(y, y)]
        residual = scatter_yy - cross.T @ slopes
        # What the regression explains to round-off leaves round-off: never less than this.
        residual += np.diag(ROUND_OFF * (1 + len(c)) * np.diag(scatter_yy))
        dof = self.count - 1 - len(c)
        leverage = 1 / self.count + float(offset @ inverse @ offset)
        return Estimate(self.mean[y] - slopes.T @ offset, residual / dof * leverage, dof)

    def slopes(self, rows: Sequence[int], controls: Sequence[int]) -> Array:
        """Return what `adjusted` subtracts of each control from each row, `(controls, rows)`."""
        found = np.zeros((len(self.mean), len(rows)))
        c, scale, inverse = self._controls(controls)
        cross = self.scatter[np.ix_(c, np.asarray(rows))] / scale[:, None]
        found[c] = inverse @ cross / scale[:, None]
        wanted: Array = found[np.asarray(controls)]
        return wanted

    def _controls(self, controls: Sequence[int]) -> tuple[Array, Array, Array]:
        """Return the control rows that vary, their scale, and the inverse of their correlation."""
        c = np.asarray(controls)
        scale = np.sqrt(np.diag(self.scatter)[c])
        c, scale = c[scale > 0], scale[scale > 0]
        correlation = self.scatter[np.ix_(c, c)] / np.multiply.outer(scale, scale)
        return c, scale, np.linalg.pinv(correlation, rcond=1e-10, hermitian=True)
