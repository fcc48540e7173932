"""One-step evidence, free of sampling noise: exact errors of a single step on GBM.

From a state x, with the per-step factors of `gbm_errors` (a run of one step from x0 = x):
E D = x (E g - e^(μh)) and E D² = x² (s - 2 e^(μh) c + e^((2μ+σ²)h)), D = scheme minus flow.
"""

import numpy as np
import pytest

import sdebench as sb
from sdebench import discovery
from sdebench.expansion import expand, settings
from tests.known.gbm_errors import gbm_errors
from tests.tolerance import round_off


@pytest.mark.parametrize("name", ["euler-maruyama", "milstein"])
@pytest.mark.parametrize("spec", ["gbm", "gbm:mu=1.5,sigma=0.5,x0=1,horizon=0.7"])
def test_local_errors_on_gbm_are_exact_to_round_off(name, spec):
    """The expansion's own floors bound the round-off of one result; quadrature has 32 nodes."""
    found = expand(discovery.schemes()[name], settings(sb.problem(spec))[0], 3)
    p = found.setting.problem.params
    for i, h in enumerate(found.h):
        for j, x in enumerate(found.setting.x):
            exact = gbm_errors(name, 1, p["mu"], p["sigma"], x, h)
            floor = found.floors[i, j]
            rms = float(exact.mean_square.sqrt())
            assert abs(found.root_mean_square[i, j] - rms) <= floor + round_off(rms, 32)
            assert abs(found.mean_error[i, j] - float(exact.mean)) <= floor + round_off(rms, 32)


@pytest.mark.parametrize("name", ["euler-maruyama", "milstein"])
def test_differences_of_second_moments_on_gbm_are_exact_to_round_off(name):
    """E (ΔX^h)² - E ΔX² = E X^h² - E X² - 2x (E X^h - E X)."""
    found = expand(discovery.schemes()[name], settings(sb.problem("gbm"))[0], 3)
    p = found.setting.problem.params
    for i, h in enumerate(found.h):
        for j, x in enumerate(found.setting.x):
            errors = gbm_errors(name, 1, p["mu"], p["sigma"], x, h)
            exact = float(errors.second_moment - 2 * errors.mean * type(errors.mean)(float(x)))
            allowed = found.moment_floors[i, j, 1] + round_off(exact, 32)
            assert abs(found.moments[i, j, 1] - exact) <= allowed


@pytest.mark.parametrize("spec", ["ou", "ou:theta=5,mean=-2,sigma=0.3,x0=4"])
def test_local_errors_of_euler_maruyama_on_ou_are_exact_to_round_off(spec):
    """D = (1 - θh - e^(-θh)) (x - m) + σ (dw - I), with Var(dw - I) from the step's covariances."""
    found = expand(discovery.schemes()["euler-maruyama"], settings(sb.problem(spec))[0], 3)
    p = found.setting.problem.params
    for i, h in enumerate(found.h):
        y = p["theta"] * h
        drift = -(np.expm1(-y) + y) * (found.setting.x - p["mean"])
        law = sb.StepLaw(("decayed",), float(h), p["theta"])
        # dw - I in the factor's terms: its round-off is that of √h, which the floor covers.
        parts = law.factor[0] - law.factor[1]
        variance = p["sigma"] ** 2 * float(parts @ parts)
        rms = np.sqrt(drift**2 + variance)
        allowed = found.floors[i] + round_off(1.0, 192) * rms
        assert np.all(np.abs(found.root_mean_square[i] - rms) <= allowed)
        assert np.all(np.abs(found.mean_error[i] - drift) <= allowed)
