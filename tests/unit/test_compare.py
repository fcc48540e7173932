"""Two integrators side by side, against the ratio of their exact errors."""

import math
from dataclasses import dataclass

import numpy as np
import pytest

import sdebench as sb
from sdebench.compare import Comparison, summary
from sdebench.evidence import ErrorConstant
from sdebench.ratios import ComparedRung, Side
from tests.known.gaussian_errors import EndPoints
from tests.known.gbm_errors import gbm_errors
from tests.tolerance import FALSE_ALARM, round_off

GBM = dict(sb.problem("gbm").params)
RAMPED = dict(sb.problem("ramped-noise").params)
EULER, MILSTEIN = "euler-maruyama", "milstein"
KNOWN = [None, "mean", "second-moment"]  # of which there is a closed form


def exact(name: str, steps: int, functional: str | None) -> float:
    """Return the size of the exact error on the default GBM."""
    errors = gbm_errors(name, steps, **GBM)
    weak = {"mean": errors.mean, "second-moment": errors.second_moment}
    return float(errors.mean_square.sqrt() if functional is None else abs(weak[functional]))


@pytest.fixture(scope="module")
def on_gbm() -> dict[str | None, Comparison]:
    """Return the comparisons of Euler–Maruyama with Milstein, by functional."""
    return {c.functional: c for c in sb.compare(EULER, MILSTEIN, on="gbm", threads=1)}


def test_there_is_a_comparison_of_the_strong_error_and_one_of_each_functional(on_gbm):
    assert [(c.kind, c.functional) for c in on_gbm.values()] == [
        ("strong", None),
        ("weak", "mean"),
        ("weak", "second-moment"),
        ("weak", "cos"),
    ]
    assert {(c.old, c.new, c.problem) for c in on_gbm.values()} == {(EULER, MILSTEIN, "gbm")}


def test_what_does_not_depend_on_time_is_propagated_over_the_long_ladder(on_gbm):
    for found in on_gbm.values():
        assert found.route == "propagated"
        assert [(r.steps, r.h) for r in found.rungs] == [
            (n, 1 / n) for n in (4, 16, 64, 256, 1024, 4096)
        ]


@pytest.mark.parametrize("functional", KNOWN, ids=str)
def test_the_bounds_of_every_rung_hold_the_exact_ratio(on_gbm, functional):
    """It would catch old over new, a ratio of mean squares, and bounds that are not rooted."""
    for rung in on_gbm[functional].rungs:
        known = exact(MILSTEIN, rung.steps, functional) / exact(EULER, rung.steps, functional)
        assert rung.low <= known <= rung.high, rung.steps
        assert rung.high - rung.low < 0.01 * known


@pytest.mark.parametrize("functional", KNOWN, ids=str)
def test_every_rung_holds_the_exact_errors_of_both(on_gbm, functional):
    for rung in on_gbm[functional].rungs:
        for name, side in ((EULER, rung.old), (MILSTEIN, rung.new)):
            gap = abs(abs(side.error) - exact(name, rung.steps, functional))
            assert gap <= side.uncertainty, (name, rung.steps)


def limits() -> dict[tuple[str, str | None], tuple[float, float]]:
    """Return (p, C) in error ~ C h^p on the default GBM, T = 1 (derived for this test).

    With a = 2μ + σ², E X_T = x0 e^μ and E X_T² = x0² e^a: a step of either scheme has the mean
    1 + μh, whose logarithm is μh - μ²h²/2, and the mean square 1 + ah + qh², with q = μ² for
    Euler–Maruyama and μ² + σ⁴/2 for Milstein, whose logarithm is ah + (q - a²/2)h². The strong
    limit of Euler–Maruyama is √(E X_T² σ⁴/2); that of Milstein is read off the closed form at
    10^9 steps, to some 10^-9 of itself.
    """
    mu, sigma, x0 = GBM["mu"], GBM["sigma"], GBM["x0"]
    a = 2 * mu + sigma**2
    first, second = x0 * math.exp(mu), x0**2 * math.exp(a)
    mean = (1.0, first * mu**2 / 2)
    return {
        (EULER, None): (0.5, math.sqrt(second * sigma**4 / 2)),
        (MILSTEIN, None): (1.0, exact(MILSTEIN, 10**9, None) * 10**9),
        (EULER, "mean"): mean,
        (MILSTEIN, "mean"): mean,
        (EULER, "second-moment"): (1.0, second * (a**2 / 2 - mu**2)),
        (MILSTEIN, "second-moment"): (1.0, second * (a**2 / 2 - mu**2 - sigma**4 / 2)),
    }


