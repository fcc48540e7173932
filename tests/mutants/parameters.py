"""A parameter ignored, hard-coded at its default, or taken for another."""

from tests.mutants.catalogue import ONE_STEP, Family
from tests.mutants.steps import euler

family = Family("parameter")
DRIFT = {"strong": "term h at", "weak": "E ΔX / h"}
NOISE = {"strong": "term dw at", "weak": "E ΔX² / h"}


def linear(x, h, dw, mu, sigma):
    """Milstein's step of dX = μ X dt + σ X dW."""
    return x * (1 + mu * h + sigma * dw + 0.5 * sigma**2 * (dw**2 - h))


def reverting(x, h, dw, theta, mean, sigma):
    """Euler's step of dX = θ (m - X) dt + σ dW."""
    return x + theta * (mean - x) * h + sigma * dw


@family.mutant("gbm", ONE_STEP, DRIFT)
def growth_at_its_default(sde, t, x, h, noise):
    return linear(x, h, noise.dw, 0.25, sde.params["sigma"])


@family.mutant("gbm", ONE_STEP, {"strong": "One-step", "weak": "E ΔX² / h"})
def volatility_at_its_default(sde, t, x, h, noise):
    return linear(x, h, noise.dw, sde.params["mu"], 0.3)


@family.mutant("gbm", ONE_STEP, {"strong": "One-step", "weak": "One-step"})
def growth_and_volatility_swapped(sde, t, x, h, noise):
    return linear(x, h, noise.dw, sde.params["sigma"], sde.params["mu"])


@family.mutant("gbm", ONE_STEP, {"strong": "term dw at", "weak": "E ΔX² / h"})
def volatility_squared(sde, t, x, h, noise):
    return linear(x, h, noise.dw, sde.params["mu"], sde.params["sigma"] ** 2)


@family.mutant("ou", ONE_STEP, DRIFT)
def reversion_at_its_default(sde, t, x, h, noise):
    return reverting(x, h, noise.dw, 0.75, sde.params["mean"], sde.params["sigma"])


@family.mutant("ou", ONE_STEP, DRIFT)
def mean_at_its_default(sde, t, x, h, noise):
    return reverting(x, h, noise.dw, sde.params["theta"], 1.2, sde.params["sigma"])


@family.mutant("ou", ONE_STEP, NOISE)
def noise_level_at_its_default(sde, t, x, h, noise):
    return reverting(x, h, noise.dw, sde.params["theta"], sde.params["mean"], 0.6)


@family.mutant("ou", ONE_STEP, DRIFT)
def mean_ignored(sde, t, x, h, noise):
    return reverting(x, h, noise.dw, sde.params["theta"], 0.0, sde.params["sigma"])


@family.mutant("ou", ONE_STEP, DRIFT)
def mean_taken_for_the_start(sde, t, x, h, noise):
    return reverting(x, h, noise.dw, sde.params["theta"], sde.start, sde.params["sigma"])


@family.mutant("ramped-noise", ONE_STEP, {"strong": "One-step", "weak": "One-step"})
def ramp_at_its_default(sde, t, x, h, noise):
    b = 0.2 * (1 + t) ** 2
    return x + (2 * x / (1 + t) + b) * h + b * noise.dw


@family.mutant("ramped-noise", ONE_STEP, NOISE)
def ramp_of_the_noise_at_its_default(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + 0.2 * (1 + t) ** 2 * noise.dw


@family.mutant("ou", ONE_STEP, DRIFT)
def drift_kept_from_the_start(sde, t, x, h, noise):
    frozen = 0 * x + sde.start
    return euler(sde, t, x, h, noise.dw) + (sde.drift(t, frozen) - sde.drift(t, x)) * h
