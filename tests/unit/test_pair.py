"""A scheme on a problem: what is measured, how it grows, and when it is settled."""

import copy
import math
from dataclasses import replace

import pytest

import sdebench as sb
from sdebench.assess import Levels
from sdebench.claims import bearing, claim_ruling, decisive, settled
from sdebench.discovery import find_scheme
from sdebench.functional import STANDARD
from sdebench.integrator import Claim
from sdebench.ladder import DEFAULT, Ladder
from sdebench.pair import FIRST_BLOCKS, SAMPLED_ALONE, Pair, Routes
from sdebench.sample import BLOCK, Plan
from sdebench.verdict import Ruling, Verdict
from tests.tolerance import round_off

LEVELS = Levels(0.95, 0.1, 4)
BOTH = Routes(propagate=True, sample=True, ladder=Ladder((4, 16, 64)))


def pair(scheme, on="gbm", routes=SAMPLED_ALONE, claims=None, **changes) -> Pair:
    found = find_scheme(scheme)
    options = {"ladder": DEFAULT, "functionals": STANDARD, "seed": 1} | changes
    return Pair(Plan(found, sb.problem(on), **options), routes, claims)


def propagated(scheme, on="gbm", **changes) -> Pair:
    made = pair(scheme, on, BOTH, **changes)
    made.examine(0.1)
    made.propagate(LEVELS, 1)
    return made


@pytest.fixture
def looked_at() -> Pair:
    made = pair("milstein")
    made.examine(0.1)
    made.look(LEVELS, 1, lambda: None)
    return made


def test_the_label_is_scheme_on_problem_as_typed():
    assert pair("milstein", "gbm:mu=0.30").label == "milstein on gbm:mu=0.30"


@pytest.mark.parametrize(
    ("name", "on", "applies"), [("exact-ou", "ou", True), ("exact-ou", "gbm", False)]
)
def test_a_scheme_applies_where_its_functionals_are(name, on, applies):
    assert pair(name, on).applies is applies


def test_the_claims_are_those_for_the_class_of_noise():
    assert pair("euler-maruyama", "gbm").claims == [Claim("strong", 0.5), Claim("weak", 1.0)]
    assert pair("euler-maruyama", "ou").claims == [Claim("strong", 1.0), Claim("weak", 1.0)]


def test_there_is_a_row_for_the_strong_claim_and_one_for_each_functional():
    found = [(r.claim.kind, r.functional, r.at) for r in pair("milstein").rows]
    assert found[0] == ("strong", None, "horizon")
    assert [f for kind, f, _ in found[1:] if kind == "weak"] == [0, 1, 2]


def test_the_grid_maximum_is_a_further_strong_row():
    few = pair("milstein").rows
    more = pair("milstein", grid_maximum=True).rows
    assert [r.at for r in more if r not in few] == ["grid"]


def test_the_size_of_x_is_the_root_mean_square_of_the_end_and_the_start():
    """GBM: E X_T² = x0² e^{(2 mu + sigma²) T}; its root is off by doubt/(2 root) at the most."""
    made = pair("milstein")
    p = made.plan.problem.params
    _, doubt = made.plan.problem.law(p).expectation(lambda x: x * x)
    known = p["x0"] * (1 + math.exp(p["mu"] + p["sigma"] ** 2 / 2))
    assert abs(made.scale - known) <= doubt / known + round_off(known, 64)


def test_nothing_is_sampled_before_the_contract_is_checked():
    assert not pair("milstein").sampled


def test_a_step_that_breaks_its_contract_is_not_measured():
    @sb.scheme(strong=0.5)
    def still(sde, t, x, h, noise):
        return x

    made = pair(still)
    made.examine(0.1)
    assert made.local.breach is not None
    assert made.local.one_step is None
    assert not made.sampled


def test_the_first_look_draws_the_first_blocks(looked_at):
    assert looked_at.looks == 1
    assert looked_at.sample.n_paths == FIRST_BLOCKS * BLOCK


