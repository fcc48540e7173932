"""Sound steps that claim more than they reach."""

import math

from tests.mutants.catalogue import ONE_STEP, Family
from tests.mutants.steps import euler, milstein

family = Family("overclaim")


@family.mutant("gbm", ONE_STEP, {"strong": "the correction ½·b·∂b/∂x·(dw² - h) is missing"})
def euler_maruyama_of_strong_order_1(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw)


@family.mutant("ou", ONE_STEP, {"strong": "allow strong order 1.00"}, strong=1.5, weak=1.0)
def euler_maruyama_of_strong_order_15_on_additive_noise(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw)


@family.mutant("ou", ONE_STEP, {"weak": "allow weak order 1.00"}, weak=2.0)
def euler_maruyama_of_weak_order_2(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw)


@family.mutant("gbm", ONE_STEP, {"strong": "allow strong order 1.00"}, strong=1.5)
def milstein_of_strong_order_15(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw)


@family.mutant("gbm", ONE_STEP, {"weak": "allow weak order 1.00"}, strong=1.0, weak=2.0)
def milstein_of_weak_order_2(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw)


ORDER_1 = {"strong": "allow strong order 1.00", "weak": "allow weak order 1.00"}


@family.mutant("ou", ONE_STEP, ORDER_1, strong=2.0, weak=2.0, noise="decayed")
def ornstein_uhlenbeck_with_a_linear_decay(sde, t, x, h, noise):
    theta, mean, sigma = (sde.params[name] for name in ("theta", "mean", "sigma"))
    return mean + (x - mean) * (1 - theta * h) + sigma * noise.decayed


@family.mutant("ou", ONE_STEP, ORDER_1, strong=2.0, weak=2.0, noise="decayed")
def ornstein_uhlenbeck_with_an_implicit_decay(sde, t, x, h, noise):
    theta, mean, sigma = (sde.params[name] for name in ("theta", "mean", "sigma"))
    return mean + (x - mean) / (1 + theta * h) + sigma * noise.decayed


@family.mutant("ou", ONE_STEP, {"strong": "allow strong order 1.00"}, strong=2.0, weak=2.0)
def ornstein_uhlenbeck_exact_in_law_only(sde, t, x, h, noise):
    theta, mean, sigma = (sde.params[name] for name in ("theta", "mean", "sigma"))
    kept = math.exp(-theta * h)
    spread = math.sqrt(-math.expm1(-2 * theta * h) / (2 * theta * h))
    return mean + (x - mean) * kept + sigma * spread * noise.dw


@family.mutant("gbm", ONE_STEP, {"weak": "allow weak order 1.00"}, strong=1.0, weak=2.0)
def weak_order_2_with_a_doubled_mixed_term(sde, t, x, h, noise):
    mu, sigma, dw = sde.params["mu"], sde.params["sigma"], noise.dw
    mixed = 2 * mu * sigma * x * dw * h
    return milstein(sde, t, x, h, dw) + mixed + 0.5 * mu**2 * x * h**2


@family.mutant("gbm", ONE_STEP, {"weak": "allow weak order 1.00"}, strong=1.0, weak=2.0)
def weak_order_2_without_the_square_of_h(sde, t, x, h, noise):
    mu, sigma, dw = sde.params["mu"], sde.params["sigma"], noise.dw
    return milstein(sde, t, x, h, dw) + mu * sigma * x * dw * h
