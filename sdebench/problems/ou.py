"""Ornstein–Uhlenbeck: mean-reverting, additive noise, Gaussian.

    dX = θ (m - X) dt + σ dW,    X_{t+h} = m + (X_t - m) e^{-θh} + σ ∫ e^{-θ(h-s)} dW_s

The integral is the decayed increment, so that the exact solution is taken on the same path.
Uhlenbeck & Ornstein (1930), Phys. Rev. 36, 823; exact update: Gillespie (1996), Phys. Rev. E 54,
2084.

Defaults: every parameter differs from 0, from 1 and from the others, and x0 from the mean, so
that no factor can be lost unseen; the moment errors of the Euler–Maruyama scheme keep their sign
on all rungs from 4 steps (with θ=2, σ=0.5, mean=0, x0=1 the second-moment error changes it near
16 steps).
"""

import math

import numpy as np

from sdebench import Array, Noise, NormalLaw, Parameter, Params, Problem


def drift(p: Params, t: float, x: Array) -> Array:
    return p["theta"] * (p["mean"] - x)


def diffusion(p: Params, t: float, x: Array) -> Array:
    return np.full_like(x, p["sigma"])


def diffusion_dx(p: Params, t: float, x: Array) -> Array:
    return np.zeros_like(x)


def flow(p: Params, t: float, x: Array, h: float, noise: Noise) -> Array:
    kept = math.exp(-p["theta"] * h)
    return p["mean"] + (x - p["mean"]) * kept + p["sigma"] * noise.decayed


def law(p: Params) -> NormalLaw:
    exponent = p["theta"] * p["horizon"]
    mean = p["mean"] + (p["x0"] - p["mean"]) * math.exp(-exponent)
    sd = p["sigma"] * math.sqrt(-math.expm1(-2 * exponent) / (2 * p["theta"]))
    return NormalLaw(mean, sd, lambda g: g)


ou = Problem(
    name="ou",
    title="Ornstein–Uhlenbeck",
    equation="dX = theta (mean - X) dt + sigma dW",
    parameters={
        "theta": Parameter(0.75, above=0.0, why="or nothing pulls X back to its mean"),
        "mean": Parameter(1.2),
        "sigma": Parameter(0.6, above=0.0, why="or there is no noise to measure against"),
        "x0": Parameter(2.5),
    },
    noise_kind="additive",
    drift=drift,
    diffusion=diffusion,
    diffusion_dx=diffusion_dx,
    flow=flow,
    flow_noise=("decayed",),
    law=law,
    decay="theta",
)
