"""What is asked of a study: schemes, problems, functionals and plain numbers, checked and found."""

import math
import os
from collections.abc import Callable, Iterable
from typing import TypeVar

from sdebench.discovery import find_functional, find_problem, find_scheme, problems, schemes
from sdebench.errors import BadOption, NothingSuits
from sdebench.functional import STANDARD, Functional
from sdebench.integrator import Scheme
from sdebench.problem import Problem
from sdebench.sde import Array

SchemeLike = str | Scheme
ProblemLike = str | Problem
Single = TypeVar("Single", Scheme, Problem)
FunctionalLike = str | Functional | Callable[[Array], Array]


def chosen_pairs(
    given: SchemeLike | Iterable[SchemeLike] | None,
    on: ProblemLike | Iterable[ProblemLike] | None,
) -> list[tuple[Scheme, Problem]]:
    """Return the pairs to measure; without a problem named, those that the scheme applies to.

    Raises `NothingSuits` for a scheme that is named and applies to none.
    """
    named_schemes = [find_scheme(s) for s in _several("schemes", given)] or list(schemes().values())
    named = [find_problem(p) for p in _several("on", on)]
    pairs = [
        (scheme, problem)
        for scheme in named_schemes
        for problem in named or list(problems().values())
        if named or problem.suits(scheme)
    ]
    if given is not None and not named:
        for scheme in named_schemes:
            if not any(scheme is each for each, _ in pairs):
                raise NothingSuits(scheme.label, (*scheme.noise, *scheme.params))
    return list({(s.label, p.label): (s, p) for s, p in pairs}.values())


def _several(what: str, given: str | Single | Iterable[str | Single] | None) -> list[str | Single]:
    if given is None:
        return []
    if isinstance(given, str) or not isinstance(given, Iterable):
        return [given]
    several = list(given)
    if not several:
        raise BadOption(what, "an empty list", "leave it out to take every one")
    return several


def chosen_functionals(
    given: FunctionalLike | Iterable[FunctionalLike] | None,
) -> tuple[Functional, ...]:
    """Return the standard functionals of weak errors and those given."""
    return distinct(() if given is None else given, STANDARD)


def distinct(
    given: FunctionalLike | Iterable[FunctionalLike], before: Iterable[Functional]
) -> tuple[Functional, ...]:
    """Return functionals after those `before`; raises `BadOption` where two share a name."""
    if isinstance(given, str | Functional) or not isinstance(given, Iterable):
        given = [given]
    chosen = list(before)
    for functional in map(find_functional, given):
        taken = [f for f in chosen if f.name == functional.name]
        if not taken:
            chosen.append(functional)
        elif taken[0] != functional:
            raise BadOption(
                "functionals", functional.name, "two of them have this name; give each its own"
            )
    return tuple(chosen)


def check_numbers(
    confidence: float,
    tolerance: float,
    seed: int,
    budget: float | None,
    looks: int | None,
    threads: int | None,
) -> None:
    """Raise `BadOption` on a number that cannot be used; each rule is one sentence."""
    _check_number("confidence", confidence, 0.5, 1.0, "it lies between 0.5 and 1, such as 0.95")
    _check_number("tolerance", tolerance, 0.0, 0.25, "it lies between 0 and 0.25 orders")
    _check_number("budget", budget, 0.0, math.inf, "it is a number of seconds above 0")
    for option, value, least in (("seed", seed, 0), ("looks", looks, 1), ("threads", threads, 1)):
        if value is not None and not (type(value) is int and value >= least):
            raise BadOption(option, value, f"it is a whole number, {least} or more")
    if looks is not None and budget is not None:
        raise BadOption("looks", looks, "give looks or a budget, not both")


def _check_number(option: str, value: object, above: float, below: float, rule: str) -> None:
    if value is None:
        return
    if not isinstance(value, int | float) or not above < value < below:
        raise BadOption(option, value, rule)


def processors() -> int:
    """Return the number of processors at hand."""
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1
