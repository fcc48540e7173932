"""What a step of a scheme costs: its own time and that of drawing its noise, a path."""

import math
import time
from collections.abc import Sequence
from statistics import median

import numpy as np

from sdebench.blame import blamed
from sdebench.integrator import Scheme
from sdebench.problem import Problem
from sdebench.sample import BLOCK
from sdebench.wiener import Noise, StepLaw

REPEATS = 7
N_STEPS = 8
N_SMALL = 64  # of the size of the horizon, so that the steps stay in the range of a real run


def step_seconds(schemes: Sequence[Scheme], problem: Problem) -> list[list[float]]:
    """Return the seconds that one step of one path takes, for each scheme, in rounds.

    The schemes take turns, so that a machine that drifts does not favour one: compare within a
    round. Measured on blocks of 16384 paths on one thread, with drawing the normals.
    """
    rounds = [[_seconds(scheme, problem) for scheme in schemes] for _ in range(REPEATS)]
    return [list(times) for times in zip(*rounds, strict=True)]


def step_costs(schemes: Sequence[Scheme], problem: Problem) -> list[float]:
    """Return the seconds of a step of a path for each scheme that the problem suits, else infinity.

    The least of the rounds: what else a machine does only adds to it.
    """
    suited = [s for s in schemes if problem.suits(s)]
    found = dict(zip((s.label for s in suited), step_seconds(suited, problem), strict=True))
    return [min(found[s.label]) if s.label in found else math.inf for s in schemes]


def middle_ratio(new: Sequence[float], old: Sequence[float]) -> tuple[float, float, float]:
    """Return the median of paired ratios new / old, and the least and the largest."""
    ratios = [a / b for a, b in zip(new, old, strict=True)]
    return median(ratios), min(ratios), max(ratios)


def _seconds(scheme: Scheme, problem: Problem) -> float:
    sde = problem.sde.in_calculus(scheme.calculus)
    h = problem.horizon / N_SMALL
    law = StepLaw(scheme.noise, h, problem.decay_rate)
    stream = np.random.Generator(np.random.SFC64(1))
    x = np.full(BLOCK, problem.start)
    begin = time.perf_counter()
    with np.errstate(all="ignore"), blamed(f"Scheme '{scheme.label}'", scheme.step, "when timed"):
        drawn = []
        for k in range(N_STEPS):
            noise = law.from_normals([stream.standard_normal(BLOCK) for _ in law.names])
            own = {name: noise[name] for name in scheme.noise}
            if scheme.path is None:
                x = scheme.step(sde, k * h, x, h, Noise(**own))
            else:
                drawn.append(own)
        if scheme.path is not None:
            kept = {name: np.stack([each[name] for each in drawn]) for name in scheme.noise}
            scheme.path(sde, 0.0, x, h, Noise(**kept))
    return (time.perf_counter() - begin) / (N_STEPS * BLOCK)
