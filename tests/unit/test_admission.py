"""What can be measured at all: problems and functionals that double precision holds."""

import numpy as np
import pytest

import sdebench as sb
from sdebench.admission import check_functional, check_problem
from sdebench.discovery import find_functional
from sdebench.errors import BadFunctional, BadOption, UserCodeRaised


@pytest.mark.parametrize("name", ["gbm", "ou", "ramped-noise"])
def test_a_problem_within_double_precision_passes_its_check(name):
    check_problem(sb.problem(name))


@pytest.mark.parametrize(
    ("typed", "words"),
    [
        ("gbm:mu=1000", "overflows double precision"),
        ("gbm:sigma=40", "overflows double precision"),
        ("gbm:sigma=1e-12", "lost in the round-off"),
        ("ou:sigma=1e-12", "lost in the round-off"),
    ],
)
def test_a_problem_beyond_double_precision_is_told(typed, words):
    with pytest.raises(BadOption, match=words):
        check_problem(sb.problem(typed))


FUNCTIONALS = {
    "writes into its input": lambda x: np.negative(x, out=x),
    "returns shape (1,)": lambda x: x[:1],
    "returns float": lambda x: 3.0,
    "gives nan": lambda x: np.full_like(x, np.nan),
    "gives inf": lambda x: np.full_like(x, np.inf),
    "returns complex128": lambda x: x + 1j,
}


@pytest.mark.parametrize(("words", "function"), FUNCTIONALS.items(), ids=list(FUNCTIONALS))
def test_a_functional_that_cannot_be_averaged_is_told(words, function):
    with pytest.raises(BadFunctional) as caught:
        check_functional(sb.Functional("mine", function), np.array([0.5, 1.5]))
    assert f"Functional 'mine' {words}" in str(caught.value)


@pytest.mark.parametrize(
    "function",
    [lambda: 1.0, lambda x, y: x, lambda *, x: x],
    ids=["none", "two", "by name alone"],
)
def test_a_functional_that_does_not_take_one_array_is_told_by_its_signature(function):
    with pytest.raises(BadFunctional, match=r"Functional 'mine' takes \("):
        check_functional(sb.Functional("mine", function), np.ones(2))


def test_the_end_points_that_a_functional_is_tried_on_are_left_as_they_are():
    x = np.array([0.5, 1.5])
    with pytest.raises(BadFunctional):
        check_functional(sb.Functional("mine", lambda v: np.negative(v, out=v)), x)
    assert x.tolist() == [0.5, 1.5]


def test_the_end_point_at_which_a_functional_is_no_number_is_told():
    with pytest.raises(BadFunctional, match=r"gives nan at x=-1\.5"):
        check_functional(sb.Functional("mine", np.sqrt), np.array([0.5, -1.5]))


def test_a_functional_that_raises_is_told_as_the_users(user_file):
    path = user_file("def payoff(x):\n    raise KeyError(x.size)\n")
    with pytest.raises(UserCodeRaised, match="payoff' raised KeyError when it was tried"):
        check_functional(find_functional(f"{path}:payoff"), np.ones(2))


@pytest.mark.parametrize("function", [np.cos, lambda x: x > 1, lambda x: x.astype(int)])
def test_a_functional_of_real_numbers_can_be_averaged(function):
    check_functional(sb.Functional("mine", function), np.array([0.5, 1.5]))
