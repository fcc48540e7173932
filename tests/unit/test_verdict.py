"""Verdicts on synthetic ladders."""

import math
from itertools import pairwise

import numpy as np
import pytest

from sdebench.orders import Errors, Interval, counting_rungs, observed_order
from sdebench.verdict import Verdict, finer, judge, overall, shown

Q, TOLERANCE = 3.0, 0.1


def ruling(measures, claimed, relative=1e-5, steps=(4, 8, 16, 32, 64), power=1, floor=0.0):
    """Judge independent errors, each known to a fraction `relative` (one, or one a rung)."""
    m = np.asarray(measures, dtype=float)
    octaves = tuple(math.log2(b / a) for a, b in pairwise(steps))
    covariance = np.diag((np.broadcast_to(relative, m.shape) * m) ** 2)
    errors = Errors(steps, octaves, m, covariance, 100, power, np.full(len(m), floor))
    counting = counting_rungs(errors, Q)
    order = observed_order(errors, counting, Q)
    unresolved = not errors.resolved(Q).all()
    return judge(errors, order, counting, claimed, TOLERANCE, 1, unresolved)


def power_law(p, steps=(4, 8, 16, 32, 64)):
    return [n**-p for n in steps]


def from_orders(*orders):
    """Return errors whose local orders, coarse to fine, are the given ones."""
    return 2.0 ** -np.cumsum([0.0, *orders])


@pytest.mark.parametrize("power", [1, 2], ids=["weak", "strong"])
@pytest.mark.parametrize("p", [0.5, 1.0, 1.5, 2.0])
def test_a_clean_power_law_supports_its_own_order(p, power):
    measures = np.array(power_law(p)) ** power
    assert ruling(measures, p, power=power).verdict is Verdict.SUPPORTED


@pytest.mark.parametrize("power", [1, 2], ids=["weak", "strong"])
@pytest.mark.parametrize(("p", "claimed"), [(0.5, 1.0), (1.0, 1.5), (1.0, 2.0)])
def test_a_clean_power_law_refutes_a_higher_order(p, claimed, power):
    measures = np.array(power_law(p)) ** power
    assert ruling(measures, claimed, power=power).verdict is Verdict.REFUTED


def test_a_clean_power_law_supports_a_lower_order():
    assert ruling(power_law(2.0), 1.0).verdict is Verdict.SUPPORTED


@pytest.mark.parametrize(("p", "verdict"), [(0.91, Verdict.SUPPORTED), (0.89, Verdict.REFUTED)])
def test_the_tolerance_is_where_the_verdict_turns(p, verdict):
    assert ruling(power_law(p), 1.0).verdict is verdict


def test_three_rungs_refute_nothing():
    found = ruling(power_law(0.5, (16, 32, 64)), 1.0, steps=(16, 32, 64))
    assert found.verdict is Verdict.UNDECIDED


def test_a_ladder_that_ends_above_32_steps_refutes_nothing():
    found = ruling(power_law(0.5, (2, 4, 8, 16)), 1.0, steps=(2, 4, 8, 16))
    assert found.verdict is Verdict.UNDECIDED


def test_rungs_in_round_off_are_too_few_to_tell():
    found = ruling(power_law(1.0), 1.0, floor=0.2)
    assert found.verdict is Verdict.UNDECIDED
    assert "1 of 5 rungs count" in found.sentence


@pytest.mark.parametrize(("relative", "help_"), [(1e-5, False), (0.5, True)], ids=str)
def test_more_paths_help_too_few_rungs_only_where_one_is_not_told_from_zero(relative, help_):
    found = ruling(power_law(1.0), 1.0, relative=[*[1e-5] * 4, relative], floor=0.1)
    assert "2 of 5 rungs count" in found.sentence
    assert found.more_paths_help is help_


@pytest.mark.parametrize(
    "orders",
    [(0.2, 0.4, 0.6, 0.8), (0.14, 0.26, 0.38, 0.5)],
    ids=["on to the claim", "not yet on to the claim"],
)
def test_an_order_that_rises_is_not_refuted(orders):
    found = ruling(from_orders(*orders), 1.0)
    assert found.verdict is Verdict.UNDECIDED
    assert "rising" in found.sentence


def test_an_order_that_rises_too_slowly_to_reach_the_claim_is_refuted():
    """0.5 and four times the last rise of 0.03 are 0.62: far below 0.9."""
    assert ruling(from_orders(0.41, 0.44, 0.47, 0.5), 1.0).verdict is Verdict.REFUTED


@pytest.mark.parametrize(
    ("last", "verdict"), [(0.57, Verdict.REFUTED), (0.59, Verdict.UNDECIDED)], ids=str
)
def test_four_times_the_last_rise_is_granted_to_a_low_order(last, verdict):
    """From 0.5: 0.57 + 4 · 0.07 = 0.85 stays below 0.9, and 0.59 + 4 · 0.09 = 0.95 does not."""
    assert ruling(from_orders(0.3, 0.4, 0.5, last), 1.0).verdict is verdict


def test_a_rise_within_the_noise_is_granted_as_well():
    """Errors known to 1% leave the rise unknown to ±0.1, four times which reaches the claim."""
    found = ruling(power_law(0.7), 1.0, relative=0.01)
    assert found.verdict is Verdict.UNDECIDED
    assert found.more_paths_help


@pytest.mark.parametrize(
    "orders", [(0.2, 0.3, 0.4, 0.5), (1.4, 1.3, 1.2, 1.113)], ids=["rising", "falling"]
)
def test_an_order_that_is_clear_of_the_claim_is_not_called_too_wide(orders):
    """Known to 0.0001: it is where the trend leads that cannot be told from 0.9."""
    found = ruling(from_orders(*orders), 1.0, relative=1e-3 if orders[0] > 1 else 1e-5)
    assert found.verdict is Verdict.UNDECIDED
    assert "as it falls or rises it may lead from" in found.sentence


def test_an_order_that_falls_is_not_supported():
    found = ruling(from_orders(1.4, 1.3, 1.2, 1.0), 1.0)
    assert found.verdict is Verdict.UNDECIDED
    assert "falling" in found.sentence


def test_an_order_that_falls_and_stays_high_enough_is_supported():
    assert ruling(from_orders(1.4, 1.3, 1.2, 1.19), 1.0).verdict is Verdict.SUPPORTED


def test_an_order_that_falls_below_the_claim_is_refuted():
    assert ruling(from_orders(0.9, 0.8, 0.7, 0.6), 1.0).verdict is Verdict.REFUTED


def test_an_unresolved_fine_rung_refutes_nothing():
    """The finest error may be anything up to a bound: the order may be as high as it likes."""
    found = ruling(power_law(0.5), 1.0, relative=[1e-5] * 4 + [0.6])
    assert found.verdict is Verdict.UNDECIDED
    assert found.more_paths_help


def test_a_wide_interval_is_undecided_and_more_paths_would_help():
    found = ruling(power_law(1.0), 1.0, relative=0.05)
    assert found.verdict is Verdict.UNDECIDED
    assert found.more_paths_help
    assert "paths" in found.sentence


def test_too_coarse_rungs_are_not_a_matter_of_paths():
    found = ruling(from_orders(0.2, 0.4, 0.6, 0.8), 1.0)
    assert not found.more_paths_help
    assert "--steps" in found.sentence


def test_errors_before_a_change_of_sign_do_not_count_against_a_claim():
    """After the change, three clean rungs of order 1 are left; before it the order was negative."""
    found = ruling([-1.0, -2.0, 1.0, 0.5, 0.25], 1.0)
    assert found.verdict is Verdict.SUPPORTED


@pytest.mark.parametrize(
    ("verdicts", "whole"),
    [
        ([], Verdict.NOT_APPLICABLE),
        ([Verdict.NOT_APPLICABLE], Verdict.NOT_APPLICABLE),
        ([Verdict.NOT_APPLICABLE, Verdict.SUPPORTED], Verdict.SUPPORTED),
        ([Verdict.SUPPORTED, Verdict.UNDECIDED], Verdict.UNDECIDED),
        ([Verdict.UNDECIDED, Verdict.REFUTED, Verdict.SUPPORTED], Verdict.REFUTED),
    ],
    ids=lambda v: ",".join(x.value for x in v) or "none" if isinstance(v, list) else v.value,
)
def test_the_worst_verdict_is_the_whole_one(verdicts, whole):
    assert overall(verdicts) is whole


@pytest.mark.parametrize(
    ("verdict", "code"),
    [
        (Verdict.SUPPORTED, 0),
        (Verdict.REFUTED, 1),
        (Verdict.UNDECIDED, 3),
        (Verdict.NOT_APPLICABLE, 0),
    ],
    ids=lambda v: getattr(v, "value", str(v)),
)
def test_a_verdict_has_its_exit_code(verdict, code):
    assert verdict.exit_code == code


@pytest.mark.parametrize("verdict", Verdict, ids=lambda v: v.value)
def test_every_verdict_has_a_meaning(verdict):
    assert verdict.meaning


@pytest.mark.parametrize(
    ("interval", "text"),
    [
        (Interval(0.998, 0.98, 1.016), "0.998 (0.980 to 1.016)"),
        (Interval(0.5, -math.inf, 0.75), "0.50 (no lower bound to 0.75)"),
        (Interval(0.5, 0.25, math.inf), "0.50 (0.25 upward)"),
        (Interval(0.5, -math.inf, math.inf), "0.500 (no lower bound upward)"),
        (Interval(1.0, 1.0, 1.0), "1.000"),
        (Interval(0.998312, 0.998271, 0.998353), "0.99831 (0.99827 to 0.99835)"),
        (Interval(0.999832, 0.999831, 0.999833), "0.99983"),
    ],
    ids=[
        "both ends",
        "no lower end",
        "no upper end",
        "no end",
        "no width",
        "five digits at the most",
        "narrower than five digits",
    ],
)
def test_an_interval_is_shown_to_the_digits_that_mean_something(interval, text):
    assert shown(interval) == text


@pytest.mark.parametrize(
    ("steps", "advice"),
    [((4, 8, 16, 32, 64), "16,32,64,128,256"), ((2, 4, 8), "2,4,8,16,32")],
)
def test_the_advised_ladder_goes_two_octaves_further(steps, advice):
    assert finer(steps) == advice
