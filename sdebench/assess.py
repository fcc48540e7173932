"""From a sample to a ruling on each measured row: errors, trust, order, verdict."""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np

from sdebench.constant import settled_constant
from sdebench.errors import BadFunctional, BenchFault
from sdebench.evidence import ErrorConstant, finite
from sdebench.integrator import Claim
from sdebench.ladder import ROUND_OFF, round_off
from sdebench.orders import (
    Errors,
    Order,
    counting_rungs,
    observed_order,
    student_quantile,
)
from sdebench.sample import Sample, Tally
from sdebench.sde import Array
from sdebench.verdict import Ruling, Verdict, finer, judge

# The largest share of one path in the sum of squares with which an interval is trusted. A choice,
# put where coverage begins to fall: on geometric Brownian motion with rising volatility, 150 seeds
# each (±2%), nominal 95% intervals covered 90 to 100% with median shares below 0.1, 85 to 95% from
# 0.1 to 0.2, and 81 to 93% above.
TRUSTED_SHARE = 0.1

# Probability that a run calls a sound flow and law inconsistent.
FAULT_ALARM = 1e-6


@dataclass(frozen=True)
class Levels:
    """Confidence and tolerance, and how the confidence is shared among rows and looks."""

    confidence: float
    tolerance: float
    n_rows: int

    def simultaneous(self, look: int) -> float:
        """Return the error probability of one row at one look; over all of them it sums to 1 - C.

        Look k spends 1/(k(k+1)) of it, so that the shares add up to one without a last look.
        """
        return (1 - self.confidence) / (max(self.n_rows, 1) * look * (look + 1))


@dataclass(frozen=True)
class Row:
    """A measured row: the claim it bears on and, if weak, its functional; else where it looks."""

    claim: Claim
    functional: int | None = None
    at: Literal["horizon", "grid"] | None = None


@dataclass(frozen=True)
class Assessment:
    """What one route says of one row.

    `counts` is false for a functional with fewer than two resolved rungs. Of a sample, `shares`
    are the largest path's part in the sum of squares, a rung; of propagation, `dropped` says why
    a rung was, or None.
    """

    row: Row
    route: Literal["sampled", "propagated"]
    errors: Errors
    order: Order | None
    quantile: float
    exact: bool
    counts: bool
    trusted: bool
    ruling: Ruling
    shares: Array | None = None
    dropped: tuple[str | None, ...] = ()

    def constant(self, horizon: float) -> ErrorConstant | None:
        """Return the error constant, where the errors are trusted and settle at an order."""
        if not self.trusted:
            return None
        return settled_constant(self.errors, self.order, horizon, self.quantile)

    @property
    def bounds(self) -> tuple[float | None, float | None, float | None]:
        """The local order at the finest counting pair, its lower and its upper bound."""
        if self.order is None:
            return None, None, None
        local = self.order.local
        return local.estimate, finite(local.low), finite(local.high)


def assess(sample: Sample, row: Row, levels: Levels, look: int, scale: float) -> Assessment:
    """Return the assessment of one row after `look` looks; `scale` is the size of X_T."""
    assert sample.tally is not None
    tally, rows = sample.tally, sample.plan.rows
    errors = measured(sample, row, scale)
    quantile = student_quantile(levels.simultaneous(look), errors.dof)
    index = np.asarray(_rows(sample, row))
    with np.errstate(all="ignore"):
        shares = np.nan_to_num(tally.largest[index] / tally.squares[index])
    size = np.sqrt(np.abs(tally.moments.mean[list(rows.squares)]))
    exact = bool(np.all(size <= round_off(sample.plan.ladder.steps, scale)))
    # An error as large as the solution is that of an unstable step size, and no convergence.
    counting = [r for r in counting_rungs(errors, quantile) if size[r] <= scale]
    order = None if exact else observed_order(errors, counting, quantile)
    trusted = exact or bool(np.all(shares <= TRUSTED_SHARE))
    n_resolved = int(np.sum(errors.resolved(quantile)))
    ruling = (
        _overflow(sample, tally, row, errors, size, scale)
        or _exact(exact)
        or _distrust(trusted, shares, errors)
        or judge(
            errors,
            order,
            counting,
            row.claim.order,
            levels.tolerance,
            look,
            n_resolved < len(errors.steps),
        )
    )
    counts = exact or n_resolved >= 2 or ruling.verdict is Verdict.REFUTED
    return Assessment(
        row, "sampled", errors, order, quantile, exact, counts, trusted, ruling, shares
    )


