"""The decorator that makes a step a scheme, what it refuses, and the claims of a scheme."""

import math
from dataclasses import replace

import numpy as np
import pytest

import sdebench as sb
from sdebench.errors import BadClaim, BadOption, BadStep, UnknownName


def own_step(sde, t, x, h, noise):
    """Take no step."""
    return x


def test_the_name_is_the_functions_with_hyphens():
    assert sb.scheme(strong=0.5)(own_step).name == "own-step"


def test_a_given_name_is_kept():
    assert sb.scheme(strong=0.5, name="another")(own_step).name == "another"


def test_a_scheme_is_called_as_its_step():
    x = np.arange(3.0)
    assert sb.scheme(strong=0.5)(own_step)(None, 0.0, x, 0.1, None) is x


def test_a_scheme_carries_its_steps_docstring_and_module():
    made = sb.scheme(strong=0.5)(own_step)
    assert made.doc == "Take no step."
    assert made.module == __name__


@pytest.mark.parametrize("claim", ["strong", "weak", "strong_additive"])
@pytest.mark.parametrize(
    "order",
    [True, "1", math.nan, math.inf, -0.5, 0, 1j, [1.0]],
    ids=["bool", "text", "nan", "infinity", "negative", "zero", "complex", "list"],
)
def test_an_order_that_is_no_positive_number_is_refused(claim, order):
    with pytest.raises(BadClaim, match=rf"'own-step' claims {claim}="):
        sb.scheme(**{claim: order})(own_step)


def test_a_scheme_that_claims_nothing_is_refused():
    with pytest.raises(BadClaim, match="claims nothing"):
        sb.scheme()(own_step)


def test_an_unknown_functional_is_refused_with_the_nearest_one():
    with pytest.raises(UnknownName, match=r"'dx'.*Did you mean 'd[wz]'"):
        sb.scheme(strong=0.5, noise=("dx",))(own_step)


def test_one_functional_may_be_given_without_a_tuple():
    assert sb.scheme(strong=0.5, noise="decayed")(own_step).noise == ("decayed",)


def test_an_unknown_calculus_is_refused():
    with pytest.raises(BadOption, match="'ito' or 'stratonovich'"):
        sb.scheme(strong=0.5, calculus="backward")(own_step)


def test_whole_orders_become_floats():
    made = sb.scheme(strong=1, weak=2, strong_additive=3)(own_step)
    assert [type(v) for v in (made.strong, made.weak, made.strong_additive)] == [float] * 3


@pytest.mark.parametrize(
    ("orders", "kind", "claims"),
    [
        ({"strong": 0.5}, "multiplicative", [("strong", 0.5)]),
        ({"weak": 2.0}, "multiplicative", [("weak", 2.0)]),
        ({"strong": 0.5, "weak": 1.0}, "additive", [("strong", 0.5), ("weak", 1.0)]),
        ({"strong": 0.5, "strong_additive": 1.0}, "additive", [("strong", 1.0)]),
        ({"strong": 0.5, "strong_additive": 1.0}, "multiplicative", [("strong", 0.5)]),
        ({"strong_additive": 1.5}, "additive", [("strong", 1.5)]),
        ({"strong_additive": 1.5}, "multiplicative", []),
    ],
)
def test_the_claims_are_those_that_hold_on_the_class_of_noise(orders, kind, claims):
    made = sb.scheme(**orders)(own_step)
    assert [(c.kind, c.order) for c in made.claims(kind)] == claims


def test_the_label_is_the_name_as_typed():
    made = sb.scheme(strong=0.5)(own_step)
    assert made.label == "own-step"
    assert replace(made, typed="my.py:own_step").label == "my.py:own_step"


def test_a_step_that_takes_other_arguments_is_refused():
    with pytest.raises(BadStep, match=r"'short' takes \(x, h\)"):
        sb.scheme(strong=0.5, name="short")(lambda x, h: x)


def test_what_is_no_function_is_refused():
    with pytest.raises(BadStep, match="'list' is a list, not a function"):
        sb.scheme(strong=0.5)([1])


def test_the_decorator_without_its_claims_is_told_what_to_write():
    with pytest.raises(BadClaim, match=r"write @scheme\(strong=..., weak=...\)"):
        sb.scheme(own_step)


def test_an_object_that_is_called_makes_a_step():
    class Stepper:
        def __call__(self, sde, t, x, h, noise):
            return x + h

    made = sb.scheme(strong=0.5)(Stepper())
    assert made.name == "Stepper"
    assert made(None, 0.0, np.zeros(1), 0.5, None).tolist() == [0.5]
