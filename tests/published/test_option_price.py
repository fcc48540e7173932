"""European calls: worked examples of the handbooks, as a functional of GBM under its risk-neutral
drift μ = r (Black & Scholes 1973, J. Polit. Econ. 81, 637; the formula from memory).

Hull, Options, Futures, and Other Derivatives, chapter on the Black–Scholes–Merton model, and Haug,
The Complete Guide to Option Pricing Formulas: the examples from memory, with more digits computed
for these tests.
"""

import math
from typing import NamedTuple

import numpy as np
import pytest
from scipy.special import ndtr

import sdebench as sb
from sdebench import discovery
from sdebench.ladder import Ladder
from sdebench.quadrature import EDGES
from sdebench.sample import Plan, Sample
from tests.tolerance import FALSE_ALARM, as_printed, round_off, sampling


class Call(NamedTuple):
    """Spot, strike, time to expiry in years, rate and volatility a year; the price as printed."""

    spot: float
    strike: float
    expiry: float
    rate: float
    volatility: float
    printed: str

    @property
    def problem(self) -> sb.Problem:
        return sb.problem(
            "gbm", mu=self.rate, sigma=self.volatility, x0=self.spot, horizon=self.expiry
        )

    @property
    def functional(self) -> sb.Functional:
        discount = math.exp(-self.rate * self.expiry)
        return sb.Functional("call", lambda x: discount * np.maximum(x - self.strike, 0.0))

    @property
    def price(self) -> float:
        """The Black–Scholes formula."""
        spread = self.volatility * math.sqrt(self.expiry)
        bond = self.strike * math.exp(-self.rate * self.expiry)
        d1 = math.log(self.spot / bond) / spread + spread / 2
        return float(self.spot * ndtr(d1) - bond * ndtr(d1 - spread))

    @property
    def one_step_price(self) -> float:
        """The price if S_T = S (1 + rT + σ W_T), one Euler–Maruyama step: Bachelier's formula."""
        forward = self.spot * (1 + self.rate * self.expiry)
        spread = self.spot * self.volatility * math.sqrt(self.expiry)
        d = (forward - self.strike) / spread
        density = math.exp(-d * d / 2) / math.sqrt(2 * math.pi)
        value = (forward - self.strike) * ndtr(d) + spread * density
        return float(math.exp(-self.rate * self.expiry) * value)


EXAMPLES = {
    "Hull": Call(42, 40, 0.5, 0.10, 0.20, "4.76"),
    "Haug": Call(60, 65, 0.25, 0.08, 0.30, "2.1334"),
    "at the money": Call(100, 100, 1.0, 0.05, 0.20, "10.4506"),
}
LONG = {"Hull": "4.759422393", "Haug": "2.133368445", "at the money": "10.450583572185565"}
each_example = pytest.mark.parametrize("call", EXAMPLES.values(), ids=EXAMPLES.keys())


@each_example
def test_the_formula_gives_the_printed_price(call):
    assert abs(call.price - float(call.printed)) <= as_printed(call.printed)


@pytest.mark.parametrize("name", LONG)
def test_the_formula_gives_the_price_to_more_digits(name):
    """Two normal probabilities and an exponential, some 30 operations on the spot."""
    call, text = EXAMPLES[name], LONG[name]
    assert abs(call.price - float(text)) <= as_printed(text) + round_off(call.spot, 30)


@each_example
def test_the_exact_law_gives_the_printed_price(call):
    problem = call.problem
    value, doubt = problem.law(problem.params).expectation(call.functional.function)
    assert abs(value - float(call.printed)) <= as_printed(call.printed) + doubt


@each_example
def test_the_exact_law_is_within_its_own_doubt_of_the_price(call):
    problem = call.problem
    value, doubt = problem.law(problem.params).expectation(call.functional.function)
    assert abs(value - call.price) <= doubt + round_off(call.price, 12 * 4000)


def strikes(law: sb.NormalLaw) -> list[float]:
    """Return strikes beside the panels' edges within 2.5 deviations, and 13 from 35 to 50."""
    edges = EDGES[np.abs(EDGES) <= 2.5][::16]
    beside = np.exp(law.mean + law.sd * np.concatenate([edges - 1e-3, edges + 1e-6]))
    return [float(k) for k in (*beside, *np.linspace(35.0, 50.0, 13))]


@pytest.mark.parametrize("payoff", ["call", "digital"])
def test_the_exact_law_knows_its_doubt_at_every_strike(payoff):
    """A payoff has a kink or a step, and its place must not decide whether the doubt is honest.

    Strikes close to where panels of the quadrature meet, where a step is hardest to see, and some
    others.
    """
    problem = EXAMPLES["Hull"].problem
    law = problem.law(problem.params)
    missed = []
    for strike in strikes(law):
        call = EXAMPLES["Hull"]._replace(strike=float(strike))
        if payoff == "call":
            function, exact = call.functional.function, call.price
        else:
            z = (math.log(strike) - law.mean) / law.sd
            function, exact = (lambda x, k=strike: (x > k).astype(float)), float(ndtr(-z))
        value, doubt = law.expectation(function)
        if abs(value - exact) > doubt + round_off(max(exact, 1.0), 12 * 4000):
            missed.append(round(float(strike), 3))
    assert missed == []


@each_example
def test_the_sampled_reference_is_the_price(call):
    """65536 paths, seed 4, false alarm 1e-6; known to some 0.3%.

    It would catch a flow without the Itô correction -σ²/2, and a control whose mean is not zero.
    """
    plan = Plan(
        discovery.schemes()["euler-maruyama"],
        call.problem,
        Ladder((1, 2, 4)),
        (call.functional,),
        seed=4,
    )
    sample = Sample(plan)
    sample.extend(4, threads=1)
    reference, controls = list(plan.rows.reference), list(plan.rows.controls)
    estimate = sample.tally.moments.adjusted(reference, controls)
    error = math.sqrt(estimate.covariance[0, 0])
    assert abs(estimate.means[0] - call.price) <= sampling(error, estimate.dof)


@each_example
def test_one_euler_step_misprices_by_the_difference_of_two_formulas(call):
    """Weak error on the rung of one step: Bachelier's price less that of Black and Scholes.

    65536 paths, seed 1, false alarm 1e-6; it would catch a functional taken of the wrong end point.
    """
    evidence = sb.measure(
        "euler-maruyama",
        route="sampled",
        on=call.problem,
        functionals=[call.functional],
        steps=(1, 2, 4),
        looks=2,
        threads=1,
        confidence=1 - FALSE_ALARM,
    )
    row = next(r for r in evidence.results if r.functional == "call")
    rung = row.rungs[0]
    assert abs(rung.error - (call.one_step_price - call.price)) <= rung.uncertainty


def test_the_better_strong_order_does_not_buy_the_better_price():
    """Common practice: strong and weak order are different things. S = K = 100, r = 5%, σ = 20%.

    Milstein's error is some four times Euler–Maruyama's (computed for these tests). 65536 paths,
    seed 1; false alarm 2e-6.
    """
    call = EXAMPLES["at the money"]
    finest = {}
    for name in ("euler-maruyama", "milstein"):
        evidence = sb.measure(
            name,
            route="sampled",
            on=call.problem,
            functionals=[call.functional],
            steps=(2, 4, 8),
            looks=2,
            threads=1,
            confidence=1 - FALSE_ALARM,
        )
        finest[name] = next(r for r in evidence.results if r.functional == "call").rungs[-1]
    plain, corrected = finest["euler-maruyama"], finest["milstein"]
    assert abs(corrected.error) - corrected.uncertainty > abs(plain.error) + plain.uncertainty
