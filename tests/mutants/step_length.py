"""Drift or noise on a wrong scale of time, and steps cut into the wrong number of parts."""

import math

from sdebench.contract import Law
from tests.mutants.catalogue import ONE_STEP, Family
from tests.mutants.steps import euler, milstein

family = Family("step-length")


@family.mutant("gbm", ONE_STEP, {"strong": "scaled by √h once more", "weak": "scaled by √h"})
def noise_scaled_by_root_h_twice(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw * math.sqrt(h))


@family.mutant("gbm", ONE_STEP, {"strong": "scaled by √h once more", "weak": "scaled by √h"})
def noise_scaled_by_h(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw * h)


@family.mutant("ou", Law.NO_STEP, "in a step of vanishing length")
def noise_without_root_h(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw / math.sqrt(h))


@family.mutant("ou", ONE_STEP, {"strong": "only 0.707 of it", "weak": "only 0.5 of it"})
def noise_of_half_the_step(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw * math.sqrt(0.5))


@family.mutant("ou", ONE_STEP, {"strong": "1.41 times too large", "weak": "2 times too large"})
def noise_of_twice_the_step(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw * math.sqrt(2.0))


@family.mutant("ou", ONE_STEP, "the drift is halved")
def drift_over_half_the_step(sde, t, x, h, noise):
    return x + sde.drift(t, x) * (h / 2) + sde.diffusion(t, x) * noise.dw


@family.mutant("ou", ONE_STEP, {"strong": "allow strong order -0.50", "weak": "E ΔX² / h"})
def drift_times_root_h(sde, t, x, h, noise):
    return x + sde.drift(t, x) * math.sqrt(h) + sde.diffusion(t, x) * noise.dw


@family.mutant("ou", ONE_STEP, "the drift is missing")
def drift_times_h_squared(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h**2 + sde.diffusion(t, x) * noise.dw


@family.mutant("gbm", ONE_STEP, {"strong": "the -h of (dw² - h) is missing", "weak": "-h of"})
def correction_less_h_squared(sde, t, x, h, noise):
    c = 0.5 * sde.diffusion(t, x) * sde.diffusion_dx(t, x)
    return euler(sde, t, x, h, noise.dw) + c * (noise.dw**2 - h**2)


@family.mutant("gbm", ONE_STEP, "2.36 times too large")
def step_taken_twice(sde, t, x, h, noise):
    once = milstein(sde, t, x, h, noise.dw)
    return milstein(sde, t, once, h, noise.dw)


@family.mutant("ou", ONE_STEP, "only 0.75 of it")
def substeps_one_too_few(sde, t, x, h, noise):
    n = 4
    for k in range(1, n):
        x = x + sde.drift(t + k * h / n, x) * h / n
    return x + sde.diffusion(t, x) * noise.dw


@family.mutant("ramped-noise", ONE_STEP, {"strong": "the drift is halved", "weak": "halved"})
def half_steps_of_which_one_drifts(sde, t, x, h, noise):
    middle = euler(sde, t, x, h / 2, noise.dw / 2)
    return middle + sde.diffusion(t + h / 2, middle) * noise.dw / 2


@family.mutant("ou", ONE_STEP, {"strong": "the noise is twice too large", "weak": "twice"})
def half_steps_with_the_whole_noise_each(sde, t, x, h, noise):
    middle = euler(sde, t, x, h / 2, noise.dw)
    return euler(sde, t + h / 2, middle, h / 2, noise.dw)
