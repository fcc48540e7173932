"""The exact errors of Euler–Maruyama on OU, and what the bench measures of them.

With Y = X - m, a = 1 - θh and b = e^(-θh), for N steps of length h:

    E Y^h_N = a^N y0                E Y_T = b^N y0
    E (Y^h_N)² = a^2N y0² + σ² h (1 - a^2N) / (1 - a²)
    E Y_T²     = b^2N y0² + σ² (1 - b^2N) / (2θ)
    E Y^h_N Y_T = (ab)^N y0² + σ² (1 - b)/θ (1 - (ab)^N) / (1 - ab)

Derived for these tests; the tables with θ = σ = x0 = T = 1, m = 0 were computed apart from this
file. Measured: 131072 paths, seed 6, a false alarm of 1e-6 a rung. It would catch a decayed
increment that does not belong to the path, a mean level that is left out, and a lost sign.
"""

import math
from decimal import Decimal, localcontext

import pytest

import sdebench as sb
from tests.known.gaussian_errors import ou_end_points
from tests.known.measured import mean_square, rows
from tests.tolerance import as_printed, round_off

PROBLEMS = {
    "default": "ou",
    "second moment that changes sign": "ou:theta=2,sigma=0.5,mean=0,x0=1",
    "fast pull, from below its mean": "ou:theta=3,mean=0.4,sigma=0.8,x0=-1.5,horizon=0.5",
    "long horizon": "ou:theta=0.6,mean=-0.7,sigma=1.3,x0=0.2,horizon=4",
}
STEPS = (8, 16, 32, 64, 128, 256, 512)
TABLES = {
    "strong": "0.0460144403422 0.022492099468 0.0111216252915 0.00553022683448 "
    "0.00275753056881 0.00137687743557 0.000687967733102",
    "mean": "0.02427052537 0.01180531072 0.005824151915 0.002892916928 0.001441725249 "
    "7.196862799e-4 3.595499169e-4",
    "second-moment": "-0.02076366566 -0.009810803403 -0.004770533093 -0.00235247855 "
    "-0.00116815507 -5.820703799e-4 -2.905351256e-4",
}
CONSTANTS = {  # θ, σ, x0, T: limit of the root mean square error over h
    (1.0, 1.0, 1.0, 1.0): "0.351998667808",
    (2.0, 0.5, 1.0, 1.0): "0.349431673581",
    (1.5, 0.5, 2.0, 1.0): "0.536110436041",
}
on_each_problem = pytest.mark.parametrize("spec", PROBLEMS.values(), ids=PROBLEMS.keys())


def finite_sums(steps, theta, mean, sigma, x0, horizon) -> dict[str, Decimal]:
    """Mean square, and errors of the mean and second moment, from the sums above."""
    with localcontext() as context:
        context.prec = 80
        theta, mean, sigma, x0, end = (Decimal(p) for p in (theta, mean, sigma, x0, horizon))
        h, y = end / steps, x0 - mean
        a, b = 1 - theta * h, (-theta * h).exp()
        p, q, r = a**steps, b**steps, (a * b) ** steps
        scheme = p**2 * y**2 + sigma**2 * h * (1 - p**2) / (1 - a**2)
        exact = q**2 * y**2 + sigma**2 * (1 - q**2) / (2 * theta)
        both = r * y**2 + sigma**2 * (1 - b) / theta * (1 - r) / (1 - a * b)
        first = (p - q) * y
        return {
            "strong": scheme - 2 * both + exact,
            "mean": first,
            "second-moment": 2 * mean * first + scheme - exact,
        }


@pytest.mark.parametrize("row", TABLES)
def test_the_finite_sums_give_the_tables(row):
    sign = 1 if row == "strong" else -1  # the table's weak errors are exact minus scheme
    for steps, text in zip(STEPS, TABLES[row].split(), strict=True):
        value = finite_sums(steps, 1.0, 0.0, 1.0, 1.0, 1.0)[row]
        found = value.sqrt() if row == "strong" else value
        assert abs(sign * float(found) - float(text)) <= as_printed(text), steps


