"""What the bench measures on GBM, held against the exact errors of the schemes.

131072 paths, seed 6. Each comparison of a rung is a miss with probability 1e-6 (see `measured`)
where the bench is right. It is caught if an error is computed from the wrong difference, square or
mean, its sign is lost, a rung is walked with the wrong step, x0 or the horizon is forgotten, or
the paths of a rung are not those of the exact solution; and if an uncertainty is given too small.
"""

import math

import pytest

import sdebench as sb
from tests.known.gbm_errors import gbm_errors
from tests.known.measured import mean_square, rows

SCHEMES = ("euler-maruyama", "milstein")
PROBLEMS = {
    "default": "gbm",
    "strong growth": "gbm:mu=1.5,sigma=0.5,x0=1",
    "noisier than it grows": "gbm:mu=0.3,sigma=0.4,x0=1",
    "shrinking over a longer horizon": "gbm:mu=-0.4,sigma=0.25,x0=2,horizon=1.7",
    "heavy tails": "gbm:mu=2,sigma=1",
}
ROWS = ("strong", "mean", "second-moment")
on_each_problem = pytest.mark.parametrize("spec", PROBLEMS.values(), ids=PROBLEMS.keys())


def exact(scheme: str, spec: str, steps: int, row: str) -> float:
    errors = gbm_errors(scheme, steps, **sb.problem(spec).params)
    by_row = dict(zip(ROWS, errors, strict=False))
    return float(by_row[row])


def estimate(rung, row: str) -> tuple[float, float]:
    return mean_square(rung) if row == "strong" else (rung.error, rung.uncertainty)


@pytest.mark.parametrize("row", ROWS)
@on_each_problem
@pytest.mark.parametrize("scheme_name", SCHEMES)
def test_every_rung_holds_the_exact_error_within_its_uncertainty(scheme_name, spec, row):
    measured = rows(scheme_name, spec)[row]
    if not measured.trusted:
        pytest.skip("the evidence itself says that a single path weighs too much")
    for rung in measured.rungs:
        value, half_width = estimate(rung, row)
        assert abs(value - exact(scheme_name, spec, rung.steps, row)) <= half_width, rung.steps


@pytest.mark.parametrize("row", ROWS)
@pytest.mark.parametrize("scheme_name", SCHEMES)
def test_the_default_problem_gives_intervals_that_the_evidence_trusts(scheme_name, row):
    assert rows(scheme_name, "gbm")[row].trusted


@pytest.mark.parametrize("scheme_name", SCHEMES)
def test_heavy_tails_are_not_trusted_where_the_fourth_moment_rules(scheme_name):
    """With μ=2, σ=1 one standard deviation of the squared error is some 13 times its mean."""
    assert not rows(scheme_name, PROBLEMS["heavy tails"])["strong"].trusted


@pytest.mark.parametrize("row", ["strong", "second-moment"])
@pytest.mark.parametrize("scheme_name", SCHEMES)
def test_the_intervals_are_narrow_enough_to_exclude_the_other_scheme(scheme_name, row):
    """On the finest rung; so that the comparisons above could have failed."""
    other = next(name for name in SCHEMES if name != scheme_name)
    rung = rows(scheme_name, "gbm")[row].rungs[-1]
    value, half_width = estimate(rung, row)
    assert abs(value - exact(other, "gbm", rung.steps, row)) > half_width


@pytest.mark.parametrize("row", ROWS)
@on_each_problem
@pytest.mark.parametrize("scheme_name", SCHEMES)
def test_the_bounds_on_the_order_hold_the_exact_local_order(scheme_name, spec, row):
    """At the finest pair of rungs that count; it would catch a wrong power of h or ratio."""
    measured = rows(scheme_name, spec)[row]
    if not measured.trusted:
        pytest.skip("the evidence itself says that a single path weighs too much")
    coarse, fine = [rung.steps for rung in measured.rungs if rung.counts][-2:]
    ratio = exact(scheme_name, spec, coarse, row) / exact(scheme_name, spec, fine, row)
    power = 2 if row == "strong" else 1
    order = math.log2(abs(ratio)) / math.log2(fine / coarse) / power
    assert measured.low <= order
    assert measured.high is None or order <= measured.high
