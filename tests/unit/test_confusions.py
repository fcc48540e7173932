"""Each mistake that integrators share is told from the limits of a step's terms."""

from types import SimpleNamespace

import numpy as np
import pytest

from sdebench.confusions import CONFUSIONS, name_confusion

A = np.array([0.3, -0.7, 1.1])  # drift
B = np.array([0.5, 0.4, -0.9])  # diffusion
C = np.array([0.2, 0.6, -0.35])  # half b times its derivative


def limits_of(drift, noise, square):
    yours = np.stack([drift, noise, square, 0 * A], axis=1)
    needed = np.stack([A, B, C, 0 * A], axis=1)
    return SimpleNamespace(yours=yours, needed=needed)


MISTAKES = [
    ("-h of (dw² - h) is missing", 0, A + C, B, C),
    ("Stratonovich drift a - ½·b·∂b/∂x was used", 0, A - C, B, C),
    ("conversion has the wrong sign", 0, A + C, B, 0 * C),
    ("the drift is missing", 0, 0 * A, B, C),
    ("drift has the wrong sign", 0, -A, B, C),
    ("drift is twice too large", 0, 2 * A, B, C),
    ("drift is halved", 0, A / 2, B, C),
    ("noise term vanishes", 1, A, 0 * B, C),
    ("noise term has the wrong sign", 1, A, -B, C),
    ("noise is twice too large", 1, A, 2 * B, C),
    ("noise is halved", 1, A, B / 2, C),
    ("correction ½·b·∂b/∂x·(dw² - h) is missing", 2, A, B, 0 * C),
    ("½ of the correction", 2, A, B, 2 * C),
    ("correction ½·b·∂b/∂x·(dw² - h) has the wrong sign", 2, A, B, -C),
    ("correction ½·b·∂b/∂x·(dw² - h) is halved", 2, A, B, C / 2),
]
each_mistake = pytest.mark.parametrize(
    ("words", "degree", "drift", "noise", "square"),
    MISTAKES,
    ids=lambda v: v if isinstance(v, str) else "",
)


@each_mistake
def test_a_mistake_is_named_for_the_term_that_it_makes_wrong(words, degree, drift, noise, square):
    assert words in (name_confusion([limits_of(drift, noise, square)], degree) or "nothing")


@each_mistake
def test_a_mistake_is_not_named_for_a_term_that_it_leaves_right(
    words, degree, drift, noise, square
):
    limits = limits_of(drift, noise, square)
    right = [j for j in range(3) if np.array_equal(limits.yours[:, j], limits.needed[:, j])]
    assert degree not in right
    assert [j for j in right if name_confusion([limits], j) is not None] == []


def test_every_confusion_has_a_case_here():
    named = {name_confusion([limits_of(*terms)], degree) for _, degree, *terms in MISTAKES}
    assert named == {confusion.sentence for confusion in CONFUSIONS}


@pytest.mark.parametrize("degree", [1, 2])
def test_two_mistakes_at_once_are_each_named_for_their_own_term(degree):
    """A drift twice too large does not hide, nor is taken for, what is wrong with the noise."""
    limits = limits_of(2 * A, B / 2, 2 * C)
    assert "drift is twice too large" in name_confusion([limits], 0)
    wanted = {1: "noise is halved", 2: "½ of the correction"}
    assert wanted[degree] in name_confusion([limits], degree)


@pytest.mark.parametrize("degree", range(4), ids=["h", "dw", "dw² - h", "beyond"])
@pytest.mark.parametrize(
    "terms",
    [(A, B, C), (1.3 * A, B, C), (A, B, C + 0.1), (0.5 * A + 0.1, B, C)],
    ids=["no mistake", "another factor", "another shift", "halved and shifted"],
)
def test_what_follows_no_pattern_gets_no_name(terms, degree):
    assert name_confusion([limits_of(*terms)], degree) is None


def test_a_pattern_that_holds_in_one_setting_only_gets_no_name():
    assert name_confusion([limits_of(2 * A, B, C), limits_of(2.1 * A, B, C)], 0) is None


def test_a_pattern_in_every_setting_is_named():
    assert name_confusion([limits_of(2 * A, B, C), limits_of(2 * A, B, C)], 0) is not None


def test_a_drift_that_is_zero_anyway_is_not_called_missing():
    still = SimpleNamespace(
        yours=np.stack([0 * A, B, 2 * C, 0 * A], axis=1),
        needed=np.stack([0 * A, B, C, 0 * A], axis=1),
    )
    assert name_confusion([still], 0) is None
    assert "½ of the correction" in name_confusion([still], 2)
