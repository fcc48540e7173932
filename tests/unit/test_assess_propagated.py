"""From propagated errors to a ruling, and the comparison with a sample, on errors made by hand."""

import math
from itertools import pairwise, product

import numpy as np
import pytest
from scipy import stats

from sdebench.assess import FAULT_ALARM, Assessment, Levels, Row
from sdebench.assess_propagated import assess_propagated, check_routes, n_comparisons
from sdebench.errors import BenchFault
from sdebench.integrator import Claim
from sdebench.orders import Errors
from sdebench.propagate import Propagated
from sdebench.refine import Estimate
from sdebench.verdict import Ruling, Verdict
from tests.tolerance import round_off

STEPS = (4, 16, 64, 256, 1024)
SCALE = 1.5
STRONG = Row(Claim("strong", 1.0), at="horizon")
WEAK = Row(Claim("weak", 1.0), functional=0)
LEVELS = Levels(0.95, 0.1, 4)


def estimates(values, relative=1e-4, dropped=()) -> tuple[Estimate, ...]:
    """Estimates known to a fraction `relative`; rungs in `dropped` have that reason."""
    reasons = dict(dropped)
    return tuple(
        Estimate(v, abs(v) * relative, reasons.get(r)) for r, v in enumerate(map(float, values))
    )


def found(squares=None, weak=None, why_not=None, steps=STEPS) -> Propagated:
    """What was propagated; mean squares of order 1 unless given."""
    squares = squares or estimates([0.01 / n**2 for n in steps])
    rows = {"mean": weak} if weak else {}
    return Propagated(steps, squares, rows, why_not or {}, 0.1)


def strong(**kwargs) -> Assessment | str:
    return assess_propagated(found(**kwargs), STRONG, None, LEVELS, SCALE)


def weak(values) -> Assessment | str:
    return assess_propagated(found(weak=values), WEAK, "mean", LEVELS, SCALE)


@pytest.mark.parametrize("p", [0.5, 1.0, 1.5])
def test_the_order_of_a_power_law_of_mean_squares_is_half_its_power(p):
    a = strong(squares=estimates([0.01 * n ** (-2 * p) for n in STEPS]))
    assert abs(a.order.local.estimate - p) <= round_off(p + 40, 32)
    assert a.order.counting == tuple(range(len(STEPS)))


@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_the_order_of_a_weak_error_is_its_power_whatever_its_sign(sign):
    a = weak(estimates([sign * 0.1 / n for n in STEPS]))
    assert abs(a.order.local.estimate - 1) <= round_off(41.0, 32)
    assert a.errors.power == 1
    assert np.sign(a.errors.measures).tolist() == [sign] * len(STEPS)


def own_orders(m) -> tuple[float, float]:
    """Return the last two local orders of weak errors on rungs two octaves apart."""
    before, last = (math.log2(abs(a / b)) / 2 for a, b in pairwise(m[-3:]))
    return before, last


@pytest.mark.parametrize("relative", [1e-5, 1e-3])
def test_bounds_of_the_order_hold_whatever_the_stated_uncertainties_allow(relative):
    """At all eight corners of the box about three rungs, by arithmetic.

    It would catch uncertainties taken for standard errors of which one is enough, and bounds of
    two rungs used for what is computed of three.
    """
    m = np.array([0.1 / n * (1 + 3 / n) for n in STEPS])
    order = weak(estimates(m, relative)).order
    for corner in product([-1, 1], repeat=3):
        moved = m[-3:] * (1 + relative * np.array(corner))
        before, last = own_orders(moved)
        assert order.local.low <= last <= order.local.high
        assert order.trend.moved.low <= last - before <= order.trend.moved.high
        limit = (4 * last - before) / 3  # of errors C h (1 + c h), on rungs that quarter the step
        assert order.trend.extrapolated.low <= limit <= order.trend.extrapolated.high


