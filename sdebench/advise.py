"""Step-size advice: the largest step of each scheme whose error stays below a target."""

import math
from collections.abc import Iterable, Sequence
from dataclasses import replace
from typing import Literal

import msgspec
from msgspec.structs import replace as replace_in

from sdebench.assess import Assessment, Levels, Row
from sdebench.discovery import find_problem
from sdebench.errors import BadOption
from sdebench.functional import STANDARD, Functional
from sdebench.integrator import Claim, ClaimKind
from sdebench.ladder import DEFAULT, Ladder
from sdebench.orders import student_quantile
from sdebench.pair import Pair, Routes
from sdebench.propagate import Estimate, propagate
from sdebench.request import (
    FunctionalLike,
    ProblemLike,
    SchemeLike,
    check_numbers,
    chosen_pairs,
    distinct,
    processors,
)
from sdebench.sample import Plan, Sample
from sdebench.step_cost import step_costs
from sdebench.target import (
    PRECISION,
    Known,
    between,
    first_below,
    known_from,
    power_law,
)

RUNGS = Ladder((1, 2, 4, 8, 16, 32, 64, 128, 256, 512, 1024, 2048, 4096))
SAMPLE_LOOKS = 2
SAMPLED = (DEFAULT, Ladder((16, 32, 64, 128, 256)), Ladder((64, 128, 256, 512, 1024)))
DEFAULT_SEED = 1


class Advice(msgspec.Struct, frozen=True, kw_only=True):
    """What one scheme needs to keep an error below the target.

    `steps` of length `h` have `error` ± `uncertainty` (of `functional`, if weak); all null where
    no step can be named. `how` tells what was measured from what is inferred.
    """

    scheme: str
    problem: str
    kind: ClaimKind
    target: float
    sentence: str
    functional: str | None = None
    steps: int | None = None
    h: float | None = None
    error: float | None = None
    uncertainty: float | None = None
    how: Literal["measured", "between rungs", "beyond the rungs"] | None = None
    seconds_per_path: float | None = None


def advise(
    schemes: SchemeLike | Iterable[SchemeLike] | None = None,
    *,
    on: ProblemLike,
    error: float,
    kind: ClaimKind = "strong",
    functionals: FunctionalLike | Iterable[FunctionalLike] | None = None,
    seed: int = DEFAULT_SEED,
    confidence: float = 0.95,
    threads: int | None = None,
) -> list[Advice]:
    """Return advice for each scheme that applies to a problem, the cheapest first.

    `error` is the target: for `kind` "strong" of the root mean square error of the end point, for
    "weak" of the errors of all `functionals` (default: mean, second moment and cosine). Errors are
    propagated where that can be done, else sampled; they stay below the target with their
    uncertainty on every finer rung too. Raises `SdebenchError` on wrong use.

    >>> import sdebench as sb
    >>> best, *rest = sb.advise(["euler-maruyama", "milstein"], on="gbm", error=1e-3)
    >>> best.scheme, best.steps < rest[0].steps
    ('milstein', True)
    """
    check_numbers(confidence, 0.1, seed, None, None, threads)
    if isinstance(error, bool) or not isinstance(error, int | float) or not 0 < error < math.inf:
        raise BadOption("error", error, "it is a positive number, such as 1e-3")
    if kind not in ("strong", "weak"):
        raise BadOption("kind", repr(kind), "it is 'strong' or 'weak'")
    problem = find_problem(on)
    chosen = _required(functionals, kind)
    claim = Claim(kind, 1.0)  # no claim is judged: its order is of no account
    levels = Levels(confidence, 0.1, 1)
    found, tried = [], []
    for scheme, _ in chosen_pairs(schemes, problem):
        if schemes is None and not set(scheme.noise) <= set(problem.functionals):
            continue
        plan = Plan(scheme, problem, DEFAULT, chosen, seed)
        pair = Pair(plan, Routes(propagate=True, sample=True, ladder=RUNGS), [claim])
        search = _Search(pair, claim, float(error), levels, threads or processors())
        found.append(search.advice())
        tried.append(scheme)
    timed = [
        replace_in(a, seconds_per_path=a.steps * cost) if a.steps else a
        for a, cost in zip(found, step_costs(tried, problem), strict=True)
    ]
    return sorted(timed, key=lambda each: each.seconds_per_path or math.inf)


def _required(
    given: FunctionalLike | Iterable[FunctionalLike] | None, kind: ClaimKind
) -> tuple[Functional, ...]:
    """Return the functionals that are to meet the target: of a weak error alone."""
    if kind == "strong":
        if given is not None:
            raise BadOption("functional", given, "a strong error is of no functional; ask for weak")
        return ()
    return STANDARD if given is None else distinct(given, ())


