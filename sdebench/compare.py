"""Two integrators side by side: the ratio of their errors, of their constants and of their cost."""

import math
from collections.abc import Iterable, Sequence
from dataclasses import replace
from typing import Literal

import msgspec
import numpy as np

from sdebench.assess import Assessment, Levels, Row
from sdebench.assess_propagated import BOX
from sdebench.discovery import find_scheme
from sdebench.duet import Duet
from sdebench.errors import BadOption
from sdebench.evidence import ErrorConstant
from sdebench.integrator import Claim, ClaimKind, Scheme
from sdebench.ladder import DEFAULT, PROPAGATED, Ladder, round_off
from sdebench.orders import Errors, student_quantile
from sdebench.pair import Pair, Routes
from sdebench.ratios import Both, ComparedRung
from sdebench.request import (
    FunctionalLike,
    ProblemLike,
    SchemeLike,
    check_numbers,
    chosen_functionals,
    chosen_pairs,
    processors,
)
from sdebench.sample import Plan
from sdebench.step_cost import middle_ratio, step_seconds

CLAIMS = (Claim("strong", 1.0), Claim("weak", 1.0))  # none is judged: for their rows alone
N_BLOCKS = 8  # of paths, where errors are sampled
DEFAULT_SEED = 1


class Comparison(msgspec.Struct, frozen=True, kw_only=True):
    """What the errors of two integrators on one problem are to one another.

    `cost` is the time of a step of the new one over that of the old one, the median of rounds in
    turn, between `cost_low` and `cost_high`. Constants are those of error ~ C h^p.
    """

    old: str
    new: str
    problem: str
    kind: ClaimKind
    functional: str | None
    route: Literal["propagated", "sampled"]
    rungs: list[ComparedRung]
    old_constant: ErrorConstant | None
    new_constant: ErrorConstant | None
    cost: float
    cost_low: float
    cost_high: float
    sentence: str


def compare(
    old: SchemeLike,
    new: SchemeLike,
    *,
    on: ProblemLike | Iterable[ProblemLike] | None = None,
    steps: Iterable[int] | None = None,
    functionals: FunctionalLike | Iterable[FunctionalLike] | None = None,
    seed: int = DEFAULT_SEED,
    confidence: float = 0.95,
    threads: int | None = None,
) -> list[Comparison]:
    """Return the comparisons of two integrators on problems that both apply to.

    Errors are propagated where that can be done for both; else both are sampled on the same paths,
    so that most of the noise leaves their ratio. Arguments are as for `measure`. Raises
    `SdebenchError` on wrong use.

    >>> import sdebench as sb
    >>> strong = sb.compare("euler-maruyama", "milstein", on="gbm")[0]
    >>> strong.rungs[-1].ratio < 0.1
    True
    """
    check_numbers(confidence, 0.1, seed, None, None, threads)
    first, second = find_scheme(old), find_scheme(new)
    if first == second:
        raise BadOption("new", second.label, "it is the old integrator itself; name another one")
    chosen = chosen_functionals(functionals)
    own = None if steps is None else Ladder.of(steps)
    asked = [p for _, p in chosen_pairs(first, on)]
    problems = [p for p in asked if p.suits(first) and p.suits(second)]
    if not problems or (on is not None and problems != asked):
        alone = next((p.label for p in asked if p not in problems), "nothing")
        rule = f"{first.label} and {second.label} share no problem there"
        raise BadOption("on", alone, rule)
    levels = Levels(confidence, 0.1, 1)
    found = []
    for problem in problems:
        plan = Plan(first, problem, own or DEFAULT, chosen, seed)
        found += _Sides(plan, second, own or PROPAGATED, levels, threads or processors()).compared()
    return found


