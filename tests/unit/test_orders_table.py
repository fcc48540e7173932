"""What the errors of a scheme on a problem come to."""

import msgspec
import pytest
from sdebench.reports import numbers
from sdebench.reports.orders_table import orders_table

import sdebench as sb


def measured(evidence):
    return [row for row in evidence.results if row.kind in ("strong", "weak") and not row.check]


@pytest.fixture(scope="module")
def table(supported_evidence):
    return orders_table(measured(supported_evidence))


def test_every_kind_of_error_has_its_row(table):
    assert [row[0] for row in table.rows] == [
        *("strong", "weak, mean", "weak, second-moment", "weak, cos")
    ]


def test_the_error_constant_is_that_of_the_evidence_with_its_bounds(table, supported_evidence):
    strong = measured(supported_evidence)[0].error_constant
    width = max(strong.high - strong.value, strong.value - strong.low)
    assert table.rows[0][4] == f"{numbers.with_uncertainty(strong.value, width)} · h"


@pytest.mark.parametrize(
    ("order", "power"), [(0.5, "√h"), (1.0, "h"), (1.5, "h^1.5"), (2.0, "h²"), (3.0, "h³")]
)
def test_a_power_of_h_is_written_as_by_hand(supported_evidence, order, power):
    row = measured(supported_evidence)[0]
    constant = msgspec.structs.replace(row.error_constant, order=order)
    (line,) = orders_table([msgspec.structs.replace(row, error_constant=constant)]).rows
    assert line[4].endswith(f" · {power}")


def test_what_is_not_known_is_left_empty():
    evidence = sb.measure("exact-ou", on="ou", steps=(4, 8, 16), looks=1, threads=1)
    for row in orders_table(measured(evidence)).rows:
        assert row[2:5] == ("exact", "", "")
