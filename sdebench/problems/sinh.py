"""Hyperbolic sine of a drifting Brownian motion: noise that grows with |X|, either sign of X.

    dX = (a √(1+X²) + (b²/2) X) dt + b √(1+X²) dW,    X_t = sinh(a t + b W_t + arcsinh x0)

Kloeden & Platen (1992), section 4.4 (from memory).

Defaults: a, b and x0 differ from each other and from 1; the start is off 0, where symmetry would
hide errors of the mean.
"""

import math

import numpy as np

from sdebench import Array, Coordinate, Noise, NormalLaw, Parameter, Params, Problem

inverse_sine = Coordinate(to=np.arcsinh, back=np.sinh, slope=lambda x: 1 / np.sqrt(1 + x * x))


def drift(p: Params, t: float, x: Array) -> Array:
    return p["a"] * np.sqrt(1 + x * x) + 0.5 * p["b"] ** 2 * x


def diffusion(p: Params, t: float, x: Array) -> Array:
    return p["b"] * np.sqrt(1 + x * x)


def diffusion_dx(p: Params, t: float, x: Array) -> Array:
    return p["b"] * x / np.sqrt(1 + x * x)


def flow(p: Params, t: float, x: Array, h: float, noise: Noise) -> Array:
    return np.sinh(np.arcsinh(x) + p["a"] * h + p["b"] * noise.dw)


def law(p: Params) -> NormalLaw:
    mean = math.asinh(p["x0"]) + p["a"] * p["horizon"]
    return NormalLaw(mean, p["b"] * math.sqrt(p["horizon"]), inverse_sine.back)


sinh = Problem(
    name="sinh",
    title="hyperbolic sine of a drifting Brownian motion",
    equation="dX = (a sqrt(1+X^2) + b^2/2 X) dt + b sqrt(1+X^2) dW",
    parameters={
        "a": Parameter(0.2),
        "b": Parameter(0.4, above=0.0, why="or there is no noise to measure against"),
        "x0": Parameter(0.5),
    },
    noise_kind="multiplicative",
    drift=drift,
    diffusion=diffusion,
    diffusion_dx=diffusion_dx,
    flow=flow,
    law=law,
    coordinate=inverse_sine,
)
