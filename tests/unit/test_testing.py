"""Convergence as an assertion: what passes, what fails, and with which words."""

import pytest

import sdebench as sb
from sdebench.errors import BadClaim, UnknownName
from sdebench.testing import assert_converges

QUICK = {"steps": (4, 8, 16, 32), "looks": 1, "threads": 1}


def euler(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


def test_a_claim_that_is_supported_returns_its_evidence():
    found = assert_converges(euler, strong=0.5, weak=1.0, **QUICK)
    assert [claim.problem for claim in found.claims] == ["gbm", "gbm"]


@pytest.mark.parametrize(
    "step", ["euler-maruyama", sb.scheme(strong=0.5)(euler)], ids=["by name", "decorated"]
)
def test_a_scheme_brings_its_own_claims(step):
    assert assert_converges(step, **QUICK).verdict is sb.Verdict.SUPPORTED


def test_a_refuted_claim_fails_with_its_sentence_first_and_no_other_claim():
    with pytest.raises(AssertionError) as caught:
        assert_converges(euler, strong=1.0, weak=1.0, **QUICK)
    first, *rest = str(caught.value).splitlines()
    assert first.startswith("euler on gbm, strong: refuted. One-step evidence, term dw² - h")
    assert not any("weak" in line for line in rest)


def test_an_undecided_claim_fails_and_says_what_would_decide():
    with pytest.raises(AssertionError, match=r"undecided\. .*More paths may help"):
        assert_converges(
            euler, on="gbm:mu=2,sigma=1", strong=0.5, looks=1, threads=1, route="sampled"
        )


def test_a_step_without_claims_is_a_wrong_use():
    with pytest.raises(BadClaim, match="claims nothing"):
        assert_converges(euler)


def test_an_unknown_problem_is_a_wrong_use_and_no_failed_assertion():
    with pytest.raises(UnknownName):
        assert_converges(euler, on="gmb", strong=0.5)


def test_a_scheme_is_held_to_the_claims_that_are_given_and_not_to_its_own():
    found = assert_converges("milstein", strong=0.5, **QUICK)
    assert [(claim.kind, claim.claimed) for claim in found.claims] == [("strong", 0.5)]
    with pytest.raises(AssertionError, match="euler-maruyama on gbm, strong: refuted"):
        assert_converges("euler-maruyama", strong=1.0, **QUICK)
