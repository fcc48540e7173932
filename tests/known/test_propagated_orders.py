"""Propagated errors and orders where there is no closed form, held against finer computations.

On few steps against a lattice for (X^h, W) (see `lattice.py`), which shares nothing with the
bench but the formulas of the problems; on many steps, where the lattice is slow, against the
bench's own propagation with three times the nodes and a higher degree, which is unstable on few.
It would catch a bend of the coordinate that the nodes do not resolve, a step of the scheme from
the wrong state, a mean square without its cross term, and an uncertainty that looks at the wrong
part of the resolution.
"""

import math
from collections.abc import Callable
from functools import cache
from itertools import pairwise
from typing import NamedTuple

import numpy as np
import pytest
from threadpoolctl import threadpool_limits

import sdebench as sb
from sdebench import discovery
from sdebench.chain import MEAN_SQUARE, Chain, Resolution, weak_goal
from sdebench.propagable import growth_of
from sdebench.refine import Estimate
from tests.known.gbm_errors import gbm_errors
from tests.known.lattice import Lattice, Step
from tests.known.propagated import BY_NAME, estimates, propagated
from tests.tolerance import round_off

SCHEMES = ("euler-maruyama", "milstein")
NONLINEAR = ("sinh", "tanh", "arctan", "arcsinh")
WEAK = {"mean": lambda x: x, "second-moment": lambda x: x * x, "cos": np.cos}
ROWS = ("strong", *WEAK)
FEW = (8, 16)  # steps of the mean squares that the lattice is asked for
MORE = (32, 128)  # and of weak errors besides
MANY = (1024, 2048, 4096)
STEPS = (*FEW, *MORE, *MANY)
KNOWN = 1e-4  # of the error, what a rung is refined to: asked for, no tolerance
Function = Callable[[np.ndarray], np.ndarray]


class Case(NamedTuple):
    """A problem on T = 1 by its formulas: a, b and ∂b/∂x, and X_T = end(W_T).

    With the lattices on which it is told: the difference from the coarser bounds the error of the
    finer. They hold what is reached with a probability above 1e-15.
    """

    drift: Function
    diffusion: Function
    diffusion_dx: Function
    end: Function
    lattices: tuple[Lattice, Lattice]

    def step(self, scheme: str) -> Step:
        corrected = scheme == "milstein"

        def step(x, h, dw):
            b = self.diffusion(x)
            correction = b * self.diffusion_dx(x) * (dw * dw - h) / 2 if corrected else 0.0
            return x + self.drift(x) * h + b * dw + correction

        return step


