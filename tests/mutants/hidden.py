"""Faults that only whole paths meet: one step is taken where they do not act.

One-step evidence stands at ten times over the horizon, two for each of five parameter sets, at
four states that the process visits halfway, and tells what is left as h vanishes. The faults here
act in the stretches between those times, at levels beyond or between those states, at the step
lengths of a ladder, in the last step of a path, or for bits that few states have.
"""

import math

import numpy as np

from tests.mutants.catalogue import LOW_ORDER, OUTLIER, PROPAGATED, SAMPLED, Family
from tests.mutants.steps import euler, milstein

family = Family("hidden")
STRONG = {"strong": LOW_ORDER}
BOTH = {"strong": LOW_ORDER, "weak": LOW_ORDER}
NAN = "paths end in NaN or infinity"


def between(sde, t, first, last):
    return first * sde.horizon <= t <= last * sde.horizon


def is_rare(x, one_in):
    return x.view(np.uint64) % np.uint64(one_in) == 1


@family.mutant("ramped-noise", SAMPLED, BOTH)
def diffusion_a_fifth_up_in_a_late_stretch(sde, t, x, h, noise):
    late = between(sde, t, 0.84, 0.93)
    return euler(sde, t, x, h, noise.dw, noise=1.2 if late else 1.0)


@family.mutant("ou", SAMPLED, BOTH)
def drift_a_fifth_down_soon_after_the_start(sde, t, x, h, noise):
    early = between(sde, t, 0.12, 0.265)
    return euler(sde, t, x, h, noise.dw, drift=0.8 if early else 1.0)


@family.mutant("ramped-noise", SAMPLED, STRONG)
def clock_that_stands_still_past_the_middle(sde, t, x, h, noise):
    still = between(sde, t, 0.46, 0.61)
    return euler(sde, 0.46 * sde.horizon if still else t, x, h, noise.dw)


@family.mutant("gbm", SAMPLED, STRONG)
def noise_reversed_in_a_stretch_past_the_middle(sde, t, x, h, noise):
    past = between(sde, t, 0.46, 0.61)
    return milstein(sde, t, x, h, -noise.dw if past else noise.dw)


@family.mutant("ramped-noise", SAMPLED, BOTH)
def drift_a_tenth_down_above_a_level_that_half_the_paths_reach(sde, t, x, h, noise):
    high = np.abs(x) > 5 * abs(sde.start)
    return euler(sde, t, x, h, noise.dw, drift=np.where(high, 0.9, 1.0))


@family.mutant("ramped-noise", SAMPLED, BOTH)
def diffusion_a_quarter_up_above_a_level_that_half_the_paths_reach(sde, t, x, h, noise):
    high = np.abs(x) > 5 * abs(sde.start)
    return euler(sde, t, x, h, noise.dw, noise=np.where(high, 1.25, 1.0))


@family.mutant("ou", SAMPLED, STRONG, strong=1.0)
def diffusion_halved_in_a_band_that_every_path_crosses(sde, t, x, h, noise):
    level = (x - sde.params["mean"]) / sde.params["sigma"]
    band = (level > 1.5) & (level < 1.75)
    return euler(sde, t, x, h, noise.dw, noise=np.where(band, 0.5, 1.0))


@family.mutant("ou", PROPAGATED, {"strong": OUTLIER}, strong=1.0)
def noise_a_tenth_up_at_one_step_size(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, noise=1.1 if h == sde.horizon / 64 else 1.0)


@family.mutant("ou", SAMPLED, {"strong": OUTLIER}, strong=1.0)
def noise_a_tenth_up_at_the_last_rung_but_one(sde, t, x, h, noise):
    # Of 32 steps: the sample that checks propagated errors has this rung, they have not.
    one = math.isclose(h, sde.horizon / 32)
    return euler(sde, t, x, h, noise.dw, noise=1.1 if one else 1.0)


@family.mutant("ramped-noise", SAMPLED, BOTH)
def noise_a_tenth_up_in_steps_longer_than_a_hundredth(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, noise=1.1 if h > sde.horizon / 100 else 1.0)


@family.mutant("ou", SAMPLED, STRONG)
def last_step_without_its_noise(sde, t, x, h, noise):
    last = t + 1.5 * h > sde.horizon
    return euler(sde, t, x, h, noise.dw, noise=0.0 if last else 1.0)


@family.mutant("ou", SAMPLED, STRONG)
def last_step_not_taken(sde, t, x, h, noise):
    last = t + 1.5 * h > sde.horizon
    return x.copy() if last else euler(sde, t, x, h, noise.dw)


@family.mutant("ou", SAMPLED, STRONG, strong=1.0)
def noise_reversed_for_rare_bits_of_the_state(sde, t, x, h, noise):
    dw = np.where(is_rare(x, 1 << 6), -noise.dw, noise.dw)
    return euler(sde, t, x, h, dw)


@family.mutant("gbm", SAMPLED, {"strong": NAN, "weak": NAN})
def nan_for_rare_bits_of_the_state(sde, t, x, h, noise):
    # One state in 2^16, of some four million in a look: none at all has a probability of e^-60.
    return np.where(is_rare(x, 1 << 16), np.nan, milstein(sde, t, x, h, noise.dw))


@family.mutant("gbm", SAMPLED, {"strong": NAN, "weak": NAN})
def root_of_the_room_below_a_level_that_few_paths_pass(sde, t, x, h, noise):
    # The volatility is written as a root that is real up to 2.5 times the start.
    room = 2.5 * sde.start - x
    return milstein(sde, t, x, h, noise.dw * np.sqrt(room) / np.sqrt(room))


@family.mutant("gbm", SAMPLED, {"strong": NAN, "weak": NAN})
def logarithm_late_in_the_horizon_only(sde, t, x, h, noise):
    after = milstein(sde, t, x, h, noise.dw)
    late = between(sde, t, 0.84, 0.93)
    return after + 0 * np.log(2 * sde.start - after) if late else after
