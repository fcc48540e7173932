"""The coefficients taken at a wrong time: only a problem that depends on time shows it."""

import math

import numpy as np

from tests.mutants.catalogue import ONE_STEP, Family
from tests.mutants.steps import euler

family = Family("clock")
WRONG_COEFFICIENTS = {"strong": "term h at", "weak": "E ΔX / h"}
WRONG_NOISE = {"strong": "term dw at", "weak": "E ΔX² / h"}


@family.mutant("ramped-noise", ONE_STEP, WRONG_COEFFICIENTS)
def time_frozen_at_the_start(sde, t, x, h, noise):
    return euler(sde, 0.0, x, h, noise.dw)


@family.mutant("ramped-noise", ONE_STEP, WRONG_COEFFICIENTS)
def time_ahead_by_one(sde, t, x, h, noise):
    return euler(sde, t + 1.0, x, h, noise.dw)


@family.mutant("ramped-noise", ONE_STEP, WRONG_COEFFICIENTS)
def time_doubled(sde, t, x, h, noise):
    return euler(sde, 2 * t, x, h, noise.dw)


@family.mutant("ramped-noise", ONE_STEP, WRONG_COEFFICIENTS)
def time_in_days(sde, t, x, h, noise):
    return euler(sde, 365 * t, x, h, noise.dw)


@family.mutant("ramped-noise", ONE_STEP, WRONG_COEFFICIENTS)
def time_a_thousandth_fast(sde, t, x, h, noise):
    return euler(sde, 1.001 * t, x, h, noise.dw)


@family.mutant("ramped-noise", ONE_STEP, WRONG_COEFFICIENTS)
def time_to_go(sde, t, x, h, noise):
    return euler(sde, sde.horizon - t, x, h, noise.dw)


@family.mutant("ramped-noise", ONE_STEP, WRONG_COEFFICIENTS)
def time_of_the_last_tenth(sde, t, x, h, noise):
    return euler(sde, math.floor(10 * t) / 10, x, h, noise.dw)


@family.mutant("ramped-noise", ONE_STEP, WRONG_NOISE)
def noise_frozen_at_the_start(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(0.0, x) * noise.dw


@family.mutant("ramped-noise", ONE_STEP, WRONG_COEFFICIENTS)
def drift_frozen_at_the_start(sde, t, x, h, noise):
    return x + sde.drift(0.0, x) * h + sde.diffusion(t, x) * noise.dw


@family.mutant("ramped-noise", ONE_STEP, WRONG_COEFFICIENTS)
def root_of_time(sde, t, x, h, noise):
    return euler(sde, math.sqrt(t), x, h, noise.dw)


SINGLE = "as single precision or a rounded constant would be"


@family.mutant("ramped-noise", ONE_STEP, SINGLE)
def time_in_single_precision(sde, t, x, h, noise):
    return euler(sde, float(np.float32(t)), x, h, noise.dw)


@family.mutant("ramped-noise", ONE_STEP, WRONG_COEFFICIENTS)
def time_rounded_to_hundredths(sde, t, x, h, noise):
    return euler(sde, round(t, 2), x, h, noise.dw)


@family.mutant("ramped-noise", ONE_STEP, WRONG_COEFFICIENTS)
def time_rounded_to_thousandths(sde, t, x, h, noise):
    return euler(sde, round(t, 3), x, h, noise.dw)
