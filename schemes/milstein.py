"""The Milstein scheme for scalar noise.

    X' = X + a(t, X) h + b(t, X) ΔW + (1/2) b(t, X) ∂b/∂x(t, X) (ΔW² - h)

Strong and weak order 1. Milstein (1974), Theory Probab. Appl. 19, 557; Kloeden & Platen (1992),
section 10.3 (from memory).
"""

from sdebench import SDE, Array, Noise, scheme


@scheme(strong=1.0, weak=1.0)
def milstein(sde: SDE, t: float, x: Array, h: float, noise: Noise) -> Array:
    """Milstein: Euler–Maruyama with the correction for noise that depends on the state."""
    b = sde.diffusion(t, x)
    correction = 0.5 * b * sde.diffusion_dx(t, x) * (noise.dw * noise.dw - h)
    return x + sde.drift(t, x) * h + b * noise.dw + correction
