"""Nodes, interpolation on them, and what is told of a problem by its coordinate.

Interpolation is held against `numpy.polynomial`; the map of the nodes is written once more here,
from the formula in the docstring of the module, and inverted by Brent's method.
"""

import math
import warnings
from functools import cache

import numpy as np
import pytest
from numpy.polynomial import chebyshev
from scipy.fft import dct
from scipy.optimize import brentq

import sdebench as sb
from sdebench.grid import ErrorPolynomials, Focus, Grid, chebyshev_points, reach, to
from tests.tolerance import round_off

NARROW = Focus(0.4, 0.05)
GRIDS = {
    "plain": Grid(12, -1.0, 1.0),
    "moved": Grid(13, 2.0, 7.5),
    "one focus": Grid(24, -2.0, 3.0, (NARROW,)),
    "two focuses": Grid(25, -2.0, 3.0, (NARROW, Focus(2.5, 0.3))),
    "a focus near the edge": Grid(24, -2.0, 3.0, (Focus(-1.99, 0.02),)),
}
on_each_grid = pytest.mark.parametrize("grid", GRIDS.values(), ids=GRIDS)


def own_map(grid: Grid, u: np.ndarray | float) -> np.ndarray:
    """Return s(u) as the module's docstring has it, scaled to -1 … 1."""

    def stretched(u):
        half = (grid.high - grid.low) / 2
        total = (2 * np.asarray(u) - grid.low - grid.high) / (grid.high - grid.low)
        for f in grid.focuses:
            total = total + np.arcsinh((u - f.place) / f.length) / np.arcsinh(half / f.length)
        return total

    low, high = stretched(grid.low), stretched(grid.high)
    return -1 + 2 * (stretched(u) - low) / (high - low)


def own_inverse(grid: Grid, s: float) -> float:
    if not grid.focuses:
        return (grid.low + grid.high) / 2 + s * (grid.high - grid.low) / 2
    if abs(s) >= 1:
        return grid.high if s > 0 else grid.low
    return brentq(lambda u: own_map(grid, u) - s, grid.low, grid.high, xtol=1e-15)


def lebesgue(n: int) -> float:
    """Bound interpolation on `n` Chebyshev points (Rivlin 1974, The Chebyshev Polynomials)."""
    return 2 / math.pi * math.log(n) + 1


def inside(grid: Grid, n: int = 301) -> np.ndarray:
    return np.linspace(grid.low, grid.high, n)


def lost(grid: Grid, size: float, steep: float) -> float:
    """Return the round-off of interpolation of values up to `size`, of slope `steep` in s.

    6n + 6 operations on Λ times the values (Higham 2004, IMA J. Numer. Anal. 24, 547; from memory),
    and a place s that is known to some ulp of 1 and, by its slope ds/du, of u, at the nodes and
    where it is asked.
    """
    steepest = 2 / (grid.high - grid.low) + sum(1 / f.length for f in grid.focuses)
    place = 1 + max(abs(grid.low), abs(grid.high)) * steepest
    values = round_off(lebesgue(grid.n) * size, 6 * grid.n + 6)
    return values + round_off(lebesgue(grid.n) * steep * place, 16)


@pytest.mark.parametrize("n", [1, 2, 5, 48])
def test_chebyshev_points_are_those_of_the_first_kind(n):
    """It would catch points of the second kind, which have -1 and 1 among them."""
    found = np.sort(chebyshev_points(n)[0])
    assert np.abs(found - chebyshev.chebpts1(n)).max() <= round_off(1.0, 8)


@pytest.mark.parametrize("n", [2, 3, 8, 17])
def test_barycentric_weights_are_reciprocal_products_of_distances(n):
    """Up to a common factor; it would catch a forgotten sine or a forgotten sign."""
    x, w = chebyshev_points(n)
    products = np.array([np.prod(np.delete(x[k] - x, k)) for k in range(n)])
    ratios = w * products / (w[0] * products[0])
    # A distance is known to two ulp of 1: every factor of a product to as much over its size.
    parts = max(float((1 / np.abs(np.delete(x[k] - x, k))).sum()) for k in range(n))
    assert np.abs(ratios - 1).max() <= round_off(parts, 8)


@on_each_grid
def test_nodes_lie_inside_of_the_interval(grid):
    assert len(np.unique(grid.u)) == grid.n
    assert grid.low < grid.u.min()
    assert grid.u.max() < grid.high


