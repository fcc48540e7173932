"""Leading constants of errors: what an error tends to over its power of the step, unsampled.

On GBM with E X_T² = x0² e^((2μ+σ²)T) = S and E X_T = x0 e^(μT) = M, as h → 0:

    Euler–Maruyama   E (X^h_T - X_T)² → S (σ⁴/2) T h
    Milstein         E (X^h_T - X_T)² → S (T² μ² (σ² + μ/2)² + T (μ²σ² + σ⁶/6)) h²
    both             E X^h_T - E X_T → -M (μ²/2) T h
    Euler–Maruyama   E (X^h_T)² - E X_T² → -S T (μ² + 2μσ² + σ⁴/2) h
    Milstein         E (X^h_T)² - E X_T² → -S T (μ² + 2μσ²) h

On OU with y0 = x0 - m, and E = e^(-2θT), Euler–Maruyama:

    E (X^h_T - X_T)² → ((θ²/4) (θ²T² E y0² + σ² J) + (θσ²/24) (1 - E)) h²,
    J = ∫_0^T e^(-2θu) (θu - 1)² du
    E X^h_T - E X_T → -(θ²/2) T e^(-θT) y0 h

Derived; checked by exact enumeration (those of GBM as limits of the finite products, that of the
mean square on OU against the finite sums). The strong constant of Euler–Maruyama is that of the
limit law of Jacod & Protter (1998), Ann. Probab. 26, 267.
"""

import math
from collections.abc import Iterable
from functools import cache
from itertools import pairwise

import pytest
from scipy.integrate import quad

import sdebench as sb
from sdebench.evidence import Result
from tests.known.propagated import estimates, propagated

SPECS = {
    "gbm": "gbm",
    "gbm, strong growth": "gbm:mu=1.5,sigma=0.5",
    "gbm, noisier than it grows": "gbm:mu=0.3,sigma=0.4,x0=1",
    "gbm, shrinking over a longer horizon": "gbm:mu=-0.4,sigma=0.25,x0=2,horizon=1.7",
    "ou": "ou",
    "ou, fast pull": "ou:theta=2,sigma=0.5",
    "ou, as in the tables": "ou:theta=1,mean=0,sigma=1,x0=1",
}
FINEST = (256, 1024, 4096)
KNOWN = 1e-4  # of a constant, what it is asked to be known to: no tolerance


def constants(scheme: str, spec: str) -> dict[str, float]:
    """Return the limits of mean square and weak errors over their power of h."""
    p = sb.problem(spec).params
    end = p["horizon"]
    if spec.startswith("gbm"):
        mu, v, x0 = p["mu"], p["sigma"], p["x0"]
        square = x0**2 * math.exp((2 * mu + v**2) * end)
        noise = v**4 / 2 if scheme == "euler-maruyama" else 0.0
        mixed = end**2 * mu**2 * (v**2 + mu / 2) ** 2 + end * (mu**2 * v**2 + v**6 / 6)
        return {
            "strong": square * (noise * end if noise else mixed),
            "mean": -x0 * math.exp(mu * end) * mu**2 / 2 * end,
            "second-moment": -square * end * (mu**2 + 2 * mu * v**2 + noise),
        }
    theta, v, y0 = p["theta"], p["sigma"], p["x0"] - p["mean"]
    decay = math.exp(-2 * theta * end)
    j = quad(lambda u: math.exp(-2 * theta * u) * (theta * u - 1) ** 2, 0, end, epsabs=1e-13)[0]
    from_start = theta**2 / 4 * (theta**2 * end**2 * decay * y0**2 + v**2 * j)
    return {
        "strong": from_start + theta * v**2 / 24 * (1 - decay),
        "mean": -(theta**2) / 2 * end * math.sqrt(decay) * y0,
    }


def order(scheme: str, spec: str, row: str) -> float:
    """Return the order of the error, a root mean square in the strong row."""
    half = (scheme, row) == ("euler-maruyama", "strong") and spec.startswith("gbm")
    return 0.5 if half else 1.0


@cache
def rows(scheme: str, spec: str) -> dict[str, Result]:
    evidence = sb.measure(scheme, on=spec, steps=FINEST, route="propagated", threads=1)
    return {r.functional or "strong": r for r in evidence.results if r.route == "propagated"}


def cases(keys: Iterable[str]) -> pytest.MarkDecorator:
    """Return a test for each row on some problems; Milstein on OU is Euler–Maruyama."""
    found = [
        pytest.param(scheme, SPECS[key], row, id=f"{scheme}, {key}, {row}")
        for key in keys
        for scheme in ("euler-maruyama", "milstein")[: 2 if key.startswith("gbm") else 1]
        for row in constants(scheme, SPECS[key])
    ]
    return pytest.mark.parametrize(("scheme_name", "spec", "row"), found)


@cases(SPECS)
def test_richardson_finds_the_constant_from_the_propagated_errors(scheme_name, spec, row):
    """Errors over their power of h are a polynomial in h: two powers are eliminated.

    Richardson (1911), Philos. Trans. R. Soc. A 210, 307. It would catch an error of the scheme or
    of the propagation that is off by a ten-thousandth, whatever its uncertainty says.
    """
    found = estimates(propagated(scheme_name, spec, FINEST, ("mean", "second-moment")), row)
    power = 2 * order(scheme_name, spec, row) if row == "strong" else 1
    end = sb.problem(spec).horizon
    scaled = [found[n].value * (n / end) ** power for n in FINEST]
    once = [(4 * fine - coarse) / 3 for coarse, fine in pairwise(scaled)]
    twice = (16 * once[1] - once[0]) / 15
    exact = constants(scheme_name, spec)[row]
    assert abs(twice - exact) <= KNOWN * abs(exact)


@cases(["gbm", "gbm, shrinking over a longer horizon", "ou", "ou, fast pull"])
def test_the_bounds_of_the_evidence_hold_the_constant(scheme_name, spec, row):
    """Of the error itself: in a strong row the constant of the root, in a weak one the size.

    It would catch a constant of the mean square, one for another power of h or for powers of 1/N,
    and bounds that leave out what the extrapolation moves by.
    """
    found = rows(scheme_name, spec)[row].error_constant
    exact = abs(constants(scheme_name, spec)[row]) ** (0.5 if row == "strong" else 1.0)
    assert found.order == order(scheme_name, spec, row)
    assert found.low <= exact <= found.high


@cases(["gbm", "ou"])
def test_the_bounds_of_the_evidence_are_a_thousandth_apart(scheme_name, spec, row):
    """So that the test above could have failed."""
    found = rows(scheme_name, spec)[row].error_constant
    assert found.high - found.low <= 1e-3 * found.value
