"""Tolerances, each derived from round-off, a stated uncertainty, or a false-alarm probability."""

from decimal import Decimal

import numpy as np
from scipy import stats

FALSE_ALARM = 1e-6  # of one random assertion


def round_off(scale: float, operations: int) -> float:
    """Return the worst round-off of so many operations on numbers of size `scale`."""
    return operations * float(np.finfo(float).eps) / 2 * abs(scale)


def printed(last_digit: float) -> float:
    """Return half a unit of the last digit that a source prints."""
    return last_digit / 2


def as_printed(text: str) -> float:
    """Return half a unit of the last digit of a decimal number as a source prints it."""
    return printed(10.0 ** int(Decimal(text).as_tuple().exponent))


def sampling(standard_error: float, dof: float = np.inf, false_alarm: float = FALSE_ALARM) -> float:
    """Return the distance from the truth exceeded with probability `false_alarm`."""
    return float(stats.t.isf(false_alarm / 2, dof)) * standard_error


def binomial_band(n: int, p: float, false_alarm: float = FALSE_ALARM) -> tuple[int, int]:
    """Return bounds on successes in `n` trials of probability `p`, missed with `false_alarm`."""
    low = int(stats.binom.ppf(false_alarm / 2, n, p))
    high = int(stats.binom.isf(false_alarm / 2, n, p))
    return low, high