@on_each_grid
def test_nodes_are_the_inverse_of_the_map_at_chebyshev_points(grid):
    """It would catch too few bisections, and an inverse of another map."""
    points = chebyshev_points(grid.n)[0]
    expected = np.array([own_inverse(grid, s) for s in points])
    # An ulp of s moves u by du/ds, at the most half the interval for each term of the map.
    moved = (grid.high - grid.low) / 2 * (1 + len(grid.focuses))
    slack = round_off(moved + max(abs(grid.low), abs(grid.high)), 16)
    assert np.abs(grid.u - expected).max() <= slack


@on_each_grid
def test_the_map_is_that_of_the_docstring(grid):
    u = inside(grid)
    assert np.abs(grid.mapped(u) - own_map(grid, u)).max() <= lost(grid, 1.0, 1.0)


@on_each_grid
def test_the_map_increases_from_end_to_end(grid):
    s = grid.mapped(inside(grid, 5001))
    assert np.all(np.diff(s) > 0)
    assert abs(s[0] + 1) <= round_off(1.0, 16)
    assert abs(s[-1] - 1) <= round_off(1.0, 16)


@pytest.mark.parametrize("focus", [NARROW, Focus(-1.2, 0.01)], ids=["wide", "narrow"])
def test_nodes_are_drawn_together_about_a_focus(focus):
    """As many as the map sends to within its length: n/π times an angle, give or take one.

    It would catch nodes that are not drawn together, or about another place.
    """
    n = 200
    grid = Grid(n, -2.0, 3.0, (focus,))
    ends = np.array([focus.place - focus.length, focus.place + focus.length])
    angle = float(np.diff(-np.arccos(own_map(grid, ends)))[0])
    expected = n / math.pi * angle
    within = np.abs(grid.u - focus.place) < focus.length
    assert abs(np.count_nonzero(within) - expected) <= 1


@on_each_grid
def test_interpolation_reproduces_polynomials_in_the_mapped_place(grid):
    """Of every degree below n; it would catch weights of other points than the nodes."""
    u = inside(grid)
    for degree in range(grid.n):
        series = np.eye(grid.n)[degree]
        values = chebyshev.chebval(own_map(grid, grid.u), series)
        expected = chebyshev.chebval(own_map(grid, u), series)
        found = grid.interpolation(u) @ values
        assert np.abs(found - expected).max() <= lost(grid, 1.0, degree**2), degree


@on_each_grid
def test_weights_of_interpolation_sum_to_one(grid):
    sums = grid.interpolation(inside(grid)).sum(axis=-1)
    assert np.abs(sums - 1).max() <= round_off(lebesgue(grid.n), 2 * grid.n)


def test_interpolation_at_a_node_is_the_value_of_that_node():
    """To the bit; it would catch a division of 0 by 0."""
    grid = GRIDS["plain"]
    values = np.random.default_rng(1).uniform(1, 2, grid.n)
    assert np.array_equal(grid.interpolation(grid.u) @ values, values)


@pytest.mark.parametrize("shape", [(5,), (3, 4), (2, 1, 3)], ids=str)
def test_weights_come_in_the_shape_of_the_places_with_the_nodes_last(shape):
    grid = GRIDS["one focus"]
    u = np.random.default_rng(2).uniform(grid.low, grid.high, shape)
    weights = grid.interpolation(u)
    assert weights.shape == (*shape, grid.n)
    assert np.array_equal(weights.reshape(-1, grid.n), grid.interpolation(u.ravel()))


def test_interpolation_leaves_its_places_alone():
    grid, u = GRIDS["moved"], np.linspace(2.5, 7.0, 9)
    kept = u.copy()
    grid.interpolation(u)
    assert np.array_equal(u, kept)


FUNCTIONS = {
    "exp": np.exp,
    "a narrow step": lambda u: np.tanh((u - NARROW.place) / NARROW.length),
    "a narrow peak": lambda u: 1 / (1 + ((u - NARROW.place) / NARROW.length / 2) ** 2),
    "the window": lambda u: np.exp(-14 * ((u - 0.5) / 2.5) ** 4),
}


N_TERMS = 1500  # more than the slowest of these series needs to fall to round-off


@cache
def places(focuses: tuple[Focus, ...]) -> np.ndarray:
    """Return u on [-2, 3] at Chebyshev points of the first kind in s, from the right."""
    grid = Grid(1, -2.0, 3.0, focuses)
    return np.array([own_inverse(grid, s) for s in chebyshev.chebpts1(N_TERMS)[::-1]])


