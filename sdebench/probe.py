"""Where a step is tried: states the process visits, times in its horizon, other parameters."""

import math

import numpy as np

from sdebench.problem import Problem
from sdebench.sde import Array
from sdebench.wiener import Noise, StepLaw

SPREAD = (-1.5, -0.5, 0.5, 1.5)  # standard deviations of the driving noise
PARAMETER_SETS = 4  # beside the problem's own values


def states(problem: Problem) -> Array:
    """Return states that the process visits around T/2, shape `(4,)`, by its exact flow."""
    h = problem.horizon / 2
    law = StepLaw(problem.functionals, h, problem.decay_rate)
    z = np.array(SPREAD)
    deviations = np.sqrt(np.diag(law.covariance))
    noise = Noise(**{n: sd * z for n, sd in zip(law.names, deviations, strict=True)})
    return problem.exact_step(0.0, np.full(len(z), problem.start), h, noise)


def times(problem: Problem) -> tuple[float, float]:
    """Return a time at the start and one well inside the horizon."""
    return 0.0, 0.375 * problem.horizon


def parameter_sets(problem: Problem) -> list[Problem]:
    """Return the problem and some others with every parameter but the horizon moved.

    Each parameter is multiplied by an independent factor between 1/2 and 2 (one that is zero is
    drawn from ±1), always the same ones: a scheme that ignores a parameter, or a value that
    hides a fault, does not pass by luck. Draws outside a parameter's domain are left where they
    were.
    """
    rng = np.random.default_rng(20)
    sets = [problem]
    for _ in range(PARAMETER_SETS):
        values: dict[str, object] = {}
        for name in sorted(problem.parameters):
            value, limits = problem.params[name], problem.parameters[name]
            factor = math.exp(rng.uniform(-1, 1) * math.log(2))
            moved = value * factor if value else rng.uniform(-1, 1)
            values[name] = moved if limits.above < moved < limits.below else value
        sets.append(problem.with_parameters(values))
    return sets
