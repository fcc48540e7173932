"""The closed-form errors on GBM, before anything is held against them.

Leading constants: derived by series expansion of the finite products for these tests. Tables:
computed apart from this file with x0 = T = 1; simulation agreed within a standard error.
"""

from decimal import Decimal, localcontext

import numpy as np
import pytest

import sdebench as sb
from sdebench import discovery
from sdebench.wiener import gauss_hermite
from tests.known.gbm_errors import CHAOS, DIGITS, gbm_errors
from tests.tolerance import as_printed, round_off

SCHEMES = ("euler-maruyama", "milstein")
STEPS = (8, 16, 32, 64, 128, 256, 512)
STRONG = {
    ("euler-maruyama", 0.05, 0.2): "0.0107973224628 0.00760971337428 0.00537178130736 "
    "0.00379516865174 0.0026824322147 0.00189635566177 0.00134078065761",
    ("milstein", 0.05, 0.2): "1.46239553395e-3 7.34605130737e-4 3.68160913368e-4 "
    "1.84295864686e-4 9.22018874498e-5 4.61144454202e-5 2.30605997506e-5",
    ("euler-maruyama", 2.0, 1.0): "5.03533993429 3.32477602733 2.10178975623 1.32902703253 "
    "0.862220061126 0.57655157016 0.394691450097",
}
WEAK_MEAN = (
    "1.635671538e-4 8.195665429e-5 4.102175056e-5 2.052175048e-5 1.026359646e-5 "
    "5.132478839e-6 2.56640961e-6"
)
POINTS = [(0.25, 0.3, 1.0), (1.5, 0.5, 1.0), (-0.4, 0.25, 1.7), (2.0, 1.0, 0.6)]


@pytest.mark.parametrize("setting", STRONG, ids=lambda s: f"{s[0]}, mu={s[1]}, sigma={s[2]}")
def test_the_root_mean_square_errors_are_those_of_the_table(setting):
    for steps, text in zip(STEPS, STRONG[setting].split(), strict=True):
        found = float(gbm_errors(setting[0], steps, *setting[1:]).mean_square.sqrt())
        assert abs(found - float(text)) <= as_printed(text), steps


@pytest.mark.parametrize("name", SCHEMES)
def test_the_errors_of_the_mean_are_those_of_the_table(name):
    for steps, text in zip(STEPS, WEAK_MEAN.split(), strict=True):
        found = -float(gbm_errors(name, steps, 0.05, 0.2).mean)
        assert abs(found - float(text)) <= as_printed(text), steps


def leading_constants(name: str, m: Decimal, v: Decimal, end: Decimal) -> dict[str, Decimal]:
    """Limits of (mean square / E X_T²) / h^p, mean / h, second moment / h."""
    growth, square = (m * end).exp(), ((2 * m + v**2) * end).exp()
    mean = -(m**2) / 2 * end * growth
    if name == "euler-maruyama":
        strong = v**4 / 2 * end
        second = -square * end * (m**2 + 2 * m * v**2 + v**4 / 2)
    else:
        strong = end**2 * m**2 * (v**2 + m / 2) ** 2 + end * (m**2 * v**2 + v**6 / 6)
        second = -square * end * (m**2 + 2 * m * v**2)
    return {"strong": strong, "mean": mean, "second-moment": second}


def scaled_errors(name: str, steps: int, mu: float, sigma: float, end: float) -> dict[str, Decimal]:
    errors = gbm_errors(name, steps, mu, sigma, 1.0, end)
    h = Decimal(end) / steps
    power = 1 if name == "euler-maruyama" else 2
    return {
        "strong": errors.mean_square / errors.exact_second_moment / h**power,
        "mean": errors.mean / h,
        "second-moment": errors.second_moment / h,
    }


@pytest.mark.parametrize("name", SCHEMES)
@pytest.mark.parametrize("point", POINTS, ids=lambda p: "mu={},sigma={},T={}".format(*p))
def test_the_errors_shrink_with_the_leading_constants(name, point):
    """The remainder is of first order in h: over the last halving it moves by what is left.

    Twice that movement, at 2^40 steps a 10^-12 part of the constant, is allowed.
    """
    with localcontext() as context:
        context.prec = DIGITS
        mu, sigma, end = point
        limit = leading_constants(name, *(Decimal(p) for p in point))
        coarse = scaled_errors(name, 2**39, mu, sigma, end)
        fine = scaled_errors(name, 2**40, mu, sigma, end)
        for row, constant in limit.items():
            assert abs(fine[row] - constant) <= 2 * abs(fine[row] - coarse[row]), row


@pytest.mark.parametrize("name", SCHEMES)
@pytest.mark.parametrize("point", POINTS, ids=lambda p: "mu={},sigma={},T={}".format(*p))
def test_one_step_of_the_scheme_has_the_factors_of_the_formula(name, point):
    """By quadrature of the registered step itself, exact for its polynomials in ΔW."""
    mu, sigma, end = point
    problem = sb.problem("gbm", mu=mu, sigma=sigma, x0=1.0)
    z, weights = gauss_hermite(40)
    for h in (end / 4, end / 64):
        noise = sb.Noise(dw=np.sqrt(h) * z)
        g = discovery.schemes()[name](problem.sde, 0.0, np.ones(len(z)), h, noise)
        f = problem.exact_step(0.0, np.ones(len(z)), h, noise)
        chaos = CHAOS[name](mu, sigma, h)
        s = sum(each**2 * h**k / max(k, 1) for k, each in enumerate(chaos))
        c = np.exp(mu * h) * sum(each * sigma**k * h**k / max(k, 1) for k, each in enumerate(chaos))
        scale = round_off(float(weights @ (g * g + f * f)), 2 * len(z))
        assert abs(weights @ g - chaos[0]) <= scale
        assert abs(weights @ (g * g) - s) <= scale
        assert abs(weights @ (g * f) - c) <= scale
