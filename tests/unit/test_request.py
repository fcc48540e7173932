"""What is asked of a study, checked and found."""

import pytest

import sdebench as sb
from sdebench.discovery import problems, schemes
from sdebench.errors import BadOption, NothingSuits
from sdebench.functional import STANDARD
from sdebench.request import check_numbers, chosen_functionals, chosen_pairs, processors

SOUND = {
    "confidence": 0.95,
    "tolerance": 0.1,
    "seed": 1,
    "budget": None,
    "looks": None,
    "threads": None,
}


@pytest.mark.parametrize(
    "changes",
    [
        {},
        {"confidence": 0.51},
        {"tolerance": 0.2},
        {"seed": 0},
        {"seed": 2**70},
        {"budget": 3},
        {"looks": 1, "threads": 2},
    ],
    ids=str,
)
def test_numbers_that_can_be_used_pass(changes):
    check_numbers(**(SOUND | changes))


@pytest.mark.parametrize(
    "changes",
    [
        {"confidence": 1.0},
        {"confidence": 0.4},
        {"confidence": float("nan")},
        {"confidence": "0.9"},
        {"tolerance": 0.0},
        {"tolerance": 0.3},
        {"seed": -1},
        {"seed": 1.5},
        {"seed": True},
        {"budget": 0},
        {"budget": float("inf")},
        {"looks": 0},
        {"looks": 1.0},
        {"threads": 0},
        {"looks": 1, "budget": 1.0},
    ],
    ids=str,
)
def test_a_number_that_cannot_be_used_is_refused_by_its_name(changes):
    with pytest.raises(BadOption, match=f"^{next(iter(changes))} = "):
        check_numbers(**(SOUND | changes))


def named(pairs) -> list[tuple[str, str]]:
    return [(scheme.name, problem.name) for scheme, problem in pairs]


def test_everything_that_fits_is_chosen_where_nothing_is_named(pair_applies):
    fitting = [
        (s.name, p.name)
        for s in schemes().values()
        for p in problems().values()
        if pair_applies(s, p)
    ]
    assert named(chosen_pairs(None, None)) == fitting


def test_a_problem_that_is_named_is_chosen_even_where_the_scheme_does_not_apply():
    assert named(chosen_pairs("exact-ou", "gbm")) == [("exact-ou", "gbm")]


def test_pairs_named_twice_are_chosen_once():
    assert named(chosen_pairs(["milstein", "milstein"], ["gbm", "gbm"])) == [("milstein", "gbm")]


def test_a_problem_on_two_parameter_sets_is_chosen_twice():
    assert len(chosen_pairs("milstein", ["gbm:mu=0.1", "gbm:mu=0.2"])) == 2


@pytest.mark.parametrize("given", [([], None), (None, [])], ids=["no scheme", "no problem"])
def test_an_empty_list_is_no_choice(given):
    with pytest.raises(BadOption, match="an empty list"):
        chosen_pairs(*given)


def test_functionals_come_after_the_standard_ones():
    mine = sb.Functional("mine", lambda x: x**3)
    assert chosen_functionals([mine]) == (*STANDARD, mine)


@pytest.mark.parametrize("given", [None, (), "cos"])
def test_the_standard_functionals_are_always_there_once(given):
    assert chosen_functionals(given) == STANDARD


def test_one_functional_may_be_given_without_a_list():
    mine = sb.Functional("mine", lambda x: x**3)
    assert chosen_functionals(mine)[-1] is mine


def test_there_is_a_processor():
    assert processors() >= 1


def test_a_scheme_that_no_problem_suits_is_told_with_what_it_needs():
    astray = sb.library("none.so", "path", params=("mu", "sigmaa"), strong=1.0)
    with pytest.raises(NothingSuits, match="No problem has all that path steps by: dw, mu, sigmaa"):
        chosen_pairs(["milstein", astray], None)
    assert named(chosen_pairs(astray, "gbm")) == [("path", "gbm")]
