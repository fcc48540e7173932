"""What the errors of a scheme on a problem come to: orders, constants, and what would be seen."""

from collections.abc import Sequence

from sdebench.reports import numbers
from sdebench.reports.tables import Table, error_of

from sdebench.evidence import ErrorConstant, Result


def orders_table(rows: Sequence[Result]) -> Table:
    """Return one row a kind of error: its order, where that leads, and the error constant.

    The constant is C in error ~ C h^p as h → 0; a plateau is the smallest error that would not
    shrink with h and would have been seen.
    """
    body = [
        (
            error_of(row),
            numbers.claimed(row.claimed),
            numbers.measured_order(row.order, row.low, row.high, row.exact),
            "" if row.extrapolated is None else numbers.order(row.extrapolated),
            _constant(row.error_constant),
            "" if row.detection_limit is None else f"{row.detection_limit.plateau:.1e}",
        )
        for row in rows
    ]
    headings = (
        *("of", "claimed", "local order, finest pair", "order as h → 0"),
        *("error constant", "least plateau seen"),
    )
    return Table("Orders and error constants", headings, body, frozenset({1, 2, 3, 4, 5}))


def _constant(found: ErrorConstant | None) -> str:
    if found is None:
        return ""
    width = max(found.high - found.value, found.value - found.low)
    return f"{numbers.with_uncertainty(found.value, width)} · {_power(found.order)}"


def _power(order: float) -> str:
    """Return h to a power as it is written by hand."""
    if order in (0.5, 1.0):
        return "h" if order == 1.0 else "√h"
    return f"h{numbers.superscript(int(order))}" if order == int(order) else f"h^{order:g}"