@pytest.mark.parametrize("functional", KNOWN, ids=str)
def test_the_error_constants_hold_the_exact_limits(on_gbm, functional):
    found = on_gbm[functional]
    for name, constant in ((EULER, found.old_constant), (MILSTEIN, found.new_constant)):
        order, known = limits()[name, functional]
        assert constant.order == order
        assert constant.low <= known <= constant.high
        assert constant.high - constant.low < 1e-3 * known


def test_a_step_costs_some_positive_multiple_between_its_least_and_its_most(on_gbm):
    for found in on_gbm.values():
        assert 0 < found.cost_low <= found.cost <= found.cost_high < math.inf


@sb.scheme(strong_additive=1.0)
def laborious(sde, t, x, h, noise):
    """Euler–Maruyama with several times its work, of which nothing is left."""
    idle = sum(np.exp(-x * x - k) for k in range(6))
    return x + (sde.drift(t, x) + 0 * idle) * h + sde.diffusion(t, x) * noise.dw


def test_a_new_scheme_that_works_more_costs_more():
    """It would catch the ratio the other way round, and schemes that trade places."""
    found = sb.compare(EULER, laborious, on="ramped-noise", steps=(2, 4, 8), threads=1)[0]
    assert found.cost > 1
    assert f"A step costs {found.cost:.2g} times as much" in found.sentence


def test_a_new_scheme_that_is_better_is_named_with_both_orders(on_gbm):
    said = on_gbm[None].sentence
    assert said.startswith("milstein has the smaller error on every rung: milstein's is 0.0228 ")
    assert "times euler-maruyama's with 4096 steps; orders 0.5 and 1." in said


def test_errors_that_are_the_same_are_said_not_to_differ(on_gbm):
    """The mean of either is x0 (1 + μh)^N: no bounds may exclude the ratio 1."""
    said = on_gbm["mean"].sentence
    assert said.startswith("The errors of euler-maruyama and milstein do not differ beyond their")
    assert "in the limit 1.000 times (both of order 1)" in said


@dataclass(frozen=True)
class Loud:
    """Euler–Maruyama with a larger diffusion on ramped noise, in closed form.

    X^h_N = Π g_i x0 + Σ (Π_{j>i} g_j) b (1+t_i)² (h + s ΔW_i), with g_i = 1 + 2h/(1+t_i) and s the
    factor of the diffusion, and X_T = (1+T)² (x0 + b Σ (h + ΔW_i)).
    """

    factor: float

    def end_points(self, steps: int) -> EndPoints:
        b, x0, horizon = RAMPED["b"], RAMPED["x0"], RAMPED["horizon"]
        h = horizon / steps
        t = h * np.arange(steps)
        after = np.cumprod(np.append(1 + 2 * h / (1 + t), 1.0)[::-1])[::-1]
        own, whole = after[1:] * b * (1 + t) ** 2, np.full(steps, b * (1 + horizon) ** 2)
        start = x0 * np.array([after[0], (1 + horizon) ** 2])
        weights = np.array([self.factor * own, whole])
        return EndPoints(start + h * np.array([own.sum(), whole.sum()]), h * weights @ weights.T)

    def error(self, steps: int, functional: str | None) -> float:
        found = self.end_points(steps)
        return abs(math.sqrt(found.mean_square) if functional is None else found.weak[functional])


