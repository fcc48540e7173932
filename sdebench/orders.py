"""From errors on rungs to orders of convergence with intervals.

Everything here works on *measures* m_r: signed weak errors (power 1) or mean squares (power 2),
so that the error on rung r is |m_r|^(1/power), with the covariance between rungs. The local order
between rungs c (coarse) and f (fine), k octaves apart, is log2(|m_c| / |m_f|) / (power k).
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from sdebench.sde import Array


@dataclass(frozen=True)
class Errors:
    """Measures on the rungs of a ladder, coarsest first.

    `measures` has shape `(rungs,)`, `covariance` `(rungs, rungs)` with `dof` degrees of freedom;
    `floors` are measures below which round-off hides the error; `octaves` are the distances
    between neighbouring rungs.
    """

    steps: tuple[int, ...]
    octaves: tuple[float, ...]
    measures: Array
    covariance: Array
    dof: int
    power: int
    floors: Array

    @property
    def values(self) -> Array:
        """The errors themselves: signed for a weak error, a root mean square for a strong one."""
        if self.power == 1:
            return self.measures
        return np.sqrt(np.maximum(self.measures, 0.0))

    @property
    def standard_errors(self) -> Array:
        """Standard errors of the measures."""
        return np.sqrt(np.maximum(np.diag(self.covariance), 0.0))

    def half_widths(self, quantile: float) -> Array:
        """Return half-widths of the intervals of `values`, for a quantile of Student's t."""
        spread = quantile * self.standard_errors
        if self.power == 1:
            return spread
        upper = np.sqrt(np.maximum(self.measures + spread, 0.0))
        lower = np.sqrt(np.maximum(self.measures - spread, 0.0))
        return (upper - lower) / 2

    def resolved(self, quantile: float) -> NDArray[np.bool_]:
        """Return which rungs' intervals exclude zero."""
        return np.abs(self.measures) > quantile * self.standard_errors


def student_quantile(alpha: float, dof: int) -> float:
    """Return the two-sided quantile of Student's t: |T| exceeds it with probability `alpha`."""
    from scipy.special import stdtrit

    return float(-stdtrit(dof, alpha / 2))


@dataclass(frozen=True)
class Interval:
    """An estimate with the interval that holds it; `high` may be infinite."""

    estimate: float
    low: float
    high: float


@dataclass(frozen=True)
class Trend:
    """Where the last two local orders lead, q_before and then q.

    `curbed` is where a falling order would lead, min(q, q - 2.4 (q_before - q)); `lifted` where a
    rising one would, max(q, q + 4 (q - q_before)); `extrapolated` is where an error C h^p (1 + c h)
    leads, which is 2 q - q_before on rungs that halve the step; `moved` is q - q_before.
    """

    curbed: Interval
    lifted: Interval
    extrapolated: Interval
    moved: Interval


@dataclass(frozen=True)
class Order:
    """What the counting rungs say of the order.

    `counting` are the rungs that count, `local` is the local order at the finest pair of them, and
    `trend` says where it leads, if three of them count. `outlier` is a rung whose error stands
    out from those about it, with the factor by which it does.
    """

    counting: tuple[int, ...]
    local: Interval
    trend: Trend | None
    outlier: tuple[int, float] | None = None


# How far a falling and a rising local order are continued. A distance to the limit that shrinks
# like h^r leaves 1/(2^r - 1) times the last move: 2.4 for r = 1/2, and 4 for r = 0.32.
CURB = 2.4
LIFT = 4.0


def counting_rungs(errors: Errors, quantile: float) -> list[int]:
    """Return the rungs that count: above round-off, and after the last change of sign.

    An unresolved rung among or after the last ones of one sign counts (it still bounds); one
    between two resolved rungs of opposite sign does not, since it may have either.
    """
    above = np.abs(errors.measures) > errors.floors
    resolved = errors.resolved(quantile) & above
    usable = [r for r in range(len(errors.steps)) if above[r] and np.isfinite(errors.measures[r])]
    signs = [(r, errors.measures[r] > 0) for r in usable if resolved[r]]
    if not signs:
        return usable
    last = signs[-1][1]
    opposite = [r for r, sign in signs if sign != last]
    if not opposite:
        return usable
    first = min(r for r, sign in signs if r > opposite[-1])
    return [r for r in usable if r >= first]


def observed_order(errors: Errors, counting: Sequence[int], quantile: float) -> Order | None:
    """Return the order seen on the counting rungs, or None with fewer than two of them.

    `quantile` is of Student's t for the simultaneous level.
    """
    if len(counting) < 2:
        return None
    *earlier, coarse, fine = counting
    local = local_order(errors, coarse, fine, quantile)
    if not earlier:
        return Order(tuple(counting), local, None)
    before = local_order(errors, earlier[-1], coarse, quantile)
    triple = (earlier[-1], coarse, fine)
    orders = (before, local)
    falling = combined(errors, triple, (-CURB, 1 + CURB), quantile, orders)
    rising = combined(errors, triple, (-LIFT, 1 + LIFT), quantile, orders)
    trend = Trend(
        curbed=Interval(*map(min, _ends(falling), _ends(local))),
        lifted=Interval(*map(max, _ends(rising), _ends(local))),
        extrapolated=combined(errors, triple, _to_the_limit(errors, triple), quantile, orders),
        moved=combined(errors, triple, (-1.0, 1.0), quantile, orders),
    )
    return Order(tuple(counting), local, trend, _outlier(errors, counting, quantile))


