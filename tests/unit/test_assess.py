"""From a sample to a ruling on a row."""

from dataclasses import replace

import numpy as np
import pytest

import sdebench as sb
from sdebench.assess import Levels, Row, assess, check_references, measured
from sdebench.errors import BadFunctional
from sdebench.functional import STANDARD
from sdebench.integrator import Claim
from sdebench.ladder import DEFAULT, Ladder
from sdebench.sample import Plan, Sample
from sdebench.verdict import Verdict
from tests.tolerance import round_off, sampling

LEVELS = Levels(0.95, 0.1, 4)
STRONG, WEAK = Claim("strong", 1.0), Claim("weak", 1.0)


@sb.scheme(strong=1.0, weak=1.0)
def milstein_by_hand(sde, t, x, h, noise):
    b = sde.diffusion(t, x)
    correction = 0.5 * b * sde.diffusion_dx(t, x) * (noise.dw**2 - h)
    return x + sde.drift(t, x) * h + b * noise.dw + correction


@sb.scheme(strong=1.0, weak=1.0)
def plain_euler(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


def sampled(scheme, on, ladder=DEFAULT, functionals=STANDARD, blocks=2) -> Sample:
    problem = sb.problem(on) if isinstance(on, str) else on
    sample = Sample(Plan(scheme, problem, ladder, functionals, seed=1, grid_maximum=True))
    sample.extend(blocks, 1)
    return sample


@pytest.fixture(scope="module")
def milstein_sample() -> Sample:
    return sampled(milstein_by_hand, "gbm")


@pytest.mark.parametrize(("confidence", "n_rows"), [(0.95, 1), (0.95, 40), (0.5, 7)])
def test_the_shares_of_rows_and_looks_add_up_to_what_the_confidence_leaves(confidence, n_rows):
    """Σ 1/(k(k+1)) over K looks is 1 - 1/(K+1): nothing is spent twice, and all in the end."""
    levels, n_looks = Levels(confidence, 0.1, n_rows), 1000
    spent = sum(n_rows * levels.simultaneous(k) for k in range(1, n_looks + 1))
    left = 1 - confidence
    assert abs(spent - left * (1 - 1 / (n_looks + 1))) <= round_off(left, 4 * n_looks)


def test_a_run_without_rows_has_levels():
    assert Levels(0.95, 0.1, 0).simultaneous(1) > 0


def test_strong_rows_are_mean_squares(milstein_sample):
    found = measured(milstein_sample, Row(STRONG), 1.0)
    rows = list(milstein_sample.plan.rows.squares)
    assert found.power == 2
    assert np.array_equal(found.measures, milstein_sample.tally.moments.mean[rows])


def test_grid_rows_are_those_of_the_grid(milstein_sample):
    found = measured(milstein_sample, Row(STRONG, at="grid"), 1.0)
    rows = list(milstein_sample.plan.rows.grid)
    assert np.array_equal(found.measures, milstein_sample.tally.moments.mean[rows])


@pytest.mark.parametrize("rung", range(5))
def test_weak_rows_are_the_known_errors_of_the_mean(milstein_sample, rung):
    """E X^h_T = x0 (1 + mu h)^N for Milstein; 32 768 paths, seed 1; false alarm 1e-6.

    The standard error is that after the controls: catches controls whose mean is not zero.
    """
    found = measured(milstein_sample, Row(WEAK, functional=0), 1.0)
    p, n = milstein_sample.plan.problem.params, DEFAULT.steps[rung]
    known = p["x0"] * ((1 + p["mu"] / n) ** n - np.exp(p["mu"]))
    error = float(found.standard_errors[rung])
    assert abs(found.measures[rung] - known) <= sampling(error, found.dof)


def test_controls_narrow_a_weak_error_tenfold_or_more():
    sample = sampled(plain_euler, "gbm")
    adjusted = measured(sample, Row(WEAK, functional=0), 1.0).standard_errors
    plain = sample.tally.moments.estimate(list(sample.plan.rows.weak(0))).covariance
    assert np.all(adjusted[-1] * 10 < np.sqrt(np.diag(plain))[-1])


@pytest.mark.parametrize("row", [Row(STRONG), Row(WEAK, functional=0), Row(STRONG, at="grid")])
def test_an_honest_claim_is_supported(milstein_sample, row):
    found = assess(milstein_sample, row, LEVELS, 1, 1.0)
    assert found.ruling.verdict is Verdict.SUPPORTED
    assert found.counts
    assert found.trusted


def test_a_false_claim_is_refuted():
    found = assess(sampled(plain_euler, "gbm"), Row(STRONG), LEVELS, 1, 1.0)
    assert found.ruling.verdict is Verdict.REFUTED


def test_the_exact_flow_is_exact_and_has_no_order():
    problem = sb.problem("ou")

    @sb.scheme(strong=1.0, noise=("decayed",))
    def flow(sde, t, x, h, noise):
        return problem.exact_step(t, x, h, noise)

    found = assess(sampled(flow, problem), Row(STRONG), LEVELS, 1, 3.0)
    assert found.exact
    assert found.order is None
    assert found.ruling.verdict is Verdict.SUPPORTED


def test_a_later_look_takes_a_wider_interval(milstein_sample):
    first = assess(milstein_sample, Row(STRONG), LEVELS, 1, 1.0)
    third = assess(milstein_sample, Row(STRONG), LEVELS, 3, 1.0)
    assert third.quantile > first.quantile
    assert third.order.local.low < first.order.local.low


def test_paths_that_end_in_no_number_refute():
    @sb.scheme(strong=0.5)
    def failing(sde, t, x, h, noise):
        return np.where(noise.dw > 2 * h**0.5, np.nan, plain_euler.step(sde, t, x, h, noise))

    found = assess(sampled(failing, "gbm"), Row(STRONG), LEVELS, 1, 1.0)
    assert found.ruling.verdict is Verdict.REFUTED
    assert "paths end in NaN or infinity" in found.ruling.sentence


def test_rungs_whose_error_is_as_large_as_the_solution_do_not_count():
    """θ = 40: |1 - θh| is 9, 4, 1.5, 0.25 and 0.38; the first three rungs blow up or hardly not."""
    found = assess(sampled(plain_euler, "ou:theta=40"), Row(STRONG), LEVELS, 1, 1.2)
    large = [bool(error > 1.2) for error in found.errors.values]
    assert large == [True, True, True, False, False]
    assert found.order.counting == (3, 4)


@pytest.mark.parametrize("index", range(3), ids=[f.name for f in STANDARD])
def test_a_weak_error_does_not_count_where_the_strong_one_is_as_large_as_the_solution(index):
    """A cosine is bounded, and its error stays the same on all rungs of an unstable scheme."""
    row = Row(WEAK, functional=index)
    found = assess(sampled(plain_euler, "ou:theta=1000"), row, LEVELS, 1, 1.2)
    assert found.ruling.verdict is Verdict.UNDECIDED
    assert found.order is None


def test_errors_that_overflow_on_every_path_refute_nothing():
    with np.errstate(all="ignore"):
        sample = sampled(plain_euler, "ou:theta=10000000")
        found = assess(sample, Row(STRONG), LEVELS, 1, 1.2)
    assert sample.tally.non_finite[-1] == sample.n_paths
    assert found.ruling.verdict is Verdict.UNDECIDED
    assert "The errors overflow with" in found.ruling.sentence


def test_a_heavy_tail_is_told_and_nothing_is_decided_on_it():
    found = assess(sampled(plain_euler, "gbm:mu=2,sigma=3"), Row(STRONG), LEVELS, 1, 1.0)
    assert not found.trusted
    assert found.ruling.verdict is Verdict.UNDECIDED
    assert "One path makes up" in found.ruling.sentence


def test_a_functional_that_gives_no_number_is_a_wrong_use():
    root = sb.Functional("root", np.sqrt)
    with np.errstate(all="ignore"):
        sample = sampled(plain_euler, "ou:mean=-2", functionals=(root,))
        with pytest.raises(BadFunctional, match="root"):
            assess(sample, Row(WEAK, functional=0), LEVELS, 1, 1.0)


def test_a_functional_that_is_never_resolved_does_not_count():
    """The mean of Milstein's error on OU without drift is zero on every rung: only noise."""

    @sb.scheme(weak=1.0)
    def noisy(sde, t, x, h, noise):
        return x + np.sin(1e3 * noise.dw) * h

    flat = sb.Functional("flat", lambda x: np.sin(1e4 * x))
    sample = sampled(noisy, "ou", Ladder((2, 4, 8)), (flat,))
    found = assess(sample, Row(WEAK, functional=0), LEVELS, 1, 1.0)
    assert not found.counts


def references(law: sb.NormalLaw) -> list[tuple[float, float]]:
    return [law.expectation(f.function) for f in STANDARD]


def test_a_sound_law_passes_its_check(milstein_sample):
    problem = milstein_sample.plan.problem
    check_references(milstein_sample, references(problem.law(problem.params)), 3)


@pytest.mark.parametrize("part", ["mean", "sd"])
def test_a_law_that_is_off_is_a_fault_of_the_bench(milstein_sample, part):
    """Off by 5%: with 32 768 paths that is many standard errors of the adjusted mean."""
    problem = milstein_sample.plan.problem
    law = problem.law(problem.params)
    off = replace(law, **{part: getattr(law, part) * 1.05})
    with pytest.raises(sb.BenchFault, match="contradicts itself on gbm"):
        check_references(milstein_sample, references(off), 3)


def test_a_law_that_is_off_within_its_own_doubt_is_no_fault(milstein_sample):
    problem = milstein_sample.plan.problem
    doubtful = [(e + 0.1, 0.2) for e, _ in references(problem.law(problem.params))]
    check_references(milstein_sample, doubtful, 3)
