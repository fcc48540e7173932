"""The chain of (scheme, exact solution), against closed forms after one and two steps.

A propagated number is known to three times its change against nodes that are coarser in every part
by either of two measures; the change itself is small against it, or a test would say little.
"""

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import norm
from threadpoolctl import threadpool_limits

import sdebench as sb
from sdebench.chain import (
    BASE,
    MEAN_SQUARE,
    Chain,
    Goal,
    Resolution,
    exact_goal,
    weak_goal,
)
from sdebench.functional import STANDARD
from sdebench.grid import Grid
from sdebench.transition import NotFinite
from tests.known.gaussian_errors import ou_end_points
from tests.known.gbm_errors import gbm_errors
from tests.tolerance import round_off

COARSE = Resolution(60, 6.8, 6, 4.4, math.inf, 0.6, 4)
FINE = Resolution(72, 7.1, 6, 4.2, math.inf, 0.5, 4)
FINER = Resolution(88, 7.4, 8, 4.0, math.inf, 0.4, 5)
ENOUGH = 1e-3  # of a number, to which the route itself asks it to be known
ROUND_OFF = 1e5  # operations behind a number of ours, most of them in products of matrices
GROWTHS = {"gbm": (1.0, 2.0, 0.0), "ou": (0.0, 0.0, 0.0)}


@pytest.fixture(autouse=True)
def one_thread():
    """As in the product: the matrices are too small to be shared among threads."""
    with threadpool_limits(1, "blas"):
        yield


