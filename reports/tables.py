"""The tables of a piece of evidence as headings and rows of text, for every view to show."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from sdebench.reports import numbers

from sdebench.evidence import Evidence, Result, Term
from sdebench.verdict import Verdict


@dataclass(frozen=True)
class Table:
    """A title, headings, rows of text, and which columns hold numbers."""

    title: str
    headings: tuple[str, ...]
    rows: Sequence[tuple[str, ...]]
    numeric: frozenset[int]


def claims_table(evidence: Evidence) -> Table:
    """Return one row a claim: what was claimed, measured, and the verdict."""
    rows = [
        (
            claim.scheme,
            claim.problem,
            f"{claim.kind}, {claim.functional}" if claim.functional else claim.kind,
            numbers.claimed(claim.claimed),
            numbers.interval(claim.order, claim.low, claim.high, claim.exact),
            claim.verdict.value,
        )
        for claim in evidence.claims
    ]
    headings = ("scheme", "problem", "kind", "claimed", "local order, finest pair", "verdict")
    return Table("", headings, rows, frozenset({3}))


def error_of(row: Result) -> str:
    """Return what the errors of a row are of: 'strong', or 'weak, mean'."""
    what = row.functional or ("largest on the grid" if row.at == "grid" else "")
    return f"{row.kind}, {what}" if what else row.kind


def rungs_table(result: Result) -> Table:
    """Return one row a rung: steps, error, local order, and whether it counts."""
    rows = [
        (
            str(rung.steps),
            f"{rung.h:.6g}",
            (rung.dropped or "NaN or infinity")
            if rung.error is None
            else numbers.with_uncertainty(rung.error, rung.uncertainty),
            "" if rung.local_order is None else numbers.order(rung.local_order),
            "yes" if rung.counts else "no",
        )
        for rung in result.rungs
    ]
    names = (f"{result.scheme} on {result.problem}", error_of(result), result.route)
    title = ", ".join(filter(None, names))
    headings = ("steps", "h", "error", "local order", "counts")
    return Table(title, headings, rows, frozenset({0, 1, 2, 3}))


def terms_table(result: Result) -> Table:
    """Return the one-step terms: the scheme's beside the SDE's."""
    rows = [
        (
            term.term,
            _coefficient(term.yours, term),
            _coefficient(term.needed, term),
            _judgement(term),
            term.at,
        )
        for term in result.terms
    ]
    title = f"{result.scheme} on {result.problem}, one step, {result.bears_on}: limits as h → 0"
    headings = ("term", "scheme", "SDE", "verdict", "where")
    return Table(title, headings, rows, frozenset({1, 2}))


def refuted_by_terms(result: Result) -> bool:
    """Return whether a one-step row is refuted by a term that its claim needs."""
    wrong = any(term.differs and term.required for term in result.terms)
    return result.kind == "one-step" and result.verdict is Verdict.REFUTED and wrong


def reasons_for_sampling(rows: Iterable[Result]) -> list[str]:
    """Return a sentence for each reason why something could not be propagated."""
    found: dict[tuple[str, str], list[str]] = {}
    for row in rows:
        if row.why_sampled is not None:
            done = "Sampled" if row.route == "sampled" else "Not propagated"
            pairs = found.setdefault((done, row.why_sampled), [])
            pair = f"{row.scheme} on {row.problem}"
            if pair not in pairs:
                pairs.append(pair)
    return [f"{done}, since {why}: {', '.join(pairs)}." for (done, why), pairs in found.items()]


def checks(rows: Iterable[Result]) -> str | None:
    """Return the sentence on samples that propagated errors were held against, if there are any."""
    rows = [row for row in rows if row.check]
    held = [row for row in rows if row.trusted]
    if not rows:
        return None
    spared = len(rows) - len(held)
    several = "rows with too heavy a tail were" if spared > 1 else "row with too heavy a tail was"
    tail = f"; {spared} {several} not compared" if spared else ""
    if not held:
        return f"No propagated error could be held against a sample{tail}."
    paths = sum({row.cost.sample: row.cost.paths for row in held}.values())
    finest = max(rung.steps for row in held for rung in row.rungs)
    return (
        f"Propagated errors agree with a check on {paths} sampled paths "
        f"({len(held)} rows, rungs to {finest} steps){tail}."
    )


def _coefficient(value: float | None, term: Term) -> str:
    if value is None or term.uncertainty is None:
        return "NaN"
    return "0" if abs(value) <= term.uncertainty else f"{value:.6g}"


def _judgement(term: Term) -> str:
    if not term.differs:
        return "agrees"
    return "differs" if term.required else "beyond the claim"
