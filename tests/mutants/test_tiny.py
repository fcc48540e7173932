"""What is told of faults that no sample of paths can see: by propagation, in numbers."""

import math

import pytest

import sdebench as sb
from tests.mutants import hidden, tiny
from tests.mutants.catalogue import PROPAGATED, Mutant, measured
from tests.tolerance import round_off

UNSEEN = [m for m in tiny.family.mutants if m.by == PROPAGATED and m.on == "gbm"]


@pytest.mark.parametrize("mutant", [pytest.param(mutant, id=mutant.label) for mutant in UNSEEN])
def test_a_sample_of_paths_alone_does_not_refute_what_propagation_does(mutant: Mutant):
    """Else the family would say nothing of propagation: with `route="sampled"` by default, say.

    One look at the default seed; the fault is not on the rungs of a sample, or far below its noise.
    """
    few = {"steps": mutant.options["steps"][:3]} if mutant.options else {}
    evidence = measured(mutant.scheme, mutant.on, route="sampled", **few)
    assert evidence.verdict is not sb.Verdict.REFUTED


@sb.scheme(weak=1.0)
def mean_exact_but_for_a_millionth(sde, t, x, h, noise):
    growth = math.exp(sde.params["mu"] * h)
    return x * (growth + sde.params["sigma"] * noise.dw) - tiny.BIAS * h / sde.horizon


def test_propagation_finds_a_bias_of_a_millionth_in_the_mean_on_every_rung():
    """With m = e^(μh) a step, E X_N = e^(μT) x0 - c (m^N - 1)/(m - 1), c the bias a step.

    Derived for this test. A sample of paths would need some 10^10 of them. Wrong code that this
    catches: weak errors as a difference of two means, known to 1e-6 only, or without the bias.
    """
    evidence = measured(mean_exact_but_for_a_millionth, "gbm", route="propagated")
    row = next(r for r in evidence.results if r.functional == "mean")
    assert (row.route, row.verdict) == ("propagated", sb.Verdict.REFUTED)
    assert row.high < 0.1
    params, horizon = sb.problem("gbm").params, sb.problem("gbm").params["horizon"]
    for rung in row.rungs:
        a_step = math.expm1(params["mu"] * rung.h)
        exact = -tiny.BIAS * rung.h / horizon * math.expm1(params["mu"] * horizon) / a_step
        assert abs(rung.error - exact) <= rung.uncertainty + round_off(1.0, rung.steps)


TIMED = [
    (hidden.drift_a_fifth_down_soon_after_the_start, "ou"),
    (hidden.noise_reversed_in_a_stretch_past_the_middle, "gbm"),
    (hidden.last_step_without_its_noise, "ou"),
    (hidden.last_step_not_taken, "ou"),
]


@pytest.mark.parametrize(
    ("timed", "on"), [pytest.param(*pair, id=f"{pair[0].name}-on-{pair[1]}") for pair in TIMED]
)
def test_a_step_that_depends_on_time_is_not_propagated(timed: sb.Scheme, on: str):
    """Wrong code that this catches: the step of time 0 taken for all times."""
    evidence = measured(timed, on, route="propagated")
    assert (evidence.verdict, evidence.exit_code) == (sb.Verdict.UNDECIDED, 3)
    assert all("the step depends on time" in claim.sentence for claim in evidence.claims)
