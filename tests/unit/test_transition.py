"""One step of the pair and its transition matrix, against integrals over its noise by QUADPACK.

One step of Euler–Maruyama beside the exact solution, from u with the scaled error r, is written
once more here for geometric Brownian motion and Ornstein–Uhlenbeck. Values are polynomials in r
times cos 2w, which 48 nodes tell to round-off (its Chebyshev coefficients are Bessel functions of
2, of the 48th order beyond), so that round-off is all that the matrix may be off by.
"""

import math
from functools import cache

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import norm

import sdebench as sb
from sdebench.errors import UserCodeRaised
from sdebench.grid import ErrorPolynomials, Grid
from sdebench.transition import (
    Exact,
    Nodes,
    NotFinite,
    Pairs,
    after_steps,
    matrices,
    take_step,
)
from sdebench.wiener import spaced_normal
from tests.tolerance import round_off

H, C, N, WIDTH = 0.1, 0.2, 48, 6.6
SPACING = 0.25  # with which the trapezoidal rule is exact to round-off here
LEBESGUE = 2 / math.pi * math.log(N) + 1  # of Chebyshev points (Rivlin 1974)
OPERATIONS = 6 * N + 3 * N + 16 * 73 * 3  # interpolation, the product, a sum over the noise


@sb.scheme(strong=0.5)
def euler(sde, t, x, h, noise):
    return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw


class Step:
    """One step of a scheme beside the exact solution on a problem, as the product has it."""

    def __init__(self, name: str, scheme=euler, degree=2, kept=math.inf) -> None:
        self.problem = sb.problem(name)
        self.grid = Grid.of(self.problem, N, WIDTH)
        self.pairs = Pairs.of(self.problem, self.grid, ErrorPolynomials(degree, C, kept))
        self.nodes = Nodes.of(scheme, self.problem, H, spaced_normal(SPACING, 0.5), 12)
        self.exact = Exact.of(self.problem, self.grid, H, self.nodes.noise)
        self.error = take_step(scheme, self.problem, H, self.pairs, self.nodes.noise, self.exact)

    def matrix(self, growth: float) -> np.ndarray:
        found = matrices(self.pairs, self.error, self.exact, self.nodes.weights, [growth])
        return found[growth]


@cache
def step(name: str) -> Step:
    return Step(name)


def place(grid: Grid, u):
    return (2 * u - grid.low - grid.high) / (grid.high - grid.low)


def window(grid: Grid, u):
    return np.exp(-14 * place(grid, u) ** 4)


def density(z: float) -> float:
    return math.exp(-z * z / 2) / math.sqrt(2 * math.pi)


def gbm_integrand(made: Step, u: float, r: float, growth: float):
    """Return z -> density · ω(u)/ω(u') · ((du/dx)/(du/dx)')^k · v(u', r'), for GBM."""
    p, grid = made.problem.params, made.grid
    x, y = math.exp(u), math.exp(u) * (1 + r)

    def value(z: float) -> float:
        dw = math.sqrt(H) * z
        u_end = u + (p["mu"] - p["sigma"] ** 2 / 2) * H + p["sigma"] * dw
        r_end = y * (1 + p["mu"] * H + p["sigma"] * dw) / math.exp(u_end) - 1
        v = math.cos(2 * place(grid, u_end)) * (1 + r_end / C - (r_end / C) ** 2)
        carried = window(grid, u) / window(grid, u_end) * (math.exp(u_end) / x) ** growth
        return density(z) * carried * v

    return value


def ou_integrand(made: Step, u: float, r: float, growth: float):
    """The same for OU, over the decayed increment I; of dw given I two moments are enough."""
    p, grid = made.problem.params, made.grid
    theta, kept = p["theta"], math.exp(-p["theta"] * H)
    variance, both = (1 - kept**2) / (2 * theta), (1 - kept) / theta
    left = p["sigma"] ** 2 * (H - both**2 / variance)  # of σ dw given I

    def value(z: float) -> float:
        decayed = math.sqrt(variance) * z
        u_end = p["mean"] + (u - p["mean"]) * kept + p["sigma"] * decayed
        given = p["sigma"] * both / variance * decayed
        a = (u + r) * (1 - theta * H) + p["mean"] * theta * H + given - u_end
        v = math.cos(2 * place(grid, u_end)) * (1 + a / C - (a * a + left) / C**2)
        return density(z) * window(grid, u) / window(grid, u_end) * v

    return value


