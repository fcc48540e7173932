"""What can be measured, as tables."""

import pytest
from sdebench.reports.catalogue import catalogue

import sdebench as sb
from sdebench.discovery import problems, schemes
from sdebench.functional import STANDARD


@pytest.fixture
def tables():
    return catalogue(schemes().values(), problems().values(), STANDARD)


def test_every_scheme_problem_and_functional_is_listed(tables):
    assert [[row[0] for row in table.rows] for table in tables] == [
        list(schemes()),
        list(problems()),
        [f.name for f in STANDARD],
    ]


def test_every_row_has_a_cell_for_every_heading(tables):
    for table in tables:
        assert {len(row) for row in table.rows} == {len(table.headings)}


def test_a_scheme_is_told_by_its_claims_and_the_first_line_of_its_docstring():
    @sb.scheme(strong=0.5, strong_additive=1.0, noise=("dw", "dz"))
    def shown_step(sde, t, x, h, noise):
        """Take a step that is shown.

        More of it.
        """

    (table, *_) = catalogue([shown_step], [], [])
    assert list(table.rows) == [
        ("shown-step", "0.5", "1", "", "dw, dz", "Take a step that is shown.")
    ]


def test_a_scheme_without_a_docstring_is_listed():
    made = sb.scheme(weak=2.0, name="bare")(lambda sde, t, x, h, noise: x)
    (table, *_) = catalogue([made], [], [])
    assert list(table.rows) == [("bare", "", "", "2", "dw", "")]


def test_a_problem_is_told_with_its_equation_and_every_parameter():
    gbm = sb.problem("gbm", mu=0.5)
    (row,) = catalogue([], [gbm], [])[1].rows
    assert row[1] == gbm.equation
    assert all(f"{n}={v:g}" in row[2] for n, v in gbm.params.items())
