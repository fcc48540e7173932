"""Propagated errors on GBM and OU, held against the exact errors of the schemes.

The exact errors are decimals of 80 digits, so that a rung is held against its own stated
uncertainty and nothing else. It would catch an uncertainty that leaves out what moves most or what
matrix powers lose, a window that cuts the tail of the second moment, a rung of N + 1 steps, and,
since then rungs are dropped, a scaled error with the wrong power of its slope or too few nodes.
"""

import pytest

import sdebench as sb
from sdebench.refine import Estimate
from tests.known.gbm_errors import gbm_errors
from tests.known.ou_errors import ou_errors
from tests.known.propagated import estimates, propagated
from tests.tolerance import round_off

STEPS = (2, 4, 8, 16, 64, 256, 1024, 4096)
ROWS = ("strong", "mean", "second-moment")
GBM = {
    "gbm": "gbm",
    "gbm, strong growth": "gbm:mu=1.5,sigma=0.5",
    "gbm, heavy tails": "gbm:mu=2,sigma=1",
    "gbm, noisier than it grows": "gbm:mu=0.3,sigma=0.4,x0=1",
    "gbm, shrinking over a longer horizon": "gbm:mu=-0.4,sigma=0.25,x0=2,horizon=1.7",
}
OU = {
    "ou": "ou",
    "ou, fast pull": "ou:theta=2,sigma=0.5",
    "ou, as in the tables": "ou:theta=1,mean=0,sigma=1,x0=1",
}
# What 4096 steps are asked to be known to, and to be said to be known to: no tolerances.
KNOWN = 1e-6
SAID = 1e-3


def propagated_row(scheme: str, spec: str, row: str) -> dict[int, Estimate]:
    """Return a row; the cosine on GBM is left to another file: it has no closed form."""
    names = ROWS[1:] if spec.startswith("gbm") else (*ROWS[1:], "cos")
    return estimates(propagated(scheme, spec, STEPS, names), row)


def exact(scheme: str, spec: str, steps: int, row: str) -> float:
    p = sb.problem(spec).params
    gbm = spec.startswith("gbm")
    errors = gbm_errors(scheme, steps, **p) if gbm else ou_errors(steps, **p)
    return errors.cosine if row == "cos" else float(errors[ROWS.index(row)])


def gap_and_allowed(
    found: Estimate, scheme: str, spec: str, steps: int, row: str
) -> tuple[float, float]:
    """Return how far an error is off, and what it states; the exact one is rounded to a float."""
    truth = exact(scheme, spec, steps, row)
    return abs(found.value - truth), found.uncertainty + round_off(truth, 1)


def rows_of(problems: dict[str, str], cosine: bool = True) -> list:
    """Return scheme, problem and row of each test; Milstein on OU is Euler–Maruyama."""
    return [
        pytest.param(scheme, spec, row, id=f"{scheme}, {key}, {row}")
        for key, spec in problems.items()
        for scheme in ("euler-maruyama", "milstein")[: 2 if spec.startswith("gbm") else 1]
        for row in ((*ROWS, "cos") if cosine and spec.startswith("ou") else ROWS)
    ]


names = ("scheme_name", "spec", "row")
each_row = pytest.mark.parametrize(names, rows_of(GBM | OU))
each_row_of_a_polynomial = pytest.mark.parametrize(names, rows_of(GBM | OU, cosine=False))
each_default = pytest.mark.parametrize(names, rows_of({"gbm": "gbm", "ou": "ou"}))


@each_row
def test_every_kept_rung_holds_the_exact_error_within_what_it_states(scheme_name, spec, row):
    missed = {}
    for n, found in propagated_row(scheme_name, spec, row).items():
        gap, allowed = gap_and_allowed(found, scheme_name, spec, n, row)
        if found.dropped is None and gap > allowed:
            missed[n] = f"{gap:.2g} off, {found.uncertainty:.2g} stated, of {found.value:.3g}"
    assert missed == {}


def test_a_tail_beyond_the_nodes_is_in_what_is_stated():
    """E X² lives 1.45 deviations nearer to where the nodes end; the error of E X² nearer still."""
    spec, n, row = "gbm:mu=2.1,sigma=0.725,x0=0.225", 24, "second-moment"
    found = estimates(propagated("euler-maruyama", spec, (n,), ROWS[1:]), row)[n]
    gap, allowed = gap_and_allowed(found, "euler-maruyama", spec, n, row)
    assert found.dropped is None
    assert gap <= allowed


@each_row_of_a_polynomial
def test_no_rung_is_dropped(scheme_name, spec, row):
    """Scheme and problem are linear, so that values are polynomials in the scaled error."""
    found = propagated_row(scheme_name, spec, row)
    assert {n: e.dropped for n, e in found.items() if e.dropped is not None} == {}


@each_row
def test_4096_steps_are_known_to_a_millionth(scheme_name, spec, row):
    if (spec, row) == (GBM["gbm, heavy tails"], "second-moment"):
        pytest.skip("X² shifts its weight by two deviations, to where the nodes begin to end")
    found = propagated_row(scheme_name, spec, row)[4096]
    truth = exact(scheme_name, spec, 4096, row)
    assert abs(found.value - truth) <= KNOWN * abs(truth)


@each_default
def test_4096_steps_are_said_to_be_known_to_a_thousandth(scheme_name, spec, row):
    """What is known is of no use unless it is said: an uncertainty must not be absurdly large."""
    found = propagated_row(scheme_name, spec, row)[4096]
    assert found.uncertainty <= SAID * abs(exact(scheme_name, spec, 4096, row))


def test_milstein_is_propagated_as_euler_maruyama_where_noise_is_additive():
    """Its correction is a product with ∂b/∂x = 0, so that not a bit differs."""
    one, other = (
        propagated(name, "ou", (2, 64, 4096), ROWS[1:]) for name in ("euler-maruyama", "milstein")
    )
    assert one.mean_square == other.mean_square
    assert one.weak == other.weak
