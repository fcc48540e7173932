"""Faults so small, or so far down the ladder, that a sample of paths cannot see them.

One step tells a wrong coefficient however small it is. What it does not tell is a fault at step
sizes that it does not try, or tries and passes on its way to the limit; there propagated errors
must, on rungs that no sample reaches. Each fault comes on gbm and on a problem that is not linear.
"""

import math

import numpy as np

from sdebench.contract import Law
from tests.mutants.catalogue import LOW_ORDER, ONE_STEP, OUTLIER, PROPAGATED, Family
from tests.mutants.steps import milstein

family = Family("tiny")
PROBLEMS = ("gbm", "sinh")
BIAS = 1e-6  # of the mean at the end, on a state of size 1


def on_each(by, says, options=None, problems=PROBLEMS, **claims):
    """Return a decorator that adds a step on each problem."""

    def decorate(step):
        for on in problems:
            made = family.mutant(on, by, says, options, **claims)(step)
        return made

    return decorate


@on_each(ONE_STEP, {"strong": "wrong by 1e-05 of its size", "weak": "E ΔX² / h"})
def diffusion_a_hundred_thousandth_off(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw, noise=1.00001)


@on_each(ONE_STEP, {"strong": "term h at", "weak": "wrong by 1e-05 of its size"})
def drift_a_hundred_thousandth_off(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw, drift=1.00001)


@on_each(ONE_STEP, {"strong": "wrong by 0.01 of its size"})
def correction_a_hundredth_off(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw, correction=1.01)


@on_each(ONE_STEP, {"weak": "E ΔX / h"}, weak=1.0)
def mean_a_millionth_off(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw) + BIAS * h / sde.horizon


@on_each(Law.NO_STEP, "in a step of vanishing length")
def state_in_single_precision(sde, t, x, h, noise):
    return milstein(sde, t, x.astype(np.float32).astype(float), h, noise.dw)


def steps_of_the_horizon(sde, h):
    return round(sde.horizon / h)


@on_each(PROPAGATED, LOW_ORDER)
def noise_a_ten_thousandth_down_on_the_finest_rung(sde, t, x, h, noise):
    finest = 3000 < steps_of_the_horizon(sde, h) < 5000
    return milstein(sde, t, x, h, noise.dw, noise=1 - 1e-4 if finest else 1.0)


@on_each(PROPAGATED, {"strong": OUTLIER}, strong=1.0)
def noise_two_thousandths_down_on_one_fine_rung(sde, t, x, h, noise):
    one = 700 < steps_of_the_horizon(sde, h) < 1500
    return milstein(sde, t, x, h, noise.dw, noise=1 - 2e-3 if one else 1.0)


# One step is taken at halvings of the horizon: a fault at thirds is left to whole paths.
THIRDS = {"steps": (3, 12, 48, 192, 768, 3072)}


def no_halving(sde, h):
    """Return 0 where h is the horizon over a power of two, and up to 1 between."""
    return math.sin(math.pi * math.log2(sde.horizon / h)) ** 2


@on_each(PROPAGATED, LOW_ORDER, THIRDS)
def noise_a_ten_thousandth_down_between_halvings(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw, noise=1 - 1e-4 * no_halving(sde, h))


@on_each(PROPAGATED, {"weak": LOW_ORDER}, THIRDS, weak=1.0)
def drift_three_ten_thousandths_down_between_halvings(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw, drift=1 - 3e-4 * no_halving(sde, h))


@on_each(PROPAGATED, {"strong": LOW_ORDER}, THIRDS, strong=1.0)
def correction_a_tenth_down_between_halvings(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw, correction=1 - 0.1 * no_halving(sde, h))


@family.mutant("gbm", PROPAGATED, {"weak": LOW_ORDER}, THIRDS, weak=1.0)
def mean_a_millionth_off_between_halvings(sde, t, x, h, noise):
    # Its mean is exact but for the bias, which all of its weak error is by then.
    mu = sde.params["mu"]
    exact_mean = x * math.exp(mu * h) - x - mu * x * h
    bias = BIAS * h / sde.horizon * no_halving(sde, h)
    return milstein(sde, t, x, h, noise.dw) + exact_mean - bias
