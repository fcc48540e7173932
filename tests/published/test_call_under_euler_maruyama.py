"""Payoffs that bend or jump, under Euler–Maruyama on GBM, without sampling.

One step of Euler–Maruyama is normal, so that a call is worth what Bachelier (1900, Théorie de la
spéculation) says and a digital a normal probability; after N steps these are the expectations given
the state one step before the end, which a lattice carries back to the start (see
`tests/known/lattice.py`; derived for these tests). The exact values are those of Black & Scholes
(1973), J. Polit. Econ. 81, 637 (the formula from memory). r = 5%, σ = 20%, S_0 = 1, T = 1.

It would catch a kink that the quadrature of the last step does not cut at, a payoff taken of the
exact path alone, nodes too far apart near the strike, and a discount that is lost.
"""

import math
from functools import cache

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import ndtr

import sdebench as sb
from sdebench.evidence import Result
from tests.known.lattice import Lattice
from tests.tolerance import round_off

RATE, VOLATILITY = 0.05, 0.2
PROBLEM = f"gbm:mu={RATE},sigma={VOLATILITY},x0=1"
DISCOUNT = math.exp(-RATE)
STRIKES = {"at the money": 1.0, "out of the money": 1.1}
STEPS = (1, 2, 4, 16, 64, 256)


def functional(payoff: str, strike: float, declared: bool) -> sb.Functional:
    kinks = (strike,) if declared else ()
    if payoff == "call":
        return sb.Functional(
            "call", lambda x: DISCOUNT * np.maximum(x - strike, 0.0), growth=1, kinks=kinks
        )
    return sb.Functional("digital", lambda x: DISCOUNT * (x > strike), growth=0, kinks=kinks)


@cache
def rows(strike: float, declared: bool = True) -> dict[str, Result]:
    """Return the rows of the two payoffs, propagated together."""
    evidence = sb.measure(
        "euler-maruyama",
        on=PROBLEM,
        functionals=[functional(payoff, strike, declared) for payoff in ("call", "digital")],
        steps=STEPS,
        route="propagated",
        threads=1,
    )
    return {row.functional: row for row in evidence.results if row.functional is not None}


def before_the_last_step(payoff: str, strike: float, x: np.ndarray, h: float) -> np.ndarray:
    """Return the discounted expectation one Euler–Maruyama step from x."""
    forward = x * (1 + RATE * h)
    spread = np.abs(x) * VOLATILITY * math.sqrt(h)
    d = (forward - strike) / spread
    if payoff == "digital":
        return DISCOUNT * ndtr(d)
    density = np.exp(-d * d / 2) / math.sqrt(2 * math.pi)
    return DISCOUNT * ((forward - strike) * ndtr(d) + spread * density)


def black_scholes(payoff: str, strike: float) -> float:
    d = (-math.log(strike) + RATE + VOLATILITY**2 / 2) / VOLATILITY
    exercised = float(DISCOUNT * ndtr(d - VOLATILITY))
    return exercised if payoff == "digital" else float(ndtr(d)) - strike * exercised


def factor(x: np.ndarray, h: float, dw: np.ndarray) -> np.ndarray:
    return x * (1 + RATE * h + VOLATILITY * dw)


@cache
def value(payoff: str, strike: float, steps: int) -> tuple[float, float]:
    """Return E f(X^h_T) and its doubt, which is what a coarser lattice differs by.

    Told by log x up to nine deviations; a step to below zero has a probability of 3e-14 with two
    steps and far less with more, and is worth nothing.
    """
    h = 1 / steps
    found = []
    for n, spacing in ((400, 0.3), (300, 0.4)):
        lattice = Lattice(-1.9, 1.9, n, spacing, place=floored_log, state=np.exp)
        given = before_the_last_step(payoff, strike, lattice.states, h)
        found.append(lattice.expectations(factor, h, steps - 1, 1.0, given[:, None])[0])
    return float(found[0]), abs(found[0] - found[1]) + round_off(1.0, 10 * steps)


def floored_log(x: np.ndarray) -> np.ndarray:
    return np.log(np.maximum(x, 1e-300))


each_payoff = pytest.mark.parametrize("payoff", ["call", "digital"])
each_strike = pytest.mark.parametrize("strike", STRIKES.values(), ids=STRIKES.keys())


@each_strike
@each_payoff
def test_the_lattice_gives_the_value_after_two_steps(payoff, strike):
    """Held against adaptive quadrature over the first of two steps, cut where the payoff turns."""

    def integrand(z: float) -> float:
        x = np.array([factor(1.0, 0.5, math.sqrt(0.5) * z)])
        density = math.exp(-z * z / 2) / math.sqrt(2 * math.pi)
        return float(before_the_last_step(payoff, strike, x, 0.5)[0]) * density

    exact, missed = quad(integrand, -7, 9, points=range(-6, 9), epsabs=1e-14, limit=400)
    found, doubt = value(payoff, strike, 2)
    assert abs(found - exact) <= doubt + missed


@each_strike
@each_payoff
def test_one_step_is_off_by_the_difference_of_two_formulas(payoff, strike):
    bachelier = float(before_the_last_step(payoff, strike, np.array([1.0]), 1.0)[0])
    rung = rows(strike)[payoff].rungs[0]
    gap = abs(rung.error - (bachelier - black_scholes(payoff, strike)))
    assert rung.steps == 1
    assert gap <= rung.uncertainty + round_off(1.0, 60)


@each_strike
@each_payoff
def test_every_rung_holds_the_weak_error_within_what_it_states(payoff, strike):
    missed = {}
    for rung in rows(strike)[payoff].rungs[1:]:
        price, doubt = value(payoff, strike, rung.steps)
        exact = price - black_scholes(payoff, strike)
        if abs(rung.error - exact) > rung.uncertainty + doubt + round_off(1.0, 60):
            missed[rung.steps] = f"{rung.error:.8g} ± {rung.uncertainty:.2g}, but {exact:.8g}"
    assert missed == {}


@each_strike
@each_payoff
def test_every_rung_of_a_declared_payoff_is_kept(payoff, strike):
    """From one step to 256, and to a hundredth of the error."""
    for rung in rows(strike)[payoff].rungs:
        assert rung.dropped is None
        assert rung.uncertainty <= 1e-2 * abs(rung.error)


@each_payoff
def test_a_payoff_whose_kink_is_not_declared_is_refused(payoff):
    """Nodes that do not know of it would be sure of a wrong error."""
    row = rows(STRIKES["out of the money"], declared=False)[payoff]
    assert not row.rungs
    assert row.sentence.startswith("Not propagated: ")
    assert "kinks=(" in row.sentence
