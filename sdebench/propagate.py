"""The propagated route: every error of a ladder without sampling, with a stated uncertainty.

What is averaged is the choice of error (`chain.py`); each rung is refined by itself (`refine.py`).
"""

import time
from collections.abc import Iterable, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass

from threadpoolctl import threadpool_limits  # type: ignore[import-untyped]

from sdebench.chain import MEAN_SQUARE, Chain, Goal, exact_goal, weak_goal
from sdebench.functional import Functional
from sdebench.integrator import Scheme
from sdebench.problem import Problem
from sdebench.propagable import growth_of, why_rough
from sdebench.refine import Estimate, Rung


@dataclass(frozen=True)
class Propagated:
    """Mean-square errors and weak errors on every rung, or the sentence that says why not.

    `why_not` holds a reason for each functional that is left to sampling.
    """

    steps: tuple[int, ...]
    mean_square: tuple[Estimate, ...]
    weak: Mapping[str, tuple[Estimate, ...]]
    why_not: Mapping[str, str]
    seconds: float


def propagate(
    scheme: Scheme,
    problem: Problem,
    steps: Sequence[int],
    functionals: Iterable[tuple[Functional, tuple[float, float]]],
    scale: float,
    threads: int = 1,
) -> Propagated:
    """Return the errors of a scheme with each number of `steps`.

    `functionals` come with their exact E f(X_T) and its doubt; `scale` is the size of X, for
    round-off.
    """
    begin = time.perf_counter()
    smooth: list[tuple[Functional, float, float]] = []
    rough = {}
    for f, (exact, _) in functionals:
        growth = growth_of(f, problem)
        why = why_rough(f, problem, growth)
        if why is None:
            smooth.append((f, growth, exact))
        else:
            rough[f.name] = why
    second, _ = problem.law(problem.params).expectation(lambda x: x * x)
    square = Functional("square", lambda x: x * x, growth=2)
    goals = {MEAN_SQUARE: exact_goal(square, growth_of(square, problem))}
    exact_values = {MEAN_SQUARE: second}
    for f, growth, exact in smooth:
        goal = weak_goal(f, growth)
        goals[goal], exact_values[goal] = exact_goal(f, growth), exact

    def rung(n: int) -> dict[Goal, Estimate]:
        chain = Chain(scheme, problem, n)
        return Rung(chain, goals, exact_values, scale).measure()

    # Matrices are too small to be shared among threads; rungs are not.
    with threadpool_limits(1, "blas"), ThreadPoolExecutor(threads) as pool:
        rungs = list(pool.map(rung, steps))
    return Propagated(
        steps=tuple(steps),
        mean_square=tuple(rung[MEAN_SQUARE] for rung in rungs),
        weak={
            goal.functional.name: tuple(rung[goal] for rung in rungs)
            for goal in goals
            if goal.functional is not None
        },
        why_not=rough,
        seconds=time.perf_counter() - begin,
    )
