"""Where a step is tried: states the process visits, times in its horizon, other parameters."""

import math

import numpy as np

from sdebench.problem import Problem
from sdebench.sde import Array
from sdebench.wiener import Noise, StepLaw

SPREAD = (-1.5, -0.5, 0.5, 1.5)  # standard deviations of the driving noise
# Times over the horizon, two for each parameter set: the problem's own and four others.
TIMES = (
    (0.0, 0.38297),
    (0.11731, 0.82891),
    (0.27143, 0.61309),
    (0.45713, 0.93719),
    (0.70921, 0.98297),
)


def states(problem: Problem) -> Array:
    """Return states that the process visits around T/2, shape `(4,)`, by its exact flow."""
    h = problem.horizon / 2
    law = StepLaw(problem.functionals, h, problem.decay_rate)
    z = np.array(SPREAD)
    deviations = np.sqrt(np.diag(law.covariance))
    noise = Noise(**{n: sd * z for n, sd in zip(law.names, deviations, strict=True)})
    return problem.exact_step(0.0, np.full(len(z), problem.start), h, noise)


def time_scale(problem: Problem, t: float, x: Array) -> float:
    """Return the time over which the SDE changes little at states `x`: at most the horizon.

    1 / max(∂a/∂x, (∂b/∂x)²) by differences between the states: a step well below it is in the
    range of the Itô–Taylor expansion, however stiff the problem.
    """
    sde, order = problem.sde, np.argsort(x)
    gaps = np.diff(x[order])
    drift, diffusion = (np.abs(np.diff(f(t, x)[order])) / gaps for f in (sde.drift, sde.diffusion))
    return 1.0 / max(1.0 / problem.horizon, float(drift.max()), float(diffusion.max()) ** 2)


def times(problem: Problem, index: int = 0) -> tuple[float, float]:
    """Return two times for parameter set `index`: spread over the horizon, at no round fraction.

    The first set has the start among its times; together they leave no long stretch unseen.
    """
    early, late = TIMES[index]
    return early * problem.horizon, late * problem.horizon


def parameter_sets(problem: Problem) -> list[Problem]:
    """Return the problem and some others with every parameter but the horizon moved.

    Each parameter is multiplied by an independent factor between 1/2 and 2, of either sign (one
    that is zero is drawn from ±1), always the same ones: a scheme that ignores a parameter, or a
    value that hides a fault, does not pass by luck. A draw outside of a parameter's domain is
    taken with the other sign, or left where it was.
    """
    rng = np.random.default_rng(20)
    sets = [problem]
    for _ in range(len(TIMES) - 1):
        values: dict[str, object] = {}
        for name in sorted(problem.parameters):
            value, limits = problem.params[name], problem.parameters[name]
            factor = math.exp(rng.uniform(-1, 1) * math.log(2)) * rng.choice([-1.0, 1.0])
            moved = value * factor if value else rng.uniform(-1, 1)
            allowed = [m for m in (moved, -moved, value) if limits.above < m < limits.below]
            values[name] = float(allowed[0])
        sets.append(problem.with_parameters(values))
    return sets
