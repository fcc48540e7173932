"""From propagated errors to a ruling on each row, and to whether a sample agrees with them."""

import math
from collections.abc import Sequence
from itertools import pairwise

import numpy as np

from sdebench.assess import FAULT_ALARM, Assessment, Levels, Row
from sdebench.errors import BenchFault
from sdebench.ladder import round_off
from sdebench.orders import Errors, counting_rungs, observed_order, student_quantile
from sdebench.propagate import Propagated
from sdebench.refine import Estimate
from sdebench.sde import Array
from sdebench.verdict import Ruling, Verdict, judge

# Stated uncertainties are bounds, not standard errors: this ellipse about three of them holds the
# box, so that what is computed for quantiles of normal errors bounds ratios of any three rungs.
BOX = math.sqrt(3.0)
SHARP = 0.01  # relative uncertainty up to which a rung is preferred to blunter ones
ENOUGH = 3  # sharp rungs, for an order with a trend
MORE_LOOKS = 7


def assess_propagated(
    found: Propagated, row: Row, name: str | None, levels: Levels, scale: float
) -> Assessment | str:
    """Return the assessment of one row, or the sentence that says why there is none.

    `name` is that of a weak row's functional, `scale` the size of X_T.
    """
    if name is not None and name in found.why_not:
        return found.why_not[name]
    estimates = found.mean_square if name is None else found.weak[name]
    errors = _errors(found, estimates, 2 if name is None else 1, scale)
    kept = [e.dropped is None for e in estimates]
    exact = all(kept) and bool(np.all(np.abs(errors.measures) <= errors.standard_errors))
    counting = [
        r
        for r in counting_rungs(errors, BOX)
        if kept[r] and math.sqrt(abs(found.mean_square[r].value)) <= scale
    ]
    sharp = [r for r in counting if errors.standard_errors[r] <= SHARP * abs(errors.measures[r])]
    counting = sharp if len(sharp) >= ENOUGH else counting  # not those that sink into noise
    order = None if exact else observed_order(errors, counting, BOX)
    if not exact and (order is None or order.trend is None):
        reasons = [e.dropped for e in estimates if e.dropped is not None]
        return f"only {len(counting)} of {len(kept)} rungs are propagated well enough to count" + (
            f" ({reasons[-1]})" if reasons else ""
        )
    if exact:
        ruling = Ruling(Verdict.SUPPORTED, "No error above round-off on any rung.")
    else:
        ruling = judge(
            errors, order, counting, row.claim.order, levels.tolerance, look=None, unresolved=False
        )
    return Assessment(
        row=row,
        route="propagated",
        errors=errors,
        order=order,
        quantile=BOX,
        exact=exact,
        counts=True,
        trusted=True,
        ruling=ruling,
        dropped=tuple(e.dropped for e in estimates),
    )


def _errors(found: Propagated, estimates: Sequence[Estimate], power: int, scale: float) -> Errors:
    usable = [e.dropped is None for e in estimates]
    values = np.where(usable, [e.value for e in estimates], np.nan)
    doubts = np.where(usable, [e.uncertainty for e in estimates], np.inf)
    octaves = tuple(math.log2(b / a) for a, b in pairwise(found.steps))
    floors = round_off(found.steps, scale) ** power
    return Errors(found.steps, octaves, values, np.diag(doubts**2), 1, power, floors)


def n_comparisons(propagated: Assessment, sampled: Assessment) -> int:
    """Return how many rungs two routes have in common."""
    return len(_common(propagated, sampled))


def check_routes(
    what: str, propagated: Assessment, sampled: Assessment, fourth: Array | None, n_checks: int
) -> str:
    """Return in what a sample agrees with propagated errors; raise `BenchFault` where it does not.

    `what` names the row. `fourth` are the sample's means of the fourth power of the error on each
    of its rungs, over the number of paths, for a mean square; `n_checks` comparisons share the
    probability of a false alarm in a run. Student's t is no guide to how far a mean of squares
    may fall below its expectation, since the sample that misses the tail misses its spread too;
    there the bound is exp(-n t²/(2 E Y²)) for a non-negative Y (Maurer 2003, J. Inequal. Pure
    Appl. Math. 4, article 15; from memory), with twice the sample's mean of Y².
    """
    if not sampled.trusted:
        return "Not held against the propagated errors: a few paths weigh too much in it."
    if not _common(propagated, sampled):
        return "Not held against the propagated errors: they have no rung in common."
    bound = student_quantile(FAULT_ALARM / n_checks, sampled.errors.dof)
    worst = 0.0
    for own, other in _common(propagated, sampled):
        mine, theirs = propagated.errors, sampled.errors
        gap = float(theirs.measures[other] - mine.measures[own])
        allowed = bound * float(theirs.standard_errors[other])
        if fourth is not None and gap < 0:
            tail = math.sqrt(4 * math.log(n_checks / FAULT_ALARM) * float(fourth[other]))
            allowed = max(allowed, tail)
        allowed += float(mine.standard_errors[own] + mine.floors[own])
        worst = max(worst, abs(gap) / allowed)
        if abs(gap) > allowed:
            raise BenchFault(
                f"The bench contradicts itself on {what}: with {mine.steps[own]} steps the "
                f"propagated {'error' if mine.power == 1 else 'mean square'} is "
                f"{mine.measures[own]:.6g}, the sampled one {theirs.measures[other]:.6g} ± "
                f"{theirs.standard_errors[other]:.2g}. Trust no verdict of this run, and report it."
            )
    return (
        f"A check of the propagated errors, which it agrees with ({worst:.0%} of what is allowed)."
    )


def doubt(propagated: Assessment, sampled: Assessment, n_checks: int) -> Ruling | None:
    """Return why a mean square is not to be believed that an untrusted sample speaks against.

    A tail too heavy to trust makes a sample's mean square too small far more often than too large:
    one that is far above, by Student's t, or that stands out on a rung, may see what nodes do not.
    """
    if sampled.trusted:
        return None
    bound = student_quantile(FAULT_ALARM / max(n_checks, 1), sampled.errors.dof)
    mine, theirs = propagated.errors, sampled.errors
    above = [
        theirs.steps[other]
        for own, other in _common(propagated, sampled)
        if theirs.measures[other] - mine.measures[own]
        > bound * theirs.standard_errors[other] + mine.standard_errors[own] + mine.floors[own]
    ]
    if sampled.order is not None and sampled.order.outlier is not None:
        above.append(theirs.steps[sampled.order.outlier[0]])
    if not above:
        return None
    return Ruling(
        Verdict.UNDECIDED,
        f"With {above[0]} steps sampled errors are far larger than propagated ones, on a few "
        "paths: the step may do something else on rare paths or at that step size. Look at it "
        f"there, or sample more (--route sampled --looks {MORE_LOOKS}).",
    )


def _common(propagated: Assessment, sampled: Assessment) -> list[tuple[int, int]]:
    """Return the rungs of both that have the same number of steps and were not dropped."""
    places = {steps: r for r, steps in enumerate(sampled.errors.steps)}
    return [
        (r, places[steps])
        for r, steps in enumerate(propagated.errors.steps)
        if steps in places and propagated.dropped[r] is None
    ]
