"""Wrong integrators that the bench does not refute, each with what would see it.

`ESCAPES` are to be refuted. `DECEPTIVE` are made to look to nodes like what they are not: they are
to be refuted or sampled, and never supported by propagation nor taken for a fault of the bench.
Those without a reason why are.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np

import sdebench as sb
from tests.mutants.hidden import is_rare
from tests.mutants.steps import euler, milstein


@dataclass(frozen=True)
class Escape:
    """A wrong integrator, its problem and how it is measured; why it gets away, if it does."""

    scheme: sb.Scheme
    on: str
    why: str | None
    options: Mapping[str, object] = field(default_factory=dict)


ESCAPES: list[Escape] = []
DECEPTIVE: list[Escape] = []


def escapes(on, why, options=None, into=ESCAPES, **claims):
    def decorate(step):
        made = sb.scheme(**(claims or {"strong": 1.0, "weak": 1.0}))(step)
        into.append(Escape(made, on, why, options or {}))
        return made

    return decorate


def deceptive(on, why=None, options=None, **claims):
    return escapes(on, why, options, into=DECEPTIVE, **claims)


@escapes(
    "gbm",
    "an error of a few paths that stays is spared as too heavy a tail",
    {"looks": 2},
)
def diffusion_half_up_above_twice_the_start(sde, t, x, h, noise):
    return milstein(sde, t, x, h, noise.dw, noise=np.where(x > 2 * sde.start, 1.5, 1.0))


@escapes("gbm", "every rung, and every single step, is the horizon over a power of two")
def step_length_rounded_to_a_halving_of_the_horizon(sde, t, x, h, noise):
    halvings = round(math.log2(sde.horizon / h))
    return milstein(sde, t, x, sde.horizon / 2**halvings, noise.dw)


@escapes(
    "ou",
    "where the rung that stands out changes the error's sign, it and all coarser ones are left out",
    weak=1.0,
)
def noise_a_tenth_up_at_one_step_size(sde, t, x, h, noise):
    return euler(sde, t, x, h, noise.dw, noise=1.1 if h == sde.horizon / 64 else 1.0)


UNCHECKED = "a sample with too heavy a tail is no check, however far it lies from the nodes"


@deceptive("gbm")
def diffusion_half_up_late_and_above_twice_the_start(sde, t, x, h, noise):
    bad = (x > 2 * sde.start) & (t > 0.5 * sde.horizon)
    return milstein(sde, t, x, h, noise.dw, noise=np.where(bad, 1.5, 1.0))


@deceptive("gbm")
def diffusion_half_up_late_and_high(sde, t, x, h, noise):
    bad = (x > 1.6 * sde.start) & (t > 0.5 * sde.horizon)
    return milstein(sde, t, x, h, noise.dw, noise=np.where(bad, 1.5, 1.0))


@deceptive("gbm", "of the times of a fine rung, 64 are tried")
def diffusion_half_up_between_the_times_that_are_tried(sde, t, x, h, noise):
    between = 0.501 * sde.horizon < t < 0.5074 * sde.horizon
    return milstein(sde, t, x, h, noise.dw, noise=1.5 if between else 1.0)


@deceptive("gbm", UNCHECKED, {"seed": 2})  # as on one seed in four
def noise_a_tenth_up_at_the_last_rung_but_one(sde, t, x, h, noise):
    one = math.isclose(h, sde.horizon / 32)
    return milstein(sde, t, x, h, noise.dw, noise=1.1 if one else 1.0)


@deceptive("ou", UNCHECKED)
def noise_reversed_for_one_state_in_four_thousand(sde, t, x, h, noise):
    return euler(sde, t, x, h, np.where(is_rare(x, 1 << 12), -noise.dw, noise.dw))


def without_noise_in_a_band(sde, t, x, h, noise, width):
    level = (x - sde.params["mean"]) / sde.params["sigma"]
    band = (level > 0.8) & (level < 0.8 + width)
    return euler(sde, t, x, h, noise.dw, noise=np.where(band, 0.0, 1.0))


@deceptive("ou")
def noise_missing_in_a_very_narrow_band(sde, t, x, h, noise):
    return without_noise_in_a_band(sde, t, x, h, noise, 0.003)


@deceptive("ou")
def noise_missing_in_a_narrow_band(sde, t, x, h, noise):
    return without_noise_in_a_band(sde, t, x, h, noise, 0.01)


@deceptive("gbm")
def noise_a_tenth_up_in_arrays_of_middling_length(sde, t, x, h, noise):
    middling = 256 < x.size < 16384  # neither what the contract tries nor a block of a sample
    return milstein(sde, t, x, h, noise.dw, noise=1.1 if middling else 1.0)
