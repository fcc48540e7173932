"""The verdict in one sentence, the claims as a matrix, and both as Markdown for a CI job."""

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

from sdebench.reports import numbers
from sdebench.reports.export import escape_markdown, markdown
from sdebench.reports.sections import Section
from sdebench.reports.tables import Table

from sdebench.evidence import ClaimResult
from sdebench.verdict import Verdict

MARKS = {
    Verdict.SUPPORTED: "✓",
    Verdict.REFUTED: "✗",
    Verdict.UNDECIDED: "?",
    Verdict.NOT_APPLICABLE: "–",
}
WORST_FIRST = (Verdict.REFUTED, Verdict.UNDECIDED)


@dataclass(frozen=True)
class Cell:
    """What a matrix says of one claim: the measured order, the claimed one, and the verdict."""

    measured: str
    claimed: str
    verdict: Verdict

    @property
    def mark(self) -> str:
        """The sign that stands for the verdict."""
        return MARKS[self.verdict]

    def __str__(self) -> str:
        claim = f"claimed {self.claimed}" if self.claimed else ""
        said = [part for part in (self.measured, claim) if part]
        return f"{self.verdict.value} ({', '.join(said)})" if said else self.verdict.value


def verdict_sentence(sections: Sequence[Section]) -> str:
    """Return the verdict on all claims in one sentence."""
    claims = [claim for section in sections for claim in section.claims]
    judged = [c for c in claims if c.verdict is not Verdict.NOT_APPLICABLE]
    counts = Counter(claim.verdict for claim in judged)
    schemes = _count(len({claim.scheme for claim in judged}), "scheme")
    problems = _count(len({claim.problem for claim in judged}), "problem")
    scope = f"of {schemes} on {problems}"
    if not judged:
        return "No claim applies to any of these problems."
    if counts[Verdict.SUPPORTED] == len(judged):
        every = "The claim" if len(judged) == 1 else f"All {len(judged)} claims"
        return f"{every} {scope} {'is' if len(judged) == 1 else 'are'} supported."
    parts = [
        f"{counts[verdict]} {'is' if counts[verdict] == 1 else 'are'} {verdict.value}"
        for verdict in (*WORST_FIRST, Verdict.SUPPORTED)
        if counts[verdict]
    ]
    joined = ", ".join(parts[:-1]) + f" and {parts[-1]}" if len(parts) > 1 else parts[0]
    return f"Of {_count(len(judged), 'claim')} {scope}, {joined}."


def kinds(sections: Sequence[Section]) -> list[str]:
    """Return the kinds of claims that there are, in their order of old."""
    found = {claim.kind for section in sections for claim in section.claims}
    return [kind for kind in ("contract", "strong", "weak") if kind in found]


def cells(section: Section, kind: str) -> list[Cell]:
    """Return what there is to say of a section's claims of one kind."""
    return [
        Cell(
            measured(claim),
            numbers.claimed(claim.claimed),
            claim.verdict,
        )
        for claim in section.claims
        if claim.kind == kind
    ]


def measured(claim: ClaimResult) -> str:
    """Return the order that was measured for a claim, with its uncertainty."""
    return numbers.measured_order(claim.order, claim.low, claim.high, claim.exact)


def matrix(sections: Sequence[Section]) -> Table:
    """Return the claims, one row a scheme and problem and one column a kind."""
    columns = kinds(sections)
    rows = [
        (
            section.scheme,
            section.problem,
            *("; ".join(map(str, cells(section, kind))) for kind in columns),
        )
        for section in sections
    ]
    return Table("claims", ("scheme", "problem", *columns), rows, frozenset())


def faults(sections: Sequence[Section]) -> list[tuple[Section, ClaimResult]]:
    """Return the claims that are not supported, refuted ones first."""
    found = [(section, claim) for section in sections for claim in section.claims]
    return [
        (section, claim)
        for verdict in WORST_FIRST
        for section, claim in found
        if claim.verdict is verdict
    ]


def summary(sections: Sequence[Section]) -> str:
    """Return the verdict and one table in Markdown, and a sentence for each fault."""
    lines = [f"**{escape_markdown(verdict_sentence(sections))}**", "", markdown(matrix(sections))]
    lines += [
        f"- **{escape_markdown(section.title)}, {claim.kind}: {claim.verdict.value}.** "
        f"{escape_markdown(claim.sentence)}"
        for section, claim in faults(sections)
    ]
    return "\n".join(lines).rstrip() + "\n"


def _count(n: int, what: str) -> str:
    return f"{n} {what}" if n == 1 else f"{n} {what}s"
