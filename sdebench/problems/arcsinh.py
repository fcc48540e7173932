"""Inverse hyperbolic sine of a Brownian motion: noise that fades as |X| grows.

    dX = -(a²/2) tanh X sech² X dt + a sech X dW,    X_t = arcsinh(a W_t + sinh x0)

Kloeden & Platen (1992), section 4.4 (from memory).

Defaults: a and x0 differ from each other and from 1; the start is off 0, where symmetry would
hide errors of the mean.
"""

import math

import numpy as np

from sdebench import Array, Coordinate, Noise, NormalLaw, Parameter, Params, Problem

sine = Coordinate(to=np.sinh, back=np.arcsinh, slope=np.cosh, bend=(0.0, 1.0))


def drift(p: Params, t: float, x: Array) -> Array:
    sech = 1 / np.cosh(x)
    return -0.5 * p["a"] * p["a"] * np.tanh(x) * sech * sech


def diffusion(p: Params, t: float, x: Array) -> Array:
    return p["a"] / np.cosh(x)


def diffusion_dx(p: Params, t: float, x: Array) -> Array:
    return -p["a"] * np.tanh(x) / np.cosh(x)


def flow(p: Params, t: float, x: Array, h: float, noise: Noise) -> Array:
    return np.arcsinh(np.sinh(x) + p["a"] * noise.dw)


def law(p: Params) -> NormalLaw:
    return NormalLaw(math.sinh(p["x0"]), p["a"] * math.sqrt(p["horizon"]), sine.back)


arcsinh = Problem(
    name="arcsinh",
    title="inverse hyperbolic sine of a Brownian motion",
    equation="dX = -a^2/2 tanh(X) sech(X)^2 dt + a sech(X) dW",
    parameters={
        "a": Parameter(0.6, above=0.0, why="or there is no noise to measure against"),
        "x0": Parameter(0.5),
    },
    noise_kind="multiplicative",
    drift=drift,
    diffusion=diffusion,
    diffusion_dx=diffusion_dx,
    flow=flow,
    law=law,
    coordinate=sine,
)
