"""Steps that are no pure functions of their own path: coupling, state, shapes, writes, NaN.

An array held across a call of the coefficients is told for certain; one held over 16 substeps
between them is told by threads, as it was in all of 300 processes on two busy cores.
"""

import numpy as np

from sdebench.contract import Law
from tests.mutants.catalogue import Family
from tests.mutants.steps import euler, milstein

family = Family("contract")
calls: list[int] = []
scratch: dict[tuple[int, ...], np.ndarray] = {}
noise_scratch: dict[tuple[int, ...], np.ndarray] = {}
OTHERS = "one path depend on others"


@family.mutant("gbm", Law.OWN_PATH, OTHERS)
def noise_centred_over_the_batch(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw - noise.dw.mean())


@family.mutant("ou", Law.OWN_PATH, OTHERS)
def noise_normalised_over_the_batch(sde, t, x, h, noise):
    spread = np.sqrt(np.mean(noise.dw**2))
    return euler(sde, t, x, h, noise.dw * np.sqrt(h) / spread)


@family.mutant("ou", Law.OWN_PATH, OTHERS)
def drift_towards_the_mean_of_all_paths(sde, t, x, h, noise):
    theta = sde.params["theta"]
    return x + theta * (x.mean() - x) * h + sde.diffusion(t, x) * noise.dw


@family.mutant("gbm", Law.OWN_PATH, OTHERS)
def noise_sorted(sde, t, x, h, noise):
    return milstein(sde, t, x, h, np.sort(noise.dw))


@family.mutant("gbm", Law.OWN_PATH, OTHERS)
def noise_of_the_neighbour(sde, t, x, h, noise):
    return milstein(sde, t, x, h, np.roll(noise.dw, 1))


@family.mutant("ou", Law.OWN_PATH, OTHERS)
def noise_summed_along_the_paths(sde, t, x, h, noise):
    count = np.sqrt(np.arange(1, x.size + 1))
    return euler(sde, t, x, h, np.cumsum(noise.dw) / count)


@family.mutant("gbm", Law.OWN_PATH, OTHERS)
def antithetic_second_half(sde, t, x, h, noise):
    half = x.size // 2
    dw = np.concatenate([noise.dw[: x.size - half], -noise.dw[:half]])
    return milstein(sde, t, x, h, dw)


@family.mutant("gbm", Law.OWN_PATH, OTHERS)
def coupling_in_long_arrays_only(sde, t, x, h, noise):
    dw = noise.dw - noise.dw.mean() if x.size > 1000 else noise.dw
    return milstein(sde, t, x, h, dw)


@family.mutant("ou", Law.OWN_PATH, OTHERS)
def noise_centred_in_pieces_of_a_thousand(sde, t, x, h, noise):
    dw = noise.dw.copy()
    for first in range(0, x.size, 1000):
        dw[first : first + 1000] -= dw[first : first + 1000].mean()
    return euler(sde, t, x, h, dw)


@family.mutant("ou", Law.OWN_PATH, OTHERS)
def noise_scaled_by_the_place_of_the_path(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw * (1 + 1e-6 * np.arange(x.size)))


@family.mutant("gbm", Law.SAME_BITS, "keep nothing from one call to the next")
def noise_reversed_in_every_second_call(sde, t, x, h, noise):
    calls.append(1)
    return milstein(sde, t, x, h, noise.dw if len(calls) % 2 else -noise.dw)


@family.mutant("gbm", Law.SAME_BITS, "when called again")
def noise_that_decays_with_use(sde, t, x, h, noise):
    calls.append(1)
    return milstein(sde, t, x, h, noise.dw, noise=1 + 1e-9 * len(calls))


@family.mutant("gbm", Law.OWN_ARRAYS, "overwrites what another call")
def scratch_array_shared_between_calls(sde, t, x, h, noise):
    after, n = scratch.setdefault(x.shape, np.empty_like(x)), 16
    after[:] = x
    for k in range(n):
        after += sde.drift(t + k * h / n, after) * h / n
        after += sde.diffusion(t, x) * noise.dw / n
    return after.copy()


