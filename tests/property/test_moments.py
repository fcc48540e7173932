"""Merging of moments, for all batches and cuts."""

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from sdebench.moments import Moments
from tests.tolerance import round_off

batches = st.integers(2, 30).flatmap(
    lambda n: st.lists(
        st.lists(st.floats(-100, 100), min_size=n, max_size=n), min_size=1, max_size=3
    )
)


@settings(max_examples=100, deadline=None)
@given(batches, st.data())
def test_merging_is_the_same_as_taking_all_at_once(rows, data):
    values = np.array(rows)
    n = values.shape[1]
    cuts = sorted(data.draw(st.sets(st.integers(1, n - 1), max_size=5)))
    parts = [Moments.of(part) for part in np.split(values, cuts, axis=1)]
    merged, whole = sum(parts[1:], parts[0]), Moments.of(values)
    scale = float(np.abs(values).max())
    assert merged.count == n
    assert np.abs(merged.mean - whole.mean).max() <= round_off(scale, 4 * n)
    assert np.abs(merged.scatter - whole.scatter).max() <= round_off(scale**2, 16 * n * n)


@settings(max_examples=100, deadline=None)
@given(batches, st.floats(-1e6, 1e6))
def test_a_shift_of_all_values_shifts_the_mean_and_nothing_else(rows, shift):
    values = np.array(rows)
    n = values.shape[1]
    plain, moved = Moments.of(values), Moments.of(values + shift)
    scale = float(np.abs(values).max()) + abs(shift)
    spread = 2 * float(np.abs(values).max())
    assert np.abs(moved.mean - plain.mean - shift).max() <= round_off(scale, 4 * n)
    # A centred value is off by the round-off of shifting and of the mean, times the spread.
    off = round_off(scale, 4 * n)
    assert np.abs(moved.scatter - plain.scatter).max() <= 2 * n * off * (spread + off)
