"""The terms of a step: which a claim needs, and their limits beside the SDE's."""

import numpy as np
import pytest

import sdebench as sb
from sdebench.expansion import Setting, expand
from sdebench.integrator import Claim
from sdebench.terms import coefficient_limits, is_required, moment_limits

TOLERANCE = 0.1
STRONG_HALF, STRONG_ONE, WEAK_ONE = Claim("strong", 0.5), Claim("strong", 1.0), Claim("weak", 1.0)
X = np.array([0.5, 2.0])


def expansion_of(step):
    problem = sb.problem("gbm", mu=0.4, sigma=0.3)
    return expand(sb.scheme(strong=0.5)(step), Setting(problem, 0.0, X), 3)


def louder(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + 1.25 * sde.diffusion(t, x) * noise.dw


def two_point(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * np.sign(noise.dw) * h**0.5


@pytest.mark.parametrize(
    ("term", "claim", "required"),
    [
        ("term h", STRONG_HALF, True),
        ("term dw", STRONG_HALF, True),
        ("term dw² - h", STRONG_HALF, False),
        ("term dw² - h", STRONG_ONE, True),
        ("term dw³ - 3h·dw", STRONG_ONE, False),
        ("E ΔX / h", STRONG_ONE, False),
        ("E ΔX / h", WEAK_ONE, True),
        ("term h", WEAK_ONE, False),
    ],
    ids=str,
)
def test_a_claim_needs_the_leading_terms_of_its_kind(term, claim, required):
    assert is_required(term, claim, TOLERANCE) is required


def test_a_wrong_term_lies_many_uncertainties_from_the_right_one_and_the_others_none():
    found = coefficient_limits(expansion_of(louder))
    assert np.all(found.clarity[:, 1] > 1)
    assert np.all(found.clarity[:, 0] <= 1)


def test_the_difference_of_a_term_is_known_to_its_uncertainty():
    """1.25 σ x instead of σ x, with σ = 0.3."""
    found = coefficient_limits(expansion_of(louder))
    assert np.all(np.abs(found.difference[:, 1] - 0.25 * 0.3 * X) <= found.uncertainty[:, 1])


def test_the_second_moment_is_that_of_the_noise_at_order_h():
    """(1.25² - 1) σ² x², with σ = 0.3."""
    found = moment_limits(expansion_of(louder))
    known = (1.25**2 - 1) * 0.3**2 * X**2
    assert np.all(np.abs(found.difference[:, 1] - known) <= found.uncertainty[:, 1])


def test_the_moments_of_a_step_that_jumps_in_its_noise_are_not_told_from_the_right_ones():
    """Quadrature is coarse at the jump: the doubt must hold what a second rule gives instead."""
    assert np.all(moment_limits(expansion_of(two_point)).clarity <= 1)


def test_what_is_no_number_is_as_clear_as_can_be():
    def failing(sde, t, x, h, noise):
        return louder(sde, t, x, h, noise) * (np.nan if h < 1e-4 else 1.0)

    with np.errstate(all="ignore"):
        assert np.all(np.isinf(coefficient_limits(expansion_of(failing)).clarity))