def _to_the_limit(errors: Errors, triple: tuple[int, int, int]) -> tuple[float, float]:
    """Return the weights of q_before and q for the order as h → 0 (Richardson 1911).

    The local order over k octaves whose finer step is h is off by c h (2^k - 1) / (k log 2), to
    first order: the weights are those that cancel it.
    """
    before, last = distance(errors, *triple[:2]), distance(errors, *triple[1:])
    ratio = 2.0**last * ((2.0**before - 1) / before) / ((2.0**last - 1) / last)
    return -1 / (ratio - 1), ratio / (ratio - 1)


OUTSTANDING = 1.0  # orders by which the local order falls to an outlier; it rises by half as many


def _outlier(errors: Errors, counting: Sequence[int], quantile: float) -> tuple[int, float] | None:
    """Return the rung whose error stands out, with the factor by which it does.

    Errors shrink up to there; the local order falls by one or more to it, and after it rises above
    those before and beyond. Two terms of an error that cancel make it too small on a rung, and
    orders about that are high first, or negative.
    """
    orders = [local_order(errors, a, b, quantile) for a, b in pairwise(counting)]
    for i in range(1, len(orders) - 1):
        before, into, out = orders[i - 1 : i + 2]
        level = min(before.high, orders[min(i + 2, len(orders) - 1)].high)
        falls = before.low > 0 and before.low - into.high >= OUTSTANDING
        if falls and out.low - max(into.high, level) >= OUTSTANDING / 2:
            gap = distance(errors, counting[i], counting[i + 1])
            return counting[i + 1], 2.0 ** (gap * (before.estimate - into.estimate))
    return None


def _ends(interval: Interval) -> tuple[float, float, float]:
    return interval.estimate, interval.low, interval.high


def distance(errors: Errors, coarse: int, fine: int) -> float:
    """Return the octaves between two rungs."""
    return sum(errors.octaves[coarse:fine])


def local_order(errors: Errors, coarse: int, fine: int, quantile: float) -> Interval:
    """Return the local order between two rungs, its interval from that of their ratio."""
    scale = errors.power * distance(errors, coarse, fine)
    m = errors.measures
    low, high = ratio_interval(
        float(m[coarse]),
        float(m[fine]),
        errors.covariance[np.ix_([coarse, fine], [coarse, fine])],
        quantile,
    )
    return Interval(
        math.log2(abs(m[coarse] / m[fine])) / scale,
        math.log2(low) / scale if low > 0 else -math.inf,
        math.log2(high) / scale if high < math.inf else math.inf,
    )


def ratio_interval(
    top: float, bottom: float, covariance: Array, quantile: float
) -> tuple[float, float]:
    """Return bounds on |ratio| of two means (Fieller 1954, J. R. Stat. Soc. B 16, 175).

    The set of ρ with (top - ρ bottom)² ≤ quantile² Var(top - ρ bottom); where it is not an
    interval (the bottom may be zero) the upper bound is infinite and the lower one still holds.
    """
    q2 = quantile * quantile
    a = bottom * bottom - q2 * float(covariance[1, 1])
    b = top * bottom - q2 * float(covariance[0, 1])
    c = top * top - q2 * float(covariance[0, 0])
    root = math.sqrt(max(b * b - a * c, 0.0))
    if c <= 0:  # the top may be zero
        return 0.0, (math.inf if a <= 0 else (abs(b) + root) / a)
    # The roots are c / (b ± root): no cancellation when a is near zero.
    low = c / (abs(b) + root)
    return low, ((abs(b) + root) / a if a > 0 else math.inf)


SMALL = 0.25  # relative half-width up to which log2 of an error is taken as linear


def combined(
    errors: Errors,
    rungs: tuple[int, int, int],
    weights: tuple[float, float],
    quantile: float,
    orders: tuple[Interval, Interval],
) -> Interval:
    """Return weights · (earlier, later local order) over three rungs, with its interval.

    Where the three measures are known to 25%, by linear propagation with their covariance
    (a log2 ratio is then linear to within an eighth of its half-width); else from the ends of
    the two intervals.
    """
    estimate = sum(w * o.estimate for w, o in zip(weights, orders, strict=True))
    index = list(rungs)
    m = errors.measures[index]
    relative = quantile * errors.standard_errors[index] / np.abs(m)
    if np.all(relative <= SMALL):
        first, second = (
            w / (errors.power * distance(errors, a, b))
            for w, (a, b) in zip(weights, pairwise(rungs), strict=True)
        )
        gradient = np.array([first, second - first, -second]) / (m * math.log(2))
        variance = float(gradient @ errors.covariance[np.ix_(index, index)] @ gradient)
        spread = quantile * math.sqrt(max(variance, 0.0))
        return Interval(estimate, estimate - spread, estimate + spread)
    low = high = 0.0
    for w, order in zip(weights, orders, strict=True):
        low += w * (order.low if w > 0 else order.high)
        high += w * (order.high if w > 0 else order.low)
    return Interval(estimate, low, high)
