"""Faults in a part of the horizon or among some of the states, where one step is taken too."""

import numpy as np

from tests.mutants.catalogue import ONE_STEP, Family
from tests.mutants.steps import euler, milstein

family = Family("somewhere")
DRIFT = {"strong": "term h at", "weak": "E ΔX / h"}
NOISE = {"strong": "term dw at", "weak": "E ΔX² / h"}


@family.mutant("ramped-noise", ONE_STEP, NOISE)
def diffusion_a_thousandth_up_in_the_second_half(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, noise=1.001 if t > 0.5 * sde.horizon else 1.0)


@family.mutant("ramped-noise", ONE_STEP, NOISE)
def diffusion_a_fifth_up_near_the_end(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, noise=1.2 if t > 0.8 * sde.horizon else 1.0)


@family.mutant("ou", ONE_STEP, DRIFT)
def drift_a_tenth_up_near_the_end(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, drift=1.1 if t > 0.8 * sde.horizon else 1.0)


@family.mutant("ou", ONE_STEP, DRIFT)
def drift_a_tenth_up_soon_after_the_start(sde, t, x, h, noise):
    early = 0 < t < 0.3 * sde.horizon
    return euler(sde, t, x, h, noise.dw, drift=1.1 if early else 1.0)


@family.mutant("ramped-noise", ONE_STEP, {"strong": "term h at"}, strong=0.5)
def time_stops_at_half_the_horizon(sde, t, x, h, noise):
    return euler(sde, min(t, 0.5 * sde.horizon), x, h, noise.dw)


@family.mutant("ramped-noise", ONE_STEP, DRIFT)
def time_stops_short_of_the_horizon(sde, t, x, h, noise):
    return euler(sde, min(t, 0.95 * sde.horizon), x, h, noise.dw)


@family.mutant("ramped-noise", ONE_STEP, DRIFT)
def drift_a_tenth_down_above_a_level(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, drift=np.where(x > 6 * sde.start, 0.9, 1.0))


@family.mutant("ramped-noise", ONE_STEP, NOISE)
def diffusion_a_quarter_up_above_a_level(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, noise=np.where(x > 6 * sde.start, 1.25, 1.0))


@family.mutant("gbm", ONE_STEP, DRIFT)
def noise_ignored_above_the_start(sde, t, x, h, noise):
    return milstein(sde, t, x, h, np.where(x > sde.start, 0.0, noise.dw))


@family.mutant("ou", ONE_STEP, {"strong": "term dw at", "weak": "allow weak order -1.00"})
def state_kept_positive_where_it_may_be_negative(sde, t, x, h, noise):
    return np.maximum(euler(sde, t, x, h, noise.dw), 0.0)
