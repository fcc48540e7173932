"""The errors of several rows as one table."""

import msgspec
from sdebench.reports.errors_table import errors_table


def rows_of(evidence, kind):
    return [row for row in evidence.results if row.kind == kind and not row.check]


def test_rows_of_several_functionals_say_which(supported_evidence):
    table = errors_table("Weak error", rows_of(supported_evidence, "weak"))
    assert table.headings[0] == "of"
    assert {row[0] for row in table.rows} == {"mean", "second-moment", "cos"}


def test_rows_of_one_kind_do_not_repeat_it(supported_evidence):
    table = errors_table("Strong error", rows_of(supported_evidence, "strong"))
    assert table.headings == (
        *("steps", "h", "error", "uncertainty", "local order", "route", "counts"),
    )
    assert [row[5] for row in table.rows] == ["propagated"] * len(table.rows)


def test_a_rung_without_an_error_says_why(supported_evidence):
    (row,) = rows_of(supported_evidence, "strong")
    first, *rest = row.rungs
    dropped = msgspec.structs.replace(first, error=None, uncertainty=None, dropped="it is lost")
    table = errors_table("", [msgspec.structs.replace(row, rungs=[dropped, *rest])])
    assert table.rows[0][2:4] == ("it is lost", "")
