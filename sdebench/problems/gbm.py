"""Geometric Brownian motion: multiplicative noise, log-normal.

    dX = μ X dt + σ X dW,    X_{t+h} = X_t exp((μ - σ²/2) h + σ ΔW)

Kloeden & Platen (1992), section 4.4 (from memory).

Defaults: μ, σ and x0 all differ, and from 1; with them every local order of the Euler–Maruyama
and Milstein schemes is near its limit from 8 steps on, no weak error of the mean, the second
moment or the cosine changes sign, and the tails are tame. (With μ=0.3, σ=0.4, x0=1 the cosine
error of Euler–Maruyama changes sign near 256 steps; with μ=2, σ=1 the fourth moment is so large
that sampled intervals cannot be trusted.)
"""

import math

import numpy as np

from sdebench import Array, Coordinate, Noise, NormalLaw, Parameter, Params, Problem

logarithm = Coordinate(to=np.log, back=np.exp, slope=lambda x: 1 / x)


def drift(p: Params, t: float, x: Array) -> Array:
    return p["mu"] * x


def diffusion(p: Params, t: float, x: Array) -> Array:
    return p["sigma"] * x


def diffusion_dx(p: Params, t: float, x: Array) -> Array:
    return np.full_like(x, p["sigma"])


def flow(p: Params, t: float, x: Array, h: float, noise: Noise) -> Array:
    return x * np.exp((p["mu"] - p["sigma"] ** 2 / 2) * h + p["sigma"] * noise.dw)


def law(p: Params) -> NormalLaw:
    mean = math.log(p["x0"]) + (p["mu"] - p["sigma"] ** 2 / 2) * p["horizon"]
    return NormalLaw(mean, p["sigma"] * math.sqrt(p["horizon"]), logarithm.back)


gbm = Problem(
    name="gbm",
    title="geometric Brownian motion",
    equation="dX = mu X dt + sigma X dW",
    parameters={
        "mu": Parameter(0.25),
        "sigma": Parameter(0.3, above=0.0, why="or there is no noise to measure against"),
        "x0": Parameter(0.5, above=0.0, why="or X stays at 0 and hides every error"),
    },
    noise_kind="multiplicative",
    drift=drift,
    diffusion=diffusion,
    diffusion_dx=diffusion_dx,
    flow=flow,
    law=law,
    coordinate=logarithm,
)