def measured(sample: Sample, row: Row, scale: float) -> Errors:
    """Return the errors of a row with their covariance between rungs.

    Weak errors are adjusted by the sample's control rows; mean squares are taken as they are.
    """
    assert sample.tally is not None
    moments, ladder = sample.tally.moments, sample.plan.ladder
    floors = round_off(sample.plan.ladder.steps, scale)
    if row.functional is None:
        estimate, power = moments.estimate(_rows(sample, row)), 2
    else:
        controls = sample.plan.rows.controls
        estimate, power = moments.adjusted(_rows(sample, row), controls), 1
    return Errors(
        ladder.steps,
        ladder.octaves,
        estimate.means,
        estimate.covariance,
        estimate.dof,
        power,
        floors**power,
    )


def parts(sample: Sample, row: Row) -> Array:
    """Return what the equal parts of a sample give for the measures of a row, `(rungs, PARTS)`.

    Weak errors are adjusted as in `measured`: the mean over the parts is the measure itself.
    """
    assert sample.tally is not None
    tally, index = sample.tally, _rows(sample, row)
    means = tally.parts / sample.n_blocks
    if row.functional is None:
        return means[index]
    controls = list(sample.plan.rows.controls)
    slopes = tally.moments.slopes(index, controls)
    return means[index] - slopes.T @ means[controls]


def check_references(
    sample: Sample, references: Sequence[tuple[float, float]], n_checks: int
) -> None:
    """Hold the sample's mean of each f(X_T) against the exact law; raise `BenchFault` on a miss.

    `references` are E f(X_T) and its numerical uncertainty for each functional of the plan.
    `n_checks` is their number in the run, which shares the probability of a false alarm. Rows
    whose tail is not to be trusted are not compared.
    """
    assert sample.tally is not None
    plan, tally = sample.plan, sample.tally
    for index, functional, (exact, doubt) in zip(
        plan.rows.reference, plan.functionals, references, strict=True
    ):
        estimate = tally.moments.adjusted([index], list(plan.rows.controls))
        bound = student_quantile(FAULT_ALARM / n_checks, estimate.dof)
        error = math.sqrt(max(float(estimate.covariance[0, 0]), 0.0))
        allowed = bound * error + doubt + ROUND_OFF * abs(exact)
        share = tally.largest[index] / tally.squares[index] if tally.squares[index] else 0.0
        if share <= TRUSTED_SHARE and abs(estimate.means[0] - exact) > allowed:
            raise BenchFault(
                f"The bench contradicts itself on {plan.problem.label}: the exact law gives "
                f"E {functional.name} = {exact:.9g}, its flow sampled on {sample.n_paths} paths "
                f"{estimate.means[0]:.9g} ± {error:.2g}. Trust no "
                "verdict of this run, and report it."
            )


def _rows(sample: Sample, row: Row) -> list[int]:
    rows = sample.plan.rows
    if row.functional is not None:
        return list(rows.weak(row.functional))
    return list(rows.grid if row.at == "grid" else rows.squares)


def _overflow(
    sample: Sample, tally: Tally, row: Row, errors: Errors, size: Array, scale: float
) -> Ruling | None:
    """Rule on NaN and infinity: a fault on some paths, unless a rung is unstable (or all paths)."""
    lost = tally.non_finite
    if np.all(np.isfinite(errors.measures)) and not lost.any():
        return None
    if row.functional is not None:
        reference = sample.plan.rows.reference[row.functional]
        if not math.isfinite(float(tally.moments.mean[reference])):
            raise BadFunctional(
                sample.plan.functionals[row.functional].name,
                "gives NaN or infinity at an end point",
            )
    some = (lost > 0) & (lost < sample.n_paths)
    if some.any() and not np.any(size > scale):
        rung = int(np.argmax(some))
        return Ruling(
            Verdict.REFUTED,
            f"{lost[rung]:.0f} of {sample.n_paths} paths end in NaN or infinity with "
            f"{errors.steps[rung]} steps: keep square roots, logarithms and divisions of the step "
            "inside their domain on rare paths too.",
            lasting=True,
        )
    rung = int(np.argmax(~np.isfinite(errors.measures) | (lost > 0)))
    return Ruling(
        Verdict.UNDECIDED,
        f"The errors overflow with {errors.steps[rung]} steps: the scheme is unstable with steps "
        f"as long as these; try --steps {finer(errors.steps)}, or finer still.",
    )


def _exact(exact: bool) -> Ruling | None:
    return Ruling(Verdict.SUPPORTED, "Exact to round-off on every rung.") if exact else None


def _distrust(trusted: bool, shares: Array, errors: Errors) -> Ruling | None:
    if trusted:
        return None
    rung = int(np.argmax(shares))
    return Ruling(
        Verdict.UNDECIDED,
        f"One path makes up {shares[rung]:.0%} of the sum of squares with {errors.steps[rung]} "
        "steps: the interval is not to be trusted with so heavy a tail, and nothing is decided on "
        "it. More paths may help (--looks), milder parameters or a shorter horizon will.",
        more_paths_help=True,
    )
