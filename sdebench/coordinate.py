"""The coordinate of a problem: a function of the state in which the exact flow is tame."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from sdebench.sde import Array


@dataclass(frozen=True)
class Coordinate:
    """u = `to(x)`, increasing in x, with its inverse x = `back(u)` and derivative `slope(x)`.

    Each maps an array to an array of the same shape. A good choice is the one in which X is an
    affine function of the driving path, or nearly so: the logarithm for geometric Brownian motion.
    `bend` tells where `back` is hard to interpolate: the place in u of its singularity nearest to
    the real axis, and the distance from there; None where there is none.
    """

    to: Callable[[Array], Array]
    back: Callable[[Array], Array]
    slope: Callable[[Array], Array]
    bend: tuple[float, float] | None = None


STATE = Coordinate(to=lambda x: x, back=lambda u: u, slope=np.ones_like)