@pytest.mark.parametrize(
    "point", CONSTANTS, ids=lambda p: "theta={},sigma={},x0={},T={}".format(*p)
)
def test_the_strong_error_shrinks_with_its_leading_constant(point):
    theta, sigma, x0, end = point
    steps = 2**50
    error = finite_sums(steps, theta, 0.0, sigma, x0, end)["strong"].sqrt()
    text = CONSTANTS[point]
    assert abs(float(error * steps / Decimal(end)) - float(text)) <= as_printed(text)


@on_each_problem
def test_the_finite_sums_and_the_recursion_agree(spec):
    """Two routes to one answer; N steps of some ten operations on numbers of the size of X²."""
    p = sb.problem(spec).params
    for steps in (4, 16, 64):
        ends = ou_end_points(steps, **p)
        sums = finite_sums(steps, **p)
        size = max(abs(p["x0"]), abs(p["mean"])) ** 2 + p["sigma"] ** 2 * p["horizon"]
        allowed = round_off(size, 10 * steps)
        assert abs(ends.mean_square - float(sums["strong"])) <= allowed
        assert abs(ends.weak["mean"] - float(sums["mean"])) <= allowed
        assert abs(ends.weak["second-moment"] - float(sums["second-moment"])) <= allowed


@on_each_problem
def test_every_strong_rung_holds_the_exact_mean_square(spec):
    for rung in rows("euler-maruyama", spec)["strong"].rungs:
        value, half_width = mean_square(rung)
        exact = float(finite_sums(rung.steps, **sb.problem(spec).params)["strong"])
        assert abs(value - exact) <= half_width, rung.steps


@on_each_problem
def test_every_strong_rung_holds_the_exact_mean_absolute_error(spec):
    """A root mean square in its place would be a quarter too large for a centred error."""
    for rung in rows("euler-maruyama", spec)["strong"].rungs:
        exact = ou_end_points(rung.steps, **sb.problem(spec).params).mean_absolute
        assert abs(rung.mean_absolute - exact) <= rung.mean_absolute_uncertainty, rung.steps


@pytest.mark.parametrize("functional", ["mean", "second-moment", "cos"])
@on_each_problem
def test_every_weak_rung_holds_the_exact_signed_error(spec, functional):
    for rung in rows("euler-maruyama", spec)[functional].rungs:
        exact = ou_end_points(rung.steps, **sb.problem(spec).params).weak[functional]
        assert abs(rung.error - exact) <= rung.uncertainty, rung.steps


def test_rungs_before_the_change_of_sign_of_the_second_moment_do_not_count():
    """The exact errors are +, -, -, - at 8, 32, 64, 128 steps."""
    spec = PROBLEMS["second moment that changes sign"]
    row = rows("euler-maruyama", spec, (8, 32, 64, 128), looks=2)["second-moment"]
    exact = [ou_end_points(r.steps, **sb.problem(spec).params).weak for r in row.rungs]
    assert exact[0]["second-moment"] > 0 > exact[1]["second-moment"]
    assert not row.rungs[0].counts


@on_each_problem
def test_the_bounds_on_the_strong_order_hold_the_exact_local_order(spec):
    row = rows("euler-maruyama", spec)["strong"]
    p = sb.problem(spec).params
    coarse, fine = (float(finite_sums(r.steps, **p)["strong"]) for r in row.rungs[-2:])
    assert row.low <= math.log2(coarse / fine) / 2 <= row.high


@on_each_problem
def test_milstein_is_euler_maruyama_where_noise_is_additive(spec):
    """Its correction is a product with ∂b/∂x = 0, so that not a bit differs."""
    for name, row in rows("euler-maruyama", spec, looks=1).items():
        assert rows("milstein", spec, looks=1)[name].rungs == row.rungs


@on_each_problem
def test_the_exact_transition_is_called_exact_on_every_row(spec):
    for name, row in rows("exact-ou", spec, looks=1).items():
        assert row.exact, name
        assert (row.order, row.low, row.high) == (None, None, None)
