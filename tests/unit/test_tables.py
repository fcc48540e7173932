"""The tables of a piece of evidence."""

import msgspec
import pytest
from sdebench.reports.tables import (
    checks,
    claims_table,
    reasons_for_sampling,
    refuted_by_terms,
    rungs_table,
    terms_table,
)


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


@pytest.mark.parametrize(
    ("route", "steps"),
    [("propagated", [4, 16, 64, 256, 1024, 4096]), ("sampled", [4, 8, 16, 32, 64])],
    ids=["propagated", "sampled"],
)
def test_the_table_of_rungs_has_a_row_for_every_rung(supported_evidence, route, steps):
    (row,) = [r for r in supported_evidence.results if (r.route, r.functional) == (route, "cos")]
    table = rungs_table(row)
    assert [cells[0] for cells in table.rows] == [str(n) for n in steps]
    assert "±" in table.rows[0][2]
    assert table.rows[0][3] == ""
    assert table.title == f"milstein on gbm, weak, cos, {route}"


def test_a_rung_that_was_dropped_says_why(supported_evidence):
    (row,) = [r for r in supported_evidence.results if (r.kind, r.check) == ("strong", False)]
    gone = msgspec.structs.replace(
        row.rungs[0], error=None, counts=False, dropped="the nodes do not resolve it"
    )
    table = rungs_table(msgspec.structs.replace(row, rungs=[gone]))
    assert table.rows[0][2] == "the nodes do not resolve it"


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
    """The contract, one step, and then the propagated row with its check."""
    assert [refuted_by_terms(r) for r in refuted_evidence.results] == [False, True, False, False]
    assert not any(refuted_by_terms(r) for r in supported_evidence.results)


def test_the_note_on_checks_counts_each_sample_once_and_names_the_finest_rung(supported_evidence):
    """Four rows rest on one sample of two blocks of 16384 paths."""
    assert checks(supported_evidence.results) == (
        "Propagated errors agree with a check on 32768 sampled paths (4 rows, rungs to 64 steps)."
    )


def test_samples_of_several_pairs_add_up_in_the_note_on_checks(supported_evidence):
    """It would catch a set of counts, in which two samples of one size are one."""
    twice = [
        msgspec.structs.replace(r, cost=msgspec.structs.replace(r.cost, sample=f"{name} {r.route}"))
        for name in ("one", "other")
        for r in supported_evidence.results
    ]
    both = msgspec.structs.replace(supported_evidence, results=twice)
    assert "on 65536 sampled paths (8 rows" in checks(both.results)


def test_a_check_that_was_not_held_against_anything_is_not_said_to_agree(supported_evidence):
    """Where a few paths weigh too much in the sample, its row is not compared."""
    rows = [
        msgspec.structs.replace(r, trusted=not (r.check and r.kind == "strong"))
        for r in supported_evidence.results
    ]
    evidence = msgspec.structs.replace(supported_evidence, results=rows)
    assert "(4 rows" not in checks(evidence.results)


def test_without_a_check_there_is_no_note_on_it(sampled_evidence):
    assert checks(sampled_evidence.results) is None


def test_each_reason_for_sampling_is_one_sentence_with_its_pairs(sampled_evidence):
    """Rows of one pair name it once; another pair of the same reason stands beside it."""
    (row,) = [r for r in sampled_evidence.results if r.functional == "mean"]
    late, rough = "gbm depends on time", "f bends"
    rows = [
        msgspec.structs.replace(row, scheme=name, why_sampled=why)
        for name, why in [("a", late), ("a", late), ("b", late), ("a", rough)]
    ]
    evidence = msgspec.structs.replace(sampled_evidence, results=rows)
    assert reasons_for_sampling(evidence.results) == [
        "Sampled, since gbm depends on time: a on gbm, b on gbm.",
        "Sampled, since f bends: a on gbm.",
    ]


def test_what_was_asked_to_be_sampled_gives_no_reason(sampled_evidence):
    assert reasons_for_sampling(sampled_evidence.results) == []
