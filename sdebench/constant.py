"""The error constant: C in error ~ C h^p as h → 0, from the finest rungs of a ladder."""

from itertools import pairwise

from sdebench.evidence import ErrorConstant
from sdebench.orders import Errors, Interval, Order, distance

ROUNDED_TO = 0.5  # orders of published schemes are multiples of this
NEAR = 0.1  # an extrapolated order this near to such a multiple is taken for it


def settled_constant(
    errors: Errors, order: Order | None, horizon: float, quantile: float
) -> ErrorConstant | None:
    """Return the constant of errors whose order settles at a multiple of one half, else None."""
    p = limiting_order(order) if order is not None else None
    if order is None or p is None:
        return None
    c = error_constant(errors, order, p, horizon, quantile)
    if c is None:
        return None
    return ErrorConstant(order=p, value=c.estimate, low=c.low, high=c.high)


def limiting_order(order: Order) -> float | None:
    """Return the multiple of one half that an order settles at, or None if it settles at none."""
    estimate = order.trend.extrapolated.estimate if order.trend else order.local.estimate
    nearest = round(estimate / ROUNDED_TO) * ROUNDED_TO
    return nearest if abs(estimate - nearest) <= NEAR and nearest > 0 else None


def error_constant(
    errors: Errors, order: Order, p: float, horizon: float, quantile: float
) -> Interval | None:
    """Return C with bounds, for errors that behave as C h^p (1 + c h + …) on counting rungs.

    The measure over h^p is extrapolated linearly to h = 0 from the two finest counting rungs
    (Richardson 1911). The bounds add `quantile` spreads of the errors and how far the
    extrapolation moves against the pair of rungs before; None with fewer than three rungs.
    """
    index = order.counting[-3:]
    if len(index) < 3:
        return None
    growth = [(errors.steps[r] / horizon) ** (p * errors.power) for r in index]
    scaled = [abs(float(errors.measures[r])) * g for r, g in zip(index, growth, strict=True)]
    spreads = [
        quantile * float(errors.standard_errors[r]) * g for r, g in zip(index, growth, strict=True)
    ]
    factors = [2.0 ** distance(errors, a, b) for a, b in pairwise(index)]
    before, value = (
        (f * fine - coarse) / (f - 1)
        for f, (coarse, fine) in zip(factors, pairwise(scaled), strict=True)
    )
    doubt = (factors[1] * spreads[2] + spreads[1]) / (factors[1] - 1) + abs(value - before)
    low, high = (max(v, 0.0) ** (1.0 / errors.power) for v in (value - doubt, value + doubt))
    return Interval(max(value, 0.0) ** (1.0 / errors.power), low, high)
