"""From errors to orders: Fieller intervals, counting rungs, combinations of three rungs."""

import math
from itertools import pairwise

import numpy as np
import pytest
from scipy import stats

from sdebench.moments import Moments
from sdebench.orders import (
    Errors,
    counting_rungs,
    distance,
    local_order,
    observed_order,
    ratio_interval,
    student_quantile,
)
from tests.tolerance import binomial_band, round_off

STEPS = (4, 8, 16, 32, 64)
Q = 3.0


def errors(measures, relative=1e-6, power=1, floor=0.0, steps=None) -> Errors:
    """Independent errors, each known to a fraction `relative` (one number, or one a rung)."""
    m = np.asarray(measures, dtype=float)
    steps = steps or STEPS[: len(m)]
    octaves = tuple(math.log2(b / a) for a, b in pairwise(steps))
    covariance = np.diag((np.broadcast_to(relative, m.shape) * m) ** 2)
    return Errors(steps, octaves, m, covariance, 100, power, np.full(len(m), floor))


@pytest.mark.parametrize("dof", [3, 63, 1023])
@pytest.mark.parametrize("alpha", [0.05, 1e-3, 1e-7])
def test_the_quantile_is_that_of_students_t(alpha, dof):
    """scipy.stats by its own route; both inversions are good to some thousand ulp."""
    expected = float(stats.t.isf(alpha / 2, dof))
    assert abs(student_quantile(alpha, dof) - expected) <= round_off(expected, 4096)


def test_a_weak_error_keeps_its_sign():
    assert errors([-4.0, 2.0], power=1).values.tolist() == [-4.0, 2.0]


def test_a_strong_error_is_the_root_of_the_mean_square():
    assert errors([4.0, 9.0], power=2).values.tolist() == [2.0, 3.0]


def test_the_half_width_of_a_weak_error_is_the_quantile_times_its_standard_error():
    found = errors([4.0, 2.0], relative=0.125).half_widths(2.0)
    assert found.tolist() == [1.0, 0.5]


def test_the_half_width_of_a_strong_error_is_that_of_its_interval_of_squares():
    """4 ± 2 · 0.5 of squares is √3 … √5 of errors."""
    found = errors([4.0], relative=0.125, power=2).half_widths(2.0)
    assert abs(found[0] - (math.sqrt(5) - math.sqrt(3)) / 2) <= round_off(math.sqrt(5), 8)


def test_a_rung_is_resolved_if_its_interval_excludes_zero():
    found = errors([1.0, 1.0, -1.0], relative=[0.3, 0.4, 0.1]).resolved(Q)
    assert found.tolist() == [True, False, True]


CASES = {
    "both clear": (2.0, 1.0, [[0.01, 0.004], [0.004, 0.01]]),
    "opposite signs": (2.0, -1.0, [[0.01, 0.0], [0.0, 0.01]]),
    "correlated": (2.0, 1.0, [[0.04, 0.0199], [0.0199, 0.01]]),
    "bottom may be zero": (2.0, 0.3, [[0.01, 0.0], [0.0, 0.04]]),
    "top may be zero": (0.2, 1.0, [[0.04, 0.0], [0.0, 0.01]]),
    "both may be zero": (0.2, 0.3, [[0.04, 0.0], [0.0, 0.04]]),
    "bottom just clear": (2.0, 0.61, [[0.01, 0.0], [0.0, 0.04]]),
    "no noise": (2.0, 0.5, [[0.0, 0.0], [0.0, 0.0]]),
}


@pytest.mark.parametrize(("top", "bottom", "covariance"), CASES.values(), ids=CASES)
def test_the_interval_of_a_ratio_is_what_a_scan_of_all_ratios_accepts(top, bottom, covariance):
    """Every ratio that |top - ρ bottom| ≤ q sd allows is scanned on a grid over ±300."""
    v = np.array(covariance)
    low, high = ratio_interval(top, bottom, v, Q)
    step = 1e-3
    rho = np.arange(-300_000, 300_001) * step
    variance = v[0, 0] - 2 * rho * v[0, 1] + rho**2 * v[1, 1]
    slack = round_off(4.0 + 300.0**2, 16)
    size = np.abs(rho[(top - rho * bottom) ** 2 <= Q**2 * variance + slack])
    edge = step + round_off(300.0, 16)
    assert abs(low - size.min()) <= edge
    assert (high == math.inf and size.max() >= 300 - edge) or abs(high - size.max()) <= edge