def test_every_further_look_doubles_the_sample(looked_at):
    looked_at.look(LEVELS, 1, lambda: None)
    looked_at.look(LEVELS, 1, lambda: None)
    assert looked_at.looks == 3
    assert looked_at.sample.n_paths == 4 * FIRST_BLOCKS * BLOCK


def test_the_next_look_is_announced(looked_at):
    announced, before = looked_at.next_blocks, looked_at.sample.n_blocks
    looked_at.look(LEVELS, 1, lambda: None)
    assert looked_at.sample.n_blocks - before == announced


def test_a_supported_pair_is_settled(looked_at):
    assert [claim_ruling(looked_at, c, LEVELS).verdict for c in looked_at.claims] == [
        Verdict.SUPPORTED,
        Verdict.SUPPORTED,
    ]
    assert settled(looked_at, LEVELS)


def test_a_claim_that_one_step_refutes_is_refuted_and_settled():
    @sb.scheme(strong=1.0)
    def uncorrected(sde, t, x, h, noise):
        return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw

    made = pair(uncorrected)
    made.examine(0.1)
    made.look(LEVELS, 1, lambda: None)
    ruling = claim_ruling(made, made.claims[0], LEVELS)
    assert ruling.verdict is Verdict.REFUTED
    assert ruling.sentence.startswith("One-step evidence")
    assert settled(made, LEVELS)


def test_rows_that_do_not_count_decide_nothing_unless_none_does(looked_at):
    weak = looked_at.claims[1]
    rows = bearing(looked_at, weak)
    sampled = looked_at.by_sample
    looked_at.by_sample = {
        row: replace(a, counts=row.functional != 1) for row, a in sampled.items()
    }
    assert [a.row.functional for a in bearing(looked_at, weak)] == [0, 2]
    looked_at.by_sample = {row: replace(a, counts=False) for row, a in sampled.items()}
    assert len(bearing(looked_at, weak)) == len(rows) == 3


def test_a_sound_problem_passes_its_check(looked_at):
    looked_at.check(3, looked_at.n_route_checks)
    assert looked_at.agreement == {}


def test_a_pair_is_sampled_alone_unless_it_is_told_otherwise(looked_at):
    looked_at.propagate(LEVELS, 1)
    assert looked_at.by_propagation == {}
    assert looked_at.n_route_checks == 0


def test_other_claims_may_be_given_than_those_of_the_scheme():
    """As where no claim is judged and only its errors are asked for."""
    made = pair("milstein", claims=[Claim("weak", 2.0)])
    assert [row.claim for row in made.rows] == [Claim("weak", 2.0)] * len(STANDARD)


@pytest.fixture(scope="module")
def measured_twice() -> Pair:
    made = propagated("milstein")
    made.look(LEVELS, 1, lambda: None)
    return made


@pytest.fixture
def two_routes(measured_twice) -> Pair:
    """Return a pair that was propagated and sampled, for a test to change."""
    return copy.copy(measured_twice)


def test_what_is_propagated_has_rungs_of_its_own(two_routes):
    assert {a.errors.steps for a in two_routes.by_propagation.values()} == {(4, 16, 64)}
    assert {a.errors.steps for a in two_routes.by_sample.values()} == {DEFAULT.steps}


def test_the_propagated_errors_decide_where_a_sample_is_their_check(two_routes):
    """It would catch a pair that still judges the sample, at a thousandth of the precision."""
    assert [a.route for a in two_routes.assessments] == ["propagated"] * 4
    assert decisive(two_routes, two_routes.claims[0]).route == "propagated"


def test_nothing_is_settled_by_more_paths_where_errors_are_propagated(two_routes):
    assert not any(a.ruling.more_paths_help for a in two_routes.assessments)
    assert settled(two_routes, LEVELS)


def test_the_routes_are_compared_on_the_rungs_that_both_have(two_routes):
    """Three rungs, 4, 16 and 64 steps, in each of four rows."""
    assert two_routes.n_route_checks == 12


def test_a_check_that_agrees_says_so_of_every_row(two_routes):
    two_routes.check(3, two_routes.n_route_checks)
    assert list(two_routes.agreement) == two_routes.rows
    assert all("which it agrees with" in said for said in two_routes.agreement.values())


