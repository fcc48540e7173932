"""Step-size advice and comparisons as tables."""

import pytest
from sdebench.reports.advice import advice_table, comparison_table

from sdebench.advise import Advice
from sdebench.compare import Comparison
from sdebench.ratios import ComparedRung, Side
from tests.tolerance import as_printed

MEASURED = {
    "scheme": "milstein",
    "problem": "gbm",
    "kind": "strong",
    "target": 1e-3,
    "sentence": "63 steps keep the error below 0.001.",
    "steps": 63,
    "h": 1 / 63,
    "error": 9.855e-4,
    "uncertainty": 2e-6,
    "how": "measured",
    "seconds_per_path": 3.1e-6,
}
NONE = {"scheme": "exact-ou", "problem": "gbm", "kind": "strong", "target": 1e-3, "sentence": "No."}


def advice(**changes) -> Advice:
    return Advice(**(MEASURED | changes))


def test_a_row_of_advice_holds_the_step_its_error_and_what_a_path_takes():
    table = advice_table([advice()])
    assert table.headings == ("scheme", "steps", "h", "error", "of", "a path takes", "how known")
    assert table.rows == [
        ("milstein", "63", "0.01587", "0.000986 ± 0.000002", "", "3.1 µs", "measured")
    ]


def test_the_title_of_advice_says_what_was_asked_for():
    title = advice_table([advice()]).title
    assert title == "strong error below 0.001 on gbm: the fewest steps"


def test_the_functional_that_binds_is_named():
    table = advice_table([advice(kind="weak", functional="cos", error=-9.8e-4)])
    assert table.title.startswith("weak error below 0.001")
    assert table.rows[0][3:5] == ("-0.000980 ± 0.000002", "cos")


def test_a_scheme_without_advice_has_a_row_of_blanks():
    table = advice_table([advice(), Advice(**NONE)])
    assert table.rows[1] == ("exact-ou", "none", "", "", "", "", "")


def test_rows_stay_in_the_order_of_the_advice():
    names = ["b", "c", "a"]
    table = advice_table([advice(scheme=name) for name in names])
    assert [row[0] for row in table.rows] == names


@pytest.mark.parametrize("how", ["measured", "between rungs", "beyond the rungs"])
def test_how_the_steps_are_known_stands_in_the_last_column(how):
    assert advice_table([advice(how=how)]).rows[0][-1] == how


def side(error, uncertainty) -> Side:
    return Side(error=error, uncertainty=uncertainty)


def comparison(*rungs: ComparedRung, **changes) -> Comparison:
    facts = {
        "old": "euler-maruyama",
        "new": "milstein",
        "problem": "gbm",
        "kind": "strong",
        "functional": None,
        "route": "propagated",
        "old_constant": None,
        "new_constant": None,
        "cost": 1.5,
        "cost_low": 1.2,
        "cost_high": 2.0,
        "sentence": "milstein has the smaller error on every rung.",
    }
    return Comparison(rungs=list(rungs), **(facts | changes))


KNOWN = ComparedRung(
    steps=4,
    h=0.25,
    old=side(0.025542, 0.000012),
    new=side(0.014435, 0.000003),
    ratio=0.56513,
    low=0.56491,
    high=0.56534,
)
LOST = ComparedRung(
    steps=16,
    h=0.0625,
    old=side(None, None),
    new=side(-0.003822, None),
    ratio=None,
    low=None,
    high=None,
)


def test_a_row_of_a_comparison_holds_both_errors_and_their_ratio():
    table = comparison_table(comparison(KNOWN))
    assert table.headings == ("steps", "euler-maruyama", "milstein", "ratio of sizes")
    assert table.rows == [
        ("4", "0.025542 ± 0.000012", "0.014435 ± 0.000003", "0.56513 (0.56491 to 0.56534)")
    ]


def test_a_rung_that_is_not_known_of_both_has_no_ratio():
    table = comparison_table(comparison(KNOWN, LOST))
    assert table.rows[1] == ("16", "none", "-0.003822", "")


def test_a_ratio_that_has_no_upper_bound_says_any():
    rung = ComparedRung(
        steps=4, h=0.25, old=side(0.1, 0.2), new=side(0.2, 0.1), ratio=2.0, low=0.5, high=None
    )
    assert comparison_table(comparison(rung)).rows[0][3] == "2.000 (0.500 to any)"


def test_a_ratio_far_below_1_is_shown_with_its_digits():
    rung = ComparedRung(
        steps=4,
        h=0.25,
        old=side(0.1, 1e-9),
        new=side(3.1e-8, 1e-10),
        ratio=3.1e-7,
        low=3.09e-7,
        high=3.11e-7,
    )
    shown = comparison_table(comparison(rung)).rows[0][3]
    assert abs(float(shown.split()[0]) - 3.1e-7) <= as_printed("3.1e-7")


@pytest.mark.parametrize(
    ("changes", "title"),
    [
        ({}, "gbm, strong, propagated"),
        ({"kind": "weak", "functional": "cos"}, "gbm, weak, cos, propagated"),
        ({"route": "sampled"}, "gbm, strong, sampled"),
    ],
    ids=["strong", "weak", "sampled"],
)
def test_the_title_of_a_comparison_names_problem_error_and_route(changes, title):
    assert comparison_table(comparison(KNOWN, **changes)).title == title


def test_every_row_has_a_cell_for_every_heading():
    for table in (advice_table([advice(), Advice(**NONE)]), comparison_table(comparison(KNOWN))):
        assert {len(row) for row in table.rows} == {len(table.headings)}
        assert max(table.numeric) < len(table.headings)
