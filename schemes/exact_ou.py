"""The exact Ornstein–Uhlenbeck transition.

    X' = m + (X - m) e^{-θh} + σ ∫_0^h e^{-θ(h-s)} dW_s

Exact for any step, hence of every order; it claims 2, above what an inexact one-step scheme of
this registry reaches, so that an approximation passed off as it is refuted. It needs the decayed
increment and so applies where a problem has one. Gillespie (1996), Phys. Rev. E 54, 2084.
"""

import math

from sdebench import SDE, Array, Noise, scheme


@scheme(strong=2.0, weak=2.0, noise=("decayed",))
def exact_ou(sde: SDE, t: float, x: Array, h: float, noise: Noise) -> Array:
    """Exact transition of the Ornstein–Uhlenbeck process, from the decayed increment."""
    mean = sde.params["mean"]
    kept = math.exp(-sde.params["theta"] * h)
    return mean + (x - mean) * kept + sde.params["sigma"] * noise.decayed
