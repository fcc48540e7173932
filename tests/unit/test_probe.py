"""Where a step is tried."""

from dataclasses import replace

import numpy as np
import pytest

import sdebench as sb
from sdebench import probe
from tests.tolerance import round_off


def test_states_of_geometric_brownian_motion_are_its_quantiles_at_half_time():
    p = sb.problem("gbm", mu=0.2, sigma=0.5, x0=2.0, horizon=3.0)
    z = np.array(probe.SPREAD) * 1.5**0.5
    expected = 2.0 * np.exp((0.2 - 0.125) * 1.5 + 0.5 * z)
    assert np.abs(probe.states(p) - expected).max() <= round_off(float(expected.max()), 16)


def test_states_are_four_different_ones():
    assert len(set(probe.states(sb.problem("ou")))) == 4


def test_times_are_the_start_and_one_inside_the_horizon():
    start, later = probe.times(sb.problem("gbm", horizon=4.0))
    assert start == 0.0
    assert 0 < later < 4.0


def test_the_times_of_all_parameter_sets_are_different_ones_within_the_horizon():
    found = [t for i in range(len(probe.TIMES)) for t in probe.times(sb.problem("gbm"), i)]
    assert len(set(found)) == 2 * len(probe.TIMES)
    assert 0.0 <= min(found) <= max(found) < 1.0


def test_there_are_times_for_every_parameter_set():
    assert len(probe.parameter_sets(sb.problem("ou"))) == len(probe.TIMES)


def test_times_leave_no_stretch_of_the_horizon_unseen():
    """A fault over a fifth of the horizon, wherever it is, has one of the times in it."""
    found = sorted({0.0, 1.0} | {t for pair in probe.TIMES for t in pair})
    assert np.diff(found).max() < 1 / 5


def slack(problem: sb.Problem) -> float:
    """Return the relative round-off of a slope by differences between the states."""
    x = np.sort(probe.states(problem))
    return round_off(float(np.abs(x).max() / np.diff(x).min()), 64)


@pytest.mark.parametrize(
    ("typed", "rate"),
    [
        ("ou:theta=100000", 1e5),
        ("ou:theta=50,horizon=3", 50.0),
        ("ou:theta=0.001,horizon=2", 0.5),
        ("gbm:mu=0.25,sigma=0.3,horizon=0.5", 2.0),
        ("gbm:mu=-40,sigma=2", 40.0),
        ("gbm:mu=0.25,sigma=5", 25.0),
        ("ramped-noise", 2.0),
    ],
)
def test_the_time_scale_is_that_of_the_fastest_of_drift_and_noise_and_horizon(typed, rate):
    """1/max(1/T, |∂a/∂x|, (∂b/∂x)²) at time 0, where the derivatives do not depend on x."""
    p = sb.problem(typed)
    found = probe.time_scale(p, 0.0, probe.states(p))
    assert abs(found * rate - 1) <= slack(p)


def test_the_time_scale_does_not_depend_on_the_order_of_the_states():
    p = sb.problem("gbm:mu=-40")
    x = probe.states(p)
    assert probe.time_scale(p, 0.0, x) == probe.time_scale(p, 0.0, x[[2, 0, 3, 1]])


def test_the_first_parameter_set_is_the_problems_own():
    p = sb.problem("gbm", mu=0.4)
    assert probe.parameter_sets(p)[0] is p


def test_the_other_sets_move_every_parameter_but_the_horizon():
    p = sb.problem("ou")
    for other in probe.parameter_sets(p)[1:]:
        moved = {n for n in p.params if other.params[n] != p.params[n]}
        assert moved == set(p.params) - {"horizon"}


def factors_of(p: sb.Problem) -> list[float]:
    sets = probe.parameter_sets(p)[1:]
    return [other.params[n] / p.params[n] for other in sets for n in p.parameters]


@pytest.mark.parametrize("name", ["gbm", "ou", "ramped-noise"])
def test_factors_lie_between_a_half_and_two_in_size(name):
    sizes = np.abs(factors_of(sb.problem(name)))
    assert 0.5 <= sizes.min() <= sizes.max() <= 2.0


@pytest.mark.parametrize("name", ["gbm", "ou", "ramped-noise"])
def test_a_parameter_that_may_change_its_sign_does_so_in_some_set(name):
    """What takes the absolute value of a parameter is right at positive ones alone."""
    p = sb.problem(name)
    free = [n for n, each in p.parameters.items() if each.above < 0 < each.below]
    sets = probe.parameter_sets(p)[1:]
    assert [n for n in free if all(s.params[n] * p.params[n] > 0 for s in sets)] == []


@pytest.mark.parametrize("name", ["gbm", "ou", "ramped-noise"])
def test_a_parameter_that_must_be_positive_stays_so_and_moves_in_every_set(name):
    p = sb.problem(name)
    bound = [n for n, each in p.parameters.items() if each.above == 0]
    moved = [s.params[n] for s in probe.parameter_sets(p)[1:] for n in bound]
    assert min(moved) > 0
    assert set(moved).isdisjoint(p.params[n] for n in bound)


def test_a_parameter_that_is_zero_is_moved_too():
    p = sb.problem("gbm", mu=0.0)
    assert all(other.params["mu"] != 0.0 for other in probe.parameter_sets(p)[1:])


def test_the_sets_are_the_same_every_time():
    p = sb.problem("gbm")
    first, again = probe.parameter_sets(p), probe.parameter_sets(p)
    assert [dict(s.params) for s in first] == [dict(s.params) for s in again]


def test_a_draw_outside_a_parameters_domain_is_left_where_it_was():
    narrow = {"b": sb.Parameter(0.2, above=0.1999, below=0.2001), "x0": sb.Parameter(0.4)}
    p = replace(sb.problem("ramped-noise"), parameters=narrow)
    assert {s.params["b"] for s in probe.parameter_sets(p)} == {0.2}
