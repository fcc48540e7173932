"""Wrong integrators that the bench does not refute, each with what would see it."""

import math
from dataclasses import dataclass

import numpy as np

import sdebench as sb
from tests.mutants.steps import milstein


@dataclass(frozen=True)
class Escape:
    """A wrong integrator, the problem and looks it was given, and why it gets away."""

    scheme: sb.Scheme
    on: str
    why: str
    looks: int = 2


ESCAPES: list[Escape] = []


def escapes(on, why, looks=2, **claims):
    def decorate(step):
        made = sb.scheme(**(claims or {"strong": 1.0, "weak": 1.0}))(step)
        ESCAPES.append(Escape(made, on, why, looks))
        return made

    return decorate


@escapes(
    "gbm",
    "a'b = ab' on every problem with noise in proportion to x: the two terms cannot be told apart",
    looks=1,
    strong=1.5,
    noise=("dw", "dz"),
)
def mixed_terms_exchanged(sde, t, x, h, noise):
    mu, sigma = sde.params["mu"], sde.params["sigma"]
    drift_changed_by_noise = mu * (sigma * x) * (noise.dw * h - noise.dz)
    noise_changed_by_drift = sigma * (mu * x) * noise.dz
    third = 0.5 * sigma**3 * x * (noise.dw**2 / 3 - h) * noise.dw
    rest = drift_changed_by_noise + noise_changed_by_drift + third + 0.5 * mu**2 * x * h**2
    return milstein(sde, t, x, h, noise.dw) + rest


@escapes("gbm", "an error of a few paths that stays is spared as too heavy a tail")
def diffusion_half_up_above_twice_the_start(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw, noise=np.where(x > 2 * sde.start, 1.5, 1.0))


@escapes("gbm", "a worse coarse rung only raises the order at the finest pair", strong=1.0)
def noise_a_tenth_up_at_the_last_rung_but_one(sde, t, x, h, noise):
    one = math.isclose(h, sde.horizon / 32)
    return milstein(sde, t, x, h, noise.dw, noise=1.1 if one else 1.0)
