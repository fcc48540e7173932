"""Over 300 seeds: the check of propagated errors raises no false alarm, and misses no real fault.

Euler–Maruyama and Milstein on geometric Brownian motion with 4, 8 and 16 steps. What is propagated
does not depend on the seed and is taken once.
"""

import copy
import os
from concurrent.futures import ProcessPoolExecutor
from dataclasses import replace
from functools import cache

import pytest

import sdebench as sb
from sdebench import discovery
from sdebench.assess import Levels
from sdebench.functional import STANDARD
from sdebench.ladder import Ladder
from sdebench.pair import Pair, Routes
from sdebench.sample import Plan, Sample

pytestmark = pytest.mark.calibration

N_SEEDS = 300
N_FAULTY = 40  # seeds with which a fault is to be seen
LEVELS = Levels(confidence=0.95, tolerance=0.1, n_rows=8)
LADDER = Ladder((4, 8, 16))
N_COMPARED = 2 * 4 * 3  # schemes, rows and rungs of a run of both, which share its false alarms
SCHEMES = ["euler-maruyama", "milstein"]


def alarms(factor: float, n_seeds: int, name: str) -> list[int]:
    """Return the seeds with which the check raises, if propagated measures are off by a factor."""
    with ProcessPoolExecutor(os.cpu_count()) as pool:
        raised = pool.map(alarm, [(factor, name, seed) for seed in range(n_seeds)], chunksize=10)
        return [seed for seed, each in enumerate(raised) if each]


def alarm(task: tuple[float, str, int]) -> bool:
    factor, name, seed = task
    pair = copy.copy(propagated(name))
    pair.plan = replace(pair.plan, seed=seed)
    pair.sample, pair.looks, pair.agreement = Sample(pair.plan), 0, {}
    pair.look(LEVELS, 1, lambda: None)
    pair.by_propagation = {
        row: replace(a, errors=replace(a.errors, measures=factor * a.errors.measures))
        for row, a in pair.by_propagation.items()
    }
    try:
        pair.check(2 * len(STANDARD), N_COMPARED)
    except sb.BenchFault:
        return True
    return False


@cache
def propagated(name: str) -> Pair:
    plan = Plan(discovery.schemes()[name], sb.problem("gbm"), LADDER, STANDARD, 0)
    pair = Pair(plan, Routes(propagate=True, sample=True, ladder=LADDER))
    pair.examine(LEVELS.tolerance)
    pair.propagate(LEVELS, 1)
    return pair


@pytest.mark.parametrize("name", SCHEMES)
def test_the_check_of_a_sound_bench_never_raises(name):
    """Each run raises with a probability of 1e-6, so that one of 300 does with 3e-4.

    It would catch a bound of a few standard errors (one in 300 at four), and the normal quantile
    for squares whose sample misses their tail.
    """
    assert alarms(1.0, N_SEEDS, name) == []


@pytest.mark.parametrize("factor", [0.75, 1.25], ids=["a quarter down", "a quarter up"])
@pytest.mark.parametrize("name", SCHEMES)
def test_the_check_never_misses_measures_that_are_off_by_a_quarter(name, factor):
    """Weak errors with 4 steps are known to some 1%, of which six are allowed: no seed is lucky."""
    assert alarms(factor, N_FAULTY, name) == list(range(N_FAULTY))


@pytest.mark.parametrize("name", SCHEMES)
def test_every_rung_of_every_row_is_compared(name):
    pair = copy.copy(propagated(name))
    pair.look(LEVELS, 1, lambda: None)
    assert pair.n_route_checks == N_COMPARED // 2
