"""Step-size advice, against the errors that the advised steps really have.

Exact errors are those of `tests/known`; a scheme's fewest steps are the first below the target.
"""

from functools import cache
from math import exp, sqrt

import pytest

import sdebench as sb
from sdebench.advise import RUNGS, Advice
from tests.known.gaussian_errors import ramped_noise_end_points
from tests.known.gbm_errors import gbm_errors
from tests.known.ou_errors import ou_errors

GBM = dict(sb.problem("gbm").params)
RAMPED = dict(sb.problem("ramped-noise").params)


@cache
def advised(scheme: str, on: str, error: float, criterion: str = "strong") -> Advice:
    """Return the advice for one scheme; the criterion is 'strong' or a functional's name."""
    weak = {} if criterion == "strong" else {"kind": "weak", "functionals": criterion}
    (found,) = sb.advise(scheme, on=on, error=error, threads=1, **weak)
    return found


def exact(scheme: str, steps: int, criterion: str) -> float:
    """Return the size of the exact error on the default GBM."""
    errors = gbm_errors(scheme, steps, **GBM)
    signed = {"mean": errors.mean, "second-moment": errors.second_moment}
    return float(errors.mean_square.sqrt() if criterion == "strong" else abs(signed[criterion]))


CASES = [
    ("euler-maruyama", 1e-3, "strong"),
    ("milstein", 1e-3, "strong"),
    ("euler-maruyama", 1e-3, "mean"),
    ("milstein", 2e-4, "second-moment"),
]
on_each_case = pytest.mark.parametrize(
    ("name", "target", "criterion"), CASES, ids=lambda v: v if isinstance(v, str) else f"{v:g}"
)


@on_each_case
def test_the_exact_error_with_the_advised_steps_is_at_or_below_the_target(name, target, criterion):
    """It would catch a mean square taken for its root, or an order taken for another."""
    found = advised(name, "gbm", target, criterion)
    assert found.how == "measured"
    assert exact(name, found.steps, criterion) <= target


