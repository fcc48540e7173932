"""The wrong noise: kept from before, shared, foreign, ignored, bent, or the wrong functional."""

import math

import numpy as np

from sdebench.contract import Law
from tests.mutants.catalogue import ONE_STEP, Family
from tests.mutants.steps import euler, milstein, taylor, taylor_gbm

family = Family("driving-noise")
kept: dict[str, np.ndarray] = {}
stream = np.random.default_rng(3)


@family.mutant("gbm", Law.SAME_BITS, "when called again with the same input")
def noise_of_the_previous_call(sde, t, x, h, noise):
    before = kept.get("previous")
    kept["previous"] = noise.dw.copy()
    same = before is not None and before.shape == x.shape
    return milstein(sde, t, x, h, before if same else noise.dw)


@family.mutant("gbm", Law.ITS_NOISE, "whatever its noise")
def noise_drawn_once_for_each_step_length(sde, t, x, h, noise):
    dw = kept.setdefault(f"{x.shape} {x[:1]} {t} {h}", noise.dw.copy())
    return milstein(sde, t, x, h, dw)


@family.mutant("ou", Law.OWN_PATH, "one path depend on others")
def noise_of_the_first_path_for_all(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw[0])


@family.mutant("ou", Law.SAME_BITS, "no random numbers of its own")
def own_noise_unseeded(sde, t, x, h, noise):
    dw = math.sqrt(h) * np.random.default_rng().standard_normal(x.shape)
    return euler(sde, t, x, h, dw)


@family.mutant("ou", Law.SAME_BITS, "no random numbers of its own")
def own_noise_from_one_stream(sde, t, x, h, noise):
    return euler(sde, t, x, h, math.sqrt(h) * stream.standard_normal(x.shape))


@family.mutant("ou", Law.SAME_BITS, "no random numbers of its own")
def own_noise_added_to_the_given(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw + 1e-3 * math.sqrt(h) * stream.standard_normal(x.shape))


@family.mutant("ou", Law.OWN_PATH, "one path depend on others")
def own_noise_seeded_in_each_call(sde, t, x, h, noise):
    dw = math.sqrt(h) * np.random.default_rng(1).standard_normal(x.shape)
    return euler(sde, t, x, h, dw)


@family.mutant("ramped-noise", Law.ITS_NOISE, "the same result whatever its noise")
def noise_ignored(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h


@family.mutant("gbm", ONE_STEP, {"strong": "term dw at", "weak": "allow weak order -0.50"})
def noise_without_its_sign(sde, t, x, h, noise):
    return euler(sde, t, x, h, np.abs(noise.dw))


@family.mutant("ou", ONE_STEP, {"strong": "term dw at"})
def coin_tosses_that_claim_to_follow_the_path(sde, t, x, h, noise):
    return euler(sde, t, x, h, np.sign(noise.dw) * math.sqrt(h))


@family.mutant("ou", ONE_STEP, {"weak": "E ΔX² / h"}, weak=1.0)
def bounded_noise_of_the_wrong_variance(sde, t, x, h, noise):
    return euler(sde, t, x, h, math.sqrt(h) * np.tanh(noise.dw / math.sqrt(h)))


def order_15(on="gbm", says=None):
    return family.mutant(on, ONE_STEP, says, strong=1.5, weak=2.0, noise=("dw", "dz"))


@order_15(says={"strong": "allow strong order 1.00", "weak": "allow weak order 1.00"})
def time_integral_doubled_where_the_drift_changes(sde, t, x, h, noise):
    more = sde.params["mu"] * sde.diffusion(t, x) * noise.dz
    return taylor_gbm(sde, x, h, noise.dw, noise.dz) + more


@order_15(says={"strong": "allow strong order 1.00"})
def time_integral_without_its_own_part(sde, t, x, h, noise):
    rest = sde.params["mu"] * sde.diffusion(t, x) * (0.5 * noise.dw * h - noise.dz)
    return taylor_gbm(sde, x, h, noise.dw, noise.dz) + rest


@order_15(says={"strong": "allow strong order 1.00", "weak": "allow weak order 1.00"})
def time_integral_missing(sde, t, x, h, noise):
    less = sde.params["mu"] * sde.diffusion(t, x) * noise.dz
    return taylor_gbm(sde, x, h, noise.dw, noise.dz) - less


@order_15(says={"strong": "allow strong order 1.00", "weak": "allow weak order 1.00"})
def time_integral_on_a_wrong_scale(sde, t, x, h, noise):
    wrong = sde.params["mu"] * sde.diffusion(t, x) * noise.dz * (math.sqrt(h) - 1)
    return taylor_gbm(sde, x, h, noise.dw, noise.dz) + wrong


@family.mutant(
    "ou", ONE_STEP, {"strong": "allow strong order 1.00"}, strong=1.5, noise=("dw", "dz")
)
def mixed_terms_exchanged(sde, t, x, h, noise):
    # L0 b = L1 a, so that nothing is wrong, wherever X_T is a function of T and W_T alone: of the
    # problems at hand, everywhere else.
    return taylor(sde, t, x, h, noise.dw, noise.dz, exchanged=True)


@family.mutant(
    "ou",
    ONE_STEP,
    {"strong": "allow strong order 1.00", "weak": "allow weak order 1.00"},
    strong=2.0,
    weak=2.0,
)
def plain_increment_for_the_decayed_one(sde, t, x, h, noise):
    theta, mean, sigma = (sde.params[name] for name in ("theta", "mean", "sigma"))
    return mean + (x - mean) * math.exp(-theta * h) + sigma * noise.dw
