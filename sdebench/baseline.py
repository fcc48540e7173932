"""The accepted baseline: what a project's integrators gave when somebody last looked at it.

A file made to live in a repository: sorted, one line a claim, a term and a rung, so that a review
shows what moved. Written whole or not at all.
"""

import json
import math
import os
from pathlib import Path
from typing import Annotated, Any, Literal

import msgspec

from sdebench.errors import BadBaseline
from sdebench.verdict import Verdict
from sdebench.versioned import read_versioned
from sdebench.whole_file import write_whole

FORMAT: Literal["sdebench-baseline/1"] = "sdebench-baseline/1"
CLOSE = 1e-6  # relative: to which the parts of a sample, kept to eight digits, give its error
Steps = Annotated[int, msgspec.Meta(ge=1)]
Size = Annotated[float, msgspec.Meta(ge=0)]


class AcceptedClaim(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """A claim and the verdict on it."""

    scheme: str
    problem: str
    kind: Literal["contract", "strong", "weak"]
    claimed: float | None
    order: float | None
    verdict: Verdict

    @property
    def key(self) -> tuple[str, str, str]:
        """What names the claim."""
        return self.scheme, self.problem, self.kind


class AcceptedTerm(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """A term of one step: the scheme's coefficient and the SDE's, at one place."""

    scheme: str
    problem: str
    kind: Literal["strong", "weak"]
    term: str
    at: str
    coefficient: float
    needed: float
    uncertainty: Size

    @property
    def key(self) -> tuple[str, str, str, str]:
        """What names the term."""
        return self.scheme, self.problem, self.kind, self.term


class AcceptedRung(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """An error at one step size; `parts` are means of equal parts of a sample (of squares if
    strong), which pair it with a later run on the same paths."""

    steps: Steps
    error: float
    uncertainty: Size
    parts: list[float] = []


class AcceptedRow(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """The errors of one kind, functional and place, on all rungs; `paths` is 0 if propagated."""

    scheme: str
    problem: str
    kind: Literal["strong", "weak"]
    functional: str | None
    at: Literal["horizon", "grid"] | None
    route: Literal["propagated", "sampled"]
    paths: Annotated[int, msgspec.Meta(ge=0)]
    rungs: list[AcceptedRung]

    @property
    def key(self) -> tuple[str, str, str, str, str]:
        """What names the row."""
        return self.scheme, self.problem, self.kind, self.functional or "", self.at or ""


class Baseline(msgspec.Struct, frozen=True, kw_only=True, forbid_unknown_fields=True):
    """Everything that was accepted, with who can read it in `why`, and how it was measured.

    `about` says what each scheme and problem is, parameters included; `stream` is a digest of the
    first normals of the seed.
    """

    format: Literal["sdebench-baseline/1"] = FORMAT
    why: str
    created: str
    revision: str | None
    sdebench: str
    numpy: str
    seed: int
    looks: Steps
    steps: list[Steps] | None
    stream: str | None
    about: dict[str, str]
    claims: list[AcceptedClaim]
    terms: list[AcceptedTerm]
    rows: list[AcceptedRow]


def save(baseline: Baseline, path: Path) -> None:
    """Write a baseline to `path`, whole or not at all; raises `CannotWrite`."""
    write_whole(path, (_laid_out(msgspec.to_builtins(baseline)) + "\n").encode())


def load(path: str | os.PathLike[str]) -> Baseline:
    """Return the baseline in a file; raises `BadBaseline` with what is wrong in it."""
    if not Path(path).exists():
        raise BadBaseline(os.fspath(path), "there is none yet; `sdebench accept` makes it")
    baseline = read_versioned(path, Baseline, FORMAT, BadBaseline)
    fault = _nonsense(baseline)
    if fault is not None:
        raise BadBaseline(os.fspath(path), fault)
    return baseline


def _nonsense(baseline: Baseline) -> str | None:
    """Return what no measurement could have written, or None."""
    for named in (baseline.claims, baseline.terms, baseline.rows):
        keys = [each.key for each in named]
        twice = next((key for key in keys if keys.count(key) > 1), None)
        if twice is not None:
            return f"it has {', '.join(filter(None, twice))} twice"
    for row in baseline.rows:
        where = f"{', '.join(filter(None, row.key))}"
        steps = [rung.steps for rung in row.rungs]
        if steps != sorted(set(steps)):
            return f"the steps of {where} do not rise: {', '.join(map(str, steps))}"
        for rung in row.rungs:
            if row.kind == "strong" and rung.error < 0:
                return f"{where} has a negative error with {rung.steps} steps"
            if rung.parts and not _adds_up(row, rung):
                return f"the parts of {where} with {rung.steps} steps do not give its error"
    return None


def _adds_up(row: AcceptedRow, rung: AcceptedRung) -> bool:
    """Return whether the parts of a rung give its error, to the digits that they have."""
    mean = math.fsum(rung.parts) / len(rung.parts)
    measure = rung.error**2 if row.kind == "strong" else rung.error
    return abs(mean - measure) <= CLOSE * max(map(abs, rung.parts))


def _laid_out(value: Any, indent: str = "", listed: bool = False) -> str:
    """Return JSON with a line for every entry, and for every listed one that holds no other."""
    inside = list(value.values()) if isinstance(value, dict) else value
    nested = isinstance(inside, list) and any(
        isinstance(each, dict) or (isinstance(each, list) and each and isinstance(each[0], dict))
        for each in inside
    )
    if not nested and (listed or not isinstance(value, dict)):
        return json.dumps(value, ensure_ascii=False)
    deeper = f"{indent}  "
    if isinstance(value, dict):
        parts = [
            f"{json.dumps(key, ensure_ascii=False)}: {_laid_out(each, deeper)}"
            for key, each in value.items()
        ]
    else:
        parts = [_laid_out(each, deeper, listed=True) for each in value]
    opening, closing = "{}" if isinstance(value, dict) else "[]"
    joined = f",\n{deeper}".join(parts)
    return f"{opening}\n{deeper}{joined}\n{indent}{closing}" if parts else opening + closing