@pytest.mark.parametrize("relative", [1e-5, 1e-3])
def test_bounds_of_the_order_are_no_wider_than_an_ellipse_about_the_box(relative):
    """√3 · √2 relative uncertainties over two octaves, to first order of them."""
    order = weak(estimates([0.1 / n for n in STEPS], relative)).order
    width = math.sqrt(6) * relative / math.log(2) / 2
    allowed = width * (1 + 8 * relative) + round_off(40.0, 32)
    assert order.local.high - order.local.estimate <= allowed
    assert order.local.estimate - order.local.low <= allowed


def test_a_power_law_of_the_claimed_order_is_supported():
    a = strong()
    assert a.ruling.verdict is Verdict.SUPPORTED
    assert "between 256 and 1024 steps" in a.ruling.sentence


def test_a_power_law_of_half_the_claimed_order_is_refuted():
    a = strong(squares=estimates([0.01 / n for n in STEPS]))
    assert a.ruling.verdict is Verdict.REFUTED


def test_more_paths_are_never_asked_for():
    """An order that is known too roughly to rule on: it would catch advice on --looks."""
    a = strong(squares=estimates([0.01 / n**1.8 for n in STEPS], relative=0.08))
    assert a.ruling.verdict is Verdict.UNDECIDED
    assert not a.ruling.more_paths_help
    assert "--looks" not in a.ruling.sentence


def test_an_assessment_says_where_it_comes_from():
    squares = estimates([0.01 / n**2 for n in STEPS], dropped=[(0, "too coarse")])
    a = strong(squares=squares)
    assert (a.route, a.row, a.counts, a.trusted) == ("propagated", STRONG, True, True)
    assert a.dropped == ("too coarse", None, None, None, None)
    assert a.order.counting == (1, 2, 3, 4)


def test_errors_of_rungs_that_were_dropped_are_no_numbers():
    """And the others keep their value, and their uncertainty as that of one rung alone."""
    squares = estimates([0.01 / n**2 for n in STEPS], dropped=[(1, "the step gives NaN")])
    e = strong(squares=squares).errors
    kept = [0, 2, 3, 4]
    assert np.isnan(e.measures[1])
    assert e.standard_errors[1] == math.inf
    assert e.measures[kept].tolist() == [squares[r].value for r in kept]
    for r in kept:
        uncertainty = squares[r].uncertainty
        assert abs(e.standard_errors[r] - uncertainty) <= round_off(uncertainty, 4)
    assert np.array_equal(e.covariance, np.diag(np.diag(e.covariance)))
    assert (e.steps, e.octaves, e.power) == (STEPS, (2.0,) * 4, 2)


def test_a_scheme_without_an_error_above_its_uncertainty_is_exact():
    tiny = tuple(Estimate(v, 1e-26, None) for v in (1e-27, -1e-27, 0.0, 9e-27, 1e-28))
    a = strong(squares=tiny)
    assert a.exact
    assert a.order is None
    assert a.ruling.verdict is Verdict.SUPPORTED


def test_one_error_above_its_uncertainty_makes_a_scheme_inexact():
    tiny = (Estimate(1e-20, 1e-26, None), *(Estimate(1e-27, 1e-26, None) for _ in range(4)))
    assert isinstance(strong(squares=tiny), str)


def test_a_scheme_is_not_exact_on_rungs_that_were_dropped():
    tiny = tuple(Estimate(1e-27, 1e-26, None) for _ in range(4))
    assert isinstance(strong(squares=(*tiny, Estimate(math.nan, math.inf, "no number"))), str)


def test_too_few_kept_rungs_give_a_sentence_with_the_last_reason():
    reasons = [(0, "first"), (3, "the nodes do not resolve it"), (4, "the last one")]
    squares = estimates([0.01 / n**2 for n in STEPS], dropped=reasons)
    assert strong(squares=squares) == (
        "only 2 of 5 rungs are propagated well enough to count (the last one)"
    )


def test_too_few_counting_rungs_give_a_sentence_without_a_reason_where_none_was_dropped():
    """The sign changes before the last two rungs."""
    values = estimates([0.3, 0.2, 0.1, -0.05, -0.02])
    assert weak(values) == "only 2 of 5 rungs are propagated well enough to count"


