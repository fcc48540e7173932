"""The propagated route: what it drops and why, and what it says it knows."""

import math
from functools import cache

import numpy as np
import pytest

import sdebench as sb
from sdebench.functional import STANDARD
from sdebench.propagate import Propagated, propagate
from sdebench.refine import KEPT
from tests.known.gaussian_errors import ou_end_points
from tests.known.gbm_errors import gbm_errors
from tests.tolerance import round_off

STEPS = (4, 16, 64)


@sb.scheme(strong=0.5, weak=1.0)
def euler(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


def referenced(problem: sb.Problem, functionals) -> list:
    law = problem.law(problem.params)
    return [(f, law.expectation(f)) for f in functionals]


def scale_of(problem: sb.Problem) -> float:
    second, _ = problem.law(problem.params).expectation(lambda x: x * x)
    return math.sqrt(second) + abs(problem.start)


def run(scheme=euler, on="gbm", steps=STEPS, functionals=STANDARD, threads=1) -> Propagated:
    problem = sb.problem(on)
    given = referenced(problem, functionals)
    return propagate(scheme, problem, steps, given, scale_of(problem), threads)


@cache
def found(on: str) -> Propagated:
    return run(on=on)


def numbers(p: Propagated) -> list:
    return [p.steps, p.mean_square, dict(p.weak), dict(p.why_not)]


def exact_on_gbm(steps: int) -> dict[str, float]:
    errors = gbm_errors("euler-maruyama", steps, **sb.problem("gbm").params)
    return dict(zip(("mean square", "mean", "second-moment"), map(float, errors), strict=False))


def exact_on_ou(steps: int) -> dict[str, float]:
    p = sb.problem("ou").params
    pair = ou_end_points(steps, p["theta"], p["mean"], p["sigma"], p["x0"])
    return {"mean square": pair.mean_square} | pair.weak


EXACT = {"gbm": exact_on_gbm, "ou": exact_on_ou}


@pytest.mark.parametrize("on", EXACT)
def test_every_rung_holds_the_exact_error_within_its_uncertainty(on):
    """Closed forms of tests/known; it would catch an uncertainty without a safety factor."""
    p = found(on)
    for r, steps in enumerate(STEPS):
        for row, exact in EXACT[on](steps).items():
            estimate = (p.mean_square if row == "mean square" else p.weak[row])[r]
            assert estimate.dropped is None
            assert abs(estimate.value - exact) <= estimate.uncertainty, (row, steps)
            assert 0 < estimate.uncertainty <= KEPT * abs(exact), (row, steps)


def test_the_rungs_are_those_that_were_asked_for():
    assert found("gbm").steps == STEPS
    assert len(found("gbm").mean_square) == len(STEPS)
    assert {name: len(rungs) for name, rungs in found("gbm").weak.items()} == {
        f.name: len(STEPS) for f in STANDARD
    }


def test_the_numbers_do_not_depend_on_threads():
    """To the bit; it would catch rungs that come in the order in which they are done."""
    one = run(steps=(64, 4, 16), threads=1)
    two = run(steps=(64, 4, 16), threads=2)
    assert numbers(one) == numbers(two)
    first, second, third = found("gbm").mean_square
    assert two.mean_square == (third, first, second)


def test_a_rung_does_not_depend_on_the_rungs_beside_it():
    alone = run(steps=(16,))
    assert alone.mean_square[0] == found("gbm").mean_square[1]
    assert alone.weak["cos"][0] == found("gbm").weak["cos"][1]


def test_the_strong_error_alone_has_no_weak_rows():
    p = run(functionals=())
    assert dict(p.weak) == {}
    assert dict(p.why_not) == {}
    assert all(estimate.dropped is None for estimate in p.mean_square)


def test_the_time_taken_is_told():
    assert 0 < found("gbm").seconds < math.inf


def test_a_functional_that_nodes_cannot_tell_is_left_to_sampling_with_the_reason():
    """The others are propagated all the same."""
    call = sb.Functional("call", lambda x: np.maximum(x - 0.65, 0.0))
    p = run(steps=(4,), functionals=(*STANDARD, call))
    assert list(p.why_not) == ["call"]
    assert "declare" in p.why_not["call"]
    assert list(p.weak) == [f.name for f in STANDARD]


def test_a_functional_whose_kinks_are_declared_is_propagated():
    call = sb.Functional("call", lambda x: np.maximum(x - 0.65, 0.0), kinks=(0.65,))
    p = run(steps=(4, 16), functionals=(call,))
    assert [e.dropped for e in p.weak["call"]] == [None, None]


def test_a_rung_whose_step_gives_no_number_is_dropped_with_the_reason():
    """And the rungs beside it are not."""

    @sb.scheme(strong=0.5)
    def failing(sde, t, x, h, noise):
        bad = (h > 0.1) & (x > 0.7)
        return np.where(bad, math.nan, euler.step(sde, t, x, h, noise))

    p = run(failing)
    for rungs in (p.mean_square, *p.weak.values()):
        assert rungs[0].dropped.startswith("the step gives NaN or infinity from x=")
        assert math.isnan(rungs[0].value)
        assert rungs[0].uncertainty == math.inf
        assert [e.dropped for e in rungs[1:]] == [None, None]
    assert p.mean_square[1:] == found("gbm").mean_square[1:]


def test_a_functional_whose_exact_expectation_the_nodes_miss_is_dropped_with_the_miss():
    """Told 0.0005 too much of E X, which is a large part of its error; other rows do not suffer."""
    problem = sb.problem("gbm")
    (mean, (exact, doubt)), *others = referenced(problem, STANDARD)
    given = [(mean, (exact + 5e-4, doubt)), *others]
    p = propagate(euler, problem, (16,), given, scale_of(problem))
    assert p.weak["mean"][0].dropped == "the nodes miss the exact law by 0.0005"
    assert p.weak["cos"][0] == found("gbm").weak["cos"][1]


def test_a_rung_that_nodes_do_not_resolve_is_dropped_with_the_reason():
    """A step that jumps in x is no polynomial in the error."""

    @sb.scheme(strong=0.5)
    def jumping(sde, t, x, h, noise):
        return euler.step(sde, t, x, h, noise) + 0.1 * np.sign(np.sin(300 * x)) * h

    p = run(jumping, steps=(4,), functionals=())
    assert p.mean_square[0].dropped == "the nodes do not resolve it"


@sb.scheme(strong=2.0, weak=2.0, noise=("dw", "decayed"))
def exact_ou(sde, t, x, h, noise):
    p = sde.params
    return p["mean"] + (x - p["mean"]) * math.exp(-p["theta"] * h) + p["sigma"] * noise.decayed


def test_a_scheme_that_is_exact_has_errors_within_their_uncertainty_of_nothing():
    """Which is that of an ulp of X for each step at the least, and not dropped for it.

    It would catch an uncertainty of what nodes say alone, which is less.
    """
    p, scale = run(exact_ou, "ou"), scale_of(sb.problem("ou"))
    for rungs in (p.mean_square, *p.weak.values()):
        assert all(e.dropped is None and abs(e.value) <= e.uncertainty for e in rungs)
    for rungs in p.weak.values():
        for steps, e in zip(STEPS, rungs, strict=True):
            assert e.uncertainty >= round_off(scale, 2 * steps)


def test_a_step_that_raises_is_told_as_the_users():
    @sb.scheme(strong=0.5)
    def raising(sde, t, x, h, noise):
        raise ValueError("no step today")

    with pytest.raises(sb.SdebenchError, match="no step today"):
        run(raising)
