"""What a step costs: how it is timed, not how fast a machine is."""

import math
import time
from itertools import groupby

import numpy as np
import pytest

import sdebench as sb
from sdebench.errors import UserCodeRaised
from sdebench.sample import BLOCK
from sdebench.step_cost import N_SMALL, N_STEPS, REPEATS, middle_ratio, step_seconds
from tests.tolerance import round_off


@sb.scheme(strong=0.5)
def euler(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


def watching(name: str, calls: list, noise=("dw",), calculus="ito") -> sb.Scheme:
    """Return a scheme that tells of each of its calls."""

    @sb.scheme(strong=0.5, name=name, noise=noise, calculus=calculus)
    def watched(sde, t, x, h, noise):
        calls.append((name, t, x, h, noise, sde))
        return x + sde.drift(t, x) * h

    return watched


def test_every_scheme_is_timed_in_every_round():
    found = step_seconds([euler, euler, euler], sb.problem("gbm"))
    assert [len(times) for times in found] == [REPEATS] * 3
    assert all(0 < seconds < math.inf for times in found for seconds in times)


def test_schemes_take_turns():
    """It would catch all rounds of one scheme before those of the next."""
    calls = []
    step_seconds([watching("one", calls), watching("two", calls)], sb.problem("gbm"))
    turns = [(name, len(list(group))) for name, group in groupby(c[0] for c in calls)]
    assert turns == [("one", N_STEPS), ("two", N_STEPS)] * REPEATS


def test_the_time_is_that_of_one_step_of_one_path():
    """At least what a step sleeps, over a block of paths, and all rounds less than all the time.

    It would catch seconds of a block or of all steps, and those of the other scheme.
    """
    pause = 2e-3

    @sb.scheme(strong=0.5)
    def sleeping(sde, t, x, h, noise):
        time.sleep(pause)
        return x

    begin = time.perf_counter()
    quick, slow = step_seconds([euler, sleeping], sb.problem("gbm"))
    whole = time.perf_counter() - begin
    assert min(slow) * BLOCK >= pause
    assert (sum(slow) + sum(quick)) * N_STEPS * BLOCK <= whole * (1 + round_off(1.0, 64))


def test_steps_are_those_of_a_real_run():
    """A block from the start, step after step in time, each from where the last one ended."""
    calls = []
    problem = sb.problem("gbm", horizon=2.0)
    step_seconds([watching("one", calls)], problem)
    first = calls[:N_STEPS]
    h = 2.0 / N_SMALL
    assert [(t, step) for _, t, _, step, _, _ in first] == [(k * h, h) for k in range(N_STEPS)]
    assert np.array_equal(first[0][2], np.full(BLOCK, problem.start))
    x, sde = first[0][2], first[0][5]
    assert np.array_equal(first[1][2], x + sde.drift(0.0, x) * h)


def test_a_scheme_is_given_the_noise_that_it_named_alone():
    """Of which the increments of steps are not the same again."""
    calls = []
    step_seconds([watching("one", calls, noise=("dz",))], sb.problem("ou"))
    assert {tuple(vars(call[4])) for call in calls} == {("dz",)}
    assert not np.array_equal(calls[0][4].dz, calls[1][4].dz)


def test_a_scheme_is_given_the_drift_in_its_own_calculus():
    calls = []
    step_seconds([watching("one", calls, calculus="stratonovich")], sb.problem("gbm"))
    assert {call[5].calculus for call in calls} == {"stratonovich"}


def test_a_step_that_raises_is_told_as_the_users():
    @sb.scheme(strong=0.5)
    def raising(sde, t, x, h, noise):
        raise ValueError("no step today")

    with pytest.raises(UserCodeRaised, match="'raising' raised ValueError when timed"):
        step_seconds([raising], sb.problem("gbm"))


def test_a_step_that_overflows_is_timed_all_the_same(recwarn):
    @sb.scheme(strong=0.5)
    def bursting(sde, t, x, h, noise):
        return np.exp(1e3 * np.abs(x) + 1e3)

    (times,) = step_seconds([bursting], sb.problem("gbm"))
    assert min(times) > 0
    assert len(recwarn) == 0


def test_ratios_are_paired_and_their_middle_is_told_with_the_ends():
    """2, 8 and 3: it would catch the ratio of two medians, which is 2."""
    assert middle_ratio([2.0, 8.0, 6.0], [1.0, 1.0, 2.0]) == (3.0, 2.0, 8.0)


def test_ratios_are_of_the_new_over_the_old():
    assert middle_ratio([1.0], [4.0]) == (0.25, 0.25, 0.25)


def test_rounds_that_do_not_pair_are_refused():
    with pytest.raises(ValueError, match="zip"):
        middle_ratio([1.0, 2.0], [1.0])