@on_each_case
def test_the_exact_error_with_a_few_per_cent_fewer_steps_is_above_the_target(
    name, target, criterion
):
    """It would catch advice that stops at a rung: 4, 16, 64 steps are up to twice as many."""
    steps = advised(name, "gbm", target, criterion).steps
    assert exact(name, steps - max(1, steps // 50), criterion) > target


@on_each_case
def test_the_exact_error_on_every_finer_rung_is_below_the_target(name, target, criterion):
    steps = advised(name, "gbm", target, criterion).steps
    assert all(exact(name, n, criterion) <= target for n in RUNGS.steps if n > steps)


@on_each_case
def test_the_stated_error_of_the_advised_steps_is_the_exact_one(name, target, criterion):
    found = advised(name, "gbm", target, criterion)
    gap = abs(abs(found.error) - exact(name, found.steps, criterion))
    assert gap <= found.uncertainty < 0.01 * target


@on_each_case
def test_the_step_size_is_the_horizon_over_the_steps(name, target, criterion):
    found = advised(name, "gbm", target, criterion)
    assert found.h == 1 / found.steps


def test_an_error_that_dips_below_the_target_and_rises_again_is_no_reason_to_stop():
    """The second-moment error here changes sign near 16 steps, where it is far below 8e-5.

    It is above again from 21 to some 70 steps: advice to take the first rung below would fall
    into the dip. Held against the closed form with every number of steps up to 600.
    """
    trap, target = "ou:theta=2,sigma=0.5,mean=0,x0=1", 8e-5
    p = dict(sb.problem(trap).params)
    errors = {n: abs(float(ou_errors(n, **p).second_moment)) for n in range(3, 601)}
    found = advised("euler-maruyama", trap, target, "second-moment")
    assert errors[16] < target
    assert all(errors[n] <= target for n in errors if n >= found.steps)
    assert errors[found.steps - 1] > target


def test_every_standard_functional_is_to_meet_a_weak_target_and_the_worst_is_named():
    """That is the second moment here; the mean alone, which comes first, needs 2 steps."""
    (found,) = sb.advise("milstein", on="gbm", error=1e-2, kind="weak", threads=1)
    assert (found.kind, found.functional) == ("weak", "second-moment")
    assert exact("milstein", found.steps, "second-moment") <= 1e-2
    assert exact("milstein", found.steps - 1, "second-moment") > 1e-2
    assert exact("milstein", 2, "mean") <= 1e-2


def test_an_exact_scheme_needs_one_step():
    (found,) = sb.advise("exact-ou", on="ou", error=1e-6, threads=1)
    assert (found.steps, found.h, found.how) == (1, 1.0, "measured")


FAR = {"euler-maruyama": 1e-4, "milstein": 1e-5}  # both need more than 4096 steps


def test_beyond_the_finest_rung_the_steps_are_those_of_the_leading_constant_of_euler_maruyama():
    """RMS² -> E X_T² (σ⁴/2) h, with E X_T² = x0² e^((2μ+σ²)T) (derived for this test).

    The correction to it is of relative size h, far below the 1% that is allowed.
    """
    target = FAR["euler-maruyama"]
    found = advised("euler-maruyama", "gbm", target)
    second = GBM["x0"] ** 2 * exp(2 * GBM["mu"] + GBM["sigma"] ** 2)
    assert abs(found.steps / (second * GBM["sigma"] ** 4 / 2 / target**2) - 1) < 0.01


def test_beyond_the_finest_rung_the_steps_are_those_of_the_leading_constant_of_milstein():
    """The constant is RMS N with so many steps that its correction is some 10^-9 of it."""
    target = FAR["milstein"]
    found = advised("milstein", "gbm", target)
    constant = exact("milstein", 10**9, "strong") * 10**9
    assert abs(found.steps / (constant / target) - 1) < 0.01


@pytest.mark.parametrize("name", ["euler-maruyama", "milstein"])
def test_a_target_beyond_the_finest_rung_is_said_to_be_beyond_it(name):
    found = advised(name, "gbm", FAR[name])
    assert found.how == "beyond the rungs"
    assert "extrapolated" in found.sentence
    assert "4096" in found.sentence
    assert found.steps > 4096


def test_the_uncertainty_of_an_extrapolated_error_holds_the_exact_error():
    found = advised("euler-maruyama", "gbm", FAR["euler-maruyama"])
    gap = abs(found.error - exact("euler-maruyama", found.steps, "strong"))
    assert found.how == "beyond the rungs"
    assert gap <= found.uncertainty


def test_an_extrapolated_weak_error_has_its_sign():
    """The mean x0 (1 + μh)^N is below x0 e^μ; on a rung it is told as a negative error."""
    assert advised("milstein", "gbm", 1e-3, "mean").error < 0
    assert advised("milstein", "gbm", 1e-6, "mean").error < 0


@pytest.fixture(scope="module")
def of_all() -> list[Advice]:
    return sb.advise(on="gbm", error=1e-3, threads=1)


def test_the_cheapest_scheme_comes_first(of_all):
    """By the time a path: 63 steps of Milstein, and 1829 of Euler–Maruyama, 29 times as many.

    A step of Milstein would have to take seven times one of Euler–Maruyama, not one and a half.
    """
    assert [each.scheme for each in of_all] == ["milstein", "euler-maruyama"]
    assert 0 < 4 * of_all[0].seconds_per_path < of_all[1].seconds_per_path


def test_a_scheme_that_does_not_apply_is_left_out_if_none_is_named(of_all):
    assert "exact-ou" not in {each.scheme for each in of_all}


def test_a_scheme_that_was_named_and_does_not_apply_says_why():
    (found,) = sb.advise("exact-ou", on="gbm", error=1e-3, threads=1)
    assert "gbm has no functional 'decayed'" in found.sentence
    assert (found.steps, found.h, found.error, found.how) == (None, None, None, None)


@sb.scheme(strong=0.5)
def still(sde, t, x, h, noise):
    return x


@sb.scheme(strong=0.5)
def half_the_drift(sde, t, x, h, noise):
    return x + 0.5 * sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


@pytest.fixture(scope="module")
def beside_wrong_ones() -> list[Advice]:
    return sb.advise([still, half_the_drift, "milstein"], on="gbm", error=1e-3, threads=1)


def test_a_scheme_that_breaks_its_contract_is_a_row_that_says_so(beside_wrong_ones):
    (found,) = [each for each in beside_wrong_ones if each.scheme == "still"]
    assert found.steps is None
    assert "breaks its contract" in found.sentence
    assert "whatever its noise" in found.sentence


def test_a_scheme_that_does_not_converge_is_given_no_steps(beside_wrong_ones):
    """Its error stays at that of the drift: the extrapolated order is 0, which no power law has."""
    (found,) = [each for each in beside_wrong_ones if each.scheme == "half-the-drift"]
    assert found.steps is None
    assert "no order has settled" in found.sentence


def test_schemes_that_cannot_be_advised_come_last(beside_wrong_ones):
    assert [each.steps is None for each in beside_wrong_ones] == [False, True, True]


def ramped(steps: int) -> float:
    return sqrt(ramped_noise_end_points(steps, **RAMPED).mean_square)


def test_a_problem_that_depends_on_time_is_advised_between_sampled_rungs():
    found = advised("euler-maruyama", "ramped-noise", 0.14)
    assert found.how == "between rungs"
    assert "between sampled rungs" in found.sentence


def test_the_error_between_sampled_rungs_is_the_exact_one_within_its_uncertainty():
    """95% for the rungs beside it; a fixed seed, with which it holds."""
    found = advised("euler-maruyama", "ramped-noise", 0.14)
    assert abs(found.error - ramped(found.steps)) <= found.uncertainty
    assert ramped(found.steps) <= 0.14


@pytest.mark.parametrize("target", [0.1, 0.06])
def test_the_exact_error_with_steps_between_sampled_rungs_is_at_or_below_the_target(target):
    assert ramped(advised("euler-maruyama", "ramped-noise", target).steps) <= target


@pytest.mark.xfail(
    strict=True,
    reason="the uncertainty is that of the rungs beside: how far a power law may be off between "
    "them is left out, most where rungs are coarse",
)
def test_the_uncertainty_between_coarse_rungs_holds_the_exact_error_too():
    """0.4015 with 5 steps, of which 0.3985 ± 0.0013 is told, so that 0.4 is not met."""
    found = advised("euler-maruyama", "ramped-noise", 0.4)
    assert ramped(found.steps) <= 0.4
    assert abs(found.error - ramped(found.steps)) <= found.uncertainty


def test_the_same_seed_gives_the_same_advice_on_any_number_of_threads():
    one = advised("euler-maruyama", "ramped-noise", 0.14)
    (two,) = sb.advise("euler-maruyama", on="ramped-noise", error=0.14, threads=2)
    assert (two.steps, two.error, two.uncertainty) == (one.steps, one.error, one.uncertainty)


@sb.scheme(strong=0.5)
def nearly_timeless(sde, t, x, h, noise):
    return x + (1 + 1e-9 * t) * sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


def test_a_sample_with_too_heavy_a_tail_is_given_no_steps():
    """Sampled, since the step depends on time, if only just; squares of errors on this wide
    log-normal rest on a few paths.
    """
    (found,) = sb.advise(nearly_timeless, on="gbm:mu=2,sigma=1", error=1e-3, threads=1)
    assert found.steps is None
    assert "few paths weigh too much" in found.sentence


@pytest.mark.parametrize(
    "error", [0, 0.0, -1e-3, float("nan"), float("inf"), "1e-3", None, [1e-3]], ids=repr
)
def test_a_target_that_is_no_positive_number_is_refused(error):
    with pytest.raises(sb.SdebenchError, match="it is a positive number"):
        sb.advise("milstein", on="gbm", error=error)


@pytest.mark.parametrize("kind", ["Strong", "both", "", None], ids=repr)
def test_a_kind_of_error_that_does_not_exist_is_refused(kind):
    with pytest.raises(sb.SdebenchError, match="it is 'strong' or 'weak'"):
        sb.advise("milstein", on="gbm", error=1e-3, kind=kind)


@pytest.mark.parametrize(
    ("changes", "told"),
    [
        ({"schemes": "milstien"}, "No scheme named 'milstien'"),
        ({"schemes": []}, "an empty list"),
        ({"on": "gmb"}, "No problem named 'gmb'"),
        ({"on": ["gbm"]}, "is no problem"),
        ({"on": "gbm:mu=1000"}, "overflows"),
        ({"kind": "weak", "functionals": "skew"}, "No functional named 'skew'"),
        ({"confidence": 1.5}, "confidence"),
        ({"seed": -1}, "seed"),
        ({"threads": 0}, "threads"),
    ],
    ids=lambda v: str(v) if isinstance(v, dict) else "",
)
def test_what_cannot_be_found_or_used_is_told_in_one_sentence(changes, told):
    wanted = {"schemes": "milstein", "on": "gbm", "error": 1e-3, "threads": 1} | changes
    with pytest.raises(sb.SdebenchError, match=told):
        sb.advise(**wanted)


def test_functionals_of_a_strong_target_are_refused():
    with pytest.raises(sb.SdebenchError):
        sb.advise("milstein", on="gbm", error=1.0, functionals="no-such-functional", threads=1)


def test_two_functionals_of_one_name_are_refused():
    cubes = [lambda x: x**3, lambda x: x**4]
    with pytest.raises(sb.SdebenchError, match="two of them have this name"):
        sb.advise("milstein", on="gbm", error=1.0, kind="weak", functionals=cubes, threads=1)
