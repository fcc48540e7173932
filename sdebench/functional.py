"""The functionals f of a weak error E f(X^h_T) - E f(X_T)."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from sdebench.sde import Array


@dataclass(frozen=True)
class Functional:
    """A named function of the end point; `function` maps `(paths,)` to `(paths,)`.

    `growth` is the power of x with which f grows where the state spreads out: 1 for a mean, 2 for
    a second moment, 0 for what is bounded; None has it found from the values of f. `kinks` are
    the states at which f bends or jumps, such as the strike of a payoff.
    """

    name: str
    function: Callable[[Array], Array]
    growth: float | None = None
    kinks: tuple[float, ...] = ()

    def __call__(self, x: Array) -> Array:
        """Return f at end points `x`, shape `(paths,)`, in float64 even if f is a condition."""
        return np.asarray(self.function(x), dtype=np.float64)


STANDARD = (
    Functional("mean", lambda x: x, growth=1),
    Functional("second-moment", lambda x: x * x, growth=2),
    Functional("cos", np.cos, growth=0),
)
