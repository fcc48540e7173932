"""Step-size advice and comparisons as tables."""

from collections.abc import Sequence

from sdebench.reports import numbers
from sdebench.reports.tables import Table

from sdebench.advise import Advice
from sdebench.compare import Comparison


def advice_table(advice: Sequence[Advice]) -> Table:
    """Return one row a scheme, the cheapest first: the step, its error, and what a path costs."""
    rows = [
        (
            each.scheme,
            "none" if each.steps is None else str(each.steps),
            "" if each.h is None else f"{each.h:.4g}",
            "" if each.error is None else numbers.with_uncertainty(each.error, each.uncertainty),
            each.functional or "",
            numbers.microseconds(each.seconds_per_path),
            each.how or "",
        )
        for each in advice
    ]
    first = advice[0]
    title = f"{first.kind} error below {first.target:g} on {first.problem}: the fewest steps"
    headings = ("scheme", "steps", "h", "error", "of", "a path takes", "how known")
    return Table(title, headings, rows, frozenset({1, 2, 3, 5}))


def comparison_table(comparison: Comparison) -> Table:
    """Return one row a rung: both errors and the ratio of their sizes."""
    c = comparison
    rows = [
        (
            str(rung.steps),
            numbers.with_uncertainty(rung.old.error, rung.old.uncertainty),
            numbers.with_uncertainty(rung.new.error, rung.new.uncertainty),
            numbers.ratio(rung.ratio, rung.low, rung.high),
        )
        for rung in c.rungs
    ]
    what = f"{c.kind}, {c.functional}" if c.functional else c.kind
    title = f"{c.problem}, {what}, {c.route}"
    headings = ("steps", c.old, c.new, "ratio of sizes")
    return Table(title, headings, rows, frozenset({0, 1, 2, 3}))
