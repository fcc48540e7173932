"""The rungs of the evidence file: each step size with its error, from what a route found."""

import numpy as np

from sdebench.assess import Assessment, Levels, parts
from sdebench.evidence import Rung, finite
from sdebench.integrator import Claim
from sdebench.onestep import OneStep
from sdebench.orders import local_order, student_quantile
from sdebench.pair import Pair
from sdebench.sde import Array

PART_DIGITS = 8  # of the means of parts: far below any change that matters


def local_rungs(one_step: OneStep, claim: Claim) -> list[Rung]:
    """The local errors on the problem's own parameters, at the state where they are largest."""
    e = one_step.expansion
    local = e.root_mean_square if claim.kind == "strong" else e.mean_error
    state = int(np.argmax(np.abs(local[-1])))
    horizon = e.setting.problem.horizon
    return [
        Rung(
            steps=round(horizon / float(h)),
            h=float(h),
            error=finite(float(local[i, state])),
            uncertainty=float(e.floors[i, state]),
        )
        for i, h in enumerate(e.h)
    ]


def measured_rungs(pair: Pair, a: Assessment, levels: Levels, check: bool) -> list[Rung]:
    """Return the rungs of a row; a check keeps no parts of its sample."""
    errors = a.errors
    sampled = a.route == "sampled"
    marginal = student_quantile(1 - levels.confidence, errors.dof) if sampled else 1.0
    values, widths = errors.values, errors.half_widths(marginal)
    absolute, absolute_widths = _mean_absolute(pair, a, levels)
    lost = pair.sample.tally.non_finite if sampled and pair.sample.tally is not None else None
    counting = a.order.counting if a.order is not None else ()
    horizon = pair.plan.problem.horizon
    parted = parts(pair.sample, a.row) if sampled and not check else None
    rungs = []
    for r, steps in enumerate(errors.steps):
        rungs.append(
            Rung(
                steps=steps,
                h=horizon / steps,
                error=finite(float(values[r])),
                uncertainty=finite(float(widths[r])),
                counts=r in counting,
                mean_absolute=None if absolute is None else finite(float(absolute[r])),
                mean_absolute_uncertainty=(
                    None if absolute_widths is None else finite(float(absolute_widths[r]))
                ),
                local_order=_local_order(a, r),
                largest_share=None if a.shares is None else finite(float(a.shares[r])),
                non_finite=0 if lost is None else int(lost[r]),
                dropped=a.dropped[r] if a.dropped else None,
                parts=_kept(parted[r]) if parted is not None else [],
            )
        )
    return rungs


def _kept(parted: Array) -> list[float]:
    """Return the parts of a rung to the digits that pair it with another run, or none."""
    if not np.all(np.isfinite(parted)):
        return []
    return [float(f"{value:.{PART_DIGITS}g}") for value in parted]


def _mean_absolute(pair: Pair, a: Assessment, levels: Levels) -> tuple[Array | None, Array | None]:
    if a.row.at != "horizon" or a.route != "sampled":
        return None, None
    assert pair.sample.tally is not None
    estimate = pair.sample.tally.moments.estimate(list(pair.plan.rows.absolute))
    quantile = student_quantile(1 - levels.confidence, estimate.dof)
    return estimate.means, quantile * np.sqrt(np.diag(estimate.covariance))


def _local_order(a: Assessment, rung: int) -> float | None:
    """The local order between a rung and the one before it, if both count."""
    if a.order is None or rung == 0:
        return None
    if rung not in a.order.counting or rung - 1 not in a.order.counting:
        return None
    return finite(local_order(a.errors, rung - 1, rung, a.quantile).estimate)
