"""A scheme on a problem under measurement, by every route that applies.

Its contract and its one step first; then its errors, propagated where that can be done, with a
sample beside them as a check, and sampled, look by look, where it cannot.
"""

import math
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from sdebench import probe
from sdebench.admission import check_functional, check_problem
from sdebench.assess import Assessment, Levels, Row, assess, check_references
from sdebench.assess_propagated import assess_propagated, check_routes, doubt, n_comparisons
from sdebench.contract import Breach, Law, fingerprint, first_breach
from sdebench.errors import BenchFault
from sdebench.integrator import Claim
from sdebench.ladder import PROPAGATED, Ladder
from sdebench.onestep import OneStep, measure_one_step
from sdebench.propagable import why_not
from sdebench.propagate import propagate
from sdebench.sample import Plan, Sample
from sdebench.verdict import Ruling

FIRST_BLOCKS = 2  # blocks of paths in the first look; every further look doubles the sample


@dataclass(frozen=True)
class Local:
    """What was found without sampling: a broken law, or one-step evidence; and the time taken."""

    breach: Breach | None
    one_step: OneStep | None
    contract_seconds: float
    one_step_seconds: float


@dataclass(frozen=True)
class Routes:
    """Which routes are taken to global errors; what is propagated has `ladder` for its rungs."""

    propagate: bool
    sample: bool
    ladder: Ladder


SAMPLED_ALONE = Routes(propagate=False, sample=True, ladder=PROPAGATED)


class Pair:
    """A scheme and a problem under measurement; the plan says how they are sampled.

    `claims` are those of the scheme on the problem's class of noise unless others are given.
    """

    def __init__(
        self,
        plan: Plan,
        routes: Routes = SAMPLED_ALONE,
        claims: Sequence[Claim] | None = None,
    ) -> None:
        self.plan = plan
        self.routes = routes
        kind = plan.problem.noise_kind
        self.claims = plan.scheme.claims(kind) if claims is None else list(claims)
        self.sample = Sample(plan)
        self.looks = 0
        self.by_sample: dict[Row, Assessment] = {}
        self.by_propagation: dict[Row, Assessment] = {}
        self.why_sampled: dict[Row, str] = {}
        self.agreement: dict[Row, str] = {}
        self.doubt: Ruling | None = None
        self.propagation_seconds = 0.0
        self.step_seconds: float | None = None
        self.local: Local | None = None
        self.fingerprint: list[bytes] = []

    @property
    def label(self) -> str:
        """The scheme and the problem as typed."""
        return f"{self.plan.scheme.label} on {self.plan.problem.label}"

    @property
    def applies(self) -> bool:
        """Whether the problem has every functional and parameter that the scheme needs."""
        return self.plan.problem.suits(self.plan.scheme)

    @property
    def why_not(self) -> str:
        """The sentence that says why the scheme does not apply."""
        scheme, problem = self.plan.scheme, self.plan.problem
        missing = [f"functional '{n}'" for n in scheme.noise if n not in problem.functionals]
        missing += [f"parameter '{n}'" for n in scheme.params if n not in problem.params]
        return f"{problem.label} has no {missing[0]}, which {scheme.label} steps by."

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

    @property
    def assessments(self) -> list[Assessment]:
        """What is known of each row: propagated where that could be done, else sampled."""
        found = [self.by_propagation.get(row) or self.by_sample.get(row) for row in self.rows]
        return [a for a in found if a is not None]

    def name_of(self, row: Row) -> str | None:
        """Return the name of a weak row's functional."""
        return None if row.functional is None else self.plan.functionals[row.functional].name

    def propagate(self, levels: Levels, threads: int) -> None:
        """Propagate what can be, and say of the rest why not."""
        scheme, problem, steps = self.plan.scheme, self.plan.problem, self.routes.ladder.steps
        if not self.routes.propagate or not self.measurable:
            return
        whole = why_not(scheme, problem, steps)
        if whole is not None:
            self.why_sampled = dict.fromkeys(self.rows, whole)
            return
        weak = any(row.functional is not None for row in self.rows)
        functionals = list(zip(self.plan.functionals, self.references, strict=True)) if weak else []
        found = propagate(scheme, problem, steps, functionals, self.scale, threads)
        self.propagation_seconds = found.seconds
        for row in self.rows:
            if row.at == "grid":
                self.why_sampled[row] = "the largest error over a grid is no function of its end"
                continue
            assessed = assess_propagated(found, row, self.name_of(row), levels, self.scale)
            if isinstance(assessed, str):
                self.why_sampled[row] = assessed
            else:
                self.by_propagation[row] = assessed
        if not self.why_sampled:
            self.plan = replace(self.plan, ladder=self.plan.ladder.coarse_part)
            self.sample = Sample(self.plan)

    def one_step_ruling(self, claim: Claim, tolerance: float) -> Ruling:
        """Return what one-step evidence says of a claim."""
        assert self.local is not None
        assert self.local.one_step is not None
        return self.local.one_step.ruling(claim, tolerance)

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
            self.fingerprint = fingerprint(scheme, problem)
            one_step = measure_one_step(scheme, problem, self.claims, tolerance)
        done = time.perf_counter()
        self.local = Local(breach, one_step, checked - begin, done - checked)

    @property
    def measurable(self) -> bool:
        """Whether there is anything to measure: the scheme applies and keeps its contract."""
        return self.applies and self.local is not None and self.local.breach is None

    @property
    def sampled(self) -> bool:
        """Whether a sample is drawn."""
        return self.measurable and self.routes.sample

    def look(self, levels: Levels, threads: int, on_block: Callable[[], None]) -> None:
        """Double the sample (or draw the first one) and assess every row anew."""
        with np.errstate(all="ignore"):  # overflow is ruled on, not warned of
            self.sample.extend(self.next_blocks, threads, on_block)
            self.looks += 1
            self.by_sample = {
                row: assess(self.sample, row, levels, self.looks, self.scale) for row in self.rows
            }

    @property
    def next_blocks(self) -> int:
        """Blocks that the next look draws."""
        return self.sample.n_blocks or FIRST_BLOCKS

    @property
    def n_route_checks(self) -> int:
        """How many rungs two routes have in common."""
        both = [(a, self.by_sample[row]) for row, a in self.by_propagation.items() if self.looks]
        return sum(n_comparisons(propagated, sampled) for propagated, sampled in both)

    def check(self, n_checks: int, n_route_checks: int) -> None:
        """Raise `BenchFault` if flow and law disagree on the sample, or two routes on an error.

        Routes that differ over a step that no longer gives what it gave are a breach of contract.
        """
        check_references(self.sample, self.references, n_checks)
        try:
            self._check_routes(n_route_checks)
        except BenchFault:
            assert self.local is not None
            if fingerprint(self.plan.scheme, self.plan.problem) == self.fingerprint:
                raise
            sentence = Law.SAME_BITS.sentence("other values", "after it was sampled")
            self.local = replace(self.local, breach=Breach(Law.SAME_BITS, sentence))

    def _check_routes(self, n_route_checks: int) -> None:
        tally, rows = self.sample.tally, self.plan.rows
        assert tally is not None
        fourth = tally.squares[list(rows.squares)] / self.sample.n_paths**2
        for row, propagated in self.by_propagation.items():
            what = f"{self.label}, {row.claim.kind} {self.name_of(row) or ''}".rstrip()
            self.agreement[row] = check_routes(
                what,
                propagated,
                self.by_sample[row],
                fourth if row.functional is None else None,
                n_route_checks,
            )
            if row.functional is None and self.doubt is None:
                self.doubt = doubt(propagated, self.by_sample[row], n_route_checks)
