"""The gate: a project's schemes measured, and held against the accepted baseline."""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from itertools import groupby

from sdebench.acceptance import baseline_of
from sdebench.baseline import AcceptedRow, Baseline, load, save
from sdebench.errors import BadBaseline, RefutedEvidence
from sdebench.evidence import Evidence
from sdebench.project import Project
from sdebench.regression import Change, Judged, Moved, judged, likely_term, moved, worst
from sdebench.study import measure
from sdebench.verdict import Verdict
from sdebench.whole_file import check_writable

Progress = Callable[[str, int, int], None]


@dataclass(frozen=True)
class Gated:
    """A project's evidence, what it comes to, and the baseline that it is held against."""

    project: Project
    evidence: Evidence
    now: Baseline
    then: Baseline

    @cached_property
    def claims(self) -> list[Judged]:
        """How every claim stands."""
        return judged(self.now, self.then)

    @cached_property
    def rungs(self) -> list[Moved]:
        """How every error stands."""
        return moved(self.now, self.then, self.project.guarded.allowed_change)

    @cached_property
    def rows(self) -> list[tuple[AcceptedRow, list[Moved]]]:
        """The errors by row, in their order."""
        grouped = groupby(self.rungs, key=lambda each: each.row.key)
        found = [list(own) for _, own in grouped]
        return [(own[0].row, own) for own in found]

    @property
    def exit_code(self) -> int:
        """1 for a regression, 3 for a claim that is no longer decided, else 0."""
        if any(c.red for c in self.claims) or any(rung.red for rung in self.rungs):
            return 1
        return 3 if any(each.doubtful for each in self.claims) else 0

    @property
    def sentences(self) -> list[str]:
        """What is red or in doubt, a sentence each, with the likely cause."""
        on_claims = [self.on_claim(each) for each in self.claims]
        return [said for said in (*on_claims, *(self.on_row(*row) for row in self.rows)) if said]

    @property
    def notes(self) -> list[str]:
        """What else differs from how the baseline was measured, a sentence each."""
        now, then, notes = self.now, self.then, []
        if now.seed == then.seed and now.stream != then.stream:
            notes.append(
                "The generator's normals are not those of the baseline (NumPy "
                f"{then.numpy} then, {now.numpy} now): samples are compared as independent."
            )
        if now.sdebench != then.sdebench:
            notes.append(f"Accepted with sdebench {then.sdebench}, measured with {now.sdebench}.")
        return notes

    @property
    def since(self) -> str:
        """When and at which revision the baseline was accepted."""
        revision = f" at revision {self.then.revision[:12]}" if self.then.revision else ""
        return f"accepted {self.then.created[:10]}{revision}"

    @property
    def failed(self) -> set[tuple[str, str]]:
        """The schemes and problems of which something is red or in doubt."""
        claims = {c.claim.key[:2] for c in self.claims if c.red or c.doubtful}
        return claims | {each.row.key[:2] for each in self.rungs if each.red}

    def on_claim(self, each: Judged) -> str | None:
        """Return the sentence on a claim that is red or in doubt, or None."""
        if not (each.red or each.doubtful):
            return None
        claim = each.claim
        why = next(
            (
                c.sentence
                for c in self.evidence.claims
                if (c.scheme, c.problem, c.kind) == claim.key
            ),
            "Nothing of this name was measured.",
        )
        return f"{claim.scheme} on {claim.problem}, {claim.kind}: {each}. {why}"

    def on_row(self, row: AcceptedRow, own: list[Moved]) -> str | None:
        """Return the sentence on errors that are red, with the likely cause, or None."""
        red = [each for each in own if each.red]
        if not red:
            return None
        most = worst(red)
        more = f" and {len(red) - 1} further step sizes" if len(red) > 1 else ""
        what = f"{row.kind} {row.functional or ''}".rstrip()
        return (
            f"{row.scheme} on {row.problem}, {what} error: {most} with {most.steps} steps{more}, "
            f"since it was {self.since}. {self._cause(row, most)}"
        )

    def _cause(self, row: AcceptedRow, most: Moved) -> str:
        if most.change is Change.GONE:
            return "There is no such error any more: it was not measured, or is no number."
        term = likely_term(self.now.terms, self.then.terms, row.scheme, row.problem)
        return term or "No leading term of one step moved: look at terms of higher order."


def gate(
    project: Project,
    *,
    seed: int | None = None,
    threads: int | None = None,
    progress: Progress | None = None,
) -> Gated:
    """Return how what a project guards stands against its baseline.

    Another `seed` than the project's compares what is sampled as independent. Raises
    `BadBaseline` if the baseline cannot be read or was made with other settings.
    """
    then = load(project.baseline)
    _check_settings(project, then, seed)
    evidence = _measured(project, seed, threads, progress)
    now = _baseline(project, evidence, "")
    _check_problems(project, now, then)
    return Gated(project, evidence, now, then)


def accept(
    project: Project,
    why: str,
    *,
    refuted_too: bool = False,
    threads: int | None = None,
    progress: Progress | None = None,
) -> tuple[Baseline, Evidence]:
    """Measure what a project guards, and write that as its baseline; return both.

    Raises `RefutedEvidence`, and leaves the old baseline, if a claim is refuted, unless it is to
    be accepted too.
    """
    check_writable(project.baseline)
    evidence = _measured(project, None, threads, progress)
    baseline = _baseline(project, evidence, why)
    refuted = [claim for claim in baseline.claims if claim.verdict is Verdict.REFUTED]
    if refuted and not refuted_too:
        raise RefutedEvidence([f"{c.scheme} on {c.problem}, {c.kind}" for c in refuted])
    save(baseline, project.baseline)
    return baseline, evidence


def _measured(
    project: Project, seed: int | None, threads: int | None, progress: Progress | None
) -> Evidence:
    return measure(
        project.schemes(),
        on=project.guarded.problems,
        threads=threads,
        progress=progress,
        **(project.options | ({} if seed is None else {"seed": seed})),
    )


def _baseline(project: Project, evidence: Evidence, why: str) -> Baseline:
    guarded = project.guarded
    return baseline_of(evidence, guarded.kinds, guarded.looks, guarded.steps, why)


def _check_settings(project: Project, then: Baseline, seed: int | None) -> None:
    """Raise `BadBaseline` unless the project still says what the baseline was made with."""
    guarded = project.guarded
    pairs = [("looks", then.looks, guarded.looks), ("steps", then.steps, guarded.steps)]
    if seed is None:
        pairs.append(("seed", then.seed, guarded.seed))
    for name, made, says in pairs:
        if made != says:
            raise BadBaseline(
                str(project.baseline),
                f"it was made with {name} = {_told(made)}, and the project says {_told(says)}; "
                "put that back, or accept anew",
            )


def _check_problems(project: Project, now: Baseline, then: Baseline) -> None:
    """Raise `BadBaseline` if a problem of the same name has other parameters."""
    problems = {row.problem for row in (*now.rows, *then.rows)}
    for name in sorted(problems & now.about.keys() & then.about.keys()):
        if now.about[name] != then.about[name]:
            raise BadBaseline(
                str(project.baseline),
                f"it was made on {name} as {then.about[name]}, which now is {now.about[name]}; "
                "accept anew",
            )


def _told(value: object) -> str:
    if value is None:
        return "none"
    return ", ".join(map(str, value)) if isinstance(value, list) else str(value)