def lattices(low: float, high: float, fine: int = 200, **maps: Function) -> tuple[Lattice, Lattice]:
    return Lattice(low, high, fine, 0.35, **maps), Lattice(low, high, 3 * fine // 4, 0.45, **maps)


def sinh(a: float, b: float, x0: float, horizon: float) -> Case:
    return Case(
        lambda x: a * np.sqrt(1 + x * x) + b * b / 2 * x,
        lambda x: b * np.sqrt(1 + x * x),
        lambda x: b * x / np.sqrt(1 + x * x),
        lambda w: np.sinh(a + b * w + math.asinh(x0)),
        lattices(-5.0, 6.0, place=np.arcsinh, state=np.sinh),
    )


def tanh(a: float, x0: float, horizon: float) -> Case:
    return Case(
        lambda x: -a * a * x * (1 - x * x),
        lambda x: a * (1 - x * x),
        lambda x: -2 * a * x,
        lambda w: np.tanh(a * w + math.atanh(x0)),
        lattices(-3.0, 3.0),
    )


def arctan(a: float, x0: float, horizon: float) -> Case:
    return Case(
        lambda x: -a * a * np.sin(x) * np.cos(x) ** 3,
        lambda x: a * np.cos(x) ** 2,
        lambda x: -a * np.sin(2 * x),
        lambda w: np.arctan(a * w + math.tan(x0)),
        lattices(-2.6, 2.6),
    )


def arcsinh(a: float, x0: float, horizon: float) -> Case:
    return Case(
        lambda x: -a * a / 2 * np.tanh(x) / np.cosh(x) ** 2,
        lambda x: a / np.cosh(x),
        lambda x: -a * np.tanh(x) / np.cosh(x),
        lambda w: np.arcsinh(a * w + math.sinh(x0)),
        lattices(-4.5, 4.5),
    )


def gbm(mu: float, sigma: float, x0: float, horizon: float) -> Case:
    """Told by log|x|: after a step to below zero, of probability 1e-10 in 16, |x| is still right.

    The steps multiply X, so that E cos X and E X² depend on |x| alone.
    """
    middle, width = math.log(x0) + mu - sigma * sigma / 2, 9 * sigma + abs(mu)
    return Case(
        lambda x: mu * x,
        lambda x: sigma * x,
        lambda x: np.full_like(x, sigma),
        lambda w: x0 * np.exp(mu - sigma * sigma / 2 + sigma * w),
        lattices(middle - width, middle + width, 500, place=log_of_size, state=np.exp),
    )


def log_of_size(x: np.ndarray) -> np.ndarray:
    return np.log(np.maximum(np.abs(x), 1e-300))


CASES = {"sinh": sinh, "tanh": tanh, "arctan": arctan, "arcsinh": arcsinh, "gbm": gbm}


@cache
def case(spec: str) -> Case:
    problem = sb.problem(spec)
    return CASES[problem.name](**problem.params)


@cache
def on_lattice(scheme: str, spec: str, steps: int, strong: bool) -> dict[str, tuple[float, float]]:
    """Return each error by its row, with what it is in doubt by."""
    x0, own = sb.problem(spec).start, case(spec)
    z = np.linspace(-12.0, 12.0, 9601)
    density = np.exp(-z * z / 2)
    of_end = np.array([f(own.end(z)) for f in WEAK.values()]) @ density / density.sum()
    told = []
    for lattice in own.lattices:
        values = np.stack([f(lattice.states) for f in WEAK.values()], axis=1)
        step = own.step(scheme)
        weak = lattice.expectations(step, 1 / steps, steps, x0, values) - of_end
        errors = dict(zip(WEAK, weak.tolist(), strict=True))
        if strong:
            errors["strong"] = lattice.mean_square(step, 1 / steps, steps, x0, own.end)
        told.append(errors)
    finer, coarser = told
    size = 1 + sb.problem(spec).law(sb.problem(spec).params).expectation(lambda x: x * x)[0]
    rounding = round_off(size, 10 * steps)
    return {row: (e, abs(e - coarser[row]) + rounding) for row, e in finer.items()}


each_scheme = pytest.mark.parametrize("scheme_name", SCHEMES)
each_nonlinear_problem = pytest.mark.parametrize("spec", NONLINEAR)
each_row = pytest.mark.parametrize("row", ROWS)


@pytest.mark.parametrize("row", ["strong", "mean", "second-moment"])
@each_scheme
def test_the_lattice_gives_the_closed_form_on_gbm(scheme_name, row):
    """So that it may be held against what has none; all 13 digits that round-off leaves."""
    found, doubt = on_lattice(scheme_name, "gbm", 8, strong=True)[row]
    errors = gbm_errors(scheme_name, 8, **sb.problem("gbm").params)
    exact = float(errors[("strong", "mean", "second-moment").index(row)])
    assert abs(found - exact) <= doubt


def disagreement(found: Estimate, exact: float, doubt: float) -> str:
    return f"{found.value:.8g} ± {found.uncertainty:.2g}, but {exact:.8g} ± {doubt:.2g}"


@each_row
@each_nonlinear_problem
@each_scheme
def test_every_kept_rung_of_few_steps_agrees_with_the_lattice(scheme_name, spec, row):
    few = FEW if row == "strong" else (*FEW, *MORE)
    missed = {}
    for n, found in estimates(propagated(scheme_name, spec, STEPS), row).items():
        if n not in few or found.dropped is not None:
            continue
        exact, doubt = on_lattice(scheme_name, spec, n, strong=n in FEW)[row]
        if abs(found.value - exact) > found.uncertainty + doubt:
            missed[n] = (
                f"{found.value:.8g} ± {found.uncertainty:.2g}, but {exact:.8g} ± {doubt:.2g}"
            )
    assert missed == {}


@pytest.mark.parametrize("spec", ["gbm", "gbm:mu=1.5,sigma=0.5"])
@each_scheme
def test_every_kept_rung_of_the_cosine_on_gbm_agrees_with_the_lattice(scheme_name, spec):
    """With μ=1.5, σ=0.5 it swings three times within two deviations of X_T."""
    missed = {}
    rungs = propagated(scheme_name, spec, (16, 32, 128, 1024), ("cos",))
    for n, found in estimates(rungs, "cos").items():
        exact, doubt = on_lattice(scheme_name, spec, n, strong=False)["cos"]
        if found.dropped is None and abs(found.value - exact) > found.uncertainty + doubt:
            missed[n] = (
                f"{found.value:.8g} ± {found.uncertainty:.2g}, but {exact:.8g} ± {doubt:.2g}"
            )
    assert missed == {}


FINE = Resolution(nodes=120, width=7.5, degree=6, spacing=0.4, n_rest=7)


@cache
def finer(scheme: str, spec: str, steps: int) -> dict[str, float]:
    problem = sb.problem(spec)
    goals = {"strong": MEAN_SQUARE}
    goals |= {name: weak_goal(f, growth_of(f, problem)) for name, f in BY_NAME.items()}
    chain = Chain(discovery.schemes()[scheme], problem, steps)
    with threadpool_limits(1, "blas"):
        found = chain.expectations(goals.values(), FINE)
    return {row: found[goal] for row, goal in goals.items()}


@each_row
@each_nonlinear_problem
@each_scheme
def test_4096_steps_agree_with_a_far_finer_resolution(scheme_name, spec, row):
    """Within what is stated, and within a thousandth of the error."""
    found = estimates(propagated(scheme_name, spec, STEPS), row)[4096]
    assert found.dropped is None
    gap = abs(found.value - finer(scheme_name, spec, 4096)[row])
    assert gap <= min(found.uncertainty, KNOWN * abs(found.value))


ORDER = 0.002  # by which an order at 4096 steps may still be off its limit: what is asked for


def claims(scheme: str, spec: str) -> dict[str, float]:
    """Kloeden & Platen (1992), chapters 10 and 14 (from memory): 1/2 where noise multiplies."""
    half = scheme == "euler-maruyama" and spec != "ou"
    return {row: 0.5 if half and row == "strong" else 1.0 for row in ROWS}


@each_row
@pytest.mark.parametrize("spec", ["gbm", *NONLINEAR, "ou"])
@each_scheme
def test_the_orders_lead_to_those_of_the_theorems(scheme_name, spec, row):
    """2 q - q_before, with the local orders q of the last two pairs of rungs."""
    if (scheme_name, spec) == ("milstein", "ou"):
        pytest.skip("is Euler–Maruyama where noise is additive")
    found = estimates(propagated(scheme_name, spec, STEPS), row)
    power = 2 if row == "strong" else 1
    before, last = (math.log2(found[n].value / found[m].value) / power for n, m in pairwise(MANY))
    assert abs(2 * last - before - claims(scheme_name, spec)[row]) <= ORDER


@each_scheme
def test_the_evidence_extrapolates_to_nearer_the_limit_than_it_has_come(scheme_name):
    """A tenth as far off as the local order or less; it would catch weights other than 2 and -1.

    Beside what the stated uncertainties u of the three finest errors e do to 2 q - q_before: the
    sum of their weights 1, 3 and 2 times u / (e log 2).
    """
    ladder = (64, 128, 256, 512)  # where orders are still off by many times their uncertainty
    evidence = sb.measure(scheme_name, on="arcsinh", steps=ladder, route="propagated", threads=1)
    expected = claims(scheme_name, "arcsinh")
    rows = [row for row in evidence.results if row.route == "propagated"]
    assert len(rows) == len(ROWS)
    for row in rows:
        limit = expected[row.functional or "strong"]
        finest = zip((1, 3, 2), row.rungs[-3:], strict=True)
        doubt = sum(w * r.uncertainty / abs(r.error) for w, r in finest) / math.log(2)
        assert abs(row.extrapolated - limit) <= 0.1 * abs(row.order - limit) + doubt