INTEGRANDS = {"gbm": gbm_integrand, "ou": ou_integrand}
CASES = [("gbm", 0.0), ("gbm", 2.0), ("ou", 0.0), ("ou", 2.0)]


@pytest.mark.parametrize(("name", "growth"), CASES, ids=lambda v: str(v))
def test_a_row_of_the_matrix_is_the_expectation_over_one_step(name, growth):
    """From every node in the middle third, from where no step leaves the interval.

    It would catch a window or a growth that is turned round, noise of the scheme and the flow that
    are not of one path, and values on pairs that are numbered in another order.
    """
    made = step(name)
    u, r = made.grid.u, made.pairs.errors.nodes
    v = np.cos(2 * place(made.grid, u))[:, None] * (1 + r / C - (r / C) ** 2)
    found = (made.matrix(growth) @ v.ravel()).reshape(v.shape)
    size = float((np.abs(made.matrix(growth)) @ np.abs(v).ravel()).max())
    rows = np.flatnonzero(np.abs(place(made.grid, u)) < 0.35)
    assert len(rows) > 8
    for i in rows:
        for j in range(len(r)):
            integrand = INTEGRANDS[name](made, float(u[i]), float(r[j]), growth)
            expected, doubt = quad(integrand, -10, 10, epsabs=1e-13, epsrel=1e-13, limit=200)
            assert abs(found[i, j] - expected) <= doubt + round_off(LEBESGUE * size, OPERATIONS)


def own_normal_rule() -> tuple[np.ndarray, np.ndarray]:
    z = (np.arange(-36, 37) + 0.5) * SPACING
    return z, norm.pdf(z) / norm.pdf(z).sum()


@pytest.mark.parametrize("growth", [0.0, 1.0, 2.0])
def test_rows_of_the_marginal_part_sum_to_the_mean_ratio_of_windows_and_slopes(growth):
    """E[ω(u)/ω(u') (x'/x)^k] for GBM, from every node, with what leaves the interval at its edge.

    Interpolation reproduces 1, so that a row's sum is that of its weights; it would catch weights
    that are lost beyond the edge, or a window that is taken there at u' itself.
    """
    made = step("gbm")
    p, grid = made.problem.params, made.grid
    z, weights = own_normal_rule()
    u = grid.u[:, None]
    u_end = u + (p["mu"] - p["sigma"] ** 2 / 2) * H + p["sigma"] * math.sqrt(H) * z
    kept = np.clip(u_end, grid.low, grid.high)
    ratio = window(grid, u) / window(grid, kept) * np.exp(growth * (kept - u))
    expected = ratio @ weights
    sums = made.matrix(growth).sum(axis=1).reshape(N, -1)
    # Sums of interpolation weights of either sign: of Λ for u, of some for r, times the ratios.
    size = np.abs(made.matrix(growth)).sum(axis=1).reshape(N, -1)
    allowed = np.array([[round_off(each, OPERATIONS) for each in row] for row in size])
    assert np.all(np.abs(sums - expected[:, None]) <= allowed)


def test_the_marginal_part_carries_a_constant_over_a_step():
    """With the window put in, row by row: Σ ω(u)^-1 M ω = 1, as far as nodes tell the window.

    Twice the Chebyshev coefficients of ω beyond 48, magnified by E ω(u)/ω(u').
    """
    made = step("gbm")
    terms = np.abs(np.polynomial.chebyshev.chebinterpolate(lambda w: np.exp(-14 * w**4), 200))
    matrix, u = made.matrix(0.0), made.grid.u
    carried = (matrix @ np.repeat(window(made.grid, u), 3)).reshape(N, 3)[:, 1]
    middle = np.abs(place(made.grid, u)) < 0.35
    size = np.abs(matrix).sum(axis=1).reshape(N, 3)[:, 1]
    allowed = 2 * terms[N:].sum() * matrix.sum(axis=1).reshape(N, 3)[:, 1] + np.array(
        [round_off(each, OPERATIONS) for each in size]
    )
    gap = np.abs(carried - window(made.grid, u))
    assert np.all((gap <= allowed)[middle])


