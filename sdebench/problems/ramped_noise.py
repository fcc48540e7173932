"""Ramped noise: a linear SDE whose pull and whose additive noise depend on time.

    dX = (2 X / (1+t) + b (1+t)²) dt + b (1+t)² dW,    X_t = (1+t)² (x0 + b (W_t + t))

so that X_{t+h} = ((1+t+h)/(1+t))² X_t + b (1+t+h)² (ΔW + h). Kloeden & Platen (1992), section
4.4 (from memory). No autonomous problem sees a step that is taken at the wrong time; this one
does, in the drift and in the diffusion.

Defaults: b and x0 differ from each other and from 1, so that neither is lost unseen.
"""

import numpy as np

from sdebench import Array, Noise, NormalLaw, Parameter, Params, Problem


def drift(p: Params, t: float, x: Array) -> Array:
    return 2 * x / (1 + t) + p["b"] * (1 + t) ** 2


def diffusion(p: Params, t: float, x: Array) -> Array:
    return np.full_like(x, p["b"] * (1 + t) ** 2)


def diffusion_dx(p: Params, t: float, x: Array) -> Array:
    return np.zeros_like(x)


def flow(p: Params, t: float, x: Array, h: float, noise: Noise) -> Array:
    growth = ((1 + t + h) / (1 + t)) ** 2
    return growth * x + p["b"] * (1 + t + h) ** 2 * (noise.dw + h)


def law(p: Params) -> NormalLaw:
    end = p["horizon"]
    growth = (1 + end) ** 2
    mean = growth * (p["x0"] + p["b"] * end)
    return NormalLaw(mean, growth * p["b"] * end**0.5, lambda g: g)


ramped_noise = Problem(
    name="ramped-noise",
    title="linear SDE with noise that ramps up in time",
    equation="dX = (2 X/(1+t) + b (1+t)^2) dt + b (1+t)^2 dW",
    parameters={
        "b": Parameter(0.2, above=0.0, why="or there is no noise to measure against"),
        "x0": Parameter(0.4),
    },
    noise_kind="additive",
    drift=drift,
    diffusion=diffusion,
    diffusion_dx=diffusion_dx,
    flow=flow,
    law=law,
    autonomous=False,
)
