"""What can be measured, on what, from which functionals: three tables."""

from collections.abc import Iterable

from sdebench.reports.numbers import claimed
from sdebench.reports.tables import Table

from sdebench.functional import Functional
from sdebench.integrator import Scheme
from sdebench.problem import Problem


def catalogue(
    schemes: Iterable[Scheme], problems: Iterable[Problem], functionals: Iterable[Functional]
) -> list[Table]:
    """Return the tables of schemes, problems and weak functionals."""
    return [_schemes(schemes), _problems(problems), _functionals(functionals)]


def _schemes(schemes: Iterable[Scheme]) -> Table:
    rows = [
        (
            each.name,
            claimed(each.strong),
            claimed(each.strong_additive),
            claimed(each.weak),
            ", ".join(each.noise),
            each.doc.splitlines()[0] if each.doc else "",
        )
        for each in schemes
    ]
    headings = ("scheme", "strong", "if additive", "weak", "steps by", "what it is")
    return Table("Schemes", headings, rows, frozenset({1, 2, 3}))


def _problems(problems: Iterable[Problem]) -> Table:
    rows = [
        (
            each.name,
            each.equation,
            ", ".join(f"{name}={value:g}" for name, value in each.params.items()),
            each.noise_kind,
            ", ".join(each.functionals),
        )
        for each in problems
    ]
    headings = ("problem", "SDE", "parameters", "noise", "offers")
    return Table("Problems", headings, rows, frozenset())


def _functionals(functionals: Iterable[Functional]) -> Table:
    rows = [(each.name,) for each in functionals]
    return Table("Functionals of weak errors", ("name",), rows, frozenset())
