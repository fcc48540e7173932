"""What evidence comes to as a baseline: its claims, terms and errors, sorted and cut."""

from collections.abc import Iterable

from sdebench.baseline import AcceptedClaim, AcceptedRow, AcceptedRung, AcceptedTerm, Baseline
from sdebench.evidence import ClaimResult, Evidence, Result
from sdebench.verdict import Verdict

ERRORS = ("strong", "weak")


def baseline_of(
    evidence: Evidence, kinds: Iterable[str], looks: int, steps: list[int] | None, why: str
) -> Baseline:
    """Return what evidence comes to as a baseline, for claims of some kinds.

    `looks` and `steps` are those that were asked for, None where each route took its own steps.
    """
    wanted = {*kinds, "contract"}
    p = evidence.provenance
    return Baseline(
        why=why,
        created=p.created,
        revision=p.revision,
        sdebench=p.sdebench,
        numpy=p.numpy,
        seed=p.seed,
        looks=looks,
        steps=steps,
        stream=p.stream,
        about=dict(sorted(evidence.about.items())),
        claims=sorted(map(_claim, _of(evidence.claims, wanted)), key=lambda c: c.key),
        terms=sorted(
            (term for row in evidence.results if row.bears_on in wanted for term in _terms(row)),
            key=lambda t: t.key[:3],
        ),
        rows=sorted(
            (
                _row(row)
                for row in evidence.results
                if row.kind in ERRORS and row.kind in wanted and row.route and not row.check
            ),
            key=lambda r: r.key,
        ),
    )


def _of(claims: Iterable[ClaimResult], wanted: set[str]) -> list[ClaimResult]:
    return [c for c in claims if c.kind in wanted and c.verdict is not Verdict.NOT_APPLICABLE]


def _claim(claim: ClaimResult) -> AcceptedClaim:
    return AcceptedClaim(
        scheme=claim.scheme,
        problem=claim.problem,
        kind=claim.kind,
        claimed=claim.claimed,
        order=claim.order,
        verdict=claim.verdict,
    )


def _terms(row: Result) -> list[AcceptedTerm]:
    """Return the terms of one step that are finite."""
    assert row.bears_on is not None
    return [
        AcceptedTerm(
            scheme=row.scheme,
            problem=row.problem,
            kind=row.bears_on,
            term=term.term,
            at=term.at,
            coefficient=_cut(term.yours, term.uncertainty),
            needed=_cut(term.needed, term.uncertainty),
            uncertainty=float(f"{term.uncertainty:.2g}"),
        )
        for term in row.terms
        if term.yours is not None and term.needed is not None and term.uncertainty is not None
    ]


def _cut(value: float, uncertainty: float) -> float:
    """Return a coefficient without the digits that another platform may give otherwise."""
    return float(f"{value:.9g}") if abs(value) > uncertainty else 0.0


def _row(row: Result) -> AcceptedRow:
    assert row.kind in ERRORS
    assert row.route in ("propagated", "sampled")
    return AcceptedRow(
        scheme=row.scheme,
        problem=row.problem,
        kind="strong" if row.kind == "strong" else "weak",
        functional=row.functional,
        at=row.at,
        route="propagated" if row.route == "propagated" else "sampled",
        paths=row.cost.paths,
        rungs=[
            AcceptedRung(
                steps=rung.steps,
                error=rung.error,
                uncertainty=rung.uncertainty,
                parts=rung.parts,
            )
            for rung in row.rungs
            if rung.error is not None and rung.uncertainty is not None
        ],
    )
