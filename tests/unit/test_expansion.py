"""One step by quadrature: its limits and rates against series and Itô–Taylor terms."""

import math

import numpy as np
import pytest

import sdebench as sb
from sdebench.expansion import Setting, expand, limit, rate, settings
from tests.tolerance import round_off

H = 2.0 ** -np.arange(4.0, 17.0)


@sb.scheme(strong=0.5)
def euler(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


SERIES = {
    "constant": [0.7],
    "whole powers": [0.7, 0.0, -1.3, 0.0, 0.4],
    "half powers": [0.7, 0.9, -1.3, 2.1, 0.4, -0.2, 0.8],
    "zero limit": [0.0, 0.9, 0.5],
    "more powers than are eliminated": [0.7, 1.0, -1.0, 1.0, -1.0, 1.0, -1.0, 1.0, -1.0],
}


def series(coefficients: list[float]) -> np.ndarray:
    return sum(c * H ** (k / 2) for k, c in enumerate(coefficients))


@pytest.mark.parametrize("coefficients", SERIES.values(), ids=SERIES)
def test_the_limit_of_a_series_in_roots_of_h_is_found_within_its_uncertainty(coefficients):
    floors = np.full_like(H, round_off(1.0, 8))
    found, doubt = limit(series(coefficients)[:, None], floors[:, None])
    assert abs(found[0] - coefficients[0]) <= doubt[0]


@pytest.mark.parametrize("size", [1e-12, 1e-9, 1e-6])
@pytest.mark.parametrize("seed", range(5))
def test_the_limit_is_found_within_its_uncertainty_under_round_off(size, seed):
    """The worst round-off is put in, of either sign; a doubt without its part would miss."""
    signs = np.random.default_rng(seed).choice([-1.0, 1.0], len(H))
    noisy = series(SERIES["half powers"]) + size * signs
    found, doubt = limit(noisy[:, None], np.full((len(H), 1), size))
    assert abs(found[0] - 0.7) <= doubt[0]


def test_the_limit_is_far_better_than_the_last_value():
    values = series(SERIES["half powers"])
    _, doubt = limit(values[:, None], np.full((len(H), 1), round_off(1.0, 8)))
    assert doubt[0] < abs(values[-1] - 0.7) ** 2


def test_limits_of_several_series_are_found_apart():
    both = np.stack([series([2.0, 1.0]), series([-3.0, 0.0, 5.0])], axis=1)
    found, doubt = limit(both, np.full_like(both, round_off(3.0, 8)))
    assert np.all(np.abs(found - [2.0, -3.0]) <= doubt)


@pytest.mark.parametrize("power", [0.5, 1.0, 1.5, 2.0, 3.0])
@pytest.mark.parametrize("sign", [1.0, -1.0], ids=["positive", "negative"])
def test_a_power_law_gives_back_its_power(power, sign):
    errors = sign * 0.3 * H**power
    found = rate(errors[:, None], np.zeros((len(H), 1)))[0]
    assert abs(found - power) <= round_off(power, 64)


def test_errors_near_round_off_are_left_out():
    """The tail is junk of the floor's size; counted, it would give an order near 0."""
    floor = 1e-9
    errors = np.maximum(0.3 * H**2.0, floor)
    found = rate(errors[:, None], np.full((len(H), 1), floor))[0]
    assert abs(found - 2.0) <= round_off(2.0, 64)


@pytest.mark.parametrize(
    "errors",
    [
        H * np.where(np.arange(len(H)) % 2, 1, -1),
        np.where(np.arange(len(H)) // 2 % 2, 1.0, 2.0) * H,
        np.r_[H[:4], np.zeros(len(H) - 4)],
        np.zeros_like(H),
    ],
    ids=["sign changes", "local orders unsettled", "four above round-off", "all zero"],
)
def test_there_is_no_rate_where_there_is_nothing_to_tell_by(errors):
    assert rate(errors[:, None], np.full((len(H), 1), 1e-300))[0] == math.inf


def test_five_errors_above_round_off_are_enough_for_a_rate():
    errors = np.r_[H[:5], np.zeros(len(H) - 5)]
    found = rate(errors[:, None], np.full((len(H), 1), 1e-300))[0]
    assert abs(found - 1.0) <= round_off(1.0, 64)


def test_round_off_that_comes_and_goes_with_every_step_size_does_not_sway_the_rate():
    """A factor of 2 at every other step size: local orders 0 and 2 in turn, 1 over two octaves."""
    errors = np.where(np.arange(len(H)) % 2, 1.0, 2.0) * H
    found = rate(errors[:, None], np.zeros((len(H), 1)))[0]
    assert abs(found - 1.0) <= round_off(1.0, 64)


def test_an_order_that_still_rises_is_extrapolated():
    """The local orders of h/(1 + 3√h) climb to 1: the last of them is no sign of a low one."""
    rising = H[:6] ** 1.0 / (1 + 3 * H[:6] ** 0.5)
    local = np.log2(rising[-2] / rising[-1])
    assert local < rate(rising[:, None], np.zeros((6, 1)))[0]


def test_an_order_that_falls_is_not_extrapolated_further_down():
    falling = H[:6] + 0.3 * H[:6] ** 0.5
    local = np.log2(falling[-3] / falling[-1]) / 2
    found = rate(falling[:, None], np.zeros((6, 1)))[0]
    assert abs(found - local) <= round_off(1.0, 64)


def test_rates_keep_the_shape_of_what_is_beside_the_step_sizes():
    errors = np.multiply.outer(H, np.ones((2, 3)))
    assert rate(errors, np.zeros_like(errors)).shape == (2, 3)


@pytest.fixture(scope="module")
def gbm_expansion():
    problem = sb.problem("gbm", mu=0.4, sigma=0.3)
    return expand(euler, Setting(problem, 0.0, np.array([0.5, 2.0])), 3)


def limits_of(e, values):
    floors = e.floors[..., None] / np.stack([e.h**p for p in (1.0, 0.5, 1.0, 1.5)], -1)[:, None, :]
    return limit(values, floors)


def test_the_flow_of_geometric_brownian_motion_has_its_ito_taylor_terms(gbm_expansion):
    """Terms of h, dw, dw² - h, dw³ - 3 h dw: mu x, sigma x, sigma² x / 2, sigma³ x / 6."""
    x = np.array([0.5, 2.0])
    known = np.stack([0.4 * x, 0.3 * x, 0.3**2 / 2 * x, 0.3**3 / 6 * x], axis=-1)
    found, doubt = limits_of(gbm_expansion, gbm_expansion.needed)
    assert np.all(np.abs(found - known) <= doubt)


def test_the_euler_step_has_the_drift_and_the_noise_and_nothing_else(gbm_expansion):
    x = np.array([0.5, 2.0])
    known = np.stack([0.4 * x, 0.3 * x, 0 * x, 0 * x], axis=-1)
    found, doubt = limits_of(gbm_expansion, gbm_expansion.coefficients)
    assert np.all(np.abs(found - known) <= doubt)


def test_the_difference_is_that_of_the_coefficients(gbm_expansion):
    e = gbm_expansion
    gap = np.abs(e.difference - (e.coefficients - e.needed))
    floors = e.floors[..., None] / np.stack([e.h**p for p in (1.0, 0.5, 1.0, 1.5)], -1)[:, None, :]
    assert np.all(gap <= 4 * floors)


def test_the_local_errors_of_euler_on_multiplicative_noise_are_of_orders_two_and_one(gbm_expansion):
    """E D = O(h²) and (E D²)^(1/2) = O(h): Kloeden & Platen (1992), section 10.2; from memory."""
    e = gbm_expansion
    assert np.round(rate(e.mean_error, e.floors), 2).tolist() == [2.0, 2.0]
    assert np.round(rate(e.root_mean_square, e.floors), 2).tolist() == [1.0, 1.0]


def test_the_mean_error_of_one_euler_step_is_the_closed_form(gbm_expansion):
    """x (1 + mu h) - x exp(mu h), for each state and step size."""
    e = gbm_expansion
    y = 0.4 * e.h[:, None]
    known = -np.array([0.5, 2.0]) * (np.expm1(y) - y)
    assert np.all(np.abs(e.mean_error - known) <= 4 * e.floors)


def test_the_root_mean_square_of_one_euler_step_is_the_closed_form(gbm_expansion):
    """E (1 + mu h + sigma dw - e^{(mu - sigma²/2) h + sigma dw})², by the normal's moments."""
    e, mu, sigma = gbm_expansion, 0.4, 0.3
    h = e.h[:4, None]  # finer ones cancel in this closed form
    square = (
        (1 + mu * h) ** 2
        + sigma**2 * h
        + np.exp((2 * mu + sigma**2) * h)
        - 2 * np.exp(mu * h) * (1 + mu * h + sigma**2 * h)
    )
    known = np.array([0.5, 2.0]) ** 2 * square
    cancelled = round_off(4.0 * 4.0, 32)
    assert np.abs(e.root_mean_square[:4] ** 2 - known).max() <= cancelled


def test_the_moments_are_those_of_the_increment(gbm_expansion):
    e = gbm_expansion
    x = np.array([0.5, 2.0])
    second = x**2 * (np.exp((0.8 + 0.09) * e.h[:, None]) - 2 * np.exp(0.4 * e.h[:, None]) + 1)
    assert np.abs(e.moments_needed[..., 1] - second).max() <= round_off(4.0 * 4.0, 32)


def test_what_is_beside_dw_is_seen_where_the_flow_has_it():
    """On OU: the sd of σ ∫e^{-θ(h-s)}dW beside dw is σ θ h^1.5/√12 to leading order."""
    problem = sb.problem("ou")
    e = expand(euler, Setting(problem, 0.0, np.array([1.0, 2.0])), 3)
    found, doubt = limit(e.rest_needed, e.floors / e.h[:, None] ** 1.5)
    known = problem.params["sigma"] * problem.params["theta"] / math.sqrt(12)
    assert np.all(np.abs(found - known) <= doubt)
    assert np.all(e.rest <= e.floors / e.h[:, None] ** 1.5)


@pytest.mark.parametrize("theta", [0.5, 300.0, 1e5])
def test_steps_are_well_below_the_time_over_which_the_sde_changes(theta):
    """A step is 1/16 at the most of the horizon and of 1/θ: else no power of h leads."""
    problem = sb.problem("ou", theta=theta)
    e = expand(euler, settings(problem)[0], 1)
    assert theta * e.h[0] <= 2.0**-4 * (1 + round_off(1.0, 2**16))
    assert e.h[0] <= problem.horizon * 2.0**-4


def test_the_weak_moments_are_had_by_a_second_rule_as_well(gbm_expansion):
    """The moments of an Euler step are polynomials and exponentials: two rules agree on them."""
    e = gbm_expansion
    assert np.all(np.abs(e.moments - e.moments_check) <= 4 * e.moment_floors)


def test_two_rules_disagree_where_a_step_jumps_in_its_noise():
    @sb.scheme(weak=1.0)
    def jumping(sde, t, x, h, noise):
        return x + np.where(noise.dw > 0.3 * h**0.5, h**0.5, -(h**0.5))

    e = expand(jumping, Setting(sb.problem("gbm"), 0.0, np.array([0.5, 2.0])), 3)
    assert np.all(np.abs(e.moments - e.moments_check)[..., 0] > 4 * e.moment_floors[..., 0])


def test_settings_are_every_parameter_set_at_every_time():
    problem = sb.problem("ou")
    found = settings(problem)
    assert found[0].problem is problem
    assert len(found) == 2 * len({id(s.problem) for s in found})


def test_a_scheme_in_the_stratonovich_calculus_is_given_the_converted_drift():
    """Read off its own term in h: a step that takes the drift as given shows a - b ∂b/∂x / 2."""

    @sb.scheme(strong=0.5, calculus="stratonovich")
    def as_given(sde, t, x, h, noise):
        return x + sde.drift(t, x) * h

    problem, x = sb.problem("gbm", mu=0.4, sigma=0.3), np.array([1.0, 2.0])
    e = expand(as_given, Setting(problem, 0.0, x), 3)
    found, doubt = limits_of(e, e.coefficients)
    assert np.all(np.abs(found[:, 0] - (0.4 - 0.045) * x) <= doubt[:, 0])
