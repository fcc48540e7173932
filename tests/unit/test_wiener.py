"""Wiener functionals: their joint law over a step, their nodes, and how pieces join."""

import math

import numpy as np
import pytest
from scipy import integrate

from sdebench import Noise, StepLaw, concatenate
from sdebench.errors import UndeclaredFunctional
from sdebench.wiener import FUNCTIONALS, gauss_hermite, in_order
from tests.tolerance import round_off

H = 0.7


def by_itos_isometry(h: float, decay: float) -> np.ndarray:
    """Return the covariance of (dw, dz, decayed) as integrals of products of their kernels.

    Over dW_s the kernels are 1, h - s and exp(-θ(h - s)).
    """
    kernels = [lambda s: 1.0, lambda s: h - s, lambda s: math.exp(-decay * (h - s))]

    def covariance(k, m) -> float:
        return integrate.quad(lambda s: k(s) * m(s), 0, h, epsabs=0)[0]

    return np.array([[covariance(k, m) for m in kernels] for k in kernels])


@pytest.mark.parametrize("decay", [0.0, 1e-9, 1e-3, 0.3, 1.4, 1.43, 5.0, 40.0, -0.8])
def test_the_covariance_is_that_of_itos_isometry(decay):
    law = StepLaw(FUNCTIONALS, H, decay)
    expected = by_itos_isometry(H, decay)
    scale = float(np.abs(expected).max())
    # quad's own relative error is of some 50 ulp on such smooth integrands
    assert np.abs(law.covariance - expected).max() <= round_off(scale, 200)


def test_a_vanishing_decay_keeps_the_digits_of_the_conditional_variance():
    """Var(I | dw, dz) = θ⁴h⁵/720 to leading order; closed forms give noise of 1e-16 here."""
    theta = 1e-4
    factor = StepLaw(FUNCTIONALS, H, theta).factor
    leading = theta**4 * H**5 / 720
    # The next term of the series is smaller by a factor of at most θh.
    assert abs(factor[2, 2] ** 2 - leading) <= leading * (theta * H) + round_off(leading, 16)


@pytest.mark.parametrize("names", [("dw",), ("dw", "dz"), ("dw", "decayed"), FUNCTIONALS])
def test_the_factor_is_lower_triangular(names):
    factor = StepLaw(names, H, 0.4).factor
    assert np.array_equal(factor, np.tril(factor))


@pytest.mark.parametrize(
    ("asked", "given"),
    [
        (("decayed",), ("dw", "decayed")),
        (("dz", "dw", "dz"), ("dw", "dz")),
        ((), ("dw",)),
        (("decayed", "dz"), FUNCTIONALS),
    ],
)
def test_names_are_put_in_sampling_order_with_dw_among_them(asked, given):
    assert in_order(asked) == given


def test_normals_become_the_factor_times_them():
    rng = np.random.default_rng(0)
    law = StepLaw(FUNCTIONALS, H, 0.6)
    normals = rng.standard_normal((3, 50))
    expected = law.factor @ normals
    found = law.from_normals([row.copy() for row in normals])
    gap = np.abs(np.array([found[n] for n in FUNCTIONALS]) - expected).max()
    assert gap <= round_off(float(np.abs(expected).max()), 8)


def test_the_arrays_of_normals_are_reused():
    normals = [np.ones(3), np.ones(3)]
    found = StepLaw(("dw", "dz"), H).from_normals(normals)
    assert found["dw"] is normals[0]
    assert found["dz"] is normals[1]


def test_nodes_reproduce_the_covariance():
    law = StepLaw(FUNCTIONALS, H, 1.1)
    nodes, weights = law.nodes(gauss_hermite(8), 4)
    values = np.array([nodes[n] for n in FUNCTIONALS])
    scale = float(np.abs(law.covariance).max())
    assert np.abs((values * weights) @ values.T - law.covariance).max() <= round_off(scale, 200)


def test_weights_of_nodes_sum_to_one():
    _, weights = StepLaw(FUNCTIONALS, H, 1.1).nodes(gauss_hermite(7), 3)
    assert len(weights) == 7 * 3 * 3
    assert abs(weights.sum() - 1) <= round_off(1.0, len(weights))


@pytest.mark.parametrize("degree", range(0, 12, 2))
def test_gauss_hermite_gives_the_moments_of_the_normal_law(degree):
    x, w = gauss_hermite(6)  # exact up to degree 11
    moment = math.prod(range(1, degree, 2))  # (degree - 1)!!
    assert abs(w @ x**degree - moment) <= round_off(moment, 100)


def test_increments_of_two_pieces_add():
    joined = concatenate({"dw": np.array([1.0, 2.0])}, {"dw": np.array([0.5, -1.0])}, H)
    assert joined["dw"].tolist() == [1.5, 1.0]


def test_the_time_integral_of_the_later_piece_starts_from_the_earlier_increment():
    """∫(W_s - W_0) over both = z1 + z2 + h2 w1: 0.5 + 0.25 + 2 · 3."""
    first = {"dw": np.array([3.0]), "dz": np.array([0.5])}
    second = {"dw": np.array([7.0]), "dz": np.array([0.25])}
    assert concatenate(first, second, 2.0)["dz"].tolist() == [6.75]


def test_the_earlier_decayed_increment_decays_over_the_later_piece():
    first = {"dw": np.array([0.0]), "decayed": np.array([4.0])}
    second = {"dw": np.array([0.0]), "decayed": np.array([1.0])}
    found = concatenate(first, second, 0.5, decay=2 * math.log(2))["decayed"]
    assert abs(found[0] - 3.0) <= round_off(4.0, 4)


def test_joining_in_place_gives_what_joining_afresh_gives():
    rng = np.random.default_rng(1)
    first, second = ({n: rng.standard_normal(9) for n in FUNCTIONALS} for _ in range(2))
    fresh = concatenate(first, second, 0.3, 0.8)
    in_place = concatenate(first, second, 0.3, 0.8, out=first)
    assert in_place["dz"] is first["dz"]
    assert all(np.array_equal(in_place[n], fresh[n]) for n in FUNCTIONALS)


@pytest.mark.parametrize("decay", [0.0, 0.9, -0.5])
def test_joining_two_halves_gives_the_law_of_the_whole(decay):
    """Joining is linear: its matrix J maps both halves' covariance to that of the whole step."""
    half = StepLaw(FUNCTIONALS, H / 2, decay).covariance
    units = np.eye(6)
    first = {n: units[i] for i, n in enumerate(FUNCTIONALS)}
    second = {n: units[3 + i] for i, n in enumerate(FUNCTIONALS)}
    joined = concatenate(first, second, H / 2, decay)
    matrix = np.array([joined[n] for n in FUNCTIONALS])
    both = np.kron(np.eye(2), half)
    gap = np.abs(matrix @ both @ matrix.T - StepLaw(FUNCTIONALS, H, decay).covariance).max()
    assert gap <= round_off(float(np.abs(half).max()), 64)


def test_reading_a_functional_that_was_not_asked_for_says_how_to_ask():
    with pytest.raises(UndeclaredFunctional, match=r'noise=\("dw", "dz"\)'):
        _ = Noise(dw=np.zeros(1)).dz


def test_reading_what_is_no_functional_lists_those_that_are():
    with pytest.raises(AttributeError, match=r"no functional 'dt'.*decayed"):
        _ = Noise(dw=np.zeros(1)).dt
