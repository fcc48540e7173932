"""Problems, their parameters, and the quadrature of their law."""

import math
from dataclasses import FrozenInstanceError

import numpy as np
import pytest
from scipy import stats

import sdebench as sb
from sdebench.errors import BadParameter, UnknownName
from sdebench.quadrature import EDGES
from tests.tolerance import round_off


@pytest.fixture
def gbm() -> sb.Problem:
    return sb.problem("gbm")


@pytest.mark.parametrize(
    ("value", "rule"),
    [
        ("two", "a parameter is a number"),
        (True, "a parameter is a number"),
        (None, "a parameter is a number"),
        ([0.3], "a parameter is a number"),
        (math.nan, "finite"),
        (math.inf, "finite"),
        (0.0, "above 0"),
        (-0.3, "above 0"),
    ],
    ids=["text", "bool", "none", "list", "nan", "infinity", "boundary", "outside"],
)
def test_an_unusable_value_of_a_parameter_is_refused(gbm, value, rule):
    with pytest.raises(BadParameter, match=rf"gbm: sigma = .*{rule}"):
        gbm.with_parameters({"sigma": value})


@pytest.mark.parametrize("value", ["0.4", 0.4, np.float32(0.5), np.int64(2), 3])
def test_numbers_of_any_kind_become_python_floats(gbm, value):
    found = gbm.with_parameters({"sigma": value}).params["sigma"]
    assert type(found) is float
    assert found == float(value)


def test_a_parameter_bounded_on_both_sides_says_so():
    with pytest.raises(BadParameter, match="above 0 and below 1, since I say so"):
        sb.Parameter(0.5, 0.0, 1.0, "since I say so").check("mine", "rho", 1.0)


def test_a_parameter_inside_its_open_interval_is_returned():
    assert sb.Parameter(0.5, 0.0, 1.0).check("mine", "rho", 0.25) == 0.25


def test_an_unknown_parameter_is_refused_with_the_nearest_one(gbm):
    with pytest.raises(UnknownName, match=r"'sigme'.*Did you mean 'sigma'"):
        gbm.with_parameters({"sigme": 0.4})


def test_every_problem_has_a_positive_horizon(gbm):
    with pytest.raises(BadParameter, match=r"horizon.*above 0"):
        gbm.with_parameters({"horizon": 0.0})


def test_setting_a_parameter_leaves_the_problem_and_the_other_parameters_alone(gbm):
    before = dict(gbm.params)
    moved = gbm.with_parameters({"mu": 0.9})
    assert dict(moved.params) == before | {"mu": 0.9}
    assert dict(gbm.params) == before


def test_settings_add_up_and_the_later_one_wins(gbm):
    twice = gbm.with_parameters({"mu": 0.9, "sigma": 0.8}).with_parameters({"mu": 0.7})
    assert (twice.params["mu"], twice.params["sigma"]) == (0.7, 0.8)


def test_parameters_cannot_be_written(gbm):
    with pytest.raises(TypeError):
        gbm.params["mu"] = 1.0
    with pytest.raises(TypeError):
        gbm.sde.params["mu"] = 1.0
    with pytest.raises(FrozenInstanceError):
        gbm.name = "other"


def test_the_label_says_what_differs_from_the_defaults(gbm):
    assert gbm.label == "gbm"
    assert gbm.with_parameters({"mu": 1.5, "horizon": 2.0}).label == "gbm:mu=1.5,horizon=2"


def test_the_label_is_the_problem_as_typed(gbm):
    assert gbm.with_parameters({"mu": 1.5}, typed="gbm:mu=1.50").label == "gbm:mu=1.50"


def test_the_sde_binds_the_parameters(gbm):
    sde = gbm.with_parameters({"mu": 0.9, "x0": 3.0, "horizon": 2.0}).sde
    x = np.array([1.0, 2.0])
    assert np.array_equal(sde.drift(0.0, x), 0.9 * x)
    assert (sde.start, sde.horizon, sde.noise_kind) == (3.0, 2.0, "multiplicative")


def test_a_scheme_is_shown_the_parameters_of_the_equation_only(gbm):
    assert set(gbm.sde.params) == {"mu", "sigma"}


def test_the_decayed_increment_is_offered_where_a_parameter_is_its_rate(gbm):
    ou = sb.problem("ou", theta=0.6)
    assert (ou.functionals, ou.decay_rate) == (("dw", "dz", "decayed"), 0.6)
    assert (gbm.functionals, gbm.decay_rate) == (("dw", "dz"), 0.0)


@pytest.mark.parametrize(
    ("f", "exact"),
    [
        (lambda x: x, 0.3),
        (lambda x: x * x, 0.3**2 + 1.7**2),
        (np.cos, math.cos(0.3) * math.exp(-(1.7**2) / 2)),
        (np.exp, math.exp(0.3 + 1.7**2 / 2)),
    ],
    ids=["mean", "second-moment", "cos", "exp"],
)
def test_the_law_gives_the_closed_form_expectations_of_a_normal(f, exact):
    """All from the characteristic function of N(0.3, 1.7²)."""
    found, doubt = sb.NormalLaw(0.3, 1.7, lambda g: g).expectation(f)
    assert abs(found - exact) <= doubt + round_off(exact, 64)


def edges_of_panels() -> list[float]:
    """Return where panels of the quadrature meet, within 2.5 deviations; every 16th."""
    return [float(z) for z in EDGES[np.abs(EDGES) <= 2.5][::16]]


@pytest.mark.parametrize("offset", [0.0, 1e-12, -1e-6, 1e-3], ids=str)
def test_the_law_knows_its_doubt_of_a_step_close_to_the_edge_of_a_panel(offset):
    """There a step would escape all the nodes of its panel, were the edges no nodes."""
    law = sb.NormalLaw(0.0, 1.0, lambda g: g)
    missed = []
    for edge in edges_of_panels():
        found, doubt = law.expectation(lambda x, k=edge + offset: 1.0 * (x > k))
        if abs(found - stats.norm.sf(edge + offset)) > doubt + round_off(1.0, 64):
            missed.append(edge)
    assert missed == []


@pytest.mark.parametrize("width", [1.6, 0.3, 0.05], ids=str)
def test_the_law_knows_its_doubt_of_a_payoff_that_is_zero_outside_of_a_band(width):
    """The first panels have nodes some five standard deviations apart: a band fits between."""
    law = sb.NormalLaw(0.0, 1.0, lambda g: g)
    missed = []
    for low in np.linspace(-2.0, 2.0, 21):
        found, doubt = law.expectation(lambda x, k=low: 1.0 * ((x > k) & (x < k + width)))
        exact = stats.norm.cdf(low + width) - stats.norm.cdf(low)
        if abs(found - exact) > doubt + round_off(1.0, 64):
            missed.append(float(low))
    assert missed == []


@pytest.mark.parametrize("f", [np.square, np.cos], ids=["second-moment", "cos"])
def test_the_law_has_next_to_no_doubt_of_a_smooth_functional(f):
    """Else a fault of the flow would hide behind it: some thousand evaluations' round-off."""
    _, doubt = sb.NormalLaw(0.3, 1.7, lambda g: g).expectation(f)
    assert doubt <= round_off(1.0, 2**14)


def test_the_law_states_its_uncertainty_where_a_functional_jumps():
    """The doubt covers the error at a jump, where quadrature is poor."""
    edge = 0.1234
    found, doubt = sb.NormalLaw(0.0, 1.0, lambda g: g).expectation(lambda x: 1.0 * (x > edge))
    assert doubt > 0
    assert abs(found - stats.norm.sf(edge)) <= doubt + round_off(1.0, 64)
