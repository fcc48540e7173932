"""What moved against a baseline, on errors whose change is known."""

import math

import msgspec
import numpy as np
import pytest

from sdebench.baseline import AcceptedClaim, AcceptedRow, AcceptedRung, AcceptedTerm, Baseline
from sdebench.regression import Change, Judged, judged, likely_term, moved, worst
from sdebench.verdict import Verdict
from tests.tolerance import round_off, sampling

ALLOWED = 0.01
N_PARTS = 32


def baseline(*rows, seed=1, stream="a", claims=(), terms=()):
    return Baseline(
        **{"why": "", "created": "2026-12-01T00:00:00+00:00", "revision": None},
        **{"sdebench": "0", "numpy": "0", "seed": seed, "looks": 1, "steps": None},
        **{"stream": stream, "about": {}, "claims": list(claims), "terms": list(terms)},
        rows=list(rows),
    )


def propagated(*errors, uncertainty=1e-12, kind="weak"):
    rungs = [
        AcceptedRung(steps=4**n, error=error, uncertainty=uncertainty)
        for n, error in enumerate(errors, start=1)
    ]
    return row("propagated", rungs, kind)


def sampled(parts, kind="weak", paths=32768):
    mean = float(np.mean(parts))
    error = math.sqrt(mean) if kind == "strong" else mean
    rung = AcceptedRung(steps=64, error=error, uncertainty=0.1 * abs(error), parts=list(parts))
    return row("sampled", [rung], kind, paths)


def row(route, rungs, kind="weak", paths=0):
    functional = "mean" if kind == "weak" else None
    names = {"scheme": "s", "problem": "p", "kind": kind, "at": None, "functional": functional}
    return AcceptedRow(**names, route=route, paths=paths, rungs=rungs)


def found(now, then, allowed=ALLOWED, **now_settings):
    (only,) = moved(baseline(now, **now_settings), baseline(then), allowed)
    return only


def test_the_same_bits_are_told_from_the_same_within_uncertainty():
    one = found(propagated(0.1), propagated(0.1))
    other = found(propagated(0.1 + 1e-13), propagated(0.1))
    assert (one.change, other.change) == (Change.SAME_BITS, Change.WITHIN)
    assert not one.red
    assert not other.red


@pytest.mark.parametrize("sign", [1, -1])
@pytest.mark.parametrize(
    ("factor", "change", "red"),
    [
        (1.02, Change.WORSE, True),
        (1.009, Change.WORSE, False),
        (0.9, Change.BETTER, False),
        (-1.0, Change.WORSE, True),
        (-0.2, Change.WORSE, True),
    ],
)
def test_a_propagated_error_that_moves_is_told_by_how_much(sign, factor, change, red):
    """Worse in size whatever its sign; an error that turns its sign is another error."""
    only = found(propagated(sign * factor * 0.1), propagated(sign * 0.1))
    assert (only.change, only.red) == (change, red)
    moved_by = abs(factor) - 1 if factor > 0 else 1 - factor
    assert abs(only.by - moved_by) <= round_off(1.0, 8)


def test_a_change_that_the_uncertainty_could_be_is_no_regression():
    """Worse by 2% ± 1.2%: not surely above the 1% allowed."""
    only = found(propagated(0.102, uncertainty=0.0006), propagated(0.1, uncertainty=0.0006))
    assert only.change is Change.WORSE
    assert not only.red
    assert str(only) == "worse by 2% ± 1.20%"


def test_an_error_that_was_round_off_and_is_not_any_more_is_a_regression():
    assert found(propagated(1e-9), propagated(1e-16)).red
    assert not found(propagated(5e-13), propagated(1e-16)).red


def parts_of(seed, mean=1.0, spread=0.3):
    return mean + spread * np.random.default_rng(seed).standard_normal(N_PARTS)


@pytest.mark.parametrize("kind", ["strong", "weak"])
def test_on_the_same_paths_a_change_far_below_the_scatter_is_seen(kind):
    """The parts scatter by 30%; paired, a change of 2% is known to 1e-4."""
    then = parts_of(1)
    factor = 1.02**2 if kind == "strong" else 1.02
    only = found(sampled(factor * then, kind), sampled(then, kind))
    assert only.red
    assert abs(only.by - 0.02) <= only.doubt + round_off(1.0, 64)
    assert only.doubt < 0.02 * 0.3


@pytest.mark.parametrize(
    "apart", [{"seed": 2}, {"stream": "another"}, {}], ids=["seed", "stream", "paths"]
)
def test_on_other_paths_chance_is_no_regression(apart):
    """2% apart, scattered by 30%/√32 each: five standard errors are 37%."""
    now = sampled(1.02 * parts_of(2), paths=32768 if apart else 65536)
    only = found(now, sampled(parts_of(1)), **apart)
    assert only.change is Change.WITHIN
    assert only.doubt > 0.3


def test_on_other_paths_what_chance_never_does_is_a_regression():
    assert found(sampled(3.0 * parts_of(2)), sampled(parts_of(1)), seed=2).red


