"""A term with a wrong factor or sign, from twice down to a hundred thousandth."""

from tests.mutants.catalogue import ONE_STEP, Family
from tests.mutants.steps import euler, milstein

family = Family("factor")


@family.mutant("gbm", ONE_STEP, "the drift is twice too large")
def drift_doubled(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw, drift=2.0)


@family.mutant("ou", ONE_STEP, "the drift is halved")
def drift_halved(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, drift=0.5)


@family.mutant("ou", ONE_STEP, "the drift is missing")
def drift_missing(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, drift=0.0)


@family.mutant("ou", ONE_STEP, "the drift has the wrong sign")
def drift_reversed(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, drift=-1.0)


@family.mutant("ramped-noise", ONE_STEP, {"strong": "the noise is twice", "weak": "twice"})
def noise_doubled(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, noise=2.0)


@family.mutant("gbm", ONE_STEP, "the noise is halved", strong=0.5, weak=1.0)
def noise_halved(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, noise=0.5)


@family.mutant("ou", ONE_STEP, {"strong": "the noise term has the wrong sign"})
def noise_reversed(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, noise=-1.0)


@family.mutant("gbm", ONE_STEP, {"strong": "it is twice too large"})
def correction_doubled(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw, correction=2.0)


@family.mutant("gbm", ONE_STEP, {"strong": "(dw² - h) is halved"})
def correction_halved(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw, correction=0.5)


@family.mutant("gbm", ONE_STEP, {"strong": "(dw² - h) has the wrong sign"})
def correction_reversed(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw, correction=-1.0)


@family.mutant("gbm", ONE_STEP, {"strong": "(dw² - h) is missing"})
def correction_missing(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw, correction=0.0)


@family.mutant(
    "ou",
    ONE_STEP,
    {"strong": "term h at", "weak": "E ΔX / h"},
)
def drift_a_thousandth_off(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, drift=1.001)


@family.mutant("ou", ONE_STEP, {"strong": "wrong by 0.001 of its size", "weak": "E ΔX² / h"})
def diffusion_a_thousandth_off(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, noise=1.001)


@family.mutant("gbm", ONE_STEP, {"strong": "wrong by 0.001 of its size"})
def correction_a_thousandth_off(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw, correction=1.001)


@family.mutant("gbm", ONE_STEP, {"strong": "wrong by 1e-05 of its size", "weak": "E ΔX² / h"})
def diffusion_a_hundred_thousandth_off(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw, noise=1.00001)


@family.mutant("ou", ONE_STEP, {"strong": "only 0.75 of it", "weak": "only 0.75 of it"})
def drift_three_quarters(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, drift=0.75)
