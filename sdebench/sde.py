"""The SDE: dX = a(t, X) dt + b(t, X) dW with its parameters, start and horizon."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Coefficient = Callable[[float, Array], Array]
Calculus = Literal["ito", "stratonovich"]
NoiseKind = Literal["additive", "multiplicative"]


@dataclass(frozen=True)
class SDE:
    """A scalar SDE as a scheme sees it.

    `drift(t, x)`, `diffusion(t, x)` and `diffusion_dx(t, x)` take t as a float and x of shape
    `(paths,)` and return an array of that shape. `params` is read-only; `start` is X at time 0
    and `horizon` the final time T. `calculus` says how the drift is to be read.
    """

    drift: Coefficient
    diffusion: Coefficient
    diffusion_dx: Coefficient
    params: Mapping[str, float]
    start: float
    horizon: float
    noise_kind: NoiseKind
    calculus: Calculus = "ito"

    def in_calculus(self, calculus: Calculus) -> "SDE":
        """Return the same process with its drift written for `calculus`.

        The Stratonovich drift is a - (1/2) b ∂b/∂x of the Itô drift a (Kloeden & Platen 1992,
        section 4.9; from memory).
        """
        if calculus == self.calculus:
            return self
        sign = -0.5 if calculus == "stratonovich" else 0.5

        def drift(t: float, x: Array) -> Array:
            return self.drift(t, x) + sign * self.diffusion(t, x) * self.diffusion_dx(t, x)

        return replace(self, drift=drift, calculus=calculus)
