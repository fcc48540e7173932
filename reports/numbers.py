"""Numbers as people read them: cut where the uncertainty begins."""

import math
from decimal import Decimal


def with_uncertainty(value: float | None, half_width: float | None) -> str:
    """Return '0.00321 ± 0.00004': two digits of the half-width if it starts with 1, else one.

    >>> with_uncertainty(0.0032148, 0.000041)
    '0.00321 ± 0.00004'
    >>> with_uncertainty(1234.5, 17.0)
    '1234 ± 17'
    """
    if value is None:
        return "none"
    if not half_width or not math.isfinite(half_width):
        return f"{value:.6g}"
    place = math.floor(math.log10(half_width))
    if Decimal(half_width).scaleb(-place) < Decimal("1.95"):
        place -= 1
    size = max(abs(value), half_width)
    if 1e-4 <= size < 1e6:
        digits = max(-place, 0)
        return f"{value:.{digits}f} ± {half_width:.{digits}f}"
    exponent = math.floor(math.log10(size))
    digits = max(exponent - place, 0)
    scaled, spread = (Decimal(x).scaleb(-exponent) for x in (value, half_width))
    return f"({scaled:.{digits}f} ± {spread:.{digits}f})e{exponent:+03d}"


def order(value: float | None) -> str:
    """Return an order as '0.531', or 'none'."""
    return "none" if value is None else f"{value:.3f}"


def interval(value: float | None, low: float | None, high: float | None, exact: bool) -> str:
    """Return '0.531 (0.515 to 0.546)', 'exact', or '' where there is no order."""
    if exact:
        return "exact"
    if value is None:
        return ""
    width = (
        min(abs(value - end) for end in (low, high) if end is not None)
        if (low is not None or high is not None)
        else 0.0
    )
    digits = 3 if width >= 0.001 or width == 0 else 4
    below = "any" if low is None else f"{low:.{digits}f}"
    above = "any" if high is None else f"{high:.{digits}f}"
    return f"{value:.{digits}f} ({below} to {above})"


def claimed(value: float | None) -> str:
    """Return a claimed order, or '' for none."""
    return "" if value is None else f"{value:g}"
