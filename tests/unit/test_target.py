"""The fewest steps below a target, from errors with so many steps."""

import math

import pytest

from sdebench.refine import Estimate
from sdebench.target import (
    PRECISION,
    Known,
    between,
    first_below,
    known_from,
    power_law,
)
from tests.tolerance import round_off


def known(error: float, uncertainty: float = 0.0) -> Known:
    return Known(error, uncertainty, None)


def test_the_most_that_an_error_may_be_is_its_size_with_its_uncertainty():
    """It would catch a negative error that is taken to be small."""
    assert Known(-3.0, 0.5, "mean").most == Known(3.0, 0.5, "mean").most == 3.5


def test_a_weak_error_is_known_as_it_is_with_its_functional():
    assert known_from("mean", Estimate(-0.25, 0.125)) == Known(-0.25, 0.125, "mean")


def test_a_mean_square_is_known_by_its_root():
    """4 ± 0.41 of squares: the root of 4.41 is 2.1."""
    found = known_from(None, Estimate(4.0, 0.41))
    assert (found.error, found.functional) == (2.0, None)
    assert abs(found.most - 2.1) <= round_off(2.1, 8)


def test_a_mean_square_below_nothing_is_no_error_with_the_root_of_its_uncertainty():
    """Numbers that are propagated may fall below 0 by their uncertainty."""
    assert known_from(None, Estimate(-1e-20, 0.25)) == Known(0.0, 0.5, None)


RUNGS = {4: known(0.8), 8: known(0.4), 16: known(0.2), 32: known(0.1)}


@pytest.mark.parametrize(
    ("target", "steps"), [(1.0, 4), (0.5, 8), (0.2, 16), (0.19, 32), (0.1, 32), (0.09, None)]
)
def test_the_fewest_steps_are_the_first_rung_below_the_target(target, steps):
    """A target that is just met is met."""
    assert first_below(RUNGS, target) == steps


def test_a_rung_below_the_target_counts_for_nothing_before_one_above_it():
    """An error that changes sign between 4 and 16 steps; it would catch a search from the top."""
    rungs = {4: known(0.3), 8: known(0.01), 16: known(-0.2), 32: known(-0.05)}
    assert first_below(rungs, 0.1) == 32
    assert first_below(rungs, 0.25) == 8


def test_an_uncertainty_that_reaches_beyond_the_target_is_not_below_it():
    rungs = {4: known(0.09, 0.02), 8: known(0.05, 0.02)}
    assert first_below(rungs, 0.1) == 8


def test_rungs_may_come_in_any_order():
    assert first_below(dict(sorted(RUNGS.items(), key=str)), 0.5) == 8


def test_no_rung_is_below_any_target():
    assert first_below({}, 0.5) is None


def errors_of(c: float, p: float):
    return lambda steps: known(c * steps**-p)


@pytest.mark.parametrize("p", [0.5, 1.0, 2.0])
@pytest.mark.parametrize("root", [64.5, 99.3, 500.9, 1023.2])
def test_the_power_law_through_two_errors_meets_the_target_at_the_next_whole_number(root, p):
    error = errors_of(0.7, p)
    target = 0.7 * root**-p
    assert power_law(64, error(64), 1024, error(1024), target) == math.ceil(root)


@pytest.mark.parametrize(("target", "steps"), [(9.0, 64), (1e-9, 1024)])
def test_a_target_that_is_not_between_two_errors_is_met_at_an_end(target, steps):
    error = errors_of(0.7, 1.0)
    assert power_law(64, error(64), 1024, error(1024), target) == steps


def searched(error, low: int, high: int, target: float) -> tuple[int, int]:
    """Close the bracket as a search does; return the fewest steps found and how many were tried."""
    low_known, high_known, tried = (error(low) if low else None), error(high), 0
    while high - low > max(1, PRECISION * high):
        middle = between(low, low_known, high, high_known, target)
        assert low < middle < high
        tried += 1
        if error(middle).most <= target:
            high, high_known = middle, error(middle)
        else:
            low, low_known = middle, error(middle)
    return high, tried


@pytest.mark.parametrize("p", [0.5, 1.0, 2.0, 3.0])
@pytest.mark.parametrize("share", [0.02, 0.3, 0.5, 0.8, 0.99])
def test_a_power_law_is_met_with_few_errors_to_the_precision(p, share):
    """Between 64 and 1024 steps, C N^-p = target at N = 64 · 16^share.

    Beside that number on the side of the farther end, then on the other side, and one for
    rounding. It would catch a guess that is linear in the error, which takes as many as halving,
    and one beside the nearer end, which creeps towards it step by step.
    """
    root = 64 * 16**share
    error = errors_of(0.7, p)
    fewest, tried = searched(error, 64, 1024, 0.7 * root**-p)
    assert root * (1 - 1e-9) <= fewest <= math.ceil(root) + PRECISION * fewest
    assert tried <= 3


@pytest.mark.parametrize("share", [0.02, 0.5, 0.99])
def test_an_error_that_is_no_power_law_is_met_too(share):
    """It stays just above the target and then falls: a bracket that never closes from one side."""
    root = round(64 + share * 960)
    fewest, tried = searched(lambda n: known(1.0 if n >= root else 1.0001), 64, 1024, 1.00005)
    assert root <= fewest <= math.ceil(root * (1 + 2 * PRECISION))
    assert tried <= 1024


@pytest.mark.parametrize(
    ("low", "low_known"),
    [(0, None), (64, None), (64, known(0.5)), (64, known(0.6))],
    ids=["no steps", "not known", "no higher than above", "lower than above"],
)
def test_without_a_fall_to_go_by_the_middle_is_tried(low, low_known):
    """Of an error of 0.7 with 100 steps, which is no lower."""
    high_known = known(0.7)
    assert between(low, low_known, 100, high_known, 0.65) == (low + 100) // 2


@pytest.mark.parametrize("target", [1e-9, 0.1001, 0.3999, 1e9], ids=str)
@pytest.mark.parametrize(("low", "high"), [(4, 6), (4, 8), (1, 3), (1000, 1002), (16, 4096)])
def test_what_is_tried_lies_strictly_between(low, high, target):
    """Even for a target that neither end brackets, and with one number only to choose."""
    found = between(low, known(0.4), high, known(0.1), target)
    assert low < found < high
