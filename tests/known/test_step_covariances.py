"""The joint law of the functionals over one step.

Each is ∫_0^h k(u) dW with u = h - s the time that is left: k = 1 for dw, u for dz, e^(-θu) for the
decayed increment, so that covariances are integrals of products of k (Itô isometry). Closed forms:

    Var dw = h      Cov(dw,dz) = h²/2      Cov(dw,I) = (1-e^-x)/θ           x = θh
    Var dz = h³/3   Var I = (1-e^-2x)/2θ   Cov(dz,I) = (1-e^-x(1+x))/θ²

Derived for these tests and held against quadrature of 31 digits; computed here once more, with
decimals of 150 digits, since at θh = 10^-9 the last conditional variance cancels to the 45th digit.
"""

from decimal import Decimal, localcontext

import numpy as np
import pytest

import sdebench as sb
from tests.tolerance import as_printed, round_off

ALL = ("dw", "dz", "decayed")
PRINTED = {  # θ, h: Cov(dw,I), Var I, Cov(dz,I), Var(I|dw), Var(I|dw,dz)
    (1.0, 0.1): "0.095162581964040427 0.090634623461009071 0.0046788401604444695 "
    "7.5453400381947251e-5 1.2572573296126362e-8",
    (2.0, 0.5): "0.31606027941427884 0.21616617919084683 0.066060279414278839 "
    "0.016377978743982803 2.6662559269235647e-4",
    (1.5, 1 / 64): "0.015443316699958644 0.015264444676937228 1.2017962340928321e-4 "
    "6.9871244304903588e-7 6.3968198065887673e-12",
}
STEPS = [
    (theta, h)
    for h in (0.01, 0.25, 1.0, 3.0)
    for theta in (1e-9, 1e-5, 0.01, 0.4, 0.99, 1.01, 4.0, 60.0)
]
at_each_step = pytest.mark.parametrize("step", STEPS, ids=lambda s: "theta={:g},h={:g}".format(*s))


def exact(theta: float, h: float) -> dict[str, float]:
    """Covariances and conditional variances, rounded once at the end."""
    with localcontext() as context:
        context.prec = 150
        theta, h = Decimal(theta), Decimal(h)
        x = theta * h
        one, two = (-x).exp(), (-2 * x).exp()
        wi, ii, zi = (1 - one) / theta, (1 - two) / (2 * theta), (1 - one * (1 + x)) / theta**2
        given_dw = ii - wi**2 / h
        rest = zi - h / 2 * wi  # Cov(dz - (h/2) dw, I)
        values = {
            "dw,dw": h,
            "dw,dz": h**2 / 2,
            "dz,dz": h**3 / 3,
            "dw,decayed": wi,
            "decayed,decayed": ii,
            "dz,decayed": zi,
            "given dw": given_dw,
            "given both": given_dw - 12 * rest**2 / h**3,
        }
        return {name: float(value) for name, value in values.items()}


def relative_round_off(theta: float, h: float, value: float, whole: float) -> float:
    """A series of 30 terms up to θh = 1: relative to the value; beyond, a plain difference of
    numbers as large as the whole variance: relative to that."""
    return round_off(value if theta * h <= 1 else whole, 60)


@pytest.mark.parametrize("step", PRINTED, ids=lambda s: "theta={:g},h={:g}".format(*s))
def test_the_covariances_are_those_of_the_table(step):
    law = sb.StepLaw(ALL, step[1], step[0])
    c, last = law.covariance, law.factor[2]
    found = (c[0, 2], c[2, 2], c[1, 2], last[1] ** 2 + last[2] ** 2, last[2] ** 2)
    for value, text in zip(found, PRINTED[step].split(), strict=True):
        allowed = as_printed(text) + round_off(float(text), 60)
        assert abs(value - float(text)) <= allowed


@at_each_step
def test_every_covariance_is_the_closed_form(step):
    """Sums of three products at the most, of factors with sixty operations each."""
    theta, h = step
    covariance, values = sb.StepLaw(ALL, h, theta).covariance, exact(theta, h)
    for i, one in enumerate(ALL):
        for j, other in enumerate(ALL[i:], start=i):
            size = (values[f"{one},{one}"] * values[f"{other},{other}"]) ** 0.5
            gap = abs(covariance[i, j] - values[f"{one},{other}"])
            assert gap <= round_off(size, 3 * 60), (one, other)