N_STEPS = (0, 1, 2, 3, 5, 16, 17, 37, 100)


@pytest.mark.parametrize("n", N_STEPS)
def test_steps_are_powers_of_the_matrix(n):
    """To the bit, by whole numbers: powers of a triangular matrix of ones stay below 2^53.

    It would catch an odd step that is dropped or taken twice while matrices are squared, and a
    column in place of a row.
    """
    rng = np.random.default_rng(4)
    matrix = np.triu(rng.integers(1, 4, (5, 5))).astype(float)
    np.fill_diagonal(matrix, 1.0)
    row = rng.integers(-5, 6, 5).astype(float)
    kept = matrix.copy()
    expected = row @ np.linalg.matrix_power(matrix, n)
    assert np.array_equal(after_steps(row, matrix, n), expected)
    assert np.array_equal(matrix, kept)


@pytest.mark.parametrize("n", N_STEPS)
def test_steps_of_a_chain_are_powers_of_its_matrix(n):
    """For a stochastic matrix, whose powers stay bounded by 1: n products of 40 terms each."""
    rng = np.random.default_rng(5)
    matrix = rng.uniform(0, 1, (40, 40))
    matrix /= matrix.sum(axis=1, keepdims=True)
    row = rng.uniform(0, 1, 40)
    found = after_steps(row, matrix, n)
    expected = row @ np.linalg.matrix_power(matrix, n)
    assert np.abs(found - expected).max() <= round_off(float(row.sum()), 2 * 40 * (n + 1))


@pytest.mark.parametrize("bad", [math.nan, math.inf, -math.inf], ids=str)
def test_a_step_that_gives_no_number_is_told_by_where_it_starts(bad):
    """The first of such pairs; it would catch the exact solution's place in the scheme's stead."""

    @sb.scheme(strong=0.5)
    def failing(sde, t, x, h, noise):
        return np.where(x > 1.7, bad, euler.step(sde, t, x, h, noise))

    with pytest.raises(NotFinite, match="the step gives NaN or infinity from x=") as told:
        Step("gbm", failing)
    place_told = str(told.value).rpartition("=")[2]
    places = [y for y in step("gbm").pairs.y.ravel() if y > 1.7]
    assert place_told == f"{places[0]:.4g}"


def test_a_step_that_gives_no_number_for_rare_noise_is_told_too():
    @sb.scheme(strong=0.5)
    def failing(sde, t, x, h, noise):
        return np.where(noise.dw > 8 * math.sqrt(h), math.nan, x)

    with pytest.raises(NotFinite):
        Step("gbm", failing)


def test_a_step_that_raises_is_told_as_the_users():
    @sb.scheme(strong=0.5)
    def raising(sde, t, x, h, noise):
        raise ValueError("no step today")

    with pytest.raises(UserCodeRaised, match="'raising' raised ValueError while its errors were"):
        Step("gbm", raising)


def test_the_scaled_error_after_a_step_is_that_of_the_ends_times_the_slope():
    """For GBM, r' = x^h'/x' - 1, from all pairs and all noise in their order."""
    made = step("gbm")
    p = made.problem.params
    dw = math.sqrt(H) * own_normal_rule()[0]
    x = np.exp(made.grid.u)[:, None, None]
    y = x * (1 + made.pairs.errors.nodes[:, None])
    growth = np.exp((p["mu"] - p["sigma"] ** 2 / 2) * H + p["sigma"] * dw)
    expected = y * (1 + p["mu"] * H + p["sigma"] * dw) / (x * growth) - 1
    inside = np.log(x[:, 0] * growth)
    inside = (inside > made.grid.low) & (inside < made.grid.high)
    gap = np.abs(made.error - expected)
    assert made.error.shape == (N, 3, len(dw))
    assert gap.transpose(0, 2, 1)[inside].max() <= round_off(float(np.abs(expected).max()) + 1, 64)


