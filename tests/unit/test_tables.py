"""The tables of a piece of evidence."""

import msgspec
import pytest
from sdebench.reports.tables import claims_table, refuted_by_terms, rungs_table, terms_table


@pytest.mark.parametrize("name", ["supported_evidence", "refuted_evidence"])
def test_the_table_of_claims_has_a_row_for_every_claim(name, request):
    evidence = request.getfixturevalue(name)
    table = claims_table(evidence)
    assert [(row[0], row[1], row[-1]) for row in table.rows] == [
        (c.scheme, c.problem, c.verdict.value) for c in evidence.claims
    ]


def test_a_claim_is_told_by_its_kind_and_the_functional_that_decides(supported_evidence):
    strong, weak = supported_evidence.claims
    assert [row[2] for row in claims_table(supported_evidence).rows] == [
        "strong",
        f"weak, {weak.functional}",
    ]
    assert strong.functional is None


def test_every_row_has_a_cell_for_every_heading(supported_evidence):
    tables = [claims_table(supported_evidence)]
    tables += [rungs_table(r) for r in supported_evidence.results if r.rungs]
    tables += [terms_table(r) for r in supported_evidence.results if r.terms]
    for table in tables:
        assert {len(row) for row in table.rows} == {len(table.headings)}
        assert max(table.numeric) < len(table.headings)


def test_the_table_of_rungs_has_a_row_for_every_rung(supported_evidence):
    row = supported_evidence.results[-1]
    table = rungs_table(row)
    assert [cells[0] for cells in table.rows] == ["4", "8", "16", "32", "64"]
    assert "±" in table.rows[0][2]
    assert table.rows[0][3] == ""
    assert table.title == "milstein on gbm, weak, cos"


def test_a_rung_without_an_error_says_why(supported_evidence):
    row = supported_evidence.results[-1]
    gone = msgspec.structs.replace(row.rungs[0], error=None, counts=False)
    table = rungs_table(msgspec.structs.replace(row, rungs=[gone]))
    assert table.rows[0][2] == "NaN or infinity"
    assert table.rows[0][-1] == "no"


def test_a_grid_row_says_so_in_its_title(supported_evidence):
    strong = supported_evidence.results[3]
    assert "grid" not in rungs_table(strong).title
    assert "largest on the grid" in rungs_table(msgspec.structs.replace(strong, at="grid")).title


def test_the_terms_of_a_step_stand_beside_the_sdes(refuted_evidence):
    row = next(r for r in refuted_evidence.results if r.terms)
    table = terms_table(row)
    found = {cells[0]: cells[1:4] for cells in table.rows}
    assert found["term h"][2] == "agrees"
    assert found["term dw² - h"][0] == "0"
    assert found["term dw² - h"][2] == "differs"


def test_a_term_that_no_claim_needs_is_marked(supported_evidence):
    cells = [c for r in supported_evidence.results for c in terms_table(r).rows if r.terms]
    assert "beyond the claim" in {c[3] for c in cells}


def test_a_row_is_refuted_by_terms_if_a_needed_one_differs(refuted_evidence, supported_evidence):
    assert [refuted_by_terms(r) for r in refuted_evidence.results] == [False, True, False]
    assert not any(refuted_by_terms(r) for r in supported_evidence.results)
