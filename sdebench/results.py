"""From pairs to the rows of the evidence file."""

from dataclasses import replace
from typing import Any

import numpy as np

from sdebench.assess import Assessment, Levels, Row
from sdebench.claims import not_propagated, overruling
from sdebench.detection import Sensitivity, limits, plateau
from sdebench.evidence import Cost, DetectionLimit, Kind, Result, finite
from sdebench.integrator import Claim
from sdebench.pair import Pair
from sdebench.rungs import local_rungs, measured_rungs
from sdebench.verdict import Ruling, Verdict


def results(
    pair: Pair,
    levels: Levels,
    threads: int,
    sensitivity: tuple[Sensitivity, list[Sensitivity]] | None,
) -> list[Result]:
    """Return the rows of a pair: contract, one step, then what was propagated and sampled."""
    if not pair.applies:
        return [_not_applicable(pair, claim) for claim in pair.claims]
    rows = [_contract(pair)]
    if pair.measurable and sensitivity is not None:
        rows += [_one_step(pair, claim, levels) for claim in pair.claims]
        for row in pair.rows:
            propagated, sampled = pair.by_propagation.get(row), pair.by_sample.get(row)
            if propagated is not None:
                rows.append(_measured(pair, propagated, levels, threads, sensitivity))
            if sampled is not None:
                rows.append(_measured(pair, sampled, levels, threads, sensitivity))
            if propagated is None and sampled is None:
                rows.append(_unmeasured(pair, row))
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
        rungs=local_rungs(one_step, claim),
        terms=one_step.terms if claim.kind == "strong" else one_step.moments,
    )


def _unmeasured(pair: Pair, row: Row) -> Result:
    cost = Cost(sample="none", seconds=0.0)
    return _row(
        pair,
        row.claim.kind,
        row.claim,
        not_propagated(pair, row),
        cost,
        bears_on=row.claim.kind,
        functional=pair.name_of(row),
        at=row.at,
        why_sampled=pair.why_sampled[row],
    )


def _measured(
    pair: Pair,
    a: Assessment,
    levels: Levels,
    threads: int,
    sensitivity: tuple[Sensitivity, list[Sensitivity]],
) -> Result:
    claim = a.row.claim
    check = a.route == "sampled" and a.row in pair.by_propagation
    ruling, limit = _ruling(pair, a, levels, sensitivity)
    if check:
        ruling = replace(ruling, sentence=f"{pair.agreement[a.row]} {ruling.sentence}")
    order, low, high = a.bounds
    index = a.row.functional
    trend = a.order.trend if a.order is not None else None
    return _row(
        pair,
        claim.kind,
        claim,
        ruling,
        _cost(pair, a, threads),
        bears_on=claim.kind,
        route=a.route,
        functional=pair.name_of(a.row),
        order=order,
        low=low,
        high=high,
        exact=a.exact,
        rungs=measured_rungs(pair, a, levels, check),
        extrapolated=None if trend is None else finite(trend.extrapolated.estimate),
        at=a.row.at,
        reference=None if index is None else finite(pair.references[index][0]),
        counts=a.counts and not check,
        check=check,
        why_sampled=pair.why_sampled.get(a.row) if a.route == "sampled" else None,
        trusted=a.trusted,
        detection_limit=limit,
        error_constant=a.constant(pair.plan.problem.horizon),
    )


def _ruling(
    pair: Pair,
    a: Assessment,
    levels: Levels,
    sensitivity: tuple[Sensitivity, list[Sensitivity]],
) -> tuple[Ruling, DetectionLimit | None]:
    """Return the ruling on a row, and the detection limit of a supported one.

    A claim that one step refutes, or a fault on some paths, is refuted in its other rows too.
    """
    overruled = overruling(pair, a.row.claim, levels)
    if overruled is not None:
        return overruled, None
    if a.ruling.verdict is not Verdict.SUPPORTED:
        return a.ruling, None
    limit = _detection_limit(a, levels, sensitivity)
    if limit is None:
        return a.ruling, None
    return replace(a.ruling, sentence=f"{a.ruling.sentence} {_limit_sentence(limit)}"), limit


def _cost(pair: Pair, a: Assessment, threads: int) -> Cost:
    if a.route == "propagated":
        seconds = pair.propagation_seconds
        return Cost(
            sample=f"{pair.label}, propagated",
            seconds=seconds,
            threads=threads,
            step_seconds=pair.step_seconds,
        )
    return Cost(
        sample=pair.label,
        seconds=pair.sample.seconds,
        normals=pair.sample.n_paths * pair.plan.normals_per_path,
        paths=pair.sample.n_paths,
        looks=pair.looks,
        threads=threads,
        step_seconds=pair.step_seconds,
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
