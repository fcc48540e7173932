"""The functionals f of a weak error E f(X^h_T) - E f(X_T)."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from sdebench.sde import Array


@dataclass(frozen=True)
class Functional:
    """A named function of the end point; `function` maps `(paths,)` to `(paths,)`."""

    name: str
    function: Callable[[Array], Array]

    def __call__(self, x: Array) -> Array:
        """Return f at end points `x`, shape `(paths,)`, in float64 even if f is a condition."""
        return np.asarray(self.function(x), dtype=np.float64)


STANDARD = (
    Functional("mean", lambda x: x),
    Functional("second-moment", lambda x: x * x),
    Functional("cos", np.cos),
)
