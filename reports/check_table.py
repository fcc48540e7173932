"""A sample beside the propagated errors that were held against it."""

from collections.abc import Sequence

from sdebench.reports import numbers
from sdebench.reports.tables import Table, error_of

from sdebench.evidence import Result, Rung


def check_table(checks: Sequence[Result], measured: Sequence[Result]) -> Table:
    """Return one row a sampled rung: both errors, and by how many half-widths they differ."""
    propagated = {
        (row.kind, row.functional, row.at, rung.steps): rung.error
        for row in measured
        for rung in row.rungs
    }
    body = []
    for row in checks:
        for rung in row.rungs:
            if rung.error is None:
                body.append((error_of(row), str(rung.steps), "NaN or infinity", "", "", ""))
                continue
            other = propagated.get((row.kind, row.functional, row.at, rung.steps))
            beside = ("", "") if other is None else _beside(rung, rung.error - other, other)
            shown = numbers.apart(rung.error, rung.uncertainty, power=False)
            body.append((error_of(row), str(rung.steps), *shown, *beside))
    headings = ("of", "steps", "sampled", "half-width", "propagated", "difference / half-width")
    return Table("Sample beside the propagated errors", headings, body, frozenset({1, 2, 3, 4, 5}))


def _beside(rung: Rung, difference: float, other: float) -> tuple[str, str]:
    """Return an error to as many digits as a sampled rung has, and how far they are apart."""
    shown, _ = numbers.apart(other, rung.uncertainty, power=False)
    return shown, f"{difference / rung.uncertainty:.2f}" if rung.uncertainty else ""
