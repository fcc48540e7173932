"""The limit law of the Euler–Maruyama error, on GBM.

Jacod & Protter (1998), Ann. Probab. 26, 267–307: (X^h_T - X_T) / √h tends in law to
σ² √(T/2) X_T Z with Z a standard normal variable independent of X (citation and abstract seen;
specialised to GBM for this test), so that E|X^h_T - X_T| → σ² √(Th/π) x0 e^(μT).
"""

import math

import pytest

import sdebench as sb
from tests.tolerance import FALSE_ALARM

PROBLEMS = ("gbm", "gbm:mu=0.3,sigma=0.4,x0=1,horizon=0.5")


@pytest.mark.parametrize("spec", PROBLEMS)
def test_mean_absolute_errors_tend_to_the_limit_law(spec):
    """131072 paths, seed 1, false alarm 1e-6 a rung.

    What is left at 128 steps is at most of order √h: then it equals what two halvings of the step,
    from 32 steps, have changed. It would catch a limit with √(2/π) or a σ too many or too few, all
    of which are wrong by tens of per cent; what is allowed is some 4%.
    """
    problem = sb.problem(spec)
    p = problem.params
    evidence = sb.measure(
        "euler-maruyama",
        route="sampled",
        on=problem,
        steps=(8, 32, 128),
        looks=3,
        threads=1,
        confidence=1 - FALSE_ALARM,
    )
    row = next(r for r in evidence.results if r.kind == "strong")
    limits = [
        p["sigma"] ** 2
        * math.sqrt(p["horizon"] * rung.h / math.pi)
        * p["x0"]
        * math.exp(p["mu"] * p["horizon"])
        for rung in row.rungs
    ]
    ratios = [rung.mean_absolute / limit for rung, limit in zip(row.rungs, limits, strict=True)]
    doubts = [
        rung.mean_absolute_uncertainty / limit
        for rung, limit in zip(row.rungs, limits, strict=True)
    ]
    left = abs(ratios[-1] - ratios[-2]) + doubts[-1] + doubts[-2]
    assert abs(ratios[-1] - 1) <= left + doubts[-1]