class _Sides:
    """Two integrators on one problem."""

    def __init__(
        self, plan: Plan, new: Scheme, ladder: Ladder, levels: Levels, threads: int
    ) -> None:
        self.levels = levels
        self.threads = threads
        plans = (plan, replace(plan, scheme=new))
        routes = Routes(propagate=True, sample=True, ladder=ladder)
        self.pairs = [Pair(each, routes, CLAIMS) for each in plans]
        self.duet = Duet(*plans)

    def compared(self) -> list[Comparison]:
        """Return a comparison of the strong error, and one for each functional."""
        for pair in self.pairs:
            pair.examine(self.levels.tolerance)
            assert pair.local is not None
            if pair.local.breach is not None:
                why = f"it breaks its contract: {pair.local.breach.sentence.rstrip('.')}"
                raise BadOption("scheme", pair.plan.scheme.label, why)
            pair.propagate(self.levels, self.threads)
        plan = self.pairs[0].plan
        costs = step_seconds([pair.plan.scheme for pair in self.pairs], plan.problem)
        cost = middle_ratio(costs[1], costs[0])
        return [self._comparison(row, cost) for row in self.pairs[0].rows]

    def _comparison(self, row: Row, cost: tuple[float, float, float]) -> Comparison:
        old, new = (pair.by_propagation.get(row) for pair in self.pairs)
        both = self._propagated(old, new) if old and new else self._sampled(row)
        first, second = (pair.plan for pair in self.pairs)
        horizon = first.problem.horizon
        rungs, constants = both.rungs(horizon), both.constants(horizon)
        return Comparison(
            old=first.scheme.label,
            new=second.scheme.label,
            problem=first.problem.label,
            kind=row.claim.kind,
            functional=self.pairs[0].name_of(row),
            route=both.route,
            rungs=rungs,
            old_constant=constants[0],
            new_constant=constants[1],
            cost=cost[0],
            cost_low=cost[1],
            cost_high=cost[2],
            sentence=summary(
                first.scheme.label, second.scheme.label, rungs, constants[0], constants[1], cost
            ),
        )

    def _propagated(self, old: Assessment, new: Assessment) -> Both:
        cross = np.zeros(len(old.errors.steps))
        return Both("propagated", old.errors, new.errors, cross, BOX, 1.0)

    def _sampled(self, row: Row) -> Both:
        """Return errors sampled on the same paths."""
        duet, plan = self.duet, self.duet.plans[0]
        if duet.moments is None:
            duet.extend(N_BLOCKS, self.threads)
        strong = row.functional is None
        means, covariance, dof = (
            duet.mean_squares() if row.functional is None else duet.weak_errors(row.functional)
        )
        n, power = len(plan.ladder.steps), 2 if strong else 1
        floors = round_off(plan.ladder.steps, self.pairs[0].scale) ** power
        old, new = (
            Errors(
                plan.ladder.steps,
                plan.ladder.octaves,
                means[part],
                covariance[part, part],
                dof,
                power,
                floors,
            )
            for part in (slice(0, n), slice(n, 2 * n))
        )
        quantile = student_quantile(1 - self.levels.confidence, dof)
        return Both("sampled", old, new, np.diag(covariance[:n, n:]), quantile, quantile)


def summary(
    old: str,
    new: str,
    rungs: Sequence[ComparedRung],
    old_constant: ErrorConstant | None,
    new_constant: ErrorConstant | None,
    cost: tuple[float, float, float],
) -> str:
    """Return the sentence that says which is better, where, and by how much."""
    known = [r for r in rungs if r.low is not None and r.ratio is not None]
    if not known:
        return "No rung has an error of both that is known well enough to compare."
    steps = {
        "smaller": [r.steps for r in known if r.high is not None and r.high < 1],
        "larger": [r.steps for r in known if r.low is not None and r.low > 1],
    }
    finest = known[-1]
    assert finest.ratio is not None
    where = "on every rung" if len(known) == len(rungs) else "on every rung that both have"
    if len(steps["smaller"]) == len(known):
        head = f"{new} has the smaller error {where}"
    elif len(steps["larger"]) == len(known):
        head = f"{old} has the smaller error {where}"
    elif not steps["smaller"] and not steps["larger"]:
        head = f"The errors of {old} and {new} do not differ beyond their uncertainty"
    else:
        said = [
            f"the {word} error with {_listed(which)} steps"
            for word, which in steps.items()
            if which
        ]
        head = f"{new} has {' and '.join(said)}"
    sentence = f"{head}: {new}'s is {_times(finest.ratio)} times {old}'s with {finest.steps} steps"
    if old_constant is not None and new_constant is not None:
        if old_constant.order == new_constant.order:
            ratio = new_constant.value / old_constant.value if old_constant.value else math.nan
            both = f"both of order {old_constant.order:g}"
            sentence += f", in the limit {_times(ratio)} times ({both})"
        else:
            sentence += f"; orders {old_constant.order:g} and {new_constant.order:g}"
    return f"{sentence}. A step costs {cost[0]:.2g} times as much ({cost[1]:.2g} to {cost[2]:.2g})."


def _listed(steps: Sequence[int]) -> str:
    return ", ".join(map(str, steps))


def _times(ratio: float) -> str:
    """Return a ratio to three digits, near 1 those after the point."""
    return f"{ratio:.3f}" if 0.9 < ratio < 1.1 else f"{ratio:.3g}"