def test_a_scheme_is_given_the_drift_in_its_own_calculus():
    """The Stratonovich drift of GBM is (μ - σ²/2) x (from memory)."""

    @sb.scheme(strong=0.5, calculus="stratonovich")
    def drifting(sde, t, x, h, noise):
        return x + sde.drift(t, x) * h

    made = Step("gbm", drifting)
    p = made.problem.params
    ended = made.pairs.y * (1 + (p["mu"] - p["sigma"] ** 2 / 2) * H)
    expected = (ended[:, :, None] - made.exact.end[:, None]) * made.exact.slope[:, None]
    size = np.abs(ended[:, :, None]) + np.abs(made.exact.end[:, None])
    allowed = round_off(1.0, 64) * size * made.exact.slope[:, None]
    assert np.all(np.abs(made.error - expected) <= allowed)


def test_a_scheme_is_given_the_functionals_it_named_alone():
    @sb.scheme(strong=0.5)
    def prying(sde, t, x, h, noise):
        return x + 0 * noise.decayed

    with pytest.raises(sb.SdebenchError, match=r'noise=\("dw", "decayed"\)'):
        Step("ou", prying)


def test_the_noise_is_of_all_that_scheme_and_flow_step_by():
    @sb.scheme(strong=0.5, noise=("dz",))
    def by_the_integral(sde, t, x, h, noise):
        return x + 0 * noise.dz

    nodes = Nodes.of(by_the_integral, sb.problem("ou"), H, spaced_normal(0.5, 0.5), 3)
    assert list(nodes.noise) == ["dw", "dz", "decayed"]
    n_first = len(spaced_normal(0.5, 0.5)[0])
    assert {len(v) for v in (*nodes.noise.values(), nodes.weights)} == {n_first * 9}
    assert abs(nodes.weights.sum() - 1) <= round_off(1.0, n_first * 9)


def test_the_exact_step_is_told_at_the_edge_where_it_leaves_the_interval():
    """From the outermost node with the largest noise: slope e^-u and window e^-14 of the edge."""
    made = step("gbm")
    exact, grid = made.exact, made.grid
    top, most = int(np.argmax(grid.u)), int(np.argmax(made.nodes.noise["dw"]))
    assert exact.end[top, most] > math.exp(grid.high)
    slope, ratio = math.exp(-grid.high), float(window(grid, grid.u[top])) / math.exp(-14)
    assert abs(exact.slope[top, most] - slope) <= round_off(slope, 16)
    assert abs(exact.windows[top, most] - ratio) <= round_off(ratio, 16 * 14)


def test_pairs_are_the_nodes_in_u_and_errors_over_the_slope_about_them():
    made = step("gbm")
    x = np.exp(made.grid.u)
    expected = x[:, None] * (1 + made.pairs.errors.nodes)
    assert np.abs(made.pairs.y - expected).max() <= round_off(float(expected.max()), 16)


@pytest.mark.parametrize("growth", [0.0, 1.0, 2.0])
def test_the_row_takes_values_to_the_expectation_at_the_start(growth):
    """ω(u) x^-k E g at u of the start and r = 0, so that E g = v(u, 0) x0^k / ω."""
    made = step("gbm")
    grid, r = made.grid, made.pairs.errors.nodes
    v = np.cos(2 * place(grid, grid.u))[:, None] * (1 + r / C - (r / C) ** 2)
    row = made.pairs.row(made.problem, growth)
    x0 = made.problem.start
    u0 = math.log(x0)
    expected = math.cos(2 * place(grid, u0)) * x0**growth / float(window(grid, u0))
    size = float(np.abs(row) @ np.abs(v).ravel())
    assert abs(row @ v.ravel() - expected) <= round_off(size, OPERATIONS)


@pytest.mark.parametrize("growth", [0.0, 2.0])
def test_the_scale_is_the_window_times_the_slope_to_the_growth(growth):
    made = step("gbm")
    expected = window(made.grid, made.grid.u) * np.exp(-growth * made.grid.u)
    found = made.pairs.scale(growth)
    assert found.shape == (N, 1)
    assert np.all(np.abs(found[:, 0] - expected) <= round_off(1.0, 16 * 14) * expected)
