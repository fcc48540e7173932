"""Hyperbolic tangent of a Brownian motion: a state that saturates between -1 and 1.

    dX = -a² X (1-X²) dt + a (1-X²) dW,    X_t = tanh(a W_t + artanh x0)

Kloeden & Platen (1992), section 4.4 (from memory).

Defaults: a and x0 differ from each other and from 1; the start is off 0, where symmetry would
hide errors of the mean.
"""

import math

import numpy as np

from sdebench import Array, Coordinate, Noise, NormalLaw, Parameter, Params, Problem

inverse_tangent = Coordinate(
    to=np.arctanh, back=np.tanh, slope=lambda x: 1 / (1 - x * x), bend=(0.0, math.pi / 2)
)


def drift(p: Params, t: float, x: Array) -> Array:
    return -p["a"] * p["a"] * x * (1 - x * x)


def diffusion(p: Params, t: float, x: Array) -> Array:
    return p["a"] * (1 - x * x)


def diffusion_dx(p: Params, t: float, x: Array) -> Array:
    return -2 * p["a"] * x


def flow(p: Params, t: float, x: Array, h: float, noise: Noise) -> Array:
    return np.tanh(np.arctanh(x) + p["a"] * noise.dw)


def law(p: Params) -> NormalLaw:
    return NormalLaw(math.atanh(p["x0"]), p["a"] * math.sqrt(p["horizon"]), inverse_tangent.back)


tanh = Problem(
    name="tanh",
    title="hyperbolic tangent of a Brownian motion",
    equation="dX = -a^2 X (1-X^2) dt + a (1-X^2) dW",
    parameters={
        "a": Parameter(0.5, above=0.0, why="or there is no noise to measure against"),
        "x0": Parameter(0.3, above=-1.0, below=1.0, why="where the state saturates"),
    },
    noise_kind="multiplicative",
    drift=drift,
    diffusion=diffusion,
    diffusion_dx=diffusion_dx,
    flow=flow,
    law=law,
    coordinate=inverse_tangent,
)
