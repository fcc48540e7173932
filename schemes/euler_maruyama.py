"""The Euler–Maruyama scheme.

    X' = X + a(t, X) h + b(t, X) ΔW

Strong order 1/2, and 1 where the noise is additive; weak order 1. Maruyama (1955), Rend. Circ.
Mat. Palermo 4, 48; orders: Kloeden & Platen (1992), sections 10.2 and 14.1 (from memory).
"""

from sdebench import SDE, Array, Noise, scheme


@scheme(strong=0.5, strong_additive=1.0, weak=1.0)
def euler_maruyama(sde: SDE, t: float, x: Array, h: float, noise: Noise) -> Array:
    """Euler–Maruyama: one value each of drift and diffusion, and the increment."""
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw
