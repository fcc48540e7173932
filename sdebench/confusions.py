"""Mistakes that integrators share, told from the limits of a step's leading terms.

Each confusion is a pattern that the coefficients of h, dw and dw² - h follow in *every* setting,
with a = drift, b = diffusion and c = (1/2) b ∂b/∂x read off the SDE's own terms.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from sdebench.sde import Array

MATCH = 1e-6  # relative agreement that makes a pattern: far above the terms' uncertainty


class Limits(Protocol):
    """The limits of the leading coefficients in one setting, arrays `(states, 4)`."""

    @property
    def yours(self) -> Array:
        """The scheme's."""

    @property
    def needed(self) -> Array:
        """The SDE's."""


@dataclass(frozen=True)
class Terms:
    """The scheme's coefficients of h, dw, dw² - h, then the SDE's; flat over all settings."""

    drift: Array
    noise: Array
    square: Array
    a: Array
    b: Array
    c: Array


@dataclass(frozen=True)
class Confusion:
    """A pattern with its sentence; `shows` says where it can be told at all.

    `explains` is the degree of the wrong term that it accounts for: 0 the one in h, 1 that in dw,
    2 that in dw² - h.
    """

    explains: int
    sentence: str
    shows: Callable[[Terms], Array]
    pattern: Callable[[Terms], Sequence[tuple[Array, Array]]]


CONFUSIONS = (
    Confusion(
        0,
        "the -h of (dw² - h) is missing, or an Itô drift was used where the Stratonovich drift "
        "a - ½·b·∂b/∂x belongs",
        lambda s: s.c,
        lambda s: [(s.square, s.c), (s.drift, s.a + s.c)],
    ),
    Confusion(
        0,
        "the Stratonovich drift a - ½·b·∂b/∂x was used in an Itô step",
        lambda s: s.c,
        lambda s: [(s.drift, s.a - s.c)],
    ),
    Confusion(
        0,
        "½·b·∂b/∂x was added to the drift: the conversion has the wrong sign",
        lambda s: s.c,
        lambda s: [(s.drift, s.a + s.c), (s.square, 0 * s.c)],
    ),
    Confusion(0, "the drift is missing", lambda s: s.a, lambda s: [(s.drift, 0 * s.a)]),
    Confusion(0, "the drift has the wrong sign", lambda s: s.a, lambda s: [(s.drift, -s.a)]),
    Confusion(0, "the drift is twice too large", lambda s: s.a, lambda s: [(s.drift, 2 * s.a)]),
    Confusion(0, "the drift is halved", lambda s: s.a, lambda s: [(s.drift, s.a / 2)]),
    Confusion(
        1,
        "the noise term vanishes as h → 0: the noise was scaled by √h once more, or is missing",
        lambda s: s.b,
        lambda s: [(s.noise, 0 * s.b)],
    ),
    Confusion(1, "the noise term has the wrong sign", lambda s: s.b, lambda s: [(s.noise, -s.b)]),
    Confusion(1, "the noise is twice too large", lambda s: s.b, lambda s: [(s.noise, 2 * s.b)]),
    Confusion(1, "the noise is halved", lambda s: s.b, lambda s: [(s.noise, s.b / 2)]),
    Confusion(
        2,
        "the correction ½·b·∂b/∂x·(dw² - h) is missing",
        lambda s: s.c,
        lambda s: [(s.drift, s.a), (s.noise, s.b), (s.square, 0 * s.c)],
    ),
    Confusion(
        2,
        "the ½ of the correction ½·b·∂b/∂x·(dw² - h) is missing: it is twice too large",
        lambda s: s.c,
        lambda s: [(s.square, 2 * s.c)],
    ),
    Confusion(
        2,
        "the correction ½·b·∂b/∂x·(dw² - h) has the wrong sign",
        lambda s: s.c,
        lambda s: [(s.square, -s.c)],
    ),
    Confusion(
        2,
        "the correction ½·b·∂b/∂x·(dw² - h) is halved",
        lambda s: s.c,
        lambda s: [(s.square, s.c / 2)],
    ),
)


def name_confusion(limits: Sequence[Limits], degree: int) -> str | None:
    """Return the sentence of the first pattern that explains a wrong term, or None.

    `degree` is that of the term; the pattern must hold in every setting.
    """
    columns = [np.concatenate([each.yours[:, j] for each in limits]) for j in range(3)]
    wanted = [np.concatenate([each.needed[:, j] for each in limits]) for j in range(3)]
    terms = Terms(*columns, *wanted)
    size = np.abs(terms.a) + np.abs(terms.b) + np.abs(terms.c)
    for confusion in CONFUSIONS:
        if confusion.explains != degree:
            continue
        if not np.any(np.abs(confusion.shows(terms)) > MATCH * size):
            continue
        if all(
            np.all(np.abs(found - wanted) <= MATCH * size)
            for found, wanted in confusion.pattern(terms)
        ):
            return confusion.sentence
    return None
