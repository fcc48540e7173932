"""From pairs to the rows of the evidence file."""

import math

import pytest

import sdebench as sb
from sdebench.functional import STANDARD
from sdebench.results import finite
from sdebench.verdict import Verdict
from tests.tolerance import round_off


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
def test_what_json_cannot_hold_is_none(value):
    assert finite(value) is None


def test_a_finite_number_stays():
    assert finite(0.25) == 0.25


def test_rows_come_as_contract_one_step_and_sampled(sampled_evidence):
    found = [(r.kind, r.bears_on, r.functional) for r in sampled_evidence.results]
    assert found == [
        ("contract", None, None),
        ("one-step", "strong", None),
        ("one-step", "weak", None),
        ("strong", "strong", None),
        *(("weak", "weak", f.name) for f in STANDARD),
    ]


def test_every_row_says_how_it_was_obtained(sampled_evidence):
    routes = [r.route for r in sampled_evidence.results]
    assert routes == [None, "quadrature", "quadrature", *["sampled"] * 4]


def test_every_row_is_propagated_and_checked_by_a_sample(supported_evidence):
    measured = supported_evidence.results[3:]
    assert [r.route for r in measured] == ["propagated", "sampled"] * 4
    assert [r.check for r in measured] == [False, True] * 4
    assert [r.counts for r in measured] == [True, False] * 4


def test_a_check_says_that_the_routes_agree(supported_evidence):
    for row in supported_evidence.results[3:]:
        assert ("which it agrees with" in row.sentence) is row.check


def test_a_check_has_the_rungs_that_a_modest_sample_can_measure(supported_evidence):
    propagated, check = supported_evidence.results[3:5]
    assert [r.steps for r in propagated.rungs] == [4, 16, 64, 256, 1024, 4096]
    assert [r.steps for r in check.rungs] == [4, 8, 16, 32, 64]


def test_what_cannot_be_propagated_says_why():
    evidence = sb.measure("milstein", on="ramped-noise", looks=1, threads=1)
    reasons = {r.why_sampled for r in evidence.results if r.route == "sampled"}
    assert reasons == {"ramped-noise depends on time"}


def test_a_row_that_is_to_be_propagated_alone_and_cannot_be_is_undecided():
    evidence = sb.measure("milstein", on="ramped-noise", route="propagated", threads=1)
    assert evidence.verdict is Verdict.UNDECIDED
    assert {r.route for r in evidence.results} == {None, "quadrature"}
    assert "ramped-noise depends on time" in evidence.claims[0].sentence


def test_one_route_alone_is_all_there_is():
    for route in ("propagated", "sampled"):
        evidence = sb.measure("milstein", on="gbm", route=route, looks=1, threads=1)
        assert {r.route for r in evidence.results[3:]} == {route}


def test_the_references_are_the_exact_expectations(supported_evidence):
    """E X_T = x0 e^{mu T} and E X_T² = x0² e^{(2 mu + sigma²) T}, within the law's own doubt."""
    problem = sb.problem("gbm")
    p, law = problem.params, problem.law(problem.params)
    doubt = {f.name: law.expectation(f.function)[1] for f in STANDARD}
    found = {r.functional: r.reference for r in supported_evidence.results if r.kind == "weak"}
    mean = p["x0"] * math.exp(p["mu"])
    second = p["x0"] ** 2 * math.exp(2 * p["mu"] + p["sigma"] ** 2)
    assert abs(found["mean"] - mean) <= doubt["mean"] + round_off(mean, 64)
    assert abs(found["second-moment"] - second) <= doubt["second-moment"] + round_off(second, 64)


def test_rungs_say_their_step_sizes(sampled_evidence):
    for row in sampled_evidence.results[3:]:
        assert [(r.steps, r.h) for r in row.rungs] == [(n, 1 / n) for n in (4, 8, 16, 32, 64)]


def test_the_order_of_a_row_is_the_local_order_of_its_finest_counting_rung(supported_evidence):
    for row in supported_evidence.results[3:]:
        last = [r for r in row.rungs if r.counts][-1]
        assert last.local_order == row.order
        assert row.low < row.order < row.high


def test_a_local_order_is_that_of_the_errors_of_two_rungs(sampled_evidence):
    for row in sampled_evidence.results[3:]:
        before, after = (r for r in row.rungs[1:3])
        known = math.log2(abs(before.error / after.error))
        assert abs(after.local_order - known) <= round_off(4.0, 16)
        assert row.rungs[0].local_order is None