@sb.scheme(strong=0.5)
def euler(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


@sb.scheme(strong=1.0)
def milstein(sde, t, x, h, noise):
    b = sde.diffusion(t, x)
    return euler.step(sde, t, x, h, noise) + b * sde.diffusion_dx(t, x) * (noise.dw**2 - h) / 2


SCHEMES = {"euler-maruyama": euler, "milstein": milstein}


def goals_of(problem: str) -> dict[str, Goal]:
    pairs = zip(STANDARD, GROWTHS[problem], strict=True)
    return {"mean square": MEAN_SQUARE} | {f.name: weak_goal(f, g) for f, g in pairs}


def known(goal: Goal, chain: Chain) -> tuple[float, float]:
    """Return an expectation and what it may be off by."""
    *others, value = (chain.expectations([goal], r)[goal] for r in (COARSE, FINE, FINER))
    return value, 3 * max(abs(other - value) for other in others) + round_off(1.0, ROUND_OFF)


@pytest.mark.parametrize("steps", [1, 2])
@pytest.mark.parametrize("row", ["mean square", "mean", "second-moment"])
@pytest.mark.parametrize("name", SCHEMES)
def test_errors_on_geometric_brownian_motion_are_the_closed_forms(name, row, steps):
    """Products of Hermite series (tests/known), x0 and the horizon off 1.

    It would catch a wrong number of steps, a wrong start, and a growth or a window that is not
    taken back.
    """
    problem = sb.problem("gbm", x0=0.7, horizon=0.8)
    exact = gbm_errors(name, steps, **problem.params)
    by_row = dict(zip(("mean square", "mean", "second-moment"), map(float, exact), strict=False))
    found, doubt = known(goals_of("gbm")[row], Chain(SCHEMES[name], problem, steps))
    assert abs(found - by_row[row]) <= doubt
    assert doubt <= ENOUGH * abs(found)


@pytest.mark.parametrize("steps", [1, 2])
@pytest.mark.parametrize("row", ["mean square", "mean", "second-moment", "cos"])
def test_errors_on_ornstein_uhlenbeck_are_the_closed_forms(row, steps):
    """A Gaussian pair (tests/known): the flow steps by the decayed increment, the scheme by dw.

    It would catch functionals of two different paths.
    """
    problem = sb.problem("ou", theta=0.4)
    p = problem.params
    pair = ou_end_points(steps, p["theta"], p["mean"], p["sigma"], p["x0"])
    by_row = {"mean square": pair.mean_square} | pair.weak
    found, doubt = known(goals_of("ou")[row], Chain(euler, problem, steps))
    assert abs(found - by_row[row]) <= doubt
    assert doubt <= ENOUGH * abs(found)


def normal_call(mean, sd, strike):
    """Bachelier (1900), from memory."""
    d = (mean - strike) / sd
    return (mean - strike) * norm.cdf(d) + sd * norm.pdf(d)


def lognormal_call(mean, sd, strike):
    """Black & Scholes (1973), from memory."""
    d = (mean - math.log(strike)) / sd
    return math.exp(mean + sd * sd / 2) * norm.cdf(d + sd) - strike * norm.cdf(d)


def ends_of_one_step(p) -> tuple[tuple[float, float], tuple[float, float]]:
    """Mean and sd of Euler's end after one step of length 1, and of the logarithm of X_1."""
    return (p["x0"] * (1 + p["mu"]), p["x0"] * p["sigma"]), (
        math.log(p["x0"]) + p["mu"] - p["sigma"] ** 2 / 2,
        p["sigma"],
    )


@pytest.mark.parametrize("strike", [0.5, 0.65, 0.9])
def test_a_kinked_functional_after_one_step_is_the_closed_form(strike):
    """A call: one step of Euler is normal, the exact end log-normal.

    It would catch a last step whose kink is left to interpolation, and one that is taken twice.
    """
    problem = sb.problem("gbm")
    normal, lognormal = ends_of_one_step(problem.params)
    call = sb.Functional("call", lambda x: np.maximum(x - strike, 0.0), kinks=(strike,))
    found, doubt = known(weak_goal(call, 1.0), Chain(euler, problem, 1))
    expected = normal_call(*normal, strike) - lognormal_call(*lognormal, strike)
    assert abs(found - expected) <= doubt
    assert doubt <= ENOUGH * abs(found)


@pytest.mark.parametrize("kinks", [(), (0.65,)], ids=["no kink", "a kink"])
def test_a_scheme_is_given_the_drift_in_its_own_calculus(kinks):
    """One step by the Stratonovich drift of GBM is normal, of mean x0 (1 + μ - σ²/2).

    It would catch a last step that is given Itô's drift.
    """

    @sb.scheme(strong=0.5, calculus="stratonovich")
    def by_the_other_drift(sde, t, x, h, noise):
        return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw

    problem = sb.problem("gbm")
    p = problem.params
    (mean, sd), lognormal = ends_of_one_step(p)
    mean -= p["x0"] * p["sigma"] ** 2 / 2
    chain = Chain(by_the_other_drift, problem, 1)
    if kinks:
        call = sb.Functional("call", lambda x: np.maximum(x - 0.65, 0.0), kinks=kinks)
        found, doubt = known(weak_goal(call, 1.0), chain)
        expected = normal_call(mean, sd, 0.65) - lognormal_call(*lognormal, 0.65)
    else:
        found, doubt = known(weak_goal(STANDARD[0], 1.0), chain)
        expected = mean - p["x0"] * math.exp(p["mu"])
    assert abs(found - expected) <= doubt
    assert doubt <= ENOUGH * abs(found)


def test_a_digital_after_one_step_is_the_closed_form():
    problem, strike = sb.problem("gbm"), 0.65
    (mean, sd), (log_mean, log_sd) = ends_of_one_step(problem.params)
    digital = sb.Functional("digital", lambda x: x > strike, kinks=(strike,))
    found, doubt = known(weak_goal(digital, 0.0), Chain(euler, problem, 1))
    expected = norm.cdf((mean - strike) / sd) - norm.cdf((log_mean - math.log(strike)) / log_sd)
    assert abs(found - expected) <= doubt
    assert doubt <= ENOUGH * abs(found)


def test_a_kinked_functional_of_a_scheme_that_steps_by_another_functional_is_the_closed_form():
    """A call after one step of Euler on OU, where dw and the decayed increment are two noises."""
    problem, strike = sb.problem("ou", theta=0.4), 1.9
    p = problem.params
    pair = ou_end_points(1, p["theta"], p["mean"], p["sigma"], p["x0"])
    sds = np.sqrt(np.diag(pair.covariance))
    call = sb.Functional("call", lambda x: np.maximum(x - strike, 0.0), kinks=(strike,))
    found, doubt = known(weak_goal(call, 0.0), Chain(euler, problem, 1))
    expected = normal_call(pair.mean[0], sds[0], strike) - normal_call(pair.mean[1], sds[1], strike)
    assert abs(found - expected) <= doubt
    assert doubt <= ENOUGH * abs(found)


@pytest.mark.parametrize("steps", [1, 2, 5])
def test_the_exact_goal_is_the_value_of_the_exact_law(steps):
    """Black & Scholes beside E X_T² = x0² e^(2μ + σ²), whatever the scheme does."""
    problem, strike = sb.problem("gbm"), 0.6
    p = problem.params
    call = sb.Functional("call", lambda x: np.maximum(x - strike, 0.0), kinks=(strike,))
    chain = Chain(euler, problem, steps)
    found, doubt = known(exact_goal(call, 1.0), chain)
    assert abs(found - lognormal_call(*ends_of_one_step(p)[1], strike)) <= doubt
    found, doubt = known(exact_goal(STANDARD[1], 2.0), chain)
    assert abs(found - p["x0"] ** 2 * math.exp(2 * p["mu"] + p["sigma"] ** 2)) <= doubt


@sb.scheme(strong=2.0, noise=("dw", "decayed"))
def exact_ou(sde, t, x, h, noise):
    p = sde.params
    return p["mean"] + (x - p["mean"]) * math.exp(-p["theta"] * h) + p["sigma"] * noise.decayed


def test_a_scheme_that_is_exact_has_no_error():
    """Up to round-off of its steps; it would catch an error in units of its own size."""
    found = Chain(exact_ou, sb.problem("ou"), 3).expectations(goals_of("ou").values(), BASE)
    assert math.sqrt(abs(found.pop(MEAN_SQUARE))) <= round_off(5.0, 64 * 3)
    assert all(abs(error) <= round_off(25.0, 64 * 3) for error in found.values())


def test_goals_of_several_kinks_and_growths_are_each_what_they_are_alone():
    """To the bit; it would catch values that are scaled by another goal's growth."""
    call = sb.Functional("call", lambda x: np.maximum(x - 0.6, 0.0), kinks=(0.6,))
    several = [*goals_of("gbm").values(), weak_goal(call, 1.0), exact_goal(call, 1.0)]
    chain = Chain(milstein, sb.problem("gbm"), 3)
    together = chain.expectations(several, BASE)
    assert list(together) != []
    assert set(together) == set(several)
    for goal in several:
        assert Chain(milstein, sb.problem("gbm"), 3).expectations([goal], BASE) == {
            goal: together[goal]
        }


def test_a_chain_that_is_asked_again_gives_the_same_bits():
    """Though what it keeps was of another resolution in between."""
    chain = Chain(euler, sb.problem("gbm"), 4)
    first = chain.expectations([MEAN_SQUARE], BASE)
    chain.expectations([MEAN_SQUARE], replace(BASE, nodes=40))
    assert chain.expectations([MEAN_SQUARE], replace(BASE, spacing=0.5)) != first
    assert chain.expectations([MEAN_SQUARE], BASE) == first


@pytest.mark.parametrize("steps", [1, 8, 256])
def test_the_size_of_the_error_is_that_of_independent_errors_of_all_steps(steps):
    """√(N E r² + (N E r)²) of the state that errs most, for Euler on OU in closed form.

    From x the error of a step is (x - m)(1 - θh - e^-θh) + σ (dw - I), with I the decayed
    increment; x is the node furthest from m within two standard deviations of the end's law, of
    33 nodes on the whole width. Left out is noise beyond four standard deviations, of which the
    outermost node that is kept is 3.75: at most its E z² there. It would catch a mean that is added
    in quadrature, or the noise of one step taken as that of all.
    """
    p = sb.problem("ou").params
    theta, sigma, h = p["theta"], p["sigma"], 1 / steps
    kept, whole = math.exp(-theta * h), math.exp(-theta)
    variance = sigma**2 * (h - 2 * (1 - kept) / theta + (1 - kept**2) / (2 * theta))
    mean = (p["x0"] - p["mean"]) * whole
    reach = 2 * sigma * math.sqrt((1 - whole**2) / (2 * theta))
    off = Grid.of(sb.problem("ou"), 33, BASE.width).u - p["mean"]
    furthest = np.abs(off[np.abs(off - mean) <= reach]).max()
    assert abs(mean) + reach / 2 < furthest
    first = furthest * (1 - theta * h - kept)
    expected = math.sqrt(steps * (variance + first**2) + (steps * first) ** 2)
    found = Chain(euler, sb.problem("ou"), steps).error_size
    tail = 2 * (3.75 * norm.pdf(3.75) + norm.sf(3.75))  # E z² beyond 3.75
    allowed = steps * variance * tail / expected + 1e-12 * 4 * reach + round_off(steps, 64)
    assert abs(found - expected) <= allowed + tail * expected
    assert tail < 0.003


@pytest.mark.parametrize("steps", [1, 8, 256])
@pytest.mark.parametrize("name", SCHEMES)
def test_the_size_of_the_error_is_in_the_coordinate_at_the_end(name, steps):
    """On GBM r = x^h'/x' - 1 from any state, and at most r x'/x where du/dx is held at x.

    Between √(N E r² + (N E r)²) of the two by QUADPACK, less what lies beyond 3.5 standard
    deviations. It would catch errors in x, which are half as large here.
    """
    problem = sb.problem("gbm")
    p, h = problem.params, 1 / steps

    def step_of(z: float) -> tuple[float, float]:
        dw = math.sqrt(h) * z
        ended = 1 + p["mu"] * h + p["sigma"] * dw
        if name == "milstein":
            ended += p["sigma"] ** 2 * (dw * dw - h) / 2
        growth = math.exp((p["mu"] - p["sigma"] ** 2 / 2) * h + p["sigma"] * dw)
        return ended / growth - 1, max(1.0, growth)

    def size(reach: float, held: bool) -> float:
        def mean(power: int) -> float:
            def value(z: float) -> float:
                r, growth = step_of(z)
                carried = r * growth if held else r
                return carried**power * math.exp(-z * z / 2) / math.sqrt(2 * math.pi)

            return quad(value, -reach, reach, epsabs=1e-14, epsrel=1e-9, limit=200)[0]

        return math.sqrt(steps * mean(2) + (steps * mean(1)) ** 2)

    found = Chain(SCHEMES[name], problem, steps).error_size
    left_out = [abs(size(9.0, held) - size(3.5, held)) for held in (False, True)]
    assert size(9.0, False) - left_out[0] <= found <= size(9.0, True) + left_out[1] + 2e-12


def test_the_size_of_the_error_of_an_exact_scheme_is_positive():
    """Or its polynomials would have all their nodes in one place."""
    size = Chain(exact_ou, sb.problem("ou"), 4).error_size
    assert 0 < size <= round_off(5.0, 64 * 4) + 1e-12 * 4


def test_the_focus_of_a_kink_is_its_place_in_u_with_the_sd_of_a_step_there():
    """On GBM log K and σ√h, whatever K; in the order of the kinks."""
    problem = sb.problem("gbm", horizon=2.0)
    found = Chain(euler, problem, 8).focuses((0.4, 1.3))
    length = problem.params["sigma"] * 0.5
    for focus, kink in zip(found, (0.4, 1.3), strict=True):
        assert abs(focus.place - math.log(kink)) <= round_off(1.0, 4)
        assert abs(focus.length - length) <= round_off(length, 16)


def test_the_focus_of_a_kink_on_a_problem_without_a_coordinate_is_the_kink():
    problem = sb.problem("ou")
    (found,) = Chain(euler, problem, 16).focuses((1.3,))
    assert (found.place, found.length) == (1.3, problem.params["sigma"] * 0.25)


def test_the_grid_of_a_kink_draws_nodes_together_to_less_than_a_step():
    chain = Chain(euler, sb.problem("gbm"), 64)
    (focus,) = chain.focuses((0.6,))
    assert chain.grid((), BASE).spacing_near(focus.place) > focus.length
    assert chain.grid((0.6,), BASE).spacing_near(focus.place) < focus.length


def test_the_grid_has_the_nodes_and_the_width_of_the_resolution():
    """Width standard deviations of log X_T about the higher of its mean and the start."""
    problem = sb.problem("gbm")
    p = problem.params
    found = Chain(euler, problem, 4).grid((), replace(BASE, nodes=31, width=5.0))
    high = math.log(p["x0"]) + p["mu"] - p["sigma"] ** 2 / 2 + 5 * p["sigma"]
    assert found.n == 31
    assert abs(found.high - high) <= round_off(4.0, 32)


def test_goals_tell_the_kinks_of_their_functional():
    call = sb.Functional("call", lambda x: np.maximum(x - 0.6, 0.0), kinks=(0.6,))
    assert weak_goal(call, 1.0).kinks == exact_goal(call, 1.0).kinks == (0.6,)
    assert weak_goal(STANDARD[0], 1.0).kinks == MEAN_SQUARE.kinks == ()


def test_goals_value_pairs_of_the_scheme_and_the_solution():
    y, x = np.array([3.0, -1.0]), np.array([1.0, 2.0])
    square = STANDARD[1]
    assert MEAN_SQUARE.value(y, x).tolist() == [4.0, 9.0]
    assert weak_goal(square, 2.0).value(y, x).tolist() == [8.0, -3.0]
    assert exact_goal(square, 2.0).value(y, x).tolist() == [1.0, 4.0]


def test_a_step_that_gives_no_number_is_raised_from_size_and_expectations():
    @sb.scheme(strong=0.5)
    def failing(sde, t, x, h, noise):
        return np.where(x > 0.9, math.nan, euler.step(sde, t, x, h, noise))

    chain = Chain(failing, sb.problem("gbm"), 4)
    with pytest.raises(NotFinite):
        _ = chain.error_size
    with pytest.raises(NotFinite):
        chain.expectations([MEAN_SQUARE], BASE)


def test_the_step_size_is_a_part_of_the_horizon():
    assert Chain(euler, sb.problem("gbm", horizon=2.0), 16).h == 0.125
