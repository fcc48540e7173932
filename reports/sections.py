"""Evidence by scheme and problem: what a report has a section on, and what its files are named."""

import re
import unicodedata
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from sdebench.reports.tables import checks, reasons_for_sampling

from sdebench.evidence import ClaimResult, Evidence, Result
from sdebench.verdict import Verdict

ERRORS = ("strong", "weak")
RANK = {
    Verdict.REFUTED: 0,
    Verdict.UNDECIDED: 1,
    Verdict.SUPPORTED: 2,
    Verdict.NOT_APPLICABLE: 3,
}


@dataclass(frozen=True)
class Section:
    """All evidence on one scheme and problem; `name` begins the names of its files."""

    scheme: str
    problem: str
    name: str
    claims: Sequence[ClaimResult]
    rows: Sequence[Result]
    about: Sequence[str] = ()

    @property
    def title(self) -> str:
        """The scheme and the problem."""
        return f"{self.scheme} on {self.problem}"

    @property
    def worst_first(self) -> list[ClaimResult]:
        """The claims, refuted and undecided ones first."""
        return sorted(self.claims, key=lambda claim: RANK[claim.verdict])

    @property
    def measured(self) -> list[Result]:
        """The rows with errors that bear on claims: strong first, then each weak functional."""
        return [r for r in self.rows if r.kind in ERRORS and r.rungs and not r.check]

    @property
    def has_errors(self) -> bool:
        """Whether there is an error that counts, and can be drawn."""
        return any(rung.error and rung.counts for row in self.measured for rung in row.rungs)

    @property
    def notes(self) -> list[str]:
        """What problem and scheme are, the contract, why errors were sampled, what checked them."""
        kept = [row.sentence for row in self.rows if row.kind == "contract"]
        found = [*self.about, *kept, *reasons_for_sampling(self.rows), checks(self.rows)]
        return [note for note in found if note is not None]

    @property
    def checks(self) -> list[Result]:
        """The samples that propagated errors were held against."""
        return [r for r in self.rows if r.kind in ERRORS and r.rungs and r.check]

    @property
    def one_step(self) -> list[Result]:
        """The rows with terms of a single step."""
        return [r for r in self.rows if r.terms]


def sections(evidences: Iterable[Evidence]) -> list[Section]:
    """Return a section for each scheme and problem with claims, in the order of the evidence."""
    found: list[Section] = []
    taken: set[str] = set()
    for evidence in evidences:
        keys = dict.fromkeys((claim.scheme, claim.problem) for claim in evidence.claims)
        for scheme, problem in keys:
            name = _free(f"{slug(scheme)}--{slug(problem)}", taken)
            found.append(
                Section(
                    scheme,
                    problem,
                    name,
                    [c for c in evidence.claims if (c.scheme, c.problem) == (scheme, problem)],
                    [r for r in evidence.results if (r.scheme, r.problem) == (scheme, problem)],
                    [
                        f"{key}: {evidence.about[key]}"
                        for key in (problem, scheme)
                        if evidence.about.get(key)
                    ],
                )
            )
    return found


def by_problem(found: Iterable[Section]) -> dict[str, list[Section]]:
    """Return the sections with errors, by problem."""
    problems: dict[str, list[Section]] = {}
    for section in found:
        if section.measured:
            problems.setdefault(section.problem, []).append(section)
    return problems


def slug(text: str) -> str:
    """Return a text as part of a file name: letters, digits, dots and single hyphens.

    >>> slug("mine.py:step on gbm:mu=1.5")
    'mine.py-step-on-gbm-mu-1.5'
    """
    plain = unicodedata.normalize("NFKD", text).encode("ascii", "ignore").decode().lower()
    return re.sub(r"[^a-z0-9.]+", "-", plain).strip("-.") or "unnamed"


def _free(name: str, taken: set[str]) -> str:
    """Return a name that no other section has, and take it."""
    free, n = name, 1
    while free in taken:
        n += 1
        free = f"{name}-{n}"
    taken.add(free)
    return free
