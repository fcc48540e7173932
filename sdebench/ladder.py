"""The ladder: the step counts of a study, each rung a whole multiple of the one above."""

import math
from collections.abc import Iterable
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from sdebench.errors import BadOption

CHECKED_STEPS = 64
MOST_STEPS = 2**20  # beyond, one block of paths alone takes minutes


@dataclass(frozen=True)
class Ladder:
    """Numbers of steps over [0, T], strictly increasing; step sizes are T / steps."""

    steps: tuple[int, ...]

    @classmethod
    def of(cls, steps: Iterable[int]) -> "Ladder":
        """Return a checked ladder; raises `BadOption` unless it has three nested rungs or more."""
        if isinstance(steps, str) or not isinstance(steps, Iterable):
            raise BadOption("steps", repr(steps), "they are numbers, such as (8, 16, 32, 64)")
        rungs = tuple(int(n) if isinstance(n, np.integer) else n for n in steps)
        shown = ",".join(map(str, rungs)) or "nothing"
        if any(isinstance(n, bool) or not isinstance(n, int) or n < 1 for n in rungs):
            raise BadOption("steps", shown, "a number of steps is a whole number of at least 1")
        if rungs and max(rungs) > MOST_STEPS:
            raise BadOption("steps", shown, f"a path has at most {MOST_STEPS} steps")
        if len(rungs) < 3:
            raise BadOption(
                "steps", shown, "an order needs three rungs or more, such as 8,16,32,64"
            )
        if any(b <= a or b % a for a, b in pairwise(rungs)):
            raise BadOption(
                "steps", shown, "each rung is a whole multiple of the one before, such as 8,16,32"
            )
        return cls(rungs)

    @property
    def ratios(self) -> tuple[int, ...]:
        """How many steps of a rung make one of the rung before, from the second rung on."""
        return tuple(b // a for a, b in pairwise(self.steps))

    @property
    def coarse_part(self) -> "Ladder":
        """The rungs that a modest sample can check: those to 64 steps, three at least."""
        few = tuple(n for n in self.steps if n <= CHECKED_STEPS)
        return Ladder(few if len(few) >= 3 else self.steps[:3])

    @property
    def octaves(self) -> tuple[float, ...]:
        """log2 of `ratios`: the distance between neighbouring rungs."""
        return tuple(math.log2(r) for r in self.ratios)


# Round-off of an end point relative to its size, a step: some eight operations of half an ulp,
# adding up in the worst case.
ROUND_OFF = 4 * float(np.finfo(float).eps)


def round_off(steps: Iterable[int], scale: float) -> NDArray[np.float64]:
    """Return the round-off of end points of size `scale` after so many steps, shape `(rungs,)`."""
    return ROUND_OFF * scale * np.array([*steps], dtype=np.float64)


DEFAULT = Ladder((4, 8, 16, 32, 64))
PROPAGATED = Ladder((4, 16, 64, 256, 1024, 4096))