@pytest.mark.parametrize("row", range(4), ids=["strong", "mean", "second-moment", "cos"])
def test_a_propagated_error_that_its_sample_contradicts_is_a_fault_of_the_bench(two_routes, row):
    """Three times the measures, on any row: as of a square root that is left out, or a factor."""
    known = two_routes.by_propagation
    which = two_routes.rows[row]
    errors = replace(known[which].errors, measures=3 * known[which].errors.measures)
    two_routes.by_propagation = known | {which: replace(known[which], errors=errors)}
    with pytest.raises(sb.BenchFault, match="contradicts itself on milstein on gbm"):
        two_routes.check(3, two_routes.n_route_checks)


def test_a_fault_that_a_check_sees_on_a_rung_refutes_a_claim_that_propagation_supports(two_routes):
    """As where some paths of the sample end in NaN, which no node of the propagation met."""
    strong, known = two_routes.rows[0], two_routes.by_sample
    seen = Ruling(Verdict.REFUTED, "1 of 32768 paths end in NaN.", lasting=True)
    two_routes.by_sample = known | {strong: replace(known[strong], ruling=seen)}
    assert [claim_ruling(two_routes, claim, LEVELS) for claim in two_routes.claims] == [seen, seen]


def test_a_check_that_refutes_an_order_on_coarse_rungs_decides_nothing(two_routes):
    """The order is the finer rungs' to tell: the check has noise, and errors to 64 steps."""
    strong, known = two_routes.rows[0], two_routes.by_sample
    refuted = Ruling(Verdict.REFUTED, "Local order 0.5 between 32 and 64 steps.")
    two_routes.by_sample = known | {strong: replace(known[strong], ruling=refuted)}
    assert claim_ruling(two_routes, two_routes.claims[0], LEVELS).verdict is Verdict.SUPPORTED


def test_a_problem_that_depends_on_time_is_sampled_and_every_row_says_why():
    made = propagated("milstein", "ramped-noise")
    assert made.by_propagation == {}
    assert made.why_sampled == dict.fromkeys(made.rows, "ramped-noise depends on time")
    assert made.plan.ladder == DEFAULT


def test_the_largest_error_on_a_grid_is_sampled_and_says_why():
    """The pair's end points do not tell the largest error on the way to them."""
    made = propagated("milstein", grid_maximum=True)
    (grid,) = made.why_sampled
    assert grid.at == "grid"
    assert "largest error over a grid" in made.why_sampled[grid]
    assert set(made.by_propagation) == set(made.rows) - {grid}


def test_a_row_that_was_neither_propagated_nor_sampled_says_why_and_what_to_do():
    made = pair("milstein", "ramped-noise", Routes(True, False, Ladder((4, 16, 64))))
    made.examine(0.1)
    made.propagate(LEVELS, 1)
    assert not made.sampled
    ruling = claim_ruling(made, made.claims[0], LEVELS)
    assert ruling.verdict is Verdict.UNDECIDED
    assert "ramped-noise depends on time" in ruling.sentence
    assert "Leave out --route" in ruling.sentence


def test_nothing_is_propagated_of_a_step_that_breaks_its_contract():
    @sb.scheme(strong=0.5)
    def still(sde, t, x, h, noise):
        return x

    made = propagated(still)
    assert made.by_propagation == {}
    assert made.why_sampled == {}


@pytest.mark.parametrize(
    ("steps", "coarse"),
    [
        ((4, 8, 16, 32, 64), (4, 8, 16, 32, 64)),
        ((4, 16, 64, 256, 1024), (4, 16, 64)),
        ((16, 64, 256, 1024), (16, 64, 256)),
        ((1024, 2048, 4096, 8192), (1024, 2048, 4096)),
    ],
    ids=str,
)
def test_a_check_has_the_rungs_to_64_steps_and_three_at_least(steps, coarse):
    assert Ladder(steps).coarse_part == Ladder(coarse)
