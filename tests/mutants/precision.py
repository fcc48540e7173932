"""Numbers cut short: single precision, rounding to decimals, clipped noise."""

import math

import numpy as np

from sdebench.contract import Law
from tests.mutants.catalogue import ONE_STEP, Family
from tests.mutants.steps import euler, milstein

family = Family("precision")


@family.mutant("gbm", Law.NO_STEP, "in a step of vanishing length")
def state_in_single_precision(sde, t, x, h, noise):
    return milstein(sde, t, x.astype(np.float32).astype(float), h, noise.dw)


@family.mutant("ou", Law.SHAPE, "float32")
def result_in_single_precision(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw).astype(np.float32)


@family.mutant("gbm", ONE_STEP, {"strong": "One-step evidence"})
def increment_in_single_precision(sde, t, x, h, noise):
    return x + (milstein(sde, t, x, h, noise.dw) - x).astype(np.float32)


@family.mutant("ou", Law.NO_STEP, "in a step of vanishing length")
def state_rounded_to_four_decimals(sde, t, x, h, noise):
    return np.round(euler(sde, t, x, h, noise.dw), 4)


@family.mutant("gbm", ONE_STEP, {"strong": "One-step evidence"})
def increment_rounded_to_six_decimals(sde, t, x, h, noise):
    return x + np.round(milstein(sde, t, x, h, noise.dw) - x, 6)


@family.mutant("ou", ONE_STEP, {"strong": "term dw at", "weak": "E ΔX² / h"})
def noise_clipped_at_three_deviations(sde, t, x, h, noise):
    return euler(sde, t, x, h, np.clip(noise.dw, -3 * math.sqrt(h), 3 * math.sqrt(h)))


@family.mutant("ramped-noise", ONE_STEP, {"strong": "term dw at", "weak": "E ΔX² / h"})
def noise_clipped_at_two_and_a_half(sde, t, x, h, noise):
    return milstein(sde, t, x, h, np.clip(noise.dw, -2.5 * math.sqrt(h), 2.5 * math.sqrt(h)))


@family.mutant("gbm", ONE_STEP, {"strong": "term h at", "weak": "E ΔX / h"})
def noise_clipped_below_its_square(sde, t, x, h, noise):
    return milstein(sde, t, x, h, np.clip(noise.dw, -3 * math.sqrt(h), 3 * math.sqrt(h)))


@family.mutant("ou", ONE_STEP, {"strong": "allow strong order"})
def noise_in_half_precision(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw.astype(np.float16).astype(float))


@family.mutant("ou", ONE_STEP, {"strong": "term dw at", "weak": "E ΔX"})
def noise_clipped_above_only(sde, t, x, h, noise):
    return euler(sde, t, x, h, np.minimum(noise.dw, 4 * math.sqrt(h)))


@family.mutant("gbm", ONE_STEP, {"strong": "term", "weak": "E ΔX"})
def growth_of_a_step_clipped(sde, t, x, h, noise):
    return x + np.minimum(milstein(sde, t, x, h, noise.dw) - x, x * math.sqrt(h))


@family.mutant("ou", ONE_STEP, {"strong": "wrong by", "weak": "wrong by"})
def diffusion_constant_in_single_precision(sde, t, x, h, noise):
    sigma = float(np.float32(sde.params["sigma"]))
    return x + sde.drift(t, x) * h + sigma * noise.dw


@family.mutant("ramped-noise", ONE_STEP, {"weak": "E ΔX² / h"}, weak=1.0)
def noise_clipped_in_a_weak_scheme(sde, t, x, h, noise):
    return euler(sde, t, x, h, np.clip(noise.dw, -2.5 * math.sqrt(h), 2.5 * math.sqrt(h)))