@sb.scheme(strong_additive=1.0)
def loud(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + 1.01 * sde.diffusion(t, x) * noise.dw


SURE = {"confidence": 1 - FALSE_ALARM, "threads": 1}


@pytest.fixture(scope="module")
def on_ramped_noise() -> dict[str | None, Comparison]:
    found = sb.compare(EULER, MILSTEIN, on="ramped-noise", threads=1)
    return {c.functional: c for c in found}


@pytest.fixture(scope="module")
def loud_on_ramped_noise() -> dict[str | None, Comparison]:
    """Bounds at 1 - 1e-6: each of them misses the exact ratio with that probability."""
    return {c.functional: c for c in sb.compare(EULER, loud, on="ramped-noise", **SURE)}


def test_what_depends_on_time_is_sampled(on_ramped_noise):
    for found in on_ramped_noise.values():
        assert found.route == "sampled"
        assert [r.steps for r in found.rungs] == [4, 8, 16, 32, 64]


def test_schemes_that_coincide_on_the_same_paths_have_the_ratio_1_without_any_width(
    on_ramped_noise,
):
    """It would catch schemes on paths of their own, or a covariance between them left out."""
    ratios = {(r.ratio, r.low, r.high) for found in on_ramped_noise.values() for r in found.rungs}
    assert ratios == {(1.0, 1.0, 1.0)}


@pytest.mark.parametrize("functional", [None, "second-moment"], ids=str)
def test_a_diffusion_that_is_1_per_cent_larger_is_told_from_its_equal(
    loud_on_ramped_noise, functional
):
    """On the same paths: apart, the errors with 64 steps are known to some 1% each."""
    for rung in loud_on_ramped_noise[functional].rungs:
        assert not rung.low <= 1 <= rung.high, rung.steps


@pytest.mark.parametrize("functional", [None, "mean", "second-moment", "cos"], ids=str)
def test_the_bounds_of_a_sampled_ratio_hold_the_exact_one(loud_on_ramped_noise, functional):
    for rung in loud_on_ramped_noise[functional].rungs:
        known = Loud(1.01).error(rung.steps, functional) / Loud(1.0).error(rung.steps, functional)
        slack = round_off(known, 16 * rung.steps)  # where the means coincide there is no width
        assert rung.low - slack <= known <= rung.high + slack, rung.steps


FEW = {"on": "ramped-noise", "steps": (4, 8, 16)}


@pytest.fixture(scope="module")
def few_rungs() -> Comparison:
    return sb.compare(EULER, loud, **FEW, threads=1)[0]


def test_the_seed_moves_what_is_sampled(few_rungs):
    other = sb.compare(EULER, loud, **FEW, threads=1, seed=2)[0]
    assert [r.old.error for r in other.rungs] != [r.old.error for r in few_rungs.rungs]


def test_the_same_seed_gives_the_same_errors_on_any_number_of_threads(few_rungs):
    assert sb.compare(EULER, loud, **FEW, threads=2)[0].rungs == few_rungs.rungs


def test_without_a_problem_named_those_that_both_apply_to_are_compared():
    found = sb.compare("exact-ou", MILSTEIN, steps=(4, 8, 16), threads=1)
    assert {c.problem for c in found} == {"ou"}


def test_a_scheme_is_not_compared_with_itself():
    with pytest.raises(sb.SdebenchError, match="it is the old integrator itself"):
        sb.compare(MILSTEIN, MILSTEIN, on="gbm")


def test_schemes_that_share_no_problem_are_refused():
    with pytest.raises(sb.SdebenchError, match="exact-ou and milstein share no problem"):
        sb.compare("exact-ou", MILSTEIN, on="gbm")


def test_a_problem_that_was_named_and_cannot_be_compared_on_is_told():
    with pytest.raises(sb.SdebenchError, match="gbm"):
        sb.compare(MILSTEIN, "exact-ou", on=["gbm", "ou"], steps=(4, 8, 16), threads=1)


@sb.scheme(strong=0.5)
def still(sde, t, x, h, noise):
    return x


@pytest.mark.parametrize("both", [(still, MILSTEIN), (MILSTEIN, still)], ids=["old", "new"])
def test_a_scheme_that_breaks_its_contract_is_refused(both):
    with pytest.raises(sb.SdebenchError, match=r"still cannot be used: it breaks its contract"):
        sb.compare(*both, on="gbm", steps=(4, 8, 16), threads=1)


@pytest.mark.parametrize(
    ("changes", "told"),
    [
        ({"old": "milstien"}, "No scheme named 'milstien'"),
        ({"on": "gmb"}, "No problem named 'gmb'"),
        ({"on": []}, "an empty list"),
        ({"steps": (4, 8)}, "three rungs"),
        ({"functionals": "skew"}, "No functional named 'skew'"),
        ({"confidence": 1.5}, "confidence"),
        ({"seed": -1}, "seed"),
        ({"threads": 0}, "threads"),
    ],
    ids=lambda v: str(v) if isinstance(v, dict) else "",
)
def test_what_cannot_be_found_or_used_is_told_in_one_sentence(changes, told):
    wanted = {"old": EULER, "new": MILSTEIN, "on": "gbm", "threads": 1} | changes
    with pytest.raises(sb.SdebenchError, match=told):
        sb.compare(**wanted)


def compared(steps, ratio, low, high) -> ComparedRung:
    side = Side(error=1.0, uncertainty=0.1)
    return ComparedRung(
        steps=steps, h=1 / steps, old=side, new=side, ratio=ratio, low=low, high=high
    )


SMALLER, LARGER, EQUAL = (0.5, 0.4, 0.6), (2.0, 1.9, 2.1), (1.0, 0.9, 1.1)
BOUNDED_BELOW, UNKNOWN = (5.0, 2.0, None), (None, None, None)


def said(*ratios) -> str:
    rungs = [compared(4**k, *each) for k, each in enumerate(ratios, start=1)]
    return summary("old", "new", rungs, None, None, (1.5, 1.25, 2.0))


@pytest.mark.parametrize(
    ("ratios", "head"),
    [
        ((SMALLER, SMALLER), "new has the smaller error on every rung: new's is 0.5 times old's "),
        ((LARGER, LARGER), "old has the smaller error on every rung: new's is 2 times old's "),
        ((EQUAL, EQUAL), "The errors of old and new do not differ beyond their uncertainty: "),
        (
            (SMALLER, EQUAL, LARGER, LARGER),
            "new has the smaller error with 4 steps and the larger error with 64, 256 steps: ",
        ),
        ((SMALLER, EQUAL), "new has the smaller error with 4 steps: "),
        ((EQUAL, LARGER), "new has the larger error with 16 steps: "),
        ((BOUNDED_BELOW, LARGER), "old has the smaller error on every rung: "),
        ((UNKNOWN, SMALLER), "new has the smaller error on every rung that both have: "),
    ],
    ids=[
        "new is better",
        "old is better",
        "no difference",
        "it changes from rung to rung",
        "better on some rungs",
        "worse on some rungs",
        "no upper bound",
        "a rung is unknown",
    ],
)
def test_the_sentence_names_the_better_one_and_where(ratios, head):
    assert said(*ratios).startswith(head)


def test_the_sentence_ends_with_the_cost_of_a_step():
    assert said(SMALLER).endswith("with 4 steps. A step costs 1.5 times as much (1.2 to 2).")


def test_the_sentence_says_if_nothing_is_known_well_enough():
    assert said(UNKNOWN) == "No rung has an error of both that is known well enough to compare."


def constant(order: float, value: float) -> ErrorConstant:
    return ErrorConstant(order=order, value=value, low=value, high=value)


@pytest.mark.parametrize(
    ("old", "new", "tail"),
    [
        (constant(1.0, 2.0), constant(1.0, 0.5), ", in the limit 0.25 times (both of order 1). "),
        (constant(0.5, 2.0), constant(1.0, 0.5), "; orders 0.5 and 1. "),
        (None, constant(1.0, 0.5), "with 4 steps. "),
    ],
    ids=["same order", "other orders", "an order is not known"],
)
def test_the_sentence_holds_the_limit_where_both_settle(old, new, tail):
    rungs = [compared(4, *SMALLER)]
    assert tail in summary("old", "new", rungs, old, new, (1.5, 1.25, 2.0))
