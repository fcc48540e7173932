"""What can be measured at all: problems and functionals that double precision holds."""

import inspect
import math

import numpy as np

from sdebench.blame import blamed
from sdebench.errors import BadFunctional, BadOption
from sdebench.functional import Functional
from sdebench.probe import states
from sdebench.problem import Problem
from sdebench.sde import Array

LARGEST = 1e100  # of E X_T²: squares of errors of squares must not overflow
LEAST_SPREAD = 1e-8  # of typical states, relative: below, round-off hides what noise does


def check_problem(problem: Problem) -> None:
    """Raise `BadOption` where double precision cannot hold the exact solution or its noise."""
    with np.errstate(all="ignore"):
        try:
            found = states(problem)
            second, _ = problem.law(problem.params).expectation(lambda x: x * x)
        except (OverflowError, ZeroDivisionError, ValueError):
            found, second = np.array([np.inf]), math.inf
    if not np.all(np.isfinite(found)) or not second < LARGEST:
        raise BadOption("problem", problem.label, "its exact solution overflows double precision")
    if np.ptp(found) <= LEAST_SPREAD * np.abs(found).max():
        raise BadOption("problem", problem.label, "its noise is lost in the round-off of its state")


def check_functional(functional: Functional, x: Array) -> None:
    """Raise `BadFunctional` unless the functional can be averaged over end points such as `x`."""
    given = x.copy()
    try:
        inspect.signature(functional.function).bind(given)
    except TypeError:
        takes = f"takes {inspect.signature(functional.function)}"
        raise BadFunctional(functional.name, takes) from None
    except ValueError:  # a function without a signature, such as one of NumPy's
        pass
    asked = blamed(f"Functional '{functional.name}'", functional.function, "when it was tried")
    with np.errstate(all="ignore"), asked:
        values = functional.function(given)
    if not np.array_equal(given, x):
        raise BadFunctional(functional.name, "writes into its input")
    if not isinstance(values, np.ndarray) or values.shape != x.shape:
        seen = f"shape {values.shape}" if isinstance(values, np.ndarray) else type(values).__name__
        raise BadFunctional(functional.name, f"returns {seen} for {x.size} end points")
    if values.dtype.kind not in "bif":
        raise BadFunctional(functional.name, f"returns {values.dtype}")
    bad = np.flatnonzero(~np.isfinite(values))
    if bad.size:
        raise BadFunctional(functional.name, f"gives {values[bad[0]]} at x={x[bad[0]]:.6g}")
