"""Ladders, and what is no ladder."""

import math

import pytest

from sdebench.errors import BadOption
from sdebench.ladder import DEFAULT, MOST_STEPS, Ladder


@pytest.mark.parametrize(
    "steps",
    [
        (),
        (8,),
        (8, 16),
        (8, 8, 16),
        (16, 8, 4),
        (4, 6, 12),
        (0, 4, 8),
        (-4, 8, 16),
        (4.0, 8.0, 16.0),
        (True, 2, 4),
        ("4", "8", "16"),
    ],
    ids=str,
)
def test_what_is_no_ladder_of_three_nested_rungs_is_refused(steps):
    with pytest.raises(BadOption, match="steps"):
        Ladder.of(steps)


def test_the_offending_steps_are_shown():
    with pytest.raises(BadOption, match="steps = 4,6,12"):
        Ladder.of((4, 6, 12))


def test_ratios_and_octaves_are_the_distances_between_rungs():
    ladder = Ladder.of([3, 6, 24, 72])
    assert ladder.ratios == (2, 4, 3)
    assert ladder.octaves == (1.0, 2.0, math.log2(3))


def test_any_iterable_makes_a_ladder():
    assert Ladder.of(2**k for k in range(3)).steps == (1, 2, 4)


def test_the_default_is_a_ladder_that_could_refute():
    """A refutation takes four rungs or more, the finest of 32 steps at least."""
    assert Ladder.of(DEFAULT.steps) == DEFAULT
    assert len(DEFAULT.steps) >= 4
    assert DEFAULT.steps[-1] >= 32


@pytest.mark.parametrize("steps", ["8,16,32", 8, None], ids=repr)
def test_what_is_no_list_of_numbers_is_told(steps):
    with pytest.raises(BadOption, match="such as"):
        Ladder.of(steps)


def test_more_steps_than_a_study_can_take_are_refused():
    Ladder.of((1, 2, MOST_STEPS))
    with pytest.raises(BadOption, match="at most"):
        Ladder.of((1, 2, 2 * MOST_STEPS))