@family.mutant("ou", Law.SHAPE, "a float where an array of shape (paths,)")
def mean_of_all_paths_returned(sde, t, x, h, noise):
    return float(np.mean(euler(sde, t, x, h, noise.dw)))


@family.mutant("gbm", Law.SHAPE, "a list")
def list_returned(sde, t, x, h, noise):
    return list(milstein(sde, t, x, h, noise.dw))


@family.mutant("gbm", Law.SHAPE, "shape (16384, 1)")
def column_returned(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw)[:, None]


@family.mutant("gbm", Law.SHAPE, "shape ()")
def single_path_returned_as_a_scalar(sde, t, x, h, noise):
    return np.array(np.squeeze(milstein(sde, t, x, h, noise.dw)))


@family.mutant("ramped-noise", Law.SHAPE, "complex128")
def complex_state_returned(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw) + 0j


@family.mutant("ou", Law.INPUTS, "writes into its input x")
def state_changed_in_place(sde, t, x, h, noise):
    step = sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw
    x += step
    return x


@family.mutant("gbm", Law.INPUTS, "writes into its input noise.dw")
def noise_changed_in_place(sde, t, x, h, noise):
    result = milstein(sde, t, x, h, noise.dw)
    noise.dw *= 0.5
    return result


@family.mutant("gbm", Law.FINITE, "gives nan for finite input")
def growth_by_the_root_of_a_square(sde, t, x, h, noise):
    growth = sde.params["mu"] * h + sde.params["sigma"] * noise.dw
    return x * np.sqrt(1 + 2 * growth)


@family.mutant("gbm", Law.FINITE, "gives inf for finite input")
def step_with_a_pole_far_out(sde, t, x, h, noise):
    room = np.maximum(1 - np.abs(noise.dw) / (8 * np.sqrt(h)), 0.0)
    return milstein(sde, t, x, h, noise.dw) + h**2 / room


@family.mutant("gbm", Law.FINITE, "gives nan for finite input")
def nan_above_a_level_that_few_steps_reach(sde, t, x, h, noise):
    after = milstein(sde, t, x, h, noise.dw)
    return np.where(after > 2.5 * sde.start, np.nan, after)


@family.mutant("gbm", Law.FINITE, "gives nan for finite input")
def root_of_a_growth_that_may_be_negative(sde, t, x, h, noise):
    # Right at the default growth: only other parameters show it.
    growth = np.sqrt(sde.params["mu"]) ** 2
    return milstein(sde, t, x, h, noise.dw, drift=0.0) + growth * x * h


@family.mutant("ou", Law.FINITE, "gives nan for finite input")
def logarithm_of_a_mean_that_may_be_negative(sde, t, x, h, noise):
    theta, mean, sigma = (sde.params[name] for name in ("theta", "mean", "sigma"))
    return x + theta * (np.exp(np.log(mean)) - x) * h + sigma * noise.dw


@family.mutant("ou", Law.NO_STEP, "in a step of vanishing length")
def drift_of_a_fixed_step(sde, t, x, h, noise):
    return x + sde.drift(t, x) * 0.01 + sde.diffusion(t, x) * noise.dw


@family.mutant("ou", Law.NO_STEP, "in a step of vanishing length")
def drift_over_h_plus_a_guard(sde, t, x, h, noise):
    return x + sde.drift(t, x) * (h + 1e-8) + sde.diffusion(t, x) * noise.dw


@family.mutant("ou", Law.OWN_ARRAYS, "overwrites what another call")
def scratch_array_of_noise_shared_between_calls(sde, t, x, h, noise):
    kicks = noise_scratch.setdefault(x.shape, np.empty_like(x))
    np.multiply(sde.diffusion(t, x), noise.dw, out=kicks)
    return x + sde.drift(t, x) * h + kicks
