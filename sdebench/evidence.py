"""The evidence file: its types, and how it is read and written.

The types are the schema: what they cannot hold is not written and not read. Files are JSON,
written whole or not at all.
"""

import math
import os
from collections.abc import Collection
from pathlib import Path
from typing import Annotated, Any, Literal

import msgspec

from sdebench.errors import BadEvidenceFile
from sdebench.verdict import Verdict, overall
from sdebench.versioned import read_versioned
from sdebench.whole_file import write_whole

FORMAT: Literal["sdebench-evidence/1"] = "sdebench-evidence/1"
Kind = Literal["contract", "one-step", "strong", "weak"]
Route = Literal["quadrature", "propagated", "sampled"]
Count = Annotated[int, msgspec.Meta(ge=0)]


class Rung(msgspec.Struct, frozen=True, kw_only=True):
    """One step size: the error with its uncertainty.

    That is the half-width of an interval at the confidence C where the error is sampled, else a
    numerical bound. `dropped` says why a propagated rung was. `parts` are the means of equal parts
    of a sample, of squares if strong: what pairs a later run on the same paths with this one.
    """

    steps: int
    h: float
    error: float | None
    uncertainty: float | None
    counts: bool = True
    mean_absolute: float | None = None
    mean_absolute_uncertainty: float | None = None
    local_order: float | None = None
    largest_share: float | None = None
    non_finite: Count = 0
    dropped: str | None = None
    parts: list[float] = []


class Term(msgspec.Struct, frozen=True, kw_only=True):
    """A term of the one-step expansion: the scheme's coefficient and the SDE's, as h → 0.

    `required` says whether a claim needs the two to agree. Null stands for what is not finite.
    """

    term: str
    at: str
    yours: float | None
    needed: float | None
    difference: float | None
    uncertainty: float | None
    differs: bool
    required: bool


class Cost(msgspec.Struct, frozen=True, kw_only=True):
    """What a measurement took; rows made from one sample name the same `sample`.

    `step_seconds` is what one step of one path takes on one thread, with drawing its noise.
    """

    sample: str
    seconds: float
    normals: Count = 0
    paths: Count = 0
    looks: Count = 0
    threads: Count = 1
    step_seconds: float | None = None


class DetectionLimit(msgspec.Struct, frozen=True, kw_only=True):
    """The smallest faults this row would have seen: a plateau, and relative ones in a and b."""

    plateau: float
    drift: float | None
    diffusion: float | None


class ErrorConstant(msgspec.Struct, frozen=True, kw_only=True):
    """C in error ~ C h^p as h → 0, with p = `order`, and bounds on it."""

    order: float
    value: float
    low: float
    high: float


class Result(msgspec.Struct, frozen=True, kw_only=True):
    """One row of evidence on one scheme and problem.

    `low, high` bound the population local order at the finest counting pair of rungs,
    simultaneously over the run; `high` is null where there is no upper bound, all three are null
    where there is no order. `extrapolated` is the Richardson value. `bears_on` is the claim that
    the row is evidence for; a row that does not count is shown and decides nothing. A `check` is
    a sample held against propagated errors; `why_sampled` says why a row could not be propagated.
    `reference` is the exact E f(X_T).
    """

    scheme: str
    problem: str
    kind: Kind
    route: Route | None
    functional: str | None
    claimed: float | None
    order: float | None
    low: float | None
    high: float | None
    exact: bool
    verdict: Verdict
    sentence: str
    rungs: list[Rung]
    cost: Cost
    bears_on: Literal["strong", "weak"] | None = None
    counts: bool = True
    check: bool = False
    why_sampled: str | None = None
    extrapolated: float | None = None
    at: Literal["horizon", "grid"] | None = None
    reference: float | None = None
    trusted: bool = True
    detection_limit: DetectionLimit | None = None
    error_constant: ErrorConstant | None = None
    terms: list[Term] = []


class ClaimResult(msgspec.Struct, frozen=True, kw_only=True):
    """The verdict on one claim, from all its rows.

    `order`, `low`, `high` are of the row that decides; if it is weak, `functional` names it.
    """

    scheme: str
    problem: str
    kind: Literal["contract", "strong", "weak"]
    claimed: float | None
    order: float | None
    low: float | None
    high: float | None
    exact: bool
    verdict: Verdict
    sentence: str
    functional: str | None = None


class Provenance(msgspec.Struct, frozen=True, kw_only=True):
    """How the evidence was made, enough to make it again to the bit.

    `revision` is that of the repository in the working directory, if there is one; `files` has the
    SHA-256 of each file that a scheme or functional of a user's came from; `stream` is a digest of
    the first normals that the seed gives.
    """

    sdebench: str
    numpy: str
    python: str
    platform: str
    created: str
    command: str
    seed: int
    confidence: float
    tolerance: float
    steps: list[int]
    looks: int | None
    budget: float | None
    threads: int
    seconds: float
    revision: str | None = None
    files: dict[str, str] = {}
    stream: str | None = None


class Evidence(msgspec.Struct, frozen=True, kw_only=True):
    """All that one run measured; shows itself as a table in a notebook.

    `about` says in a line what each scheme and problem is, by its name.
    """

    format: Literal["sdebench-evidence/1"] = FORMAT
    verdict: Verdict
    provenance: Provenance
    claims: list[ClaimResult]
    results: list[Result]
    about: dict[str, str] = {}

    @property
    def exit_code(self) -> int:
        """The exit code of a command that ends on this evidence."""
        return self.verdict.exit_code

    def save(self, path: str | os.PathLike[str]) -> None:
        """Write the evidence to `path`, whole or not at all; raises `CannotWrite`."""
        write_whole(Path(path), msgspec.json.format(msgspec.json.encode(self), indent=2) + b"\n")

    def _repr_html_(self) -> str:
        # Reports read evidence, never the other way round: the notebook view is looked up by
        # name when a notebook asks for it.
        from importlib import import_module

        return str(import_module("sdebench.reports.notebook").evidence_html(self))


def load(path: str | os.PathLike[str]) -> Evidence:
    """Return the evidence in a file; raises `BadEvidenceFile` with what is wrong in it."""
    return read_versioned(path, Evidence, FORMAT, BadEvidenceFile)


def only(evidence: Evidence, pairs: Collection[tuple[str, str]]) -> Evidence:
    """Return the part of evidence that is on some schemes and problems."""
    claims = [c for c in evidence.claims if (c.scheme, c.problem) in pairs]
    rows = [r for r in evidence.results if (r.scheme, r.problem) in pairs]
    verdict = overall([claim.verdict for claim in claims])
    return msgspec.structs.replace(evidence, claims=claims, results=rows, verdict=verdict)


def finite(value: float) -> float | None:
    """Return a number as JSON can hold it: None for what is not finite."""
    return float(value) if math.isfinite(value) else None


def schema() -> dict[str, Any]:
    """Return the JSON Schema of the evidence file."""
    return {"$schema": "https://json-schema.org/draft/2020-12/schema"} | msgspec.json.schema(
        Evidence
    )