def coefficients(f, focuses: tuple[Focus, ...]) -> np.ndarray:
    """Return the Chebyshev coefficients in s of a function of u on [-2, 3]."""
    return np.abs(dct(f(places(focuses)))) / N_TERMS


@pytest.mark.parametrize("focuses", [(), (NARROW,)], ids=["plain", "focus"])
@pytest.mark.parametrize("n", [16, 48, 108])
@pytest.mark.parametrize("name", FUNCTIONS)
def test_analytic_functions_are_told_as_well_as_their_chebyshev_series(name, n, focuses):
    """Within twice the coefficients that n nodes leave out: each is cut off, and aliased once.

    (Trefethen 2013, Approximation Theory and Approximation Practice, section 4; from memory.) It
    would catch a focus that is not heeded: the narrow step is then told 10³ times less well.
    """
    grid, f = Grid(n, -2.0, 3.0, focuses), FUNCTIONS[name]
    series = coefficients(f, focuses)
    left_out = float(series[n:].sum())
    u = inside(grid, 1001)
    s = own_map(grid, u)
    missed = np.abs(grid.interpolation(u) @ f(grid.u) - f(u)).max()
    size, steep = float(np.abs(f(u)).max()), float(np.abs(np.diff(f(u)) / np.diff(s)).max())
    assert missed <= 2 * left_out + lost(grid, size, 2 * steep)


@pytest.mark.parametrize("w", [0.0, 0.25, -0.5, 1.0, -1.0])
def test_the_window_falls_with_the_fourth_power_of_the_place(w):
    found = Grid(5, 2.0, 6.0).window(np.array([4.0 + 2.0 * w]))[0]
    assert abs(found - math.exp(-14 * w**4)) <= round_off(1.0, 16 * 14)


def test_the_place_is_linear_from_end_to_end():
    grid = Grid(5, 2.0, 6.0, (Focus(3.0, 0.1),))
    assert grid.place(np.array([2.0, 3.0, 4.0, 6.0])).tolist() == [-1.0, -0.5, 0.0, 1.0]
    assert grid.half == 2.0


@pytest.mark.parametrize("n", [8, 30])
def test_the_spacing_in_the_middle_is_that_of_the_innermost_nodes(n):
    """Between cos(π/2 ± π/2n), for an even n."""
    found = Grid(n, -1.0, 1.0).spacing_near(0.0)
    assert abs(found - 2 * math.sin(math.pi / (2 * n))) <= round_off(1.0, 8)


@pytest.mark.parametrize("u", [0.995, 1.0, 50.0])
def test_the_spacing_at_the_edge_is_the_largest_of_the_outermost_four_nodes(u):
    """It would catch an edge with no four nodes about it."""
    n = 12
    expected = math.cos(5 * math.pi / (2 * n)) - math.cos(7 * math.pi / (2 * n))
    grid = Grid(n, -1.0, 1.0)
    assert abs(grid.spacing_near(u) - expected) <= round_off(1.0, 8)
    assert abs(grid.spacing_near(-u) - expected) <= round_off(1.0, 8)


@on_each_grid
def test_the_spacing_is_the_largest_among_two_nodes_on_either_side(grid):
    nodes = sorted(grid.u.tolist())
    for u in np.linspace(nodes[1], nodes[-2], 40)[1:-1]:
        below = [x for x in nodes if x < u][-2:]
        above = [x for x in nodes if x >= u][:2]
        gaps = np.diff([*below, *above])
        assert grid.spacing_near(float(u)) == gaps.max()


CUBIC = (0.7, -1.2, 0.4, 0.9)  # coefficients from the constant up


@pytest.mark.parametrize("r", [0.0, 0.3, -1.0, 2.5, -40.0])
@pytest.mark.parametrize("degree", [3, 4, 6])
def test_polynomials_of_errors_are_reproduced_at_any_distance(degree, r):
    """In units of c; it would catch polynomials that are held although they are not to be."""
    c = 0.25
    errors = ErrorPolynomials(degree, c)
    values = np.polynomial.polynomial.polyval(errors.nodes / c, CUBIC)
    weights = errors.interpolation(np.array([r * c]))[:, 0]
    expected = float(np.polynomial.polynomial.polyval(r, CUBIC))
    size = float(np.abs(weights) @ np.abs(values)) + abs(expected)
    assert abs(weights @ values - expected) <= round_off(size, 16 * degree)


