"""One-step evidence: what it refutes, by which term, and what it leaves open."""

import numpy as np
import pytest

import sdebench as sb
from sdebench.discovery import find_scheme
from sdebench.errors import UserCodeRaised
from sdebench.integrator import Claim
from sdebench.onestep import LocalOrder, measure_one_step
from sdebench.verdict import Verdict

TOLERANCE = 0.1
STRONG_HALF, STRONG_ONE = Claim("strong", 0.5), Claim("strong", 1.0)
WEAK_ONE, WEAK_TWO = Claim("weak", 1.0), Claim("weak", 2.0)


def euler(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


def half_the_drift(sde, t, x, h, noise):
    return x + 0.5 * sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


def noise_off_by_a_thousandth(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + 1.001 * sde.diffusion(t, x) * noise.dw


def drift_of_the_defaults(sde, t, x, h, noise):
    """Ignores a parameter: right for the default mu = 0.25 alone."""
    return x + 0.25 * x * h + sde.diffusion(t, x) * noise.dw


def at_time_zero(sde, t, x, h, noise):
    return x + sde.drift(0.0, x) * h + sde.diffusion(0.0, x) * noise.dw


def two_point_noise(sde, t, x, h, noise):
    """A weak scheme: the increment's sign times √h."""
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * np.sign(noise.dw) * h**0.5


def one_step(step, problem, *claims):
    return measure_one_step(sb.scheme(strong=0.5)(step), sb.problem(problem), claims, TOLERANCE)


@pytest.mark.parametrize(
    ("step", "on", "claim", "verdict", "words"),
    [
        (euler, "gbm", STRONG_HALF, Verdict.SUPPORTED, "0.5"),
        (euler, "gbm", STRONG_ONE, Verdict.REFUTED, "term dw² - h"),
        (euler, "gbm", WEAK_ONE, Verdict.SUPPORTED, "1"),
        (euler, "gbm", WEAK_TWO, Verdict.REFUTED, "allow weak order 1.0"),
        (euler, "ou", STRONG_ONE, Verdict.SUPPORTED, "1"),
        (euler, "ou", Claim("strong", 1.5), Verdict.REFUTED, "allow strong order 1.0"),
        (half_the_drift, "gbm", STRONG_HALF, Verdict.REFUTED, "the drift is halved"),
        (half_the_drift, "gbm", WEAK_ONE, Verdict.REFUTED, "E ΔX / h"),
        (noise_off_by_a_thousandth, "gbm", STRONG_HALF, Verdict.REFUTED, "wrong by 0.001"),
        (noise_off_by_a_thousandth, "gbm", WEAK_ONE, Verdict.REFUTED, "E ΔX² / h"),
        (drift_of_the_defaults, "gbm", STRONG_HALF, Verdict.REFUTED, "term h"),
        (at_time_zero, "ramped-noise", STRONG_ONE, Verdict.REFUTED, ", t=0."),
        (two_point_noise, "gbm", WEAK_ONE, Verdict.SUPPORTED, "1"),
        (two_point_noise, "gbm", STRONG_HALF, Verdict.REFUTED, "term dw"),
    ],
    ids=lambda v: getattr(v, "__name__", None) or getattr(v, "value", None) or str(v),
)
def test_one_step_rules_on_a_claim(step, on, claim, verdict, words):
    ruling = one_step(step, on, claim).ruling(claim, TOLERANCE)
    assert ruling.verdict is verdict
    assert words in ruling.sentence


@pytest.mark.parametrize("theta", [10.0, 1e3, 1e5, 1e7])
@pytest.mark.parametrize("claim", [STRONG_ONE, WEAK_ONE], ids=["strong", "weak"])
def test_an_honest_step_is_not_refuted_on_a_stiff_problem(theta, claim):
    """θT = 1e7: steps of a fraction of the horizon would be far outside the expansion's range."""
    found = measure_one_step(
        sb.scheme(strong=1.0)(euler), sb.problem("ou", theta=theta), [claim], TOLERANCE
    )
    assert found.ruling(claim, TOLERANCE).verdict is Verdict.SUPPORTED


@pytest.mark.parametrize("step", [half_the_drift, noise_off_by_a_thousandth])
@pytest.mark.parametrize("theta", [1e3, 1e5])
def test_a_wrong_step_is_refuted_on_a_stiff_problem_as_well(step, theta):
    found = measure_one_step(
        sb.scheme(strong=0.5)(step), sb.problem("ou", theta=theta), [STRONG_HALF], TOLERANCE
    )
    assert found.ruling(STRONG_HALF, TOLERANCE).verdict is Verdict.REFUTED


@pytest.mark.parametrize("horizon", [1e-3, 1e3])
def test_an_honest_step_is_not_refuted_over_a_short_or_a_long_horizon(horizon):
    problem = sb.problem("ou", horizon=horizon)
    found = measure_one_step(sb.scheme(strong=1.0)(euler), problem, [STRONG_ONE], TOLERANCE)
    assert found.ruling(STRONG_ONE, TOLERANCE).verdict is Verdict.SUPPORTED


def test_a_term_without_a_finite_limit_differs_and_is_told_as_no_number():
    def fails_on_short_steps(sde, t, x, h, noise):
        return euler(sde, t, x, h, noise) * (np.nan if h < 1e-4 else 1.0)

    found = one_step(fails_on_short_steps, "gbm", STRONG_HALF)
    term = next(t for t in found.terms if t.term == "term dw")
    assert (term.yours, term.differs) == (None, True)
    assert "yours NaN" in found.ruling(STRONG_HALF, TOLERANCE).sentence


def test_a_mistake_in_the_noise_is_not_told_as_one_in_the_drift():
    """Both are wrong; the sentence on the weak claim is about the moment that it names."""

    def twice_wrong(sde, t, x, h, noise):
        return x + sde.drift(t, x) * h + 2 * sde.diffusion(t, x) * noise.dw

    sentence = one_step(twice_wrong, "gbm", WEAK_ONE).ruling(WEAK_ONE, TOLERANCE).sentence
    assert "E ΔX² / h" in sentence
    assert "the noise is twice too large" in sentence


def test_the_exact_flow_is_told_to_be_exact():
    scheme = find_scheme("exact-ou")
    found = measure_one_step(scheme, sb.problem("ou"), [STRONG_ONE], TOLERANCE)
    assert found.exact
    assert "exact flow" in found.ruling(STRONG_ONE, TOLERANCE).sentence


def test_an_inexact_step_is_not_told_to_be_exact():
    assert not one_step(euler, "ou", STRONG_ONE).exact


def test_a_term_that_a_claim_does_not_need_may_differ():
    found = one_step(euler, "gbm", STRONG_HALF)
    correction = next(t for t in found.terms if t.term == "term dw² - h")
    assert correction.differs
    assert not correction.required


def test_the_local_orders_of_euler_are_told_with_their_place():
    found = one_step(euler, "gbm", STRONG_HALF, WEAK_ONE)
    assert isinstance(found.strong, LocalOrder)
    assert (round(found.strong.order, 1), round(found.weak.order, 1)) == (0.5, 1.0)
    assert " at x=" in f" {found.strong.where}"


@pytest.mark.parametrize(
    ("claims", "n"), [((STRONG_ONE,), 3), ((WEAK_TWO,), 5), ((Claim("weak", 3.0),), 7)]
)
def test_as_many_moments_are_taken_as_the_weak_claim_needs(claims, n):
    assert one_step(euler, "gbm", *claims).expansion.moments.shape[-1] == n


def test_a_step_that_raises_in_another_setting_is_told_as_the_users(user_file):
    path = user_file(
        """
        from sdebench import scheme

        @scheme(strong=0.5)
        def narrow(sde, t, x, h, noise):
            assert sde.params["sigma"] == 0.3
            return x
        """
    )
    with pytest.raises(UserCodeRaised, match="in a single step"):
        measure_one_step(find_scheme(f"{path}:narrow"), sb.problem("gbm"), [STRONG_HALF], TOLERANCE)
