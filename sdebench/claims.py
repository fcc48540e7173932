"""The verdicts on the claims of a pair, from all its evidence, as the evidence file holds them.

One step may refute alone. A fault that is seen on a rung, and that finer rungs do not undo, refutes
too, on whichever route; one in mean square is a fault of the step, whatever is claimed. Else the
rows decide: propagated ones, or sampled ones in their place.
"""

import math
from dataclasses import replace

from sdebench.assess import Assessment, Levels, Row
from sdebench.evidence import ClaimResult
from sdebench.integrator import Claim
from sdebench.pair import Pair
from sdebench.verdict import Ruling, Verdict, overall


def settled(pair: Pair, levels: Levels) -> bool:
    """Return whether more paths could change no verdict on a claim."""
    return all(
        not any(a.ruling.more_paths_help for a in bearing(pair, claim))
        for claim in pair.claims
        if pair.one_step_ruling(claim, levels.tolerance).verdict is not Verdict.REFUTED
    )


def bearing(pair: Pair, claim: Claim) -> list[Assessment]:
    """Return the assessments that count for a claim: resolved ones, or all if none is."""
    own = [a for a in pair.assessments if a.row.claim == claim]
    return [a for a in own if a.counts] or own


def decisive(pair: Pair, claim: Claim) -> Assessment | None:
    """Return the assessment that the verdict on a claim rests on, of the lowest order."""
    found = bearing(pair, claim)
    verdict = overall([a.ruling.verdict for a in found])
    return min(
        (a for a in found if a.ruling.verdict is verdict),
        key=lambda a: a.order.local.estimate if a.order is not None else math.inf,
        default=None,
    )


def overruling(pair: Pair, claim: Claim, levels: Levels) -> Ruling | None:
    """Return the ruling on a claim that no order of its rows can change, or None."""
    local = pair.one_step_ruling(claim, levels.tolerance)
    if local.verdict is Verdict.REFUTED:
        return local
    seen = [*pair.by_sample.items(), *pair.by_propagation.items()]
    own = [a.ruling for row, a in seen if row.claim == claim or row.functional is None]
    return next((ruling for ruling in own if ruling.lasting), None)


def claim_ruling(pair: Pair, claim: Claim, levels: Levels) -> Ruling:
    """Return the ruling on a claim from all evidence."""
    overruled = overruling(pair, claim, levels)
    if overruled is not None:
        return overruled
    deciding = decisive(pair, claim)
    if deciding is None:
        return not_propagated(pair, next(row for row in pair.rows if row.claim == claim))
    ruling = deciding.ruling
    if pair.doubt is not None and ruling.verdict is Verdict.SUPPORTED:
        return pair.doubt
    name = pair.name_of(deciding.row)
    if name is None:
        return ruling
    return replace(ruling, sentence=f"{name}: {ruling.sentence[0].lower()}{ruling.sentence[1:]}")


def not_propagated(pair: Pair, row: Row) -> Ruling:
    """Return the ruling on a row that was to be propagated alone and could not be."""
    sentence = f"Not propagated: {pair.why_sampled[row]}. Leave out --route to sample it."
    return Ruling(Verdict.UNDECIDED, sentence)


def claim_results(pair: Pair, levels: Levels) -> list[ClaimResult]:
    """Return the verdict on each claim of a pair, after that on its contract if it is broken."""
    if not pair.applies:
        ruling = Ruling(Verdict.NOT_APPLICABLE, pair.why_not)
        return [_claim(pair, claim, ruling, None) for claim in pair.claims]
    assert pair.local is not None
    if pair.local.breach is not None:
        broken = Ruling(Verdict.REFUTED, pair.local.breach.sentence)
        unmeasured = Ruling(
            Verdict.REFUTED, "Not measured: the step breaks its contract, so no order is its own."
        )
        rest = [_claim(pair, claim, unmeasured, None) for claim in pair.claims]
        return [_claim(pair, None, broken, None), *rest]
    return [
        _claim(pair, claim, claim_ruling(pair, claim, levels), decisive(pair, claim))
        for claim in pair.claims
    ]


def _claim(
    pair: Pair, claim: Claim | None, ruling: Ruling, deciding: Assessment | None
) -> ClaimResult:
    order, low, high = deciding.bounds if deciding is not None else (None, None, None)
    return ClaimResult(
        functional=None if deciding is None else pair.name_of(deciding.row),
        scheme=pair.plan.scheme.label,
        problem=pair.plan.problem.label,
        kind=claim.kind if claim is not None else "contract",
        claimed=claim.order if claim is not None else None,
        order=order,
        low=low,
        high=high,
        exact=deciding.exact if deciding is not None else False,
        verdict=ruling.verdict,
        sentence=ruling.sentence,
    )
