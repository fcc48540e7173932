"""The exact update of the Ornstein–Uhlenbeck process and of its integral.

Gillespie (1996), Phys. Rev. E 54, 2084: for dX = -X/τ dt + √c dW and Y = ∫ X dt, with
m = e^(-h/τ) and independent standard normal n1, n2,

    X' = m X + s_X n1                               s_X² = (cτ/2)(1 - m²)
    Y' = Y + τ(1 - m) X + (k/s_X) n1 + √(s_Y² - k²/s_X²) n2
    s_Y² = cτ³ (h/τ - 2(1-m) + (1-m²)/2)            k = (cτ²/2)(1-m)²

(the paper seen; the formulas re-derived for this test). In the functionals of a step, θ = 1/τ,
σ = √c: X' = m X + σ I and, by the SDE, Y' - Y = (X - X' + σ dw)/θ.
"""

import math

import numpy as np
import pytest
from scipy.signal import lfilter

import sdebench as sb
from sdebench import discovery
from tests.tolerance import FALSE_ALARM, as_printed, round_off, sampling

PRINTED = ("0.0906346234610091", "3.09459532928217e-4", "4.52795850303136e-3")  # τ = c = 1, h = 0.1
POINTS = [(1.0, 1.0, 0.1), (0.4, 2.5, 0.05), (3.0, 0.2, 1.5)]  # τ, c, h
OPERATIONS = 3 * 60  # see tests/known: sums of three products of factors with sixty each
AR1 = {  # θ, σ, h: coefficient and innovation variance (Uhlenbeck & Ornstein 1930, from memory)
    (1.0, 1.0, 0.1): (".904837418", ".0906346235"),
    (1.5, 0.5, 0.25): (".687289279", ".0439694539"),
}


def update_covariances(tau: float, c: float, h: float) -> tuple[float, float, float]:
    """Return Var X', Var Y' and Cov(X', Y') given X and Y, from the bench's functionals."""
    covariance = sb.StepLaw(("decayed",), h, 1 / tau).covariance
    x, y = np.array([0.0, 1.0]), tau * np.array([1.0, -1.0])  # on dw and I
    return tuple(c * float(a @ covariance @ b) for a, b in ((x, x), (y, y), (x, y)))


def test_the_update_has_the_printed_variances():
    for found, text in zip(update_covariances(1.0, 1.0, 0.1), PRINTED, strict=True):
        assert abs(found - float(text)) <= as_printed(text) + round_off(0.1, OPERATIONS)


@pytest.mark.parametrize("point", POINTS, ids=lambda p: "tau={},c={},h={}".format(*p))
def test_the_update_has_the_variances_of_the_formulas(point):
    tau, c, h = point
    m = math.exp(-h / tau)
    s_x = c * tau / 2 * (1 - m * m)
    s_y = c * tau**3 * (h / tau - 2 * (1 - m) + (1 - m * m) / 2)
    k = c * tau**2 / 2 * (1 - m) ** 2
    size = c * max(tau, tau**2, tau**3) * max(h / tau, 1.0)
    for found, exact in zip(update_covariances(*point), (s_x, s_y, k), strict=True):
        assert abs(found - exact) <= round_off(size, OPERATIONS)


@pytest.mark.parametrize("time", [0.01, 0.3, 2.0])
def test_the_displacement_has_the_variance_of_uhlenbeck_and_ornstein(time):
    """Phys. Rev. 36, 823 (1930), from memory: ⟨s²⟩ = (2/γ²)(γt - 1 + e^(-γt)) at kT/m = 1.

    The velocity is stationary at the start, of variance 1, so that σ² = 2γ.
    """
    gamma = 1.7
    _, from_noise, _ = update_covariances(1 / gamma, 2 * gamma, time)
    from_start = ((1 - math.exp(-gamma * time)) / gamma) ** 2
    exact = 2 / gamma**2 * (gamma * time - 1 + math.exp(-gamma * time))
    size = max(time, 1 / gamma) / gamma
    assert abs(from_start + from_noise - exact) <= round_off(size, 2 * OPERATIONS)


@pytest.mark.parametrize("point", AR1, ids=lambda p: "theta={},sigma={},h={}".format(*p))
def test_the_update_is_an_autoregression_with_the_known_coefficients(point):
    theta, sigma, h = point
    coefficient, variance = AR1[point]
    problem = sb.problem("ou", theta=theta, sigma=sigma, mean=0.0)
    still = sb.Noise(decayed=np.zeros(1))
    kept = discovery.schemes()["exact-ou"](problem.sde, 0.0, np.ones(1), h, still)[0]
    innovation = sigma**2 * sb.StepLaw(("decayed",), h, theta).covariance[1, 1]
    assert abs(kept - float(coefficient)) <= as_printed(coefficient)
    assert abs(innovation - float(variance)) <= as_printed(variance)