def test_the_interval_of_a_ratio_covers_as_often_as_it_says():
    """95% intervals of E a / E b from 8 correlated normal batches, 3000 samples, seed 8.

    Fieller's interval is exact for normal batches. False alarm 1e-6; catches a dropped
    covariance (which covers nearly always) and a normal quantile in place of Student's (91%).
    """
    rng = np.random.default_rng(8)
    n_samples, n_batches = 3000, 8
    quantile = student_quantile(0.05, n_batches - 1)
    mix = np.array([[1.0, 0.0], [0.9, 0.4]])
    covered = 0
    for _ in range(n_samples):
        batches = np.array([[6.0], [3.0]]) + mix @ rng.standard_normal((2, n_batches))
        found = Moments.of(batches).estimate([0, 1])
        low, high = ratio_interval(*found.means, found.covariance, quantile)
        covered += low <= 2.0 <= high
    low, high = binomial_band(n_samples, 0.95)
    assert low <= covered <= high


@pytest.mark.parametrize("power", [1, 2], ids=["weak", "strong"])
@pytest.mark.parametrize("p", [0.5, 1.0, 2.0])
def test_the_local_order_of_a_power_law_is_its_power(p, power):
    made = errors([(0.3 * n**-p) ** power for n in STEPS], power=power)
    found = local_order(made, 2, 4, Q)
    assert abs(found.estimate - p) <= round_off(p, 32)
    assert found.low < p < found.high


def test_the_local_order_heeds_rungs_that_are_not_an_octave_apart():
    steps = (3, 12, 36)
    made = errors([n**-1.5 for n in steps], steps=steps)
    assert abs(local_order(made, 0, 1, Q).estimate - 1.5) <= round_off(1.5, 32)
    assert abs(local_order(made, 1, 2, Q).estimate - 1.5) <= round_off(1.5, 32)


def test_the_distance_of_rungs_is_in_octaves():
    made = errors([1.0, 1.0, 1.0], steps=(2, 8, 16))
    assert distance(made, 0, 2) == 3.0


def test_a_fine_rung_that_is_not_resolved_still_bounds_the_order_from_below():
    """8 ± 0.3 over at most 1 + 0.9: the order is above log2(7.7 / 1.9) at the least."""
    found = local_order(errors([8.0, 1.0], relative=[0.0125, 0.3]), 0, 1, Q)
    unresolved = local_order(errors([8.0, 0.5], relative=[0.0125, 0.5]), 0, 1, Q)
    assert math.log2(7.7 / 1.9) < found.low < 3.0
    assert math.log2(7.7 / 1.25) < unresolved.low < 4.0
    assert unresolved.high == math.inf


def test_a_coarse_rung_that_is_not_resolved_leaves_no_lower_bound():
    assert local_order(errors([1.0, 1.0], relative=[0.5, 0.01]), 0, 1, Q).low == -math.inf


@pytest.mark.parametrize(
    ("measures", "relative", "floor", "counting"),
    [
        ([16, 8, 4, 2, 1], 0.01, 0.0, [0, 1, 2, 3, 4]),
        ([-16, -8, -4, -2, -1], 0.01, 0.0, [0, 1, 2, 3, 4]),
        ([-16, -8, 4, 2, 1], 0.01, 0.0, [2, 3, 4]),
        ([16, -8, 4, 2, 1], 0.01, 0.0, [2, 3, 4]),
        ([16, 8, 4, 2, -1], 0.01, 0.0, [4]),
        ([16, 8, 4, 2, -1], [0.01, 0.01, 0.01, 0.01, 0.5], 0.0, [0, 1, 2, 3, 4]),
        ([-16, 0.1, 4, 2, 1], [0.01, 5, 0.01, 0.01, 0.01], 0.0, [2, 3, 4]),
        ([16, 8, 4, 2, 1], 0.01, 3.0, [0, 1, 2]),
        ([16, 8, 4, 2, 1], 0.01, 20.0, []),
        ([16, 8, 4, 2, 1], 0.5, 0.0, [0, 1, 2, 3, 4]),
        ([math.nan, 8, 4, 2, math.inf], 0.01, 0.0, [1, 2, 3]),
    ],
    ids=[
        "one sign",
        "negative",
        "a change of sign",
        "two changes of sign",
        "a resolved change at the finest",
        "an unresolved change at the finest",
        "an unresolved rung at the change",
        "sunk into round-off",
        "all in round-off",
        "none resolved",
        "not finite",
    ],
)
def test_rungs_count_from_the_last_change_of_sign_to_round_off(measures, relative, floor, counting):
    with np.errstate(invalid="ignore"):
        assert counting_rungs(errors(measures, relative, floor=floor), Q) == counting


@pytest.mark.parametrize("counting", [[], [3]])
def test_there_is_no_order_with_fewer_than_two_rungs(counting):
    assert observed_order(errors([16, 8, 4, 2, 1]), counting, Q) is None


def test_two_rungs_give_a_local_order_and_no_trend():
    found = observed_order(errors([16, 8, 4, 2, 1]), [3, 4], Q)
    assert found.local.low < 1.0 < found.local.high
    assert found.trend is None