def test_a_functional_that_was_not_propagated_gives_its_reason():
    p = found(why_not={"mean": "mean bends near x=1"})
    assert assess_propagated(p, WEAK, "mean", LEVELS, SCALE) == "mean bends near x=1"


def test_a_rung_whose_error_is_as_large_as_the_solution_does_not_count():
    """For a weak error too, however small it is itself: the scheme is unstable there."""
    squares = estimates([(2 * SCALE) ** 2, *(0.01 / n**2 for n in STEPS[1:])])
    assert strong(squares=squares).order.counting == (1, 2, 3, 4)
    p = found(squares=squares, weak=estimates([0.1 / n for n in STEPS]))
    a = assess_propagated(p, WEAK, "mean", LEVELS, SCALE)
    assert a.order.counting == (1, 2, 3, 4)


def test_a_rung_that_has_sunk_into_round_off_does_not_count():
    """Four ulp of the size of X for each step: 1.4e-12 on the last rung."""
    values = [0.1 / n for n in STEPS[:-1]]
    a = weak(estimates([*values, 1e-12]))
    assert a.order.counting == (0, 1, 2, 3)
    assert weak(estimates([*values, 2e-12])).order.counting == (0, 1, 2, 3, 4)


def blunt(values, rungs) -> tuple[Estimate, ...]:
    """Estimates known to 2% on some rungs, and to 0.01% on the others."""
    return tuple(
        Estimate(v, abs(v) * (0.02 if r in rungs else 1e-4), None) for r, v in enumerate(values)
    )


def test_blunt_rungs_are_left_out_where_three_sharper_ones_count():
    """As those that sink into what the nodes do not resolve; it would catch an order from these."""
    values = [0.1 / n for n in STEPS]
    assert weak(blunt(values, {4})).order.counting == (0, 1, 2, 3)
    assert weak(blunt(values, {3, 4})).order.counting == (0, 1, 2)


def test_blunt_rungs_count_where_there_are_no_three_sharper_ones():
    assert weak(blunt([0.1 / n for n in STEPS], {2, 3, 4})).order.counting == (0, 1, 2, 3, 4)


def sample(values, standard_errors, steps=STEPS, row=STRONG, trusted=True, dof=63) -> Assessment:
    m = np.array(values, dtype=float)
    octaves = tuple(math.log2(b / a) for a, b in pairwise(steps))
    power = 2 if row.functional is None else 1
    spread = np.diag(np.broadcast_to(standard_errors, m.shape) ** 2)
    errors = Errors(steps, octaves, m, spread, dof, power, np.zeros(len(m)))
    ruling = Ruling(Verdict.SUPPORTED, "")
    return Assessment(row, "sampled", errors, None, 3.0, False, True, trusted, ruling)


def agreed(propagated, sampled, fourth=None, n=1) -> str:
    return check_routes("mine on gbm, strong", propagated, sampled, fourth, n)


EXACT = [0.01 / n**2 for n in STEPS]


def test_routes_that_agree_pass_with_how_much_of_what_is_allowed_they_differ():
    assert agreed(strong(), sample(EXACT, 1e-6)) == (
        "A check of the propagated errors, which it agrees with (0% of what is allowed)."
    )


def allowed_gap(standard_error, n, rung, dof=63) -> float:
    """What one comparison of `n` allows: Student's t at 1e-6/n, the doubt and round-off."""
    quantile = float(stats.t.isf(FAULT_ALARM / n / 2, dof))
    floor = (4 * np.finfo(float).eps * STEPS[rung] * SCALE) ** 2
    return quantile * standard_error + 1e-4 * EXACT[rung] + floor


