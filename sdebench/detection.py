"""Detection limits: the smallest faults that a supported row would have seen.

A fault that adds a constant to the error (a *plateau*) lowers the local order at the finest pair
of rungs. The largest plateau that still leaves it at p - δ, from the upper end of the coarse
error and the lower end of the fine one, is the limit. Dividing it by the change of the same error
per relative change of the drift or the diffusion gives the limit for a wrong coefficient.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from sdebench.evidence import DetectionLimit
from sdebench.functional import Functional
from sdebench.orders import Errors, Order, distance
from sdebench.problem import Problem
from sdebench.sde import SDE, Array, Coefficient

N_PATHS = 4096
N_STEPS = 64
FAULT = 0.01
CLEAR = 4.0  # a sensitivity below this many standard errors is not told from none


@dataclass(frozen=True)
class Sensitivity:
    """Change of an error per relative change of drift and diffusion; None or 0 where none."""

    drift: float | None
    diffusion: float | None


def plateau(errors: Errors, order: Order, needed: float, quantile: float) -> float:
    """Return the smallest constant error that would have kept the order below `needed`."""
    coarse, fine = order.counting[-2:]
    spread = quantile * errors.standard_errors
    upper = float(abs(errors.measures[coarse]) + spread[coarse])
    lower = max(float(abs(errors.measures[fine]) - spread[fine]), 0.0)
    growth = 2.0 ** (needed * errors.power * distance(errors, coarse, fine))
    level = max(upper - growth * lower, 0.0) / (growth - 1.0)
    return float(level ** (1.0 / errors.power))


def limits(level: float, sensitivity: Sensitivity) -> DetectionLimit:
    """Return a plateau as a detection limit, with the relative faults that would cause it."""
    drift, diffusion = (
        level / s if s else None for s in (sensitivity.drift, sensitivity.diffusion)
    )
    return DetectionLimit(plateau=level, drift=drift, diffusion=diffusion)


def sensitivities(
    problem: Problem, functionals: Sequence[Functional]
) -> tuple[Sensitivity, list[Sensitivity]]:
    """Return the sensitivity of the strong error, and of each functional's weak error.

    From paths of the SDE with its drift or its diffusion 1% off, on the same noise; 4096 paths of
    64 Euler–Maruyama steps give them to a few per cent, which is all a detection limit needs.
    """
    sde = problem.sde
    rng = np.random.default_rng(11)
    h = problem.horizon / N_STEPS
    wrong_drift = replace(sde, drift=_scaled(sde.drift))
    wrong_diffusion = replace(sde, diffusion=_scaled(sde.diffusion))
    paths = [np.full(N_PATHS, problem.start) for _ in range(3)]
    with np.errstate(all="ignore"):
        for step in range(N_STEPS):
            dw = rng.standard_normal(N_PATHS) * h**0.5
            paths = [
                _step(each, step * h, x, h, dw)
                for each, x in zip((sde, wrong_drift, wrong_diffusion), paths, strict=True)
            ]
        right, *wrong = paths
        strong = [float(np.sqrt(np.mean((x - right) ** 2))) / FAULT for x in wrong]
        weak = [[_clear(f(x) - f(right)) for x in wrong] for f in functionals]
    return Sensitivity(*strong), [Sensitivity(*pair) for pair in weak]


def _scaled(coefficient: Coefficient) -> Coefficient:
    return lambda t, x: (1 + FAULT) * coefficient(t, x)


def _step(sde: SDE, t: float, x: Array, h: float, dw: Array) -> Array:
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * dw


def _clear(difference: Array) -> float | None:
    mean = float(np.abs(np.mean(difference)))
    error = float(np.std(difference)) / N_PATHS**0.5
    return mean / FAULT if mean > CLEAR * error else None
