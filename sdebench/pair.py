"""A scheme on a problem: its contract, its one-step evidence, and a sample that grows by looks."""

import math
import time
from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from sdebench import probe
from sdebench.admission import check_functional, check_problem
from sdebench.assess import Assessment, Levels, Row, assess, check_references
from sdebench.contract import Breach, first_breach
from sdebench.integrator import Claim
from sdebench.onestep import OneStep, measure_one_step
from sdebench.sample import Plan, Sample
from sdebench.verdict import Ruling, Verdict, overall

FIRST_BLOCKS = 2  # blocks of paths in the first look; every further look doubles the sample


@dataclass(frozen=True)
class Local:
    """What was found without sampling: a broken law, or one-step evidence; and the time taken."""

    breach: Breach | None
    one_step: OneStep | None
    contract_seconds: float
    one_step_seconds: float


class Pair:
    """A scheme and a problem under measurement; the plan says how they are sampled."""

    def __init__(self, plan: Plan) -> None:
        self.plan = plan
        self.sample = Sample(plan)
        self.looks = 0
        self.assessments: list[Assessment] = []
        self.local: Local | None = None

    @property
    def label(self) -> str:
        """The scheme and the problem as typed."""
        return f"{self.plan.scheme.label} on {self.plan.problem.label}"

    @property
    def applies(self) -> bool:
        """Whether the problem has every functional that the scheme needs."""
        return set(self.plan.scheme.noise) <= set(self.plan.problem.functionals)

    @property
    def why_not(self) -> str:
        """The sentence that says why the scheme does not apply."""
        scheme, problem = self.plan.scheme, self.plan.problem
        missing = next(name for name in scheme.noise if name not in problem.functionals)
        return f"{problem.label} has no functional '{missing}', which {scheme.label} steps by."

    @cached_property
    def claims(self) -> list[Claim]:
        """The claims on this problem's class of noise."""
        return self.plan.scheme.claims(self.plan.problem.noise_kind)

    @cached_property
    def rows(self) -> list[Row]:
        """The rows that sampling measures."""
        rows: list[Row] = []
        for claim in self.claims:
            if claim.kind == "weak":
                rows += [Row(claim, functional=i) for i in range(len(self.plan.functionals))]
            else:
                rows += [Row(claim, at="horizon")]
                rows += [Row(claim, at="grid")] if self.plan.grid_maximum else []
        return rows

    @cached_property
    def scale(self) -> float:
        """The size of X, for round-off: the root mean square of X_T plus that of x0."""
        problem = self.plan.problem
        second, _ = problem.law(problem.params).expectation(lambda x: x * x)
        return math.sqrt(second) + abs(problem.start)

    @cached_property
    def references(self) -> list[tuple[float, float]]:
        """The exact E f(X_T) of each functional, with its numerical uncertainty."""
        law = self.plan.problem.law(self.plan.problem.params)
        return [law.expectation(f) for f in self.plan.functionals]

    def examine(self, tolerance: float) -> None:
        """Check the contract and, if it holds, take one-step evidence."""
        scheme, problem = self.plan.scheme, self.plan.problem
        check_problem(problem)
        for functional in self.plan.functionals:
            check_functional(functional, probe.states(problem))
        begin = time.perf_counter()
        breach = first_breach(scheme, problem)
        checked = time.perf_counter()
        one_step = None
        if breach is None:
            one_step = measure_one_step(scheme, problem, self.claims, tolerance)
        done = time.perf_counter()
        self.local = Local(breach, one_step, checked - begin, done - checked)

    @property
    def sampled(self) -> bool:
        """Whether there is anything to sample: the scheme applies and keeps its contract."""
        return self.applies and self.local is not None and self.local.breach is None

    def look(self, levels: Levels, threads: int, on_block: Callable[[], None]) -> None:
        """Double the sample (or draw the first one) and assess every row anew."""
        with np.errstate(all="ignore"):  # overflow is ruled on, not warned of
            self.sample.extend(self.next_blocks, threads, on_block)
            self.looks += 1
            self.assessments = [
                assess(self.sample, row, levels, self.looks, self.scale) for row in self.rows
            ]

    @property
    def next_blocks(self) -> int:
        """Blocks that the next look draws."""
        return self.sample.n_blocks or FIRST_BLOCKS

    def settled(self, levels: Levels) -> bool:
        """Return whether more paths could change no verdict on a claim."""
        return all(
            not any(a.ruling.more_paths_help for a in self.bearing(claim))
            for claim in self.claims
            if self.one_step_ruling(claim, levels).verdict is not Verdict.REFUTED
        )

    def bearing(self, claim: Claim) -> list[Assessment]:
        """Return the assessments that count for a claim: resolved ones, or all if none is."""
        own = [a for a in self.assessments if a.row.claim == claim]
        return [a for a in own if a.counts] or own

    def one_step_ruling(self, claim: Claim, levels: Levels) -> Ruling:
        """Return what one-step evidence says of a claim."""
        assert self.local is not None
        assert self.local.one_step is not None
        return self.local.one_step.ruling(claim, levels.tolerance)

    def decisive(self, claim: Claim) -> Assessment:
        """Return the assessment that the verdict on a claim rests on, of the lowest order."""
        bearing = self.bearing(claim)
        verdict = overall([a.ruling.verdict for a in bearing])
        return min(
            (a for a in bearing if a.ruling.verdict is verdict),
            key=lambda a: a.order.local.estimate if a.order is not None else math.inf,
        )

    def claim_ruling(self, claim: Claim, levels: Levels) -> Ruling:
        """Return the ruling on a claim from all evidence: one step may refute it alone."""
        local = self.one_step_ruling(claim, levels)
        if local.verdict is Verdict.REFUTED:
            return local
        decisive = self.decisive(claim)
        if decisive.row.functional is None:
            return decisive.ruling
        name = self.plan.functionals[decisive.row.functional].name
        sentence = decisive.ruling.sentence
        return replace(decisive.ruling, sentence=f"{name}: {sentence[0].lower()}{sentence[1:]}")

    def check(self, n_checks: int) -> None:
        """Raise `BenchFault` if the problem's flow and law disagree on the sample."""
        check_references(self.sample, self.references, n_checks)