def test_the_doubt_of_other_paths_is_that_of_a_students_interval():
    """By SciPy: 31 degrees of freedom, 1e-6 in all, of two means of 32 parts."""
    then, now = parts_of(1), parts_of(2)
    only = found(sampled(now), sampled(then), seed=2)
    errors = [float(np.std(p, ddof=1)) / math.sqrt(N_PARTS) for p in (then, now)]
    expected = math.hypot(*(sampling(e, N_PARTS - 1) for e in errors)) / float(np.mean(then))
    assert abs(only.doubt - expected) <= round_off(expected, 1000)


def test_chance_alone_is_never_red():
    """1000 pairs of independent samples whose scatter is 3%: one red has a probability of 1e-3."""
    pairs = [(parts_of(n, spread=0.03), parts_of(10_000 + n, spread=0.03)) for n in range(1000)]
    assert not any(found(sampled(a), sampled(b), seed=2).red for a, b in pairs)


def test_what_is_new_or_gone_is_said_and_only_the_latter_is_red():
    two, three = propagated(0.1, 0.05), propagated(0.1, 0.05, 0.025)
    more = moved(baseline(three), baseline(two), ALLOWED)
    fewer = moved(baseline(two), baseline(three), ALLOWED)
    assert [(m.change, m.red) for m in more][-1] == (Change.NEW, False)
    assert [(m.change, m.red) for m in fewer][-1] == (Change.GONE, True)
    nothing = moved(baseline(), baseline(two), ALLOWED)
    assert {(m.change, m.red) for m in nothing} == {(Change.GONE, True)}
    assert not any(m.red for m in moved(baseline(two), baseline(), ALLOWED))


def test_the_worst_rung_is_the_red_one_that_moved_most():
    then, now = propagated(0.1, 0.05, 0.025), propagated(0.08, 0.052, 0.0255)
    assert worst(moved(baseline(now), baseline(then), ALLOWED)).steps == 16


def claim(verdict, claimed=1.0, kind="strong"):
    return AcceptedClaim(
        scheme="s", problem="p", kind=kind, claimed=claimed, order=1.0, verdict=verdict
    )


S, R, U = Verdict.SUPPORTED, Verdict.REFUTED, Verdict.UNDECIDED
CLAIMS = {
    "supported as before": (claim(S), claim(S), False, False),
    "refuted now": (claim(R), claim(S), True, False),
    "refuted as accepted": (claim(R), claim(R), False, False),
    "refuted, once undecided": (claim(R), claim(U), True, False),
    "undecided now": (claim(U), claim(S), False, True),
    "undecided as accepted": (claim(U), claim(U), False, False),
    "mended": (claim(S), claim(R), False, False),
    "gone": (None, claim(S), True, False),
    "new": (claim(S), None, False, False),
    "new and refuted": (claim(R), None, True, False),
    "new and undecided": (claim(U), None, False, True),
    "lowered": (claim(S, claimed=0.5), claim(S), True, False),
    "raised": (claim(S, claimed=1.5), claim(S), False, False),
}


@pytest.mark.parametrize(("now", "then", "red", "doubtful"), CLAIMS.values(), ids=CLAIMS)
def test_a_claim_is_held_against_the_accepted_one(now, then, red, doubtful):
    each = Judged(now, then)
    assert (each.red, each.doubtful) == (red, doubtful)


def test_claims_of_both_are_judged_and_a_mended_contract_is_no_loss():
    broken = claim(R, claimed=None, kind="contract")
    now, then = baseline(claims=[claim(S)]), baseline(claims=[broken])
    assert [str(each) for each in judged(now, then)] == ["supported (new)"]
    assert [each.red for each in judged(then, now)] == [True, True]


def term(coefficient, name="term dw² - h", needed=0.1):
    return AcceptedTerm(
        scheme="s",
        problem="p",
        kind="strong",
        term=name,
        at="at x=1",
        coefficient=coefficient,
        needed=needed,
        uncertainty=1e-9,
    )


def test_the_term_that_moved_is_named_by_its_share_of_what_is_needed():
    still = term(0.3, "term dw", 0.3)
    said = likely_term([still, term(0.05)], [still, term(0.1)], "s", "p")
    assert (
        said == "Of one step, term dw² - h was 1 of what the SDE needs and is 0.5 of it (at x=1)."
    )
    assert likely_term([still, term(0.1)], [still, term(0.1)], "s", "p") is None
    assert likely_term([term(0.05)], [term(0.1)], "s", "another") is None


def test_a_term_that_the_sde_does_not_have_is_passed_by():
    assert likely_term([term(1e-3, needed=0.0)], [term(0.0, needed=0.0)], "s", "p") is None


def test_another_accepted_change_is_allowed():
    only = found(propagated(0.105), propagated(0.1), allowed=0.1)
    assert (only.change, only.red) == (Change.WORSE, False)


def test_a_route_that_changed_is_compared_as_independent():
    now = msgspec.structs.replace(sampled(parts_of(1)), route="sampled")
    only = found(now, propagated_at(64, float(np.mean(parts_of(1))) * 1.02))
    assert only.change is Change.WITHIN


def propagated_at(steps, error):
    return row("propagated", [AcceptedRung(steps=steps, error=error, uncertainty=1e-12)])
