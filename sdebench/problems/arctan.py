"""Arc tangent of a Brownian motion: a state that creeps towards ±π/2.

    dX = -a² sin X cos³ X dt + a cos² X dW,    X_t = arctan(a W_t + tan x0)

Kloeden & Platen (1992), section 4.4 (from memory).

Defaults: a and x0 differ from each other and from 1; the start is off 0, where symmetry would
hide errors of the mean.
"""

import math

import numpy as np

from sdebench import Array, Coordinate, Noise, NormalLaw, Parameter, Params, Problem

tangent = Coordinate(to=np.tan, back=np.arctan, slope=lambda x: 1 / np.cos(x) ** 2, bend=(0.0, 1.0))


def drift(p: Params, t: float, x: Array) -> Array:
    cos = np.cos(x)
    return -p["a"] * p["a"] * np.sin(x) * cos * cos * cos


def diffusion(p: Params, t: float, x: Array) -> Array:
    return p["a"] * np.cos(x) ** 2


def diffusion_dx(p: Params, t: float, x: Array) -> Array:
    return -p["a"] * np.sin(2 * x)


def flow(p: Params, t: float, x: Array, h: float, noise: Noise) -> Array:
    return np.arctan(np.tan(x) + p["a"] * noise.dw)


def law(p: Params) -> NormalLaw:
    return NormalLaw(math.tan(p["x0"]), p["a"] * math.sqrt(p["horizon"]), tangent.back)


arctan = Problem(
    name="arctan",
    title="arc tangent of a Brownian motion",
    equation="dX = -a^2 sin(X) cos(X)^3 dt + a cos(X)^2 dW",
    parameters={
        "a": Parameter(0.6, above=0.0, why="or there is no noise to measure against"),
        "x0": Parameter(
            0.5, above=-math.pi / 2, below=math.pi / 2, why="between the states that it creeps to"
        ),
    },
    noise_kind="multiplicative",
    drift=drift,
    diffusion=diffusion,
    diffusion_dx=diffusion_dx,
    flow=flow,
    law=law,
    coordinate=tangent,
)
