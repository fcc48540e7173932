"""`sdebench catalogue` names all that there is."""

from sdebench import Problem, Scheme
from sdebench.functional import STANDARD


def test_every_scheme_is_named_with_the_orders_it_claims(typed, scheme: Scheme):
    lines = [line.split() for line in typed("catalogue").out.splitlines()]
    (row,) = [words for words in lines if words[:1] == [scheme.name]]
    claims = [scheme.strong, scheme.strong_additive, scheme.weak]
    assert row[1:].index(scheme.noise[0].rstrip(",")) == sum(c is not None for c in claims)


def test_every_problem_is_named_with_its_equation_and_parameters(typed, problem: Problem):
    (row,) = [
        line for line in typed("catalogue").out.splitlines() if line.startswith(f"{problem.name} ")
    ]
    assert problem.equation in row
    for name, value in problem.params.items():
        assert f"{name}={value:g}" in row


def test_every_functional_of_weak_errors_is_named(typed):
    lines = [line.strip() for line in typed("catalogue").out.splitlines()]
    assert [functional.name in lines for functional in STANDARD] == [True] * len(STANDARD)


def test_the_catalogue_runs_as_a_module(in_own_process):
    outcome = in_own_process("catalogue")
    assert (outcome.code, outcome.err) == (0, "")
    assert "\nmilstein " in outcome.out
