"""Numbers as people read them: cut where the uncertainty begins."""

import math
from decimal import Decimal

MOST_DIGITS = 8  # after the point, before a power of ten is split off


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
    if 1e-4 <= size < 1e6 and -place <= MOST_DIGITS:
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
    """Return '0.531 (0.515 to 0.546)', 'exact', or '' where there is no order.

    Two digits of the smaller half-width, three to five after the point; the value alone where its
    bounds round to it.

    >>> interval(0.50021, 0.500208, 0.500212, False)
    '0.50021'
    """
    if exact:
        return "exact"
    if value is None:
        return ""
    widths = [abs(value - end) for end in (low, high) if end is not None and end != value]
    digits = min(max(1 - math.floor(math.log10(min(widths))), 3), 5) if widths else 3
    below = "any" if low is None else f"{low:.{digits}f}"
    above = "any" if high is None else f"{high:.{digits}f}"
    shown = f"{value:.{digits}f}"
    return shown if below == above == shown else f"{shown} ({below} to {above})"


def microseconds(seconds: float | None) -> str:
    """Return a time in microseconds to two digits, or '' for none.

    >>> microseconds(2.74e-05)
    '27 µs'
    """
    return "" if seconds is None else f"{_two_digits(seconds * 1e6)} µs"


def _two_digits(value: float) -> str:
    rounded = float(f"{value:.1e}")
    place = 1 - math.floor(math.log10(abs(rounded))) if rounded else 0
    return f"{rounded:.{max(place, 0)}f}"


def ratio(value: float | None, low: float | None, high: float | None) -> str:
    """Return a ratio as `interval` does, with significant digits where it is far from 1.

    >>> ratio(3.1e-7, 3.09e-7, 3.11e-7)
    '3.1e-07 (3.09e-07 to 3.11e-07)'
    """
    if value is None or 0.01 <= value < 1000:
        return interval(value, low, high, exact=False)
    below, above = ("any" if end is None else f"{end:.3g}" for end in (low, high))
    return f"{value:.3g} ({below} to {above})"


def claimed(value: float | None) -> str:
    """Return a claimed order, or '' for none."""
    return "" if value is None else f"{value:g}"
