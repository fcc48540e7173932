"""Errors of the default schemes in closed form: what an unlimited number of paths would give."""

from collections.abc import Sequence

import numpy as np

from sdebench.problem import Problem
from tests.known.gaussian_errors import EndPoints, ou_end_points, ramped_noise_end_points
from tests.known.gbm_errors import gbm_errors

CLOSED_FORMS = ("gbm", "ou", "ramped-noise")


def errors(scheme: str, problem: Problem, steps: Sequence[int]) -> dict[str, np.ndarray]:
    """Return the mean-square error and the weak errors that are known, rung by rung.

    On additive noise Milstein is Euler–Maruyama; E cos X is known there only.
    """
    rungs = [_rung(scheme, problem, n) for n in steps]
    return {name: np.array([float(rung[name]) for rung in rungs]) for name in rungs[0]}


def _rung(scheme: str, problem: Problem, steps: int) -> dict[str, float]:
    p = dict(problem.params)
    if problem.name == "gbm":
        found = gbm_errors(scheme, steps, **p)
        weak = {"mean": found.mean, "second-moment": found.second_moment}
        return {"mean-square": found.mean_square} | weak
    of_problem = {"ou": ou_end_points, "ramped-noise": ramped_noise_end_points}
    end: EndPoints = of_problem[problem.name](steps, **p)
    return {"mean-square": end.mean_square} | end.weak