def test_three_rungs_give_the_trend_and_its_extrapolation():
    """Local orders 0.5 then 0.75: moved by 0.25, and on to 1."""
    made = errors([2**1.25, 2**0.75, 1.0], steps=(16, 32, 64))
    found = observed_order(made, [0, 1, 2], Q)
    assert abs(found.local.estimate - 0.75) <= round_off(1.0, 32)
    assert abs(found.trend.moved.estimate - 0.25) <= round_off(1.0, 64)
    assert abs(found.trend.extrapolated.estimate - 1.0) <= round_off(1.0, 64)


@pytest.mark.parametrize(
    ("before", "local", "curbed", "lifted"),
    [(0.5, 0.75, 0.75, 1.75), (1.0, 0.75, 0.15, 0.75), (0.75, 0.75, 0.75, 0.75)],
    ids=["rising", "falling", "at rest"],
)
def test_a_trend_is_continued_downward_if_it_falls_and_upward_if_it_rises(
    before, local, curbed, lifted
):
    """q - 2.4 (q_before - q) and q + 4 (q - q_before), the other end being q itself."""
    made = errors([2 ** (before + local), 2**local, 1.0], steps=(16, 32, 64))
    found = observed_order(made, [0, 1, 2], Q)
    assert abs(found.trend.curbed.estimate - curbed) <= round_off(2.0, 64)
    assert abs(found.trend.lifted.estimate - lifted) <= round_off(2.0, 64)


def test_the_trend_is_that_of_the_three_finest_counting_rungs():
    """Orders 5 and 1, then 0.5 and 0.75: the coarse ones lift nothing."""
    made = errors(2.0 ** -np.cumsum([0.0, 5.0, 1.0, 0.5, 0.75]))
    found = observed_order(made, range(5), Q)
    assert abs(found.trend.lifted.estimate - 1.75) <= round_off(2.0, 64)


@pytest.mark.parametrize("relative", [1e-6, 0.02, 0.2])
@pytest.mark.parametrize("fine", [1.0, 1.4, 0.7])
def test_what_noise_may_hide_widens_both_continuations(relative, fine):
    found = observed_order(errors([4.0, 2.0, fine], relative=relative), [0, 1, 2], Q)
    assert found.trend.curbed.low <= found.trend.curbed.estimate <= found.local.estimate
    assert found.local.estimate <= found.trend.lifted.estimate <= found.trend.lifted.high
    assert found.trend.curbed.low <= found.local.low
    assert found.trend.lifted.high >= found.local.high


@pytest.mark.parametrize("name", ["local", "extrapolated", "moved"])
def test_a_trends_interval_holds_its_estimate(name):
    found = observed_order(errors([16, 8, 4.1, 2, 1.2], relative=0.02), range(5), Q)
    interval = found.local if name == "local" else getattr(found.trend, name)
    assert interval.low < interval.estimate < interval.high


def test_the_trend_of_noisy_rungs_is_bounded_by_the_ends_of_both_local_orders():
    """Above 25% nothing is linear: 2 q - q_before lies in [2 low - high_before, 2 high - …]."""
    made = errors([4.0, 2.0, 1.0], relative=[0.01, 0.01, 0.2])
    found = observed_order(made, [0, 1, 2], Q)
    before, local = local_order(made, 0, 1, Q), local_order(made, 1, 2, Q)
    assert abs(found.trend.extrapolated.low - (2 * local.low - before.high)) <= round_off(4.0, 16)
    assert abs(found.trend.extrapolated.high - (2 * local.high - before.low)) <= round_off(8.0, 16)


def test_the_trend_of_clear_rungs_is_propagated_linearly():
    """The gradient of log2(m1/m2) - log2(m0/m1), with independent errors of 1% each."""
    made = errors([4.0, 2.0, 1.0], relative=0.01)
    found = observed_order(made, [0, 1, 2], Q).trend.moved
    spread = Q * 0.01 * math.sqrt(1 + 4 + 1) / math.log(2)
    assert abs(found.high - found.estimate - spread) <= round_off(spread + 1.0, 64)


@pytest.mark.parametrize("steps", [(4, 8, 16), (4, 16, 64), (4, 8, 32), (4, 32, 64)])
def test_an_order_is_extrapolated_to_its_limit_whatever_the_distance_of_rungs(steps):
    """Errors h (1 + c h): off by (c h)² of the coarsest h at most, where q itself is off by c h.

    It would catch the weights of rungs that halve the step on those that quarter it.
    """
    c = 1e-3
    found = errors([(1 + c / n) / n for n in steps], relative=1e-12, steps=steps)
    order = observed_order(found, range(3), Q)
    assert abs(order.local.estimate - 1) > c / steps[-1] / 2
    assert abs(order.trend.extrapolated.estimate - 1) <= (c / steps[0]) ** 2 + round_off(1.0, 64)
