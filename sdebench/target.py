"""The fewest steps that keep an error below a target, from errors with so many steps."""

import math
from dataclasses import dataclass

from sdebench.refine import Estimate

PRECISION = 0.01  # of the number of steps, to which the fewest are found


@dataclass(frozen=True)
class Known:
    """The error of one criterion with so many steps: its size, its uncertainty, what it is of."""

    error: float
    uncertainty: float
    functional: str | None

    @property
    def most(self) -> float:
        """The largest size that the error may have."""
        return abs(self.error) + self.uncertainty


def known_from(name: str | None, e: Estimate) -> Known:
    """Return what an estimate says: of a weak error, or else of the root of a mean square."""
    if name is not None:
        return Known(e.value, e.uncertainty, name)
    root = math.sqrt(max(e.value, 0.0))
    return Known(root, math.sqrt(max(e.value, 0.0) + e.uncertainty) - root, None)


def first_below(known: dict[int, Known], target: float) -> int | None:
    """Return the fewest steps from which on every rung's error is below the target."""
    enough = None
    for steps in sorted(known, reverse=True):
        if known[steps].most > target:
            break
        enough = steps
    return enough


def power_law(low: int, low_known: Known, high: int, high_known: Known, target: float) -> int:
    """Return the fewest steps from `low` to `high` whose error a power law puts at the target."""
    slope = math.log(low_known.most / high_known.most) / math.log(high / low)
    share = math.log(low_known.most / target) / slope
    return min(max(math.ceil(low * math.exp(share)), low), high)


def between(low: int, low_known: Known | None, high: int, high_known: Known, target: float) -> int:
    """Return a number of steps strictly between two, to try next.

    Beside where a power law meets the target, on the side of the end that is farther off, so that
    the bracket closes from both sides.
    """
    guess = (low + high) // 2
    if low_known is not None and low > 0 and high_known.most < low_known.most:
        guess = power_law(low, low_known, high, high_known, target)
        nudge = max(1, round(PRECISION * guess / 2))
        guess += nudge if high - guess > guess - low else -nudge
    return min(max(guess, low + 1), high - 1)