@at_each_step
def test_conditional_variances_keep_their_digits(step):
    """What an error sees of I beside dw, and beside dw and dz: 10^-38 where θh = 10^-9."""
    theta, h = step
    values, whole = exact(theta, h), exact(theta, h)["decayed,decayed"]
    given_dw = sb.StepLaw(("dw", "decayed"), h, theta).factor[1, 1] ** 2
    given_both = sb.StepLaw(ALL, h, theta).factor[2, 2] ** 2
    for found, name in ((given_dw, "given dw"), (given_both, "given both")):
        allowed = relative_round_off(theta, h, values[name], whole)
        assert abs(found - values[name]) <= allowed, name


@pytest.mark.parametrize("theta", [1e-6, 1e-4, 1e-3])
def test_conditional_variances_follow_their_series_at_small_decay(theta):
    """The first three terms of each (derived symbolically for these tests).

        Var(I|dw)    = θ²h³/12 - θ³h⁴/12 + 17 θ⁴h⁵/360 - 7 θ⁵h⁶/360 + …
        Var(I|dw,dz) = θ⁴h⁵/720 - θ⁵h⁶/720 + 19 θ⁶h⁷/25200 - …

    Both alternate with falling terms, so that the remainder is below the last term taken.
    """
    h = 0.5
    law = sb.StepLaw(ALL, h, theta)
    given_both = law.factor[2, 2] ** 2
    given_dw = given_both + law.factor[2, 1] ** 2
    x = theta * h
    first = h * np.array([x**2 / 12, -(x**3) / 12, 17 * x**4 / 360])
    second = h * np.array([x**4 / 720, -(x**5) / 720, 19 * x**6 / 25200])
    for found, terms in ((given_dw, first), (given_both, second)):
        assert abs(found - terms.sum()) <= terms[-1] + round_off(found, 60)
        assert abs(found - terms[:2].sum()) > terms[-1] / 2 - round_off(found, 60)


@at_each_step
def test_the_covariances_are_integrals_of_products_of_kernels(step):
    """Gauss–Legendre quadrature on 40 panels, a route without any of the closed forms."""
    theta, h = step
    nodes, weights = np.polynomial.legendre.leggauss(16)
    panel = h / 40
    u = (panel * (np.arange(40)[:, None] + (1 + nodes) / 2)).ravel()
    kernels = np.array([np.ones_like(u), u, np.exp(-theta * u)])
    integrals = (kernels * np.tile(panel * weights / 2, 40)) @ kernels.T
    covariance = sb.StepLaw(ALL, h, theta).covariance
    size = np.sqrt(np.outer(np.diag(integrals), np.diag(integrals))).max()
    assert np.abs(covariance - integrals).max() <= round_off(size, 3 * 60 + len(u))


@pytest.mark.parametrize("names", [("dw",), ("dz",), ("decayed",), ("dz", "decayed"), ALL], ids=str)
def test_a_law_of_fewer_functionals_is_a_part_of_the_law_of_all(names):
    whole = sb.StepLaw(ALL, 0.3, 1.4)
    law = sb.StepLaw(names, 0.3, 1.4)
    index = [ALL.index(name) for name in law.names]
    part = whole.covariance[np.ix_(index, index)]
    assert np.abs(law.covariance - part).max() <= round_off(0.3, 3 * 60)


def test_without_decay_the_decayed_increment_is_the_increment():
    law = sb.StepLaw(ALL, 0.3, 0.0)
    assert np.array_equal(law.factor[2], law.factor[0])


@pytest.mark.parametrize("theta", [0.0, 1e-6, 0.8, 30.0])
@pytest.mark.parametrize("pieces", [(0.25, 0.25), (0.01, 0.7), (2.0, 0.3)], ids=str)
def test_joining_two_pieces_gives_the_law_of_the_whole(theta, pieces):
    """`concatenate` is linear: its matrices come from unit inputs, and carry the two laws over."""
    first, second = (sb.StepLaw(ALL, h, theta) for h in pieces)
    whole = sb.StepLaw(ALL, sum(pieces), theta)
    units, zeros = dict(zip(ALL, np.eye(3), strict=True)), dict.fromkeys(ALL, np.zeros(3))
    joined = (
        sb.concatenate(units, zeros, pieces[1], theta),
        sb.concatenate(zeros, units, pieces[1], theta),
    )
    maps = [np.array([part[name] for name in ALL]) for part in joined]
    laws = zip(maps, (first, second), strict=True)
    carried = sum(m @ law.covariance @ m.T for m, law in laws)
    size = np.diag(whole.covariance)
    allowed = round_off(1.0, 3 * 60) * np.sqrt(np.outer(size, size))
    assert np.all(np.abs(carried - whole.covariance) <= allowed)
