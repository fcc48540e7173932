"""The coordinate of a problem, and the one that is the state itself."""

from dataclasses import FrozenInstanceError

import numpy as np
import pytest

import sdebench as sb
from sdebench.coordinate import STATE

X = np.array([[-2.0, 0.5, 3.0], [0.0, 1e-300, 7.25]])


def test_the_state_is_its_own_coordinate():
    assert np.array_equal(STATE.to(X), X)
    assert np.array_equal(STATE.back(X), X)


def test_the_slope_of_the_state_is_one_everywhere():
    """It would catch a slope of one number, which loses the shape."""
    slope = STATE.slope(X)
    assert (slope.shape, slope.dtype) == (X.shape, np.float64)
    assert np.all(slope == 1.0)


def test_the_state_bends_nowhere():
    assert STATE.bend is None


def test_a_coordinate_bends_nowhere_unless_it_says_so():
    assert sb.Coordinate(to=np.log, back=np.exp, slope=np.reciprocal).bend is None


def test_a_coordinate_is_frozen():
    with pytest.raises(FrozenInstanceError):
        STATE.bend = (0.0, 1.0)


def test_a_problem_that_names_no_coordinate_has_its_state():
    assert sb.problem("ou").coordinate is STATE