def test_the_exact_transition_is_the_filter_of_its_innovations():
    """`scipy.signal.lfilter` as x' = φ x + e, 1000 steps on 20 paths, same innovations, seed 31.

    Errors of a step decay as those of X; in the worst case ten operations a step on the largest X.
    """
    problem = sb.problem("ou", theta=0.8, mean=-0.4, sigma=0.7, x0=2.0)
    p, h, n_steps, n_paths = problem.params, 0.05, 1000, 20
    rng = np.random.default_rng(31)
    law = sb.StepLaw(("decayed",), h, p["theta"])
    decayed = [
        law.from_normals([rng.standard_normal(n_paths) for _ in law.names])["decayed"]
        for _ in range(n_steps)
    ]
    x, path = np.full(n_paths, p["x0"]), []
    for n, each in enumerate(decayed):
        x = discovery.schemes()["exact-ou"](problem.sde, n * h, x, h, sb.Noise(decayed=each))
        path.append(x)
    kept = math.exp(-p["theta"] * h)
    start = np.full((1, n_paths), kept * (p["x0"] - p["mean"]))
    filtered, _ = lfilter([1.0], [1.0, -kept], p["sigma"] * np.array(decayed), axis=0, zi=start)
    gap = np.abs(np.array(path) - p["mean"] - filtered).max()
    assert gap <= round_off(np.abs(path).max() + abs(p["mean"]), 10 * n_steps)


@pytest.mark.parametrize("n_steps", [1, 4])
def test_a_stationary_process_has_the_known_autocovariance(n_steps):
    """σ²/(2θ) e^(-θs) after s = 0.3 a step (Uhlenbeck & Ornstein 1930, from memory).

    From stationary starts; 2^18 paths, seed 32, false alarm 1e-6. The variance of a product of two
    normal variables gives the standard error, some 0.3% of the variance; it would catch a variance
    σ²/θ, a decay of 2θ, and Euler–Maruyama, whose stationary variance is a tenth larger.
    """
    problem = sb.problem("ou", theta=0.7, mean=1.5, sigma=0.9)
    p, h, n_paths = problem.params, 0.3, 2**18
    rng = np.random.default_rng(32)
    variance = p["sigma"] ** 2 / (2 * p["theta"])
    start = p["mean"] + math.sqrt(variance) * rng.standard_normal(n_paths)
    law, x = sb.StepLaw(("decayed",), h, p["theta"]), start
    for n in range(n_steps):
        noise = law.from_normals([rng.standard_normal(n_paths) for _ in law.names])
        own = sb.Noise(decayed=noise["decayed"])
        x = discovery.schemes()["exact-ou"](problem.sde, n * h, x, h, own)
    for other, exact in ((start, variance * math.exp(-p["theta"] * h * n_steps)), (x, variance)):
        found = np.mean((other - p["mean"]) * (x - p["mean"]))
        error = math.sqrt((variance**2 + exact**2) / n_paths)
        assert abs(found - exact) <= sampling(error)


def test_euler_maruyama_has_the_known_stationary_variance():
    """σ²/(2θ(1 - θh/2)) in place of σ²/(2θ): 0.526315789 for θ = σ = 1, h = 0.1 (derived for this
    test), and in general on every rung; the start is forgotten to e^(-40).

    32768 paths, seed 1, false alarm 1e-6 a rung; it would catch a lost factor of θh/2.
    """
    horizon, steps = 20.0, (50, 100, 200)
    evidence = sb.measure(
        "euler-maruyama",
        route="sampled",
        on=sb.problem("ou", theta=1.0, sigma=1.0, mean=0.0, x0=0.0, horizon=horizon),
        steps=steps,
        looks=1,
        threads=1,
        confidence=1 - FALSE_ALARM,
    )
    row = next(r for r in evidence.results if r.functional == "second-moment")
    for rung in row.rungs:
        exact = 0.5 / (1 - rung.h / 2) - 0.5
        assert abs(rung.error - exact) <= rung.uncertainty, rung.steps
    text = "0.526315789"
    assert abs(row.rungs[-1].error + 0.5 - float(text)) <= row.rungs[-1].uncertainty