class _Search:
    """The search for the fewest steps of one scheme."""

    def __init__(
        self, pair: Pair, claim: Claim, target: float, levels: Levels, threads: int
    ) -> None:
        self.pair = pair
        self.claim = claim
        self.target = target
        self.levels = levels
        self.threads = threads

    def advice(self) -> Advice:
        """Return the advice."""
        pair = self.pair
        if not pair.applies:
            return self._none(pair.why_not)
        pair.examine(self.levels.tolerance)
        assert pair.local is not None
        if pair.local.breach is not None:
            return self._none(f"The step breaks its contract: {pair.local.breach.sentence}")
        pair.propagate(self.levels, self.threads)
        if pair.why_sampled:
            return self._from_sample()
        return self._from_propagation()

    def _none(self, why: str) -> Advice:
        plan = self.pair.plan
        return Advice(
            scheme=plan.scheme.label,
            problem=plan.problem.label,
            kind=self.claim.kind,
            target=self.target,
            sentence=why,
        )

    def _from_propagation(self) -> Advice:
        known = self._worst(self.pair.by_propagation, 1.0)
        enough = first_below(known, self.target)
        if enough is None:
            return self._beyond(known, list(self.pair.by_propagation.values()))
        counts = sorted(known)
        before = counts[: counts.index(enough)]
        low = before[-1] if before else 0
        low_known, high_known = known.get(low), known[enough]
        while enough - low > max(1, PRECISION * enough):
            middle = between(low, low_known, enough, high_known, self.target)
            tried = self._propagated(middle)
            if tried is not None and tried.most <= self.target:
                enough, high_known = middle, tried
            else:
                low, low_known = middle, tried
        return self._some(enough, high_known, "measured")

    def _propagated(self, steps: int) -> Known | None:
        """Return the error with other numbers of steps, or None where it is not known well."""
        pair = self.pair
        found = propagate(
            pair.plan.scheme,
            pair.plan.problem,
            [steps],
            list(zip(pair.plan.functionals, pair.references, strict=True)),
            pair.scale,
        )
        estimates: list[tuple[str | None, Estimate]] = (
            [(None, found.mean_square[0])]
            if self.claim.kind == "strong"
            else [(name, e[0]) for name, e in found.weak.items()]
        )
        if any(e.dropped is not None for _, e in estimates):
            return None
        return max((known_from(name, e) for name, e in estimates), key=lambda known: known.most)

    def _from_sample(self) -> Advice:
        """Return advice from sampled rungs: those of one ladder after another, finer each time."""
        known: dict[int, Known] = {}
        pair = self.pair
        for ladder in SAMPLED:
            pair.plan = replace(pair.plan, ladder=ladder)
            pair.sample, pair.looks = Sample(pair.plan), 0
            for _ in range(SAMPLE_LOOKS):
                pair.look(self.levels, self.threads, lambda: None)
            found = pair.by_sample
            if any(not a.trusted for a in found.values()):
                return self._none("A few paths weigh too much in the sample to tell its errors by.")
            dof = next(iter(found.values())).errors.dof
            known |= self._worst(found, student_quantile(1 - self.levels.confidence, dof))
            enough = first_below(known, self.target)
            if enough is not None:
                return self._between_rungs(known, enough)
        return self._beyond(known, list(pair.by_sample.values()))

    def _between_rungs(self, known: dict[int, Known], enough: int) -> Advice:
        """Return advice by a power law between the first rung that does and the one before it."""
        before = max((steps for steps in known if steps < enough), default=None)
        if before is None:
            return self._some(enough, known[enough], "measured")
        coarse, fine = known[before], known[enough]
        steps = power_law(before, coarse, enough, fine, self.target)
        share = math.log(steps / before) / math.log(enough / before)
        most = coarse.most ** (1 - share) * fine.most**share
        doubt = most * max(coarse.uncertainty / coarse.most, fine.uncertainty / fine.most)
        error = math.copysign(most - doubt, fine.error)
        return self._some(steps, Known(error, doubt, fine.functional), "between rungs")

    def _worst(self, found: dict[Row, Assessment], quantile: float) -> dict[int, Known]:
        """Return the largest error of all criteria with each number of steps known of all."""
        known: dict[int, list[Known]] = {}
        for row, a in found.items():
            values, widths = a.errors.values, a.errors.half_widths(quantile)
            for steps, error, width in zip(a.errors.steps, values, widths, strict=True):
                if math.isfinite(error) and math.isfinite(width):
                    each = Known(float(error), float(width), self.pair.name_of(row))
                    known.setdefault(steps, []).append(each)
        return {
            steps: max(each, key=lambda k: k.most)
            for steps, each in known.items()
            if len(each) == len(found)
        }

    def _beyond(self, known: dict[int, Known], found: Sequence[Assessment]) -> Advice:
        """Return advice beyond the finest rung, by the order and the constant found on rungs."""
        finest = max(known, default=0)
        name = known[finest].functional if known else None
        binding = next((a for a in found if self.pair.name_of(a.row) == name), None)
        horizon = self.pair.plan.problem.horizon
        constant = binding.constant(horizon) if binding is not None else None
        if not known or constant is None:
            return self._none(
                f"No rung to {finest} steps has an error below the target, and no order has "
                "settled that tells of finer ones."
            )
        p, c = constant
        assert binding is not None
        finest_error = float(binding.errors.values[list(binding.errors.steps).index(finest)])
        # What the next term of the error leaves at the finest rung shrinks from there like √h.
        left = abs(abs(finest_error) * (finest / horizon) ** p - c.estimate) + c.high - c.estimate
        steps = math.ceil(horizon * ((c.estimate + left) / self.target) ** (1 / p))
        steps = max(steps, finest + 1)
        size = (horizon / steps) ** p
        doubt = left * (finest / steps) ** 0.5 * size
        return self._some(
            steps,
            Known(math.copysign(c.estimate * size, finest_error), doubt, name),
            "beyond the rungs",
            finest,
        )

    def _some(
        self,
        steps: int,
        known: Known,
        how: Literal["measured", "between rungs", "beyond the rungs"],
        finest: int = 0,
    ) -> Advice:
        plan = self.pair.plan
        said = {
            "measured": f"The error with {steps} steps is below {self.target:g}",
            "between rungs": f"{steps} steps, found between sampled rungs",
            "beyond the rungs": f"{steps} steps, extrapolated: the finest rung has {finest}, and "
            "its error is above the target",
        }[how]
        return Advice(
            scheme=plan.scheme.label,
            problem=plan.problem.label,
            kind=self.claim.kind,
            target=self.target,
            sentence=f"{said}.",
            functional=known.functional,
            steps=steps,
            h=plan.problem.horizon / steps,
            error=known.error,
            uncertainty=known.uncertainty,
            how=how,
        )
