"""Expectations over one step of functions that bend or jump, by quadrature split at each kink.

E f(Y(Z)) for a standard normal Z, where the end Y of a step is a smooth function of Z: panels of
Gauss–Legendre nodes, cut where Y crosses a kink of f.
"""

from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray

from sdebench.sde import Array

REACH = 9.0
N_PANELS = 36
EDGES = np.linspace(-REACH, REACH, N_PANELS + 1)
NODES, WEIGHTS = np.polynomial.legendre.leggauss(10)
HALVINGS = 55  # of a bracket of 1/20, down to round-off

Numbers = NDArray[np.intp]
End = Callable[[Numbers, Array], Array]  # end(rows, z): the end of a step, for row numbers and Z


def split_expectation(
    end: End, n_rows: int, f: Callable[[Array], Array], kinks: Sequence[float]
) -> Array:
    """Return E f(end(row, Z)) for every row, shape `(n_rows,)`.

    `end` takes an array of row numbers and one of values of Z of the same shape. `kinks` are the
    values of the end where f bends or jumps; f is smooth between them.
    """
    centre, half = (EDGES[1:] + EDGES[:-1]) / 2, (EDGES[1] - EDGES[0]) / 2
    z = centre[:, None] + half * np.array([-1.0, *NODES, 1.0])
    rows = np.repeat(np.arange(n_rows), z.size)
    y = end(rows, np.tile(z.ravel(), n_rows)).reshape(n_rows, *z.shape)
    inner = slice(1, -1)
    values = f(y[..., inner].ravel()).reshape(n_rows, N_PANELS, -1)
    panels = (values * density(z[:, inner])) @ WEIGHTS * half
    cuts = [_crossings(end, y, z, kink) for kink in kinks]
    panel = np.concatenate([which for which, _ in cuts])
    root = np.concatenate([where for _, where in cuts])
    for_each = _pieces(panel, root)
    flat = panels.reshape(-1)
    flat[np.unique(panel)] = 0.0
    np.add.at(flat, for_each[0], _integrals(end, f, *for_each))
    total: Array = panels.sum(axis=1)
    return total


def density(z: Array) -> Array:
    """Return the standard normal density."""
    values: Array = np.exp(-z * z / 2) / np.sqrt(2 * np.pi)
    return values


def _crossings(end: End, y: Array, z: Array, kink: float) -> tuple[Numbers, Array]:
    """Return the panels (numbered over all rows) in which the end crosses a kink, and where."""
    above = y > kink
    row, panel, before = np.nonzero(above[..., 1:] != above[..., :-1])
    low, high = z[panel, before], z[panel, before + 1]
    low_above = above[row, panel, before]
    for _ in range(HALVINGS):
        middle = (low + high) / 2
        same = (end(row, middle) > kink) == low_above
        low, high = np.where(same, middle, low), np.where(same, high, middle)
    return row * N_PANELS + panel, (low + high) / 2


def _pieces(panel: Numbers, root: Array) -> tuple[Numbers, Array, Array]:
    """Return the pieces that roots cut panels into: the panel, the lower and the upper end."""
    cut = np.unique(panel)
    number = np.concatenate([cut, panel])
    start = np.concatenate([EDGES[cut % N_PANELS], root])
    order = np.lexsort((start, number))
    number, start = number[order], start[order]
    stop = EDGES[number % N_PANELS + 1]
    followed = number[1:] == number[:-1]
    stop[:-1][followed] = start[1:][followed]
    return number, start, stop


def _integrals(
    end: End, f: Callable[[Array], Array], panel: Numbers, start: Array, stop: Array
) -> Array:
    half = (stop - start)[:, None] / 2
    z = (stop + start)[:, None] / 2 + half * NODES
    rows = np.repeat(panel // N_PANELS, len(NODES))
    y = end(rows, z.ravel())
    values: Array = (f(y).reshape(z.shape) * density(z)) @ WEIGHTS * half[:, 0]
    return values
