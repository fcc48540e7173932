"""A scheme on a problem: what is measured, how it grows, and when it is settled."""

import math
from dataclasses import replace

import pytest

import sdebench as sb
from sdebench.assess import Levels
from sdebench.discovery import find_scheme
from sdebench.functional import STANDARD
from sdebench.integrator import Claim
from sdebench.ladder import DEFAULT
from sdebench.pair import FIRST_BLOCKS, Pair
from sdebench.sample import BLOCK, Plan
from sdebench.verdict import Verdict
from tests.tolerance import round_off

LEVELS = Levels(0.95, 0.1, 4)


def pair(scheme, on="gbm", **changes) -> Pair:
    found = find_scheme(scheme)
    options = {"ladder": DEFAULT, "functionals": STANDARD, "seed": 1} | changes
    return Pair(Plan(found, sb.problem(on), **options))


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
    assert [looked_at.claim_ruling(c, LEVELS).verdict for c in looked_at.claims] == [
        Verdict.SUPPORTED,
        Verdict.SUPPORTED,
    ]
    assert looked_at.settled(LEVELS)


def test_a_claim_that_one_step_refutes_is_refuted_and_settled():
    @sb.scheme(strong=1.0)
    def uncorrected(sde, t, x, h, noise):
        return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw

    made = pair(uncorrected)
    made.examine(0.1)
    made.look(LEVELS, 1, lambda: None)
    ruling = made.claim_ruling(made.claims[0], LEVELS)
    assert ruling.verdict is Verdict.REFUTED
    assert ruling.sentence.startswith("One-step evidence")
    assert made.settled(LEVELS)


def test_rows_that_do_not_count_decide_nothing_unless_none_does(looked_at):
    weak = looked_at.claims[1]
    rows = looked_at.bearing(weak)
    looked_at.assessments = [
        replace(a, counts=a.row.functional != 1) for a in looked_at.assessments
    ]
    assert [a.row.functional for a in looked_at.bearing(weak)] == [0, 2]
    looked_at.assessments = [replace(a, counts=False) for a in looked_at.assessments]
    assert len(looked_at.bearing(weak)) == len(rows) == 3


def test_a_sound_problem_passes_its_check(looked_at):
    looked_at.check(3)
