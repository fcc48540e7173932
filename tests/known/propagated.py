"""What the bench propagates, for tests that hold it against an exact answer."""

import math
from functools import cache

import sdebench as sb
from sdebench import discovery
from sdebench.functional import STANDARD
from sdebench.propagate import Propagated, propagate
from sdebench.refine import Estimate

BY_NAME = {f.name: f for f in STANDARD}


@cache
def propagated(
    scheme: str, spec: str, steps: tuple[int, ...], functionals: tuple[str, ...] = tuple(BY_NAME)
) -> Propagated:
    """Return the errors of a scheme on a problem, as a run of the bench asks for them.

    `functionals` are names of standard ones; X has the size √(E X_T²) + |x0|, for round-off.
    """
    problem = sb.problem(spec)
    law = problem.law(problem.params)
    second, _ = law.expectation(lambda x: x * x)
    wanted = [(BY_NAME[name], law.expectation(BY_NAME[name])) for name in functionals]
    scale = math.sqrt(second) + abs(problem.start)
    return propagate(discovery.schemes()[scheme], problem, steps, wanted, scale, threads=1)


def estimates(found: Propagated, row: str) -> dict[int, Estimate]:
    """Return the estimates of a row, 'strong' or the functional's name, by the number of steps."""
    own = found.mean_square if row == "strong" else found.weak[row]
    return dict(zip(found.steps, own, strict=True))
