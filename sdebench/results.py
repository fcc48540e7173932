"""From pairs to the rows of the evidence file."""

from dataclasses import replace
from typing import Any

import numpy as np

from sdebench.assess import Assessment, Levels
from sdebench.detection import Sensitivity, limits, plateau
from sdebench.evidence import Cost, DetectionLimit, Kind, Result, Rung, finite
from sdebench.integrator import Claim
from sdebench.onestep import OneStep
from sdebench.orders import local_order, student_quantile
from sdebench.pair import Pair
from sdebench.sde import Array
from sdebench.verdict import Ruling, Verdict


def results(
    pair: Pair,
    levels: Levels,
    threads: int,
    sensitivity: tuple[Sensitivity, list[Sensitivity]] | None,
) -> list[Result]:
    """Return the rows of a pair: contract, one-step, then what was sampled."""
    if not pair.applies:
        return [_not_applicable(pair, claim) for claim in pair.claims]
    rows = [_contract(pair)]
    if pair.sampled and sensitivity is not None:
        rows += [_one_step(pair, claim, levels) for claim in pair.claims]
        rows += [_sampled(pair, a, levels, threads, sensitivity) for a in pair.assessments]
    return rows


def _row(
    pair: Pair, kind: Kind, claim: Claim | None, ruling: Ruling, cost: Cost, **measured: Any
) -> Result:
    """Return a row on a pair; what is not `measured` is blank."""
    blank: dict[str, Any] = {
        "route": None,
        "functional": None,
        "order": None,
        "low": None,
        "high": None,
        "exact": False,
        "rungs": [],
    }
    return Result(
        scheme=pair.plan.scheme.label,
        problem=pair.plan.problem.label,
        kind=kind,
        claimed=claim.order if claim is not None else None,
        verdict=ruling.verdict,
        sentence=ruling.sentence,
        cost=cost,
        **(blank | measured),
    )


def _not_applicable(pair: Pair, claim: Claim) -> Result:
    ruling = Ruling(Verdict.NOT_APPLICABLE, pair.why_not)
    return _row(pair, claim.kind, claim, ruling, Cost(sample="none", seconds=0.0))


def _contract(pair: Pair) -> Result:
    assert pair.local is not None
    breach = pair.local.breach
    ruling = Ruling(Verdict.SUPPORTED, "The step keeps every law of its contract.")
    if breach is not None:
        ruling = Ruling(Verdict.REFUTED, breach.sentence)
    cost = Cost(sample=f"{pair.label}, contract", seconds=pair.local.contract_seconds)
    return _row(pair, "contract", None, ruling, cost)


def _one_step(pair: Pair, claim: Claim, levels: Levels) -> Result:
    assert pair.local is not None
    assert pair.local.one_step is not None
    one_step = pair.local.one_step
    ruling = one_step.ruling(claim, levels.tolerance)
    local = one_step.strong if claim.kind == "strong" else one_step.weak
    order = None if one_step.exact else finite(local.order)
    return _row(
        pair,
        "one-step",
        claim,
        ruling,
        Cost(sample=f"{pair.label}, one step", seconds=pair.local.one_step_seconds),
        bears_on=claim.kind,
        route="quadrature",
        order=order,
        low=order,
        high=order,
        exact=one_step.exact,
        rungs=_local_rungs(one_step, claim),
        terms=one_step.terms if claim.kind == "strong" else one_step.moments,
    )


def _local_rungs(one_step: OneStep, claim: Claim) -> list[Rung]:
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


def _sampled(
    pair: Pair,
    a: Assessment,
    levels: Levels,
    threads: int,
    sensitivity: tuple[Sensitivity, list[Sensitivity]],
) -> Result:
    plan, claim = pair.plan, a.row.claim
    # A claim that one-step evidence refutes is refuted in its sampled rows too.
    local = pair.one_step_ruling(claim, levels)
    ruling = local if local.verdict is Verdict.REFUTED else a.ruling
    limit = None
    if ruling.verdict is Verdict.SUPPORTED:
        limit = _detection_limit(a, levels, sensitivity)
    if limit is not None:
        ruling = replace(ruling, sentence=f"{ruling.sentence} {_limit_sentence(limit)}")
    order, low, high = a.bounds
    index = a.row.functional
    trend = a.order.trend if a.order is not None else None
    cost = Cost(
        sample=pair.label,
        seconds=pair.sample.seconds,
        normals=pair.sample.n_paths * plan.normals_per_path,
        paths=pair.sample.n_paths,
        looks=pair.looks,
        threads=threads,
    )
    return _row(
        pair,
        claim.kind,
        claim,
        ruling,
        cost,
        bears_on=claim.kind,
        route="sampled",
        functional=None if index is None else plan.functionals[index].name,
        order=order,
        low=low,
        high=high,
        exact=a.exact,
        rungs=_rungs(pair, a, levels),
        extrapolated=None if trend is None else finite(trend.extrapolated.estimate),
        at=a.row.at,
        reference=None if index is None else finite(pair.references[index][0]),
        counts=a.counts,
        trusted=a.trusted,
        detection_limit=limit,
    )


def _detection_limit(
    a: Assessment, levels: Levels, sensitivity: tuple[Sensitivity, list[Sensitivity]]
) -> DetectionLimit | None:
    strong, weak = sensitivity
    own = strong if a.row.functional is None else weak[a.row.functional]
    if a.exact:
        level = float(np.max(a.errors.floors)) ** (1 / a.errors.power)
        return limits(level, own)
    if a.order is None:
        return None
    needed = a.row.claim.order - levels.tolerance
    return limits(plateau(a.errors, a.order, needed, a.quantile), own)


def _limit_sentence(limit: DetectionLimit) -> str:
    faults = [
        f"{value:.2g} of the {name}"
        for name, value in (("drift", limit.drift), ("diffusion", limit.diffusion))
        if value is not None
    ]
    tail = f", a fault of {' or '.join(faults)}" if faults else ""
    return f"Detection limit: an error of {limit.plateau:.2g} that does not shrink{tail}."


def _rungs(pair: Pair, a: Assessment, levels: Levels) -> list[Rung]:
    assert pair.sample.tally is not None
    tally, errors = pair.sample.tally, a.errors
    marginal = student_quantile(1 - levels.confidence, errors.dof)
    values, widths = errors.values, errors.half_widths(marginal)
    absolute, absolute_widths = _mean_absolute(pair, a, levels)
    counting = a.order.counting if a.order is not None else ()
    horizon = pair.plan.problem.horizon
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
                largest_share=finite(float(a.shares[r])),
                non_finite=int(tally.non_finite[r]),
            )
        )
    return rungs


def _mean_absolute(pair: Pair, a: Assessment, levels: Levels) -> tuple[Array | None, Array | None]:
    if a.row.at != "horizon":
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
