"""Expectations over the normal law, of functions that may bend, jump, or vanish outside a band.

Clenshaw–Curtis with 9 nodes on each panel, against the same on its two halves; every panel whose
halves differ is halved, all at once. Panels start narrow, so that no band hides between nodes,
and share their edges, so that no step hides beside one. (The adaptive rules of general libraries
start from one panel: they return 0 with no doubt for a payoff that is 0 at their first nodes.)
Clenshaw & Curtis (1960), Numer. Math. 2, 197.
"""

import math
from collections.abc import Callable

import numpy as np

from sdebench.sde import Array

# Panel edges in standard deviations: 1/64 wide in the bulk, and the tails to where the normal
# density underflows.
EDGES = np.concatenate([[-38.0], np.linspace(-9.0, 9.0, 18 * 64 + 1), [38.0]])
NODES = -np.cos(np.pi * np.arange(9) / 8)
_MOMENTS = np.array([2.0] + [0.0] * 8)
WEIGHTS = np.linalg.solve(np.polynomial.legendre.legvander(NODES, 8).T, _MOMENTS)
AGREED = 1e-17  # a panel's share of the whole below which its halves are taken to agree
ROUNDS = 48  # halvings: a panel with a jump is then far narrower than round-off of its edges
MOST = 40_000  # panels: a function that oscillates without end is given up, and doubted


def normal_expectation(f: Callable[[Array], Array]) -> tuple[float, float]:
    """Return E f(Z) for a standard normal Z, and its numerical uncertainty.

    `f` maps an array to an array of the same shape. The uncertainty is the sum of what panels and
    their halves differ by, and of all that is left where they still do.
    """
    low, high = EDGES[:-1], EDGES[1:]
    whole = _panels(f, low, high)
    size = float(np.abs(whole).sum())
    total = doubt = 0.0
    for _ in range(ROUNDS):
        middle = (low + high) / 2
        left, right = _panels(f, low, middle), _panels(f, middle, high)
        gap = np.abs(left + right - whole)
        done = gap <= AGREED * size
        total += float((left + right)[done].sum())
        doubt += float(gap[done].sum())
        low, high, whole = (
            np.concatenate([a[~done], b[~done]])
            for a, b in ((low, middle), (middle, high), (left, right))
        )
        size = max(size, abs(total))
        if low.size == 0 or low.size > MOST:
            break
    return total + float(whole.sum()), doubt + float(np.abs(whole).sum())


def _panels(f: Callable[[Array], Array], low: Array, high: Array) -> Array:
    half = (high - low) / 2
    z = ((low + high) / 2)[:, None] + half[:, None] * NODES
    density = np.exp(-z * z / 2) / math.sqrt(2 * math.pi)
    values: Array = (np.reshape(f(z.ravel()), z.shape) * density) @ WEIGHTS * half
    return values
