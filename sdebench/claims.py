"""From a pair to the verdicts on its claims, as the evidence file holds them."""

from sdebench.assess import Assessment, Levels
from sdebench.evidence import ClaimResult
from sdebench.integrator import Claim
from sdebench.pair import Pair
from sdebench.verdict import Ruling, Verdict


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
        _claim(pair, claim, pair.claim_ruling(claim, levels), pair.decisive(claim))
        for claim in pair.claims
    ]


def _claim(
    pair: Pair, claim: Claim | None, ruling: Ruling, decisive: Assessment | None
) -> ClaimResult:
    order, low, high = decisive.bounds if decisive is not None else (None, None, None)
    return ClaimResult(
        functional=None if decisive is None else pair.name_of(decisive.row),
        scheme=pair.plan.scheme.label,
        problem=pair.plan.problem.label,
        kind=claim.kind if claim is not None else "contract",
        claimed=claim.order if claim is not None else None,
        order=order,
        low=low,
        high=high,
        exact=decisive.exact if decisive is not None else False,
        verdict=ruling.verdict,
        sentence=ruling.sentence,
    )
