"""Numbers as people read them: cut where the uncertainty begins."""

import math
import re
from decimal import Decimal

MOST_DIGITS = 8  # after the point, before a power of ten is split off
SUPERSCRIPTS = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")


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
    place = _last_place(half_width)
    size = max(abs(value), half_width)
    if not needs_power(value, half_width):
        digits = max(-place, 0)
        return f"{value:.{digits}f} ± {half_width:.{digits}f}"
    exponent = math.floor(math.log10(size))
    digits = max(exponent - place, 0)
    scaled, spread = (Decimal(x).scaleb(-exponent) for x in (value, half_width))
    return f"({scaled:.{digits}f} ± {spread:.{digits}f})e{exponent:+03d}"


def needs_power(value: float, half_width: float | None) -> bool:
    """Return whether a value is too small, too large or too well known to write it without one."""
    if not half_width or not math.isfinite(half_width):
        return False
    size = max(abs(value), half_width)
    return not (1e-4 <= size < 1e6 and -_last_place(half_width) <= MOST_DIGITS)


def apart(value: float, half_width: float | None, power: bool) -> tuple[str, str]:
    """Return a value cut as `with_uncertainty` does it, and its uncertainty to as many digits.

    With a `power` of ten or without, so that a column can keep to one notation; a value that is
    lost in its uncertainty is '0'.

    >>> apart(3.2148e-3, 4.1e-7, power=True)
    ('3.2148e-03', '4e-07')
    >>> apart(3.2148e-3, 4.1e-5, power=False)
    ('0.00321', '4e-05')
    """
    if not half_width or not math.isfinite(half_width):
        return f"{value:.6g}", ""
    place = _last_place(half_width)
    uncertainty = f"{half_width:.{math.floor(math.log10(half_width)) - place}e}"
    if round(Decimal(value).scaleb(-place)) == 0:
        return "0", uncertainty
    digits = math.floor(math.log10(abs(value))) - place if power else -place
    return f"{value:.{max(digits, 0)}{'e' if power else 'f'}}", uncertainty


def _last_place(half_width: float) -> int:
    """Return the power of ten of the last digit: the first of a half-width, the second of a 1."""
    place = math.floor(math.log10(half_width))
    return place - 1 if Decimal(half_width).scaleb(-place) < Decimal("1.95") else place


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


def superscript(exponent: int) -> str:
    """Return a whole number in superscript digits.

    >>> superscript(-12)
    '⁻¹²'
    """
    return str(exponent).translate(SUPERSCRIPTS)


def typeset(text: str) -> str:
    """Return numbers in a text with real minus signs and powers of ten.

    >>> typeset("(-3.21 ± 0.04)e-05")
    '(−3.21 ± 0.04) × 10⁻⁵'
    >>> typeset("dw² - h at t=-1, euler-maruyama")
    'dw² − h at t=−1, euler-maruyama'
    """
    powers = re.sub(r"(?<=[\d)])e([+-]\d+)", lambda m: f" × 10{superscript(int(m[1]))}", text)
    return re.sub(r"(?<![\w.])-(?=\d)|(?<=\s)-(?=\s)", "−", powers)


def measured_order(value: float | None, low: float | None, high: float | None, exact: bool) -> str:
    """Return an order as '0.500 ± 0.002', three to four digits after the point.

    The half-width is the larger of the two; a bound that is missing is said.

    >>> measured_order(0.50021, 0.4984, 0.5013, False)
    '0.500 ± 0.002'
    >>> measured_order(1.5, 1.4, None, False)
    '1.500, at least 1.400'
    """
    if exact:
        return "exact"
    if value is None:
        return ""
    if high is None or low is None:
        end = "" if low is None else f", at least {low:.3f}"
        return f"{order(value)}{end}"
    width = max(value - low, high - value, 0.0)
    digits = min(max(-math.floor(math.log10(width)), 3), 4) if width > 0 else 4
    shown = f"{value:.{digits}f}"
    rounded = f"{math.ceil(width * 10**digits) / 10**digits:.{digits}f}"
    return f"{shown} ± {rounded}" if width >= 0.5 * 10**-digits else shown
