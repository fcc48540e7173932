"""Over 120 seeds: intervals cover what they say, and no honest scheme is refuted.

Every registered scheme on every problem with errors in closed form that it applies to, sampled
and at the levels of a default run; contract and one-step evidence do not depend on the seed and are
taken once.
"""

import os
from collections import Counter
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass, field
from functools import cache

import numpy as np
import pytest

from sdebench import discovery
from sdebench.assess import Assessment, Levels
from sdebench.claims import claim_ruling, settled
from sdebench.functional import STANDARD
from sdebench.ladder import DEFAULT
from sdebench.orders import student_quantile
from sdebench.pair import Local, Pair
from sdebench.problem import Problem
from sdebench.sample import Plan
from sdebench.study import Effort
from tests.calibration.population import CLOSED_FORMS, errors
from tests.tolerance import binomial_band

pytestmark = pytest.mark.calibration

N_SEEDS = 120
LEVELS = Levels(confidence=0.95, tolerance=0.1, n_rows=60)
KNOWN = {None: "mean-square", 0: "mean", 1: "second-moment", 2: "cos"}


@dataclass
class Found:
    """What one seed gave."""

    verdicts: Counter[tuple[str, str, str, str]] = field(default_factory=Counter)
    covered: Counter[tuple[str, str, str, int, bool]] = field(default_factory=Counter)
    orders_covered: bool = True


@pytest.fixture(scope="module")
def found() -> list[Found]:
    with ProcessPoolExecutor(os.cpu_count()) as pool:
        return list(pool.map(run, range(N_SEEDS), chunksize=5))


def test_no_honest_scheme_is_refuted_and_all_but_a_few_are_supported(found):
    """Each refutation has a false-alarm probability far below (1-C) over the run's rows."""
    verdicts = sum((each.verdicts for each in found), Counter())
    refuted = {key: n for key, n in verdicts.items() if key[-1] == "refuted"}
    assert not refuted
    undecided = {key: n for key, n in verdicts.items() if key[-1] == "undecided"}
    # A default run that stays undecided in one of a hundred would be a nuisance in CI.
    assert sum(undecided.values()) <= N_SEEDS // 100, undecided


def test_the_interval_of_each_rung_covers_the_known_error_as_often_as_it_says(found):
    """Each rung's 120 intervals against the binomial band of C, false alarm 1e-6 over all rungs."""
    covered = sum((each.covered for each in found), Counter())
    keys = {key[:-1] for key in covered}
    low, high = binomial_band(N_SEEDS, LEVELS.confidence, 1e-6 / len(keys))
    hits = {key: covered[(*key, True)] for key in keys}
    wrong = {key: n for key, n in hits.items() if not low <= n <= high}
    assert not wrong
    # Together the rungs say more, though those of one row share their paths: rows are independent
    # across schemes' problems and seeds only, so count one rung of each row.
    finest = [n for key, n in hits.items() if key[-1] == DEFAULT.steps[-1]]
    low, _ = binomial_band(N_SEEDS, LEVELS.confidence)
    assert np.mean(finest) >= low


def test_all_bounds_on_orders_of_a_run_hold_together_at_least_as_often_as_they_say(found):
    """The bounds on every order, at every look, hold at once in at least C of the runs."""
    low, _ = binomial_band(N_SEEDS, LEVELS.confidence)
    assert sum(each.orders_covered for each in found) >= low


def run(seed: int) -> Found:
    """Measure everything from one seed, as a default run does."""
    result = Found()
    for scheme, problem in with_closed_forms():
        pair = Pair(plan(scheme, problem, seed))
        pair.local = local(scheme, problem)
        effort, decided = Effort(looks=None, budget=None), False
        while effort.wants(pair.looks, decided, decided, 0.0):
            pair.look(LEVELS, 1, lambda: None)
            for assessment in pair.assessments:
                note(result, pair, assessment)
            decided = settled(pair, LEVELS)
        for claim in pair.claims:
            verdict = claim_ruling(pair, claim, LEVELS).verdict.value
            result.verdicts[(scheme, problem, claim.kind, verdict)] += 1
    return result


def note(result: Found, pair: Pair, a: Assessment) -> None:
    """Hold one assessment against the closed form, where there is one."""
    scheme, problem = pair.plan.scheme.name, pair.plan.problem
    what = KNOWN[a.row.functional]
    if a.exact or what not in population(scheme, problem.name):
        return
    known = population(scheme, problem.name)[what]
    if pair.looks == 1:
        quantile = student_quantile(1 - LEVELS.confidence, a.errors.dof)
        inside = np.abs(a.errors.measures - known) <= quantile * a.errors.standard_errors
        for steps, hit in zip(a.errors.steps, inside, strict=True):
            result.covered[(scheme, problem.name, what, steps, bool(hit))] += 1
    if a.order is not None and a.trusted:
        coarse, fine = a.order.counting[-2:]
        truth = np.log2(abs(known[coarse] / known[fine])) / a.errors.power
        result.orders_covered &= bool(a.order.local.low <= truth <= a.order.local.high)


def applicable() -> list[tuple[str, str]]:
    return [
        (scheme.name, problem.name)
        for scheme in discovery.schemes().values()
        for problem in discovery.problems().values()
        if problem.offers(scheme.noise)
    ]


def with_closed_forms() -> list[tuple[str, str]]:
    """Where noise is additive Milstein is Euler–Maruyama, to the bit: it is taken once."""
    return [
        (scheme, problem)
        for scheme, problem in applicable()
        if problem in CLOSED_FORMS and (scheme != "milstein" or problem == "gbm")
    ]


@cache
def local(scheme: str, problem: str) -> Local:
    pair = Pair(plan(scheme, problem, 0))
    pair.examine(LEVELS.tolerance)
    assert pair.local is not None
    return pair.local


@cache
def population(scheme: str, problem: str) -> dict[str, np.ndarray]:
    return errors(scheme, named(problem), DEFAULT.steps)


def plan(scheme: str, problem: str, seed: int) -> Plan:
    return Plan(discovery.schemes()[scheme], named(problem), DEFAULT, STANDARD, seed)


def named(problem: str) -> Problem:
    return discovery.find_problem(problem)


def test_a_run_has_as_many_rows_as_its_levels_say():
    rows = [len(Pair(plan(*each, 0)).rows) for each in applicable()]
    assert sum(rows) == LEVELS.n_rows