def test_nodes_of_errors_are_chebyshev_points_to_c():
    nodes = ErrorPolynomials(4, 0.25).nodes
    assert np.abs(np.sort(nodes) - 0.25 * chebyshev.chebpts1(5)).max() <= round_off(0.25, 8)


def test_errors_beyond_what_is_kept_are_taken_as_that_large():
    errors = ErrorPolynomials(4, 0.25, kept=2.0)
    beyond = errors.interpolation(np.array([0.51, 3.0, np.inf, -0.51, -7.0]))
    at = errors.interpolation(np.array([0.5, 0.5, 0.5, -0.5, -0.5]))
    assert np.array_equal(beyond, at)


def test_errors_up_to_what_is_kept_are_not_held():
    """It would catch a hold at c instead of `kept` times c."""
    r = np.linspace(-0.5, 0.5, 21)
    held, free = ErrorPolynomials(4, 0.25, kept=2.0), ErrorPolynomials(4, 0.25)
    assert np.array_equal(held.interpolation(r), free.interpolation(r))


def test_weights_of_errors_come_with_the_nodes_first():
    r = np.random.default_rng(3).uniform(-1, 1, (2, 3, 5))
    errors = ErrorPolynomials(3, 0.25)
    weights = errors.interpolation(r)
    assert weights.shape == (4, 2, 3, 5)
    assert np.array_equal(weights.reshape(4, -1), errors.interpolation(r.ravel()))


def ou_law(p) -> tuple[float, float]:
    """Mean and standard deviation of X_T (Uhlenbeck & Ornstein 1930)."""
    mean = p["mean"] + (p["x0"] - p["mean"]) * math.exp(-p["theta"])
    return mean, p["sigma"] * math.sqrt((1 - math.exp(-2 * p["theta"])) / (2 * p["theta"]))


def gbm_law(p) -> tuple[float, float]:
    """Mean and standard deviation of log X_T."""
    return math.log(p["x0"]) + p["mu"] - p["sigma"] ** 2 / 2, p["sigma"]


LAWS = {"gbm": (gbm_law, math.log), "ou": (ou_law, float)}


@pytest.mark.parametrize("width", [2.0, 6.6])
@pytest.mark.parametrize("name", LAWS)
def test_the_reach_is_of_the_end_with_the_start_between(name, width):
    """It would catch a reach in x where that in u is asked for, and a lost standard deviation."""
    problem = sb.problem(name)
    law, coordinate = LAWS[name]
    mean, sd = law(problem.params)
    expected = (mean - width * sd, coordinate(problem.start), mean + width * sd)
    assert np.abs(np.subtract(reach(problem, width), expected)).max() <= round_off(8.0, 32)


@pytest.mark.parametrize("name", LAWS)
def test_a_grid_holds_the_reach_of_the_end_and_as_much_about_the_start(name):
    """On the side of GBM it is the start that lies below, on that of OU above."""
    problem = sb.problem(name)
    law, coordinate = LAWS[name]
    mean, sd = law(problem.params)
    start = coordinate(problem.start)
    grid = Grid.of(problem, 20, 6.0)
    expected = (min(mean, start) - 6 * sd, max(mean, start) + 6 * sd)
    assert np.abs(np.subtract((grid.low, grid.high), expected)).max() <= round_off(8.0, 32)


def test_a_grid_keeps_the_kinks_inside_of_it_and_the_bend_of_the_coordinate():
    kinks = [Focus(0.2, 0.1), Focus(90.0, 0.1), Focus(-90.0, 0.1)]
    found = Grid.of(sb.problem("tanh"), 20, 6.0, kinks)
    assert found.focuses == (kinks[0], Focus(0.0, math.pi / 2))


def test_a_grid_has_no_focus_where_nothing_bends():
    assert Grid.of(sb.problem("gbm"), 20, 6.0).focuses == ()


@pytest.mark.parametrize(
    ("name", "x", "u"),
    [
        ("gbm", [-1.0, 0.0, 1.0], [-math.inf, -math.inf, 0.0]),
        ("tanh", [-1.0, 0.0, 1.0, 1.5, -1.5], [-math.inf, 0.0, math.inf, -math.inf, -math.inf]),
        ("ou", [-3.0, math.inf, math.nan], [-3.0, math.inf, -math.inf]),
    ],
)
def test_what_is_outside_of_the_coordinates_domain_is_put_at_an_edge(name, x, u):
    """Without a warning; it would catch a NaN that spreads to every node."""
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        assert to(sb.problem(name), np.array(x)).tolist() == u
