"""The standard functionals of weak errors."""

import numpy as np
import pytest

from sdebench.functional import STANDARD, Functional

X = np.array([-2.0, 0.5, 3.0])
EXPECTED = {"mean": X, "second-moment": X**2, "cos": np.cos(X)}


@pytest.mark.parametrize("functional", STANDARD, ids=lambda f: f.name)
def test_a_standard_functional_is_what_its_name_says(functional):
    assert np.array_equal(functional.function(X), EXPECTED[functional.name])


def test_there_are_three_standard_functionals():
    assert [f.name for f in STANDARD] == list(EXPECTED)


@pytest.mark.parametrize("functional", STANDARD, ids=lambda f: f.name)
def test_a_standard_functional_leaves_its_input_alone(functional):
    x = X.copy()
    functional.function(x)
    assert np.array_equal(x, X)


def test_a_condition_is_taken_as_nought_and_one():
    digital = Functional("digital", lambda x: x > 0)
    assert digital(X).tolist() == [0.0, 1.0, 1.0]
    assert digital(X).dtype == np.float64
