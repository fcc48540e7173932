"""Joining pieces of a path: for all pieces, lengths, decay rates and groupings."""

import math

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from sdebench import concatenate
from sdebench.wiener import FUNCTIONALS
from tests.tolerance import round_off

values = st.floats(-10, 10)
lengths = st.floats(1e-3, 2.0)
decays = st.floats(-1.0, 5.0)
pieces = st.lists(st.tuples(lengths, st.tuples(values, values, values)), min_size=2, max_size=12)


def stack(numbers: tuple[float, float, float]) -> dict[str, np.ndarray]:
    return {name: np.array([v]) for name, v in zip(FUNCTIONALS, numbers, strict=True)}


def join(parts, decay: float):
    """Join pieces (length, functionals) from the first to the last."""
    (h, whole), *rest = parts
    for length, piece in rest:
        whole = concatenate(whole, piece, length, decay)
        h += length
    return h, whole


def size(parts, decay: float) -> float:
    """A bound on every intermediate result: sums of sizes, grown by a negative decay."""
    total = sum(h for h, _ in parts)
    sizes = sum(float(np.abs(v).max()) for _, piece in parts for v in piece.values())
    return sizes * (1 + total) * math.exp(max(-decay, 0.0) * total)


@settings(max_examples=150, deadline=None)
@given(pieces, decays, st.data())
def test_pieces_may_be_joined_in_any_grouping(drawn, decay, data):
    parts = [(h, stack(numbers)) for h, numbers in drawn]
    cut = data.draw(st.integers(1, len(parts) - 1))
    early, late = join(parts[:cut], decay), join(parts[cut:], decay)
    grouped = join([early, late], decay)[1]
    straight = join(parts, decay)[1]
    allowed = round_off(size(parts, decay), 8 * len(parts))
    assert all(abs(grouped[n][0] - straight[n][0]) <= allowed for n in FUNCTIONALS)


@settings(max_examples=150, deadline=None)
@given(pieces, decays)
def test_joined_pieces_are_the_sums_over_the_whole_path(drawn, decay):
    """dw = Σ w_i,  dz = Σ (z_i + h_i W_{t_i}),  decayed = Σ e^{-θ(T - t_{i+1})} I_i."""
    parts = [(h, stack(numbers)) for h, numbers in drawn]
    whole = join(parts, decay)[1]
    h = np.array([length for length, _ in drawn])
    w, z, i = np.array([numbers for _, numbers in drawn]).T
    before = np.cumsum(w) - w
    after = h.sum() - np.cumsum(h)
    sums = {
        "dw": w.sum(),
        "dz": (z + h * before).sum(),
        "decayed": (np.exp(-decay * after) * i).sum(),
    }
    allowed = round_off(size(parts, decay), 16 * len(parts))
    assert all(abs(whole[n][0] - sums[n]) <= allowed for n in FUNCTIONALS)


@settings(max_examples=60, deadline=None)
@given(st.lists(st.integers(-(2**40), 2**40), min_size=2, max_size=20))
def test_increments_that_are_whole_numbers_add_without_error(increments):
    whole = {"dw": np.array([float(increments[0])])}
    for w in increments[1:]:
        whole = concatenate(whole, {"dw": np.array([float(w)])}, 0.1)
    assert whole["dw"][0] == sum(increments)


@settings(max_examples=60, deadline=None)
@given(st.lists(st.sampled_from([2, 3, 4]), min_size=1, max_size=3), decays, st.integers(0, 99))
def test_a_ladder_coarsened_rung_by_rung_ends_on_the_same_path(ratios, decay, seed):
    """Every rung is joined from the one below; the last one equals joining the finest straight."""
    n, h = math.prod(ratios), 1.0 / math.prod(ratios)
    rng = np.random.default_rng(seed)
    finest = [(h, stack(tuple(rng.standard_normal(3)))) for _ in range(n)]
    rung = finest
    for ratio in ratios:
        rung = [join(rung[k : k + ratio], decay) for k in range(0, len(rung), ratio)]
    ((_, coarsest),) = rung
    straight = join(finest, decay)[1]
    allowed = round_off(size(finest, decay), 8 * n)
    assert all(abs(coarsest[f][0] - straight[f][0]) <= allowed for f in FUNCTIONALS)
