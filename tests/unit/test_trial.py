"""The inputs on which the laws of the contract are tried."""

import numpy as np
import pytest

import sdebench as sb
from sdebench import trial
from sdebench.wiener import StepLaw, normal_trapezoid


@sb.scheme(strong=0.5, noise=("dw", "dz"))
def euler(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


@pytest.fixture(scope="module")
def trials() -> list[trial.Trial]:
    return list(trial.trials(euler, sb.problem("gbm")))


def test_steps_are_tried_at_two_times_and_two_lengths(trials):
    assert len({(each.t, each.h) for each in trials}) == len(trials) == 4


def test_a_trial_has_the_noise_that_the_scheme_asks_for_and_no_other(trials):
    assert {tuple(each.noise) for each in trials} == {("dw", "dz")}


def test_the_outermost_nodes_of_a_quadrature_are_among_the_increments(trials):
    """In standard deviations of each increment, both ends of the rule of one-step evidence."""
    ends = normal_trapezoid(0.0)[0][[0, -1]]
    for each in trials:
        factor = StepLaw(("dw",), each.h).factor[0, 0]
        assert np.array_equal(each.noise["dw"][:2], factor * ends)


def test_a_trial_is_the_same_every_time():
    one, two = (next(trial.trials(euler, sb.problem("gbm"))) for _ in range(2))
    assert np.array_equal(one.noise["dw"], two.noise["dw"])


def test_a_step_is_given_copies(trials):
    @sb.scheme(strong=0.5)
    def writing(sde, t, x, h, noise):
        x += 1.0
        noise.dw[:] = 0.0
        return x

    kept = trials[0].x.copy(), trials[0].noise["dw"].copy()
    trials[0].run(writing)
    assert np.array_equal(trials[0].x, kept[0])
    assert np.array_equal(trials[0].noise["dw"], kept[1])


def test_a_part_of_the_paths_is_stepped_alone(trials):
    assert trials[0].run(euler, slice(3, 8)).shape == (5,)


def test_the_place_of_a_path_is_told_with_its_state_and_its_noise(trials):
    where = trials[0].at(2)
    assert where.startswith("at t=0, h=0.125, x=")
    assert ", dw=" in where
    assert ", dz=" in where


def test_scaled_noise_is_every_functional_times_the_factor(trials):
    noise = trials[0].noise
    found = trial.scaled(noise, 0.5)
    assert all(np.array_equal(found[name], 0.5 * noise[name]) for name in noise)
