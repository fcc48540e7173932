"""Step-size advice: the largest step of each scheme whose error stays below a target."""

import math
from collections.abc import Iterable

import msgspec
from msgspec.structs import replace

from sdebench.assess import Levels
from sdebench.discovery import find_problem
from sdebench.errors import BadOption
from sdebench.functional import STANDARD, Functional
from sdebench.integrator import Claim, ClaimKind
from sdebench.ladder import DEFAULT, Ladder
from sdebench.pair import Pair, Routes
from sdebench.request import (
    FunctionalLike,
    ProblemLike,
    SchemeLike,
    check_numbers,
    chosen_pairs,
    distinct,
    processors,
)
from sdebench.sample import Plan
from sdebench.search import Answer, How, Search
from sdebench.step_cost import step_costs

RUNGS = Ladder((1, 2, 4, 8, 16, 32, 64, 128, 256, 512, 1024, 2048, 4096))
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
    how: How | None = None
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
        if schemes is None and not problem.suits(scheme):
            continue
        plan = Plan(scheme, problem, DEFAULT, chosen, seed)
        pair = Pair(plan, Routes(propagate=True, sample=True, ladder=RUNGS), [claim])
        search = Search(pair, claim, float(error), levels, threads or processors())
        found.append(_advice(pair, kind, float(error), search.answer()))
        tried.append(scheme)
    timed = [
        replace(a, seconds_per_path=a.steps * cost) if a.steps else a
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


def _advice(pair: Pair, kind: ClaimKind, target: float, answer: Answer | str) -> Advice:
    """Return an answer as advice, with its sentence."""
    said = answer if isinstance(answer, str) else answer.sentence(target)
    advice = Advice(
        scheme=pair.plan.scheme.label,
        problem=pair.plan.problem.label,
        kind=kind,
        target=target,
        sentence=said,
    )
    if isinstance(answer, str):
        return advice
    return replace(
        advice,
        functional=answer.known.functional,
        steps=answer.steps,
        h=pair.plan.problem.horizon / answer.steps,
        error=answer.known.error,
        uncertainty=answer.known.uncertainty,
        how=answer.how,
    )
