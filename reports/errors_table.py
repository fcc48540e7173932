"""The errors of rows that belong together as one table."""

from collections.abc import Sequence

from sdebench.reports import numbers
from sdebench.reports.tables import Table

from sdebench.evidence import Result, Rung


def errors_table(title: str, rows: Sequence[Result]) -> Table:
    """Return one row a rung: steps, h, error, uncertainty, local order, route."""
    several = len({_what(row) for row in rows}) > 1
    known = [(rung.error, rung.uncertainty) for row in rows for rung in row.rungs]
    power = any(e is not None and numbers.needs_power(e, width) for e, width in known)
    body: list[tuple[str, ...]] = []
    for row in rows:
        for rung in row.rungs:
            cells = (
                str(rung.steps),
                f"{rung.h:.6g}",
                *_error(rung, power),
                "" if rung.local_order is None else numbers.order(rung.local_order),
                row.route or "",
                "yes" if rung.counts else "no",
            )
            body.append((_what(row), *cells) if several else cells)
    headings: tuple[str, ...] = (
        "steps",
        "h",
        "error",
        "uncertainty",
        "local order",
        "route",
        "counts",
    )
    numeric = {0, 1, 2, 3, 4}
    if several:
        headings, numeric = ("of", *headings), {n + 1 for n in numeric}
    return Table(title, headings, body, frozenset(numeric))


def _what(row: Result) -> str:
    return row.functional or ("largest on the grid" if row.at == "grid" else "end point")


def _error(rung: Rung, power: bool) -> tuple[str, str]:
    """Return the error and its uncertainty, or why there is none."""
    if rung.error is None:
        return rung.dropped or "NaN or infinity", ""
    return numbers.apart(rung.error, rung.uncertainty, power)
