"""Itô and Stratonovich confused, and corrections made of the wrong pieces."""

import numpy as np

from tests.mutants.catalogue import ONE_STEP, Family
from tests.mutants.steps import euler, milstein

family = Family("calculus")


def conversion(sde, t, x):
    return 0.5 * sde.diffusion(t, x) * sde.diffusion_dx(t, x)


@family.mutant("gbm", ONE_STEP, "the Stratonovich drift a - ½·b·∂b/∂x was used in an Itô step")
def stratonovich_drift_in_an_ito_step(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw) - conversion(sde, t, x) * h


@family.mutant("gbm", ONE_STEP, "an Itô drift was used where the Stratonovich drift")
def ito_drift_in_a_stratonovich_step(sde, t, x, h, noise):
    b = sde.diffusion(t, x)
    ahead = x + b * noise.dw
    return x + sde.drift(t, x) * h + 0.5 * (b + sde.diffusion(t, ahead)) * noise.dw


@family.mutant("gbm", ONE_STEP, "an Itô drift was used where the Stratonovich drift")
def noise_at_the_midpoint(sde, t, x, h, noise):
    middle = x + 0.5 * sde.diffusion(t, x) * noise.dw
    return x + sde.drift(t, x) * h + sde.diffusion(t, middle) * noise.dw


@family.mutant(
    "gbm",
    ONE_STEP,
    "the Stratonovich drift a - ½·b·∂b/∂x was used in an Itô step",
    strong=1.0,
    weak=1.0,
    calculus="stratonovich",
)
def ito_step_that_asks_for_the_stratonovich_drift(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw)


@family.mutant("gbm", ONE_STEP, "the conversion has the wrong sign", strong=0.5, weak=1.0)
def conversion_with_the_wrong_sign(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw) + conversion(sde, t, x) * h


@family.mutant("gbm", ONE_STEP, "the -h of (dw² - h) is missing")
def square_without_its_mean(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw) + conversion(sde, t, x) * noise.dw**2


@family.mutant("gbm", ONE_STEP, {"strong": "term h at", "weak": "E ΔX / h"})
def mean_of_the_square_halved(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw) + conversion(sde, t, x) * (noise.dw**2 - 0.5 * h)


@family.mutant("gbm", ONE_STEP, {"strong": "term dw² - h"})
def correction_at_the_start_of_the_path(sde, t, x, h, noise):
    frozen = np.full_like(x, sde.start)
    return euler(sde, t, x, h, noise.dw) + conversion(sde, t, frozen) * (noise.dw**2 - h)


@family.mutant("gbm", ONE_STEP, {"strong": "term dw² - h"})
def correction_with_b_squared(sde, t, x, h, noise):
    b = sde.diffusion(t, x)
    return euler(sde, t, x, h, noise.dw) + 0.5 * b**2 * (noise.dw**2 - h)


@family.mutant("gbm", ONE_STEP, {"strong": "term dw² - h"})
def correction_with_the_drift(sde, t, x, h, noise):
    half = 0.5 * sde.drift(t, x) * sde.diffusion_dx(t, x)
    return euler(sde, t, x, h, noise.dw) + half * (noise.dw**2 - h)


@family.mutant("gbm", ONE_STEP, {"strong": "term dw² - h"})
def derivative_by_too_fine_a_difference(sde, t, x, h, noise):
    step = 1e-12  # round-off of b over this step is a ten-thousandth of its slope
    b = sde.diffusion(t, x)
    slope = (sde.diffusion(t, x + step) - b) / step
    return euler(sde, t, x, h, noise.dw) + 0.5 * b * slope * (noise.dw**2 - h)


@family.mutant("gbm", ONE_STEP, {"strong": "(dw² - h) is missing"})
def derivative_by_a_difference_that_vanishes(sde, t, x, h, noise):
    step = 1e-17
    b = sde.diffusion(t, x)
    slope = (sde.diffusion(t, x + step) - b) / step
    return euler(sde, t, x, h, noise.dw) + 0.5 * b * slope * (noise.dw**2 - h)


@family.mutant("gbm", ONE_STEP, {"strong": "it is twice too large"})
def difference_over_half_its_distance(sde, t, x, h, noise):
    b, root = sde.diffusion(t, x), np.sqrt(h)
    gain = (sde.diffusion(t, x + 2 * b * root) - b) * (noise.dw**2 - h)
    return euler(sde, t, x, h, noise.dw) + gain / (2 * root)


@family.mutant("ou", ONE_STEP, {"strong": "the drift has the wrong sign", "weak": "wrong sign"})
def implicit_drift_with_the_wrong_sign(sde, t, x, h, noise):
    theta, mean, sigma = (sde.params[name] for name in ("theta", "mean", "sigma"))
    return (x - theta * mean * h + sigma * noise.dw) / (1 - theta * h)


@family.mutant("ou", ONE_STEP, {"weak": "allow weak order 0.50"}, strong=0.5, weak=1.0)
def drift_looked_up_ahead_by_root_h(sde, t, x, h, noise):
    b = sde.diffusion(t, x)
    return x + sde.drift(t, x + b * np.sqrt(h)) * h + b * noise.dw