def test_the_mean_absolute_error_is_below_the_root_mean_square(sampled_evidence):
    for rung in sampled_evidence.results[3].rungs:
        assert 0 < rung.mean_absolute < rung.error
        assert rung.mean_absolute_uncertainty > 0


def test_rows_of_one_sample_carry_the_same_cost(sampled_evidence):
    costs = {r.cost for r in sampled_evidence.results[3:]}
    assert len(costs) == 1
    cost = costs.pop()
    assert (cost.looks, cost.threads, cost.normals) == (1, 1, 64 * cost.paths)


def test_a_supported_row_has_a_detection_limit_and_says_it(supported_evidence):
    for row in supported_evidence.results[3:]:
        assert row.detection_limit.plateau > 0
        assert "Detection limit" in row.sentence


def test_a_refuted_row_has_none(refuted_evidence):
    row = refuted_evidence.results[-1]
    assert row.verdict is Verdict.REFUTED
    assert row.detection_limit is None


def test_the_claims_verdict_names_the_cause(refuted_evidence):
    (claim,) = refuted_evidence.claims
    assert claim.verdict is Verdict.REFUTED
    assert "the correction ½·b·∂b/∂x·(dw² - h) is missing" in claim.sentence


def test_one_step_rows_of_strong_and_weak_show_their_own_terms(supported_evidence):
    strong, weak = supported_evidence.results[1:3]
    assert strong.terms[0].term == "term h"
    assert weak.terms[0].term == "E ΔX / h"


def test_a_scheme_that_does_not_apply_is_no_failure():
    evidence = sb.measure("exact-ou", on="gbm", looks=1, threads=1)
    assert {c.verdict for c in evidence.claims} == {Verdict.NOT_APPLICABLE}
    assert {r.verdict for r in evidence.results} == {Verdict.NOT_APPLICABLE}
    assert all("'decayed'" in c.sentence for c in evidence.claims)
    assert evidence.exit_code == 0


@pytest.fixture(scope="module")
def breaching() -> sb.Evidence:
    @sb.scheme(strong=0.5, weak=1.0)
    def still(sde, t, x, h, noise):
        return x

    return sb.measure(still, on="gbm", looks=1, threads=1)


def test_a_broken_contract_is_told_first_and_refutes_every_claim(breaching):
    assert [c.kind for c in breaching.claims] == ["contract", "strong", "weak"]
    assert {c.verdict for c in breaching.claims} == {Verdict.REFUTED}


def test_a_broken_contract_leaves_nothing_else_measured(breaching):
    assert [r.kind for r in breaching.results] == ["contract"]


def test_an_exact_scheme_has_no_order_and_says_exact():
    evidence = sb.measure("exact-ou", on="ou", looks=1, threads=1)
    assert all(c.exact for c in evidence.claims)
    assert {(c.order, c.low, c.high) for c in evidence.claims} == {(None, None, None)}


def test_a_grid_row_is_marked_and_at_least_the_error_at_the_horizon():
    evidence = sb.measure("milstein", on="gbm", looks=1, threads=1, grid_maximum=True)
    rows = {r.at: r for r in evidence.results if r.kind == "strong"}
    pairs = zip(rows["grid"].rungs, rows["horizon"].rungs, strict=True)
    assert all(grid.error >= end.error for grid, end in pairs)


def test_rungs_before_a_change_of_sign_do_not_count():
    """Closed form: Euler–Maruyama's second-moment error here is +0.024, -0.003, -0.004, … .

    X_N is normal with mean m + (x0 - m) a^N and variance σ²h (1 - a^2N)/(1 - a²), a = 1 - θh.
    """
    problem = "ou:theta=2,mean=0.1,sigma=0.5,x0=1"
    evidence = sb.measure("euler-maruyama", on=problem, looks=1, threads=1, steps=(2, 4, 8, 16, 32))
    row = next(r for r in evidence.results if r.functional == "second-moment")
    assert [rung.error > 0 for rung in row.rungs] == [True, False, False, False, False]
    assert [rung.counts for rung in row.rungs] == [False, True, True, True, True]


def test_what_a_step_takes_stands_with_the_errors_it_is_the_cost_of(supported_evidence):
    """Tens of nanoseconds; it would catch the time of a whole block, or of the whole study."""
    rows = [row for row in supported_evidence.results if row.kind in ("strong", "weak")]
    assert len({row.cost.step_seconds for row in rows}) == 1
    assert 0 < rows[0].cost.step_seconds < supported_evidence.provenance.seconds / 1000
