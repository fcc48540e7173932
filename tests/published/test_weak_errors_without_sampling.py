"""Weak errors of Euler–Maruyama on GBM as published, to the digits printed: nothing is sampled.

Higham (2001), SIAM Review 43, 525–546, weak experiment: dX = 2 X dt + 0.1 X dW, X_0 = 1, T = 1,
steps 2^-9 … 2^-5 (from memory). The paper's errors are means of 50000 paths; these are what an
unlimited number would give, |E X^h_1 - e²|, computed apart from this file.

Talay & Tubaro (1990), Stoch. Anal. Appl. 8, 483–509 (abstract seen): E f(X^h_T) has an expansion
in powers of h, so that 2 E f(X^(h/2)_T) - E f(X^h_T) is of weak order 2. The errors on GBM were
computed apart from this file, from E X^h_T = x0 (1 + μh)^N.
"""

import math
from itertools import pairwise

import numpy as np
import pytest

from sdebench.refine import Estimate
from tests.known.propagated import estimates, propagated
from tests.tolerance import as_printed

HIGHAM = {
    512: "0.0287325457",
    256: "0.0572055002",
    128: "0.1133863058",
    64: "0.2227799461",
    32: "0.4303893417",
}
TALAY_TUBARO = {  # μ=1.5, σ=0.5, x0=1; by the finer of two numbers of steps; exact minus scheme
    16: "0.0468119",
    32: "0.0133504",
    64: "0.00357814",
    128: "9.27159e-4",
    256: "2.36042e-4",
}
KNOWN = 1e-8  # what these errors are asked to be known to: no tolerance
STEPS = (8, 16, 32, 64, 128, 256)


def errors(spec: str, functional: str, steps: tuple[int, ...]) -> dict[int, Estimate]:
    """Return propagated errors of Euler–Maruyama, scheme minus exact, by the number of steps."""
    return estimates(propagated("euler-maruyama", spec, steps, (functional,)), functional)


def extrapolated(found: dict[int, Estimate], steps: int) -> tuple[float, float]:
    """Return the error of 2 E f(X^(h/2)) - E f(X^h), and its uncertainty; h/2 has `steps`."""
    fine, coarse = found[steps], found[steps // 2]
    return 2 * fine.value - coarse.value, 2 * fine.uncertainty + coarse.uncertainty


@pytest.mark.parametrize("steps", HIGHAM)
def test_errors_of_highams_experiment_are_those_of_its_population(steps):
    """It would catch a lost sign, a wrong e^(λT), and a tail that is cut off."""
    found = errors("gbm:mu=2,sigma=0.1,x0=1", "mean", tuple(sorted(HIGHAM)))[steps]
    assert found.dropped is None
    assert abs(found.value + float(HIGHAM[steps])) <= KNOWN + as_printed(HIGHAM[steps])


@pytest.mark.parametrize("steps", TALAY_TUBARO)
def test_extrapolated_errors_are_those_of_the_table(steps):
    """Two nearly equal errors of order 1 are subtracted: it would catch either being off."""
    text = TALAY_TUBARO[steps]
    error, doubt = extrapolated(errors("gbm:mu=1.5,sigma=0.5,x0=1", "mean", STEPS), steps)
    assert abs(error + float(text)) <= as_printed(text) + doubt


@pytest.mark.parametrize(
    ("spec", "functional"),
    [("gbm:mu=1.5,sigma=0.5,x0=1", "mean"), ("sinh", "mean"), ("arcsinh", "cos")],
)
def test_extrapolation_makes_weak_order_two(spec, functional):
    """The local orders q lead to 2 q - q_before, which is off its limit by its last change at most.

    Besides what the stated uncertainties leave open. Order 1, as of the errors themselves, is
    excluded.
    """
    found = errors(spec, functional, STEPS)
    values, doubts = np.array([extrapolated(found, n) for n in STEPS[1:]]).T
    q = [math.log2(coarse / fine) for coarse, fine in pairwise(values)]
    before, limit = 2 * q[-2] - q[-3], 2 * q[-1] - q[-2]
    open_ = [1, 3, 2] @ np.abs(doubts / values)[-3:] / math.log(2)
    allowed = abs(limit - before) + open_
    assert abs(limit - 2) <= allowed < 0.5
