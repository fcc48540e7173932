"""The joint law of the functionals, for all step lengths and decay rates."""

import math

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

import sdebench as sb
from sdebench.discovery import find_scheme
from sdebench.wiener import FUNCTIONALS, StepLaw, concatenate
from tests.tolerance import round_off

lengths = st.floats(2.0**-20, 8.0)
small = st.floats(1e-12, 1e-3)


@settings(max_examples=150, deadline=None)
@given(lengths, small)
def test_a_vanishing_decay_is_the_brownian_limit(h, x):
    """With x = θh → 0 the decayed increment is dw, up to x/2 of it (1 - (1 - e^-x)/x < x/2)."""
    factor = StepLaw(FUNCTIONALS, h, x / h).factor
    root = math.sqrt(h)
    assert abs(factor[2, 0] - root) <= root * x / 2 + round_off(root, 8)
    assert factor[2, 1] <= root * x
    assert factor[2, 2] <= root * x**2


@settings(max_examples=150, deadline=None)
@given(lengths, small)
def test_conditional_variances_are_their_leading_terms_as_the_decay_vanishes(h, x):
    """Var(I | dw) = x²h/12 (1 - x + …), Var(I | dw, dz) = x⁴h/720 (1 - x + …), with x = θh.

    The next terms are alternating and smaller, so that x bounds the relative change.
    """
    given_dw = StepLaw(("dw", "decayed"), h, x / h).factor[1, 1] ** 2
    given_both = StepLaw(FUNCTIONALS, h, x / h).factor[2, 2] ** 2
    first, second = x**2 * h / 12, x**4 * h / 720
    assert abs(given_dw - first) <= first * x + round_off(first, 32)
    assert abs(given_both - second) <= second * x + round_off(second, 32)


@settings(max_examples=150, deadline=None)
@given(lengths, st.floats(-3.0, 60.0))
def test_the_variance_of_the_decayed_increment_is_its_closed_form(h, x):
    """Var I = h (1 - e^{-2x})/(2x), Cov(dw, I) = h (1 - e^{-x})/x, for every x = θh."""
    covariance = StepLaw(FUNCTIONALS, h, x / h).covariance
    x = (x / h) * h
    var = h * (-math.expm1(-2 * x) / (2 * x) if x else 1.0)
    cov = h * (-math.expm1(-x) / x if x else 1.0)
    assert abs(covariance[2, 2] - var) <= round_off(var + h, 64)
    assert abs(covariance[0, 2] - cov) <= round_off(cov + h, 64)


@settings(max_examples=100, deadline=None)
@given(lengths, st.floats(-3.0, 60.0), st.floats(0.05, 0.95))
def test_joining_two_pieces_of_any_lengths_gives_the_law_of_the_whole(h, x, share):
    """Joining is linear: its matrix maps the covariance of both pieces to that of the whole."""
    decay = x / h
    first, second = share * h, h - share * h
    units = np.eye(6)
    joined = concatenate(
        {n: units[i] for i, n in enumerate(FUNCTIONALS)},
        {n: units[3 + i] for i, n in enumerate(FUNCTIONALS)},
        second,
        decay,
    )
    matrix = np.array([joined[n] for n in FUNCTIONALS])
    both = np.zeros((6, 6))
    both[:3, :3] = StepLaw(FUNCTIONALS, first, decay).covariance
    both[3:, 3:] = StepLaw(FUNCTIONALS, second, decay).covariance
    whole = StepLaw(FUNCTIONALS, h, decay).covariance
    sizes = np.sqrt(np.diag(whole))
    gap = np.abs(matrix @ both @ matrix.T - whole) / np.multiply.outer(sizes, sizes)
    # exp(-θh) is off by |θh| ulp, squared in a variance.
    assert gap.max() <= round_off(1.0, int(64 * (1 + abs(x))))


@settings(max_examples=100, deadline=None)
@given(
    st.floats(0.01, 8.0),
    st.floats(-5.0, 5.0),
    st.floats(0.01, 3.0),
    st.floats(0.01, 2.0),
    st.floats(0.05, 0.95),
    st.integers(0, 99),
)
def test_two_exact_ornstein_uhlenbeck_steps_are_one(theta, mean, sigma, h, share, seed):
    """The registered exact transition over two adjacent pieces = over both, on the joined noise."""
    scheme = find_scheme("exact-ou")
    sde = sb.problem("ou", theta=theta, mean=mean, sigma=sigma).sde
    rng = np.random.default_rng(seed)
    first, second = share * h, h - share * h
    pieces = [
        StepLaw(("decayed",), length, theta).from_normals([rng.standard_normal(5) for _ in "ab"])
        for length in (first, second)
    ]
    joined = concatenate(*pieces, second, theta)
    x = 5 * rng.standard_normal(5)
    noises = [sb.Noise(decayed=each["decayed"]) for each in (*pieces, joined)]
    between = scheme(sde, 0.0, x, first, noises[0])
    twice = scheme(sde, first, between, second, noises[1])
    once = scheme(sde, 0.0, x, h, noises[2])
    scale = float(np.abs(x).max()) + abs(mean) + sigma * float(np.abs(joined["decayed"]).max())
    scale += sigma * max(float(np.abs(p["decayed"]).max()) for p in pieces)
    assert np.abs(twice - once).max() <= round_off(scale, int(32 * (1 + theta * h)))