@pytest.mark.parametrize("sign", [1, -1])
@pytest.mark.parametrize("n", [1, 40])
@pytest.mark.parametrize("rung", [0, 2, 4])
def test_routes_that_differ_beyond_the_bound_end_the_run(rung, n, sign):
    """At 99% of the bound they pass, at 101% they do not.

    It would catch a bound that forgets how many comparisons there are, and a rung that is not
    looked at.
    """
    error = 1e-3 * EXACT[rung]
    for part in (0.99, 1.01):
        values = list(EXACT)
        values[rung] += sign * part * allowed_gap(error, n, rung)
        sampled = sample(values, [error if r == rung else e for r, e in enumerate(EXACT)])
        if part < 1:
            assert "99%" in agreed(strong(), sampled, n=n)
        else:
            with pytest.raises(BenchFault, match=rf"on mine on gbm, strong: with {STEPS[rung]} st"):
                agreed(strong(), sampled, n=n)


def test_the_fault_names_both_numbers():
    values = [2 * EXACT[0], *EXACT[1:]]
    with pytest.raises(BenchFault, match=r"mean square is 0\.000625, the sampled one 0\.00125 ± "):
        agreed(strong(), sample(values, 1e-9))


def test_the_fault_on_a_weak_error_speaks_of_an_error():
    mine = weak(estimates([0.1 / n for n in STEPS]))
    theirs = sample([0.2 / n for n in STEPS], 1e-9, row=WEAK)
    with pytest.raises(BenchFault, match=r"the propagated error is 0\.025, the sampled one 0\.05"):
        agreed(mine, theirs)


@pytest.mark.parametrize("n", [1, 40])
def test_a_sampled_mean_square_may_fall_short_by_what_its_tail_explains(n):
    """√(4 log(n / 1e-6) E e⁴ / paths), Maurer (2003); a sample without its tail knows no better.

    At 99% of the bound it passes, at 101% it does not; and no mean square may be too large for it.
    """
    error = 1e-4 * EXACT[0]
    tail = 0.05 * EXACT[0]
    fourth = np.full(len(STEPS), tail**2 / (4 * math.log(n / FAULT_ALARM)))
    bound = tail + 1e-4 * EXACT[0]
    for part, faulty in ((-0.99, False), (-1.01, True), (0.99, True)):
        sampled = sample([EXACT[0] + part * bound, *EXACT[1:]], error)
        if faulty:
            with pytest.raises(BenchFault):
                agreed(strong(), sampled, fourth, n)
        else:
            assert "agrees" in agreed(strong(), sampled, fourth, n)


def test_a_sample_whose_tail_is_not_trusted_is_not_compared():
    far = sample([9 * e for e in EXACT], 1e-12, trusted=False)
    assert agreed(strong(), far).startswith("Not held against the propagated errors")


def test_rungs_of_one_route_alone_are_not_compared():
    """The sampled ladder has 8 and 32 steps, which were not propagated, and not 256 or 1024."""
    steps = (4, 8, 16, 32, 64)
    values = [0.01 / n**2 * (1 if n in STEPS else 9) for n in steps]
    sampled = sample(values, 1e-12, steps)
    assert n_comparisons(strong(), sampled) == 3
    assert "agrees" in agreed(strong(), sampled)


def test_rungs_of_the_same_number_of_steps_are_compared_wherever_they_stand():
    """It would catch rungs that are matched by their place in the ladder."""
    steps = (8, 16, 32, 64)
    values = [0.01 / n**2 for n in steps]
    assert "agrees" in agreed(strong(), sample(values, 1e-12, steps))
    values[3] *= 2
    with pytest.raises(BenchFault, match="with 64 steps"):
        agreed(strong(), sample(values, 1e-12, steps))


def test_rungs_that_were_dropped_are_not_compared():
    squares = estimates(EXACT, dropped=[(1, "too coarse")])
    sampled = sample([EXACT[0], 9 * EXACT[1], *EXACT[2:]], 1e-12)
    assert n_comparisons(strong(squares=squares), sampled) == 4
    assert "agrees" in agreed(strong(squares=squares), sampled)


def test_routes_without_a_common_rung_have_nothing_to_compare():
    other = sample([1.0, 0.1, 0.01], 1e-12, (3, 6, 12))
    assert n_comparisons(strong(), other) == 0
    assert agreed(strong(), other) == (
        "Not held against the propagated errors: they have no rung in common."
    )
