"""Detection limits: a fault above them really is seen."""

import math
from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest

import sdebench as sb
from sdebench.detection import Sensitivity, limits, plateau, sensitivities
from sdebench.functional import STANDARD
from sdebench.orders import Errors, counting_rungs, observed_order
from sdebench.verdict import Verdict, judge
from tests.tolerance import round_off, sampling

Q, TOLERANCE, STEPS = 3.0, 0.1, (4, 8, 16, 32, 64)


def ladder(p, relative, power, added=0.0, sign=1.0) -> Errors:
    """Return errors n^-p, each measure known to a fraction, with a constant added to each."""
    clean = np.array([float(n) ** -p for n in STEPS]) ** power
    covariance = np.diag((relative * clean) ** 2)
    measures = sign * (clean + added**power)
    octaves = tuple(math.log2(b / a) for a, b in pairwise(STEPS))
    return Errors(STEPS, octaves, measures, covariance, 100, power, np.zeros(len(STEPS)))


def judged(errors: Errors, claimed: float) -> Verdict:
    counting = counting_rungs(errors, Q)
    order = observed_order(errors, counting, Q)
    unresolved = not errors.resolved(Q).all()
    return judge(errors, order, counting, claimed, TOLERANCE, 1, unresolved).verdict


def limit_of(errors: Errors, claimed: float) -> float:
    order = observed_order(errors, counting_rungs(errors, Q), Q)
    return plateau(errors, order, claimed - TOLERANCE, Q)


CASES = pytest.mark.parametrize(
    ("p", "claimed", "relative", "power", "sign"),
    [
        (1.0, 1.0, 1e-4, 1, 1.0),
        (1.0, 1.0, 1e-3, 1, -1.0),
        (1.0, 1.0, 1e-4, 2, 1.0),
        (0.5, 0.5, 1e-3, 2, 1.0),
        (2.0, 1.0, 2e-2, 1, 1.0),
        (2.0, 2.0, 1e-3, 2, 1.0),
    ],
)


@CASES
def test_a_ladder_without_the_plateau_is_supported(p, claimed, relative, power, sign):
    assert judged(ladder(p, relative, power, sign=sign), claimed) is Verdict.SUPPORTED


@CASES
@pytest.mark.parametrize("times", [1.001, 1.5, 10.0])
def test_a_plateau_above_the_limit_would_not_have_been_supported(
    p, claimed, relative, power, sign, times
):
    limit = limit_of(ladder(p, relative, power, sign=sign), claimed)
    faulty = ladder(p, relative, power, added=times * limit, sign=sign)
    assert judged(faulty, claimed) is not Verdict.SUPPORTED


@CASES
def test_the_limit_is_of_the_size_of_the_finest_error(p, claimed, relative, power, sign):
    """A limit far above every error would promise nothing; far below, it would promise too much."""
    errors = ladder(p, relative, power, sign=sign)
    assert 0 < limit_of(errors, claimed) < abs(float(errors.values[0]))


@pytest.mark.parametrize("power", [1, 2], ids=["weak", "strong"])
def test_without_noise_the_limit_leaves_the_order_just_at_what_is_needed(power):
    errors = ladder(1.0, 0.0, power)
    faulty = ladder(1.0, 0.0, power, added=limit_of(errors, 1.0))
    found = observed_order(faulty, range(5), Q).local.estimate
    assert abs(found - (1.0 - TOLERANCE)) <= round_off(1.0, 256)


@pytest.mark.parametrize("power", [1, 2], ids=["weak", "strong"])
def test_the_limit_allows_for_the_worst_errors_inside_their_intervals(power):
    """With the coarse error at its upper end and the fine one at its lower end the plateau at the
    limit leaves the order just at what is needed; at any other errors it leaves less.
    """
    errors = ladder(1.0, 1e-2, power)
    limit = limit_of(errors, 1.0)
    worst = errors.measures + Q * errors.standard_errors * np.array([0, 0, 0, 1, -1])
    faulty = replace(errors, measures=worst + limit**power)
    found = observed_order(faulty, range(5), Q).local.estimate
    assert abs(found - (1.0 - TOLERANCE)) <= round_off(1.0, 256)


def test_noise_raises_the_limit():
    assert limit_of(ladder(1.0, 1e-2, 1), 1.0) > limit_of(ladder(1.0, 0.0, 1), 1.0)


def test_a_limit_is_divided_by_what_a_relative_fault_does():
    found = limits(0.25, Sensitivity(drift=0.5, diffusion=None))
    assert (found.plateau, found.drift, found.diffusion) == (0.25, 0.5, None)


@pytest.fixture(scope="module")
def gbm_sensitivities():
    problem = sb.problem("gbm", mu=0.4, sigma=0.3)
    return problem, *sensitivities(problem, STANDARD)


def test_the_mean_of_geometric_brownian_motion_changes_by_mu_t_for_a_relative_fault_of_the_drift(
    gbm_sensitivities,
):
    """∂ E X_T/∂ ln mu = x0 mu T e^{mu T}; the module promises a few per cent of its paths."""
    problem, _, weak = gbm_sensitivities
    p = problem.params
    known = p["x0"] * p["mu"] * math.exp(p["mu"])
    spread = math.sqrt(math.expm1(p["sigma"] ** 2) / 4096)  # one standard error, relative
    fault = 0.01 * p["mu"] + p["mu"] / 64 + p["mu"] ** 2 / 64  # second order, and the coarse steps
    assert abs(weak[0].drift / known - 1) <= sampling(spread) + fault


def test_the_mean_of_geometric_brownian_motion_does_not_feel_the_diffusion(gbm_sensitivities):
    assert gbm_sensitivities[2][0].diffusion is None


def test_the_second_moment_feels_both(gbm_sensitivities):
    second = gbm_sensitivities[2][1]
    assert second.drift is not None
    assert second.diffusion is not None


def test_the_strong_error_feels_a_diffusion_that_is_off_as_much_as_the_noise_moves_the_path():
    """On additive noise without drift X_T differs by 1% of sigma W_T: ∂/∂ ln sigma = sigma √T.

    From 4096 paths, whose root mean square has a relative standard error of 1/√(2 · 4096);
    false alarm 1e-6.
    """
    still = replace(
        sb.problem("ramped-noise"),
        drift=lambda p, t, x: 0 * x,
        diffusion=lambda p, t, x: np.full_like(x, p["b"]),
    )
    strong, _ = sensitivities(still, STANDARD)
    b = still.params["b"]
    assert abs(strong.diffusion / b - 1) <= sampling(1 / math.sqrt(2 * 4096))
