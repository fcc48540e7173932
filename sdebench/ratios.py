"""The errors of two integrators on the same rungs, and the ratio of their sizes with bounds."""

import math
from dataclasses import dataclass
from typing import Literal

import msgspec
import numpy as np

from sdebench.constant import settled_constant
from sdebench.evidence import ErrorConstant, finite
from sdebench.orders import Errors, counting_rungs, observed_order, ratio_interval
from sdebench.sde import Array


class Side(msgspec.Struct, frozen=True, kw_only=True):
    """The error of one integrator on a rung, with its uncertainty."""

    error: float | None
    uncertainty: float | None


class ComparedRung(msgspec.Struct, frozen=True, kw_only=True):
    """A rung of both: |new error| / |old error| with bounds; null where one is not known."""

    steps: int
    h: float
    old: Side
    new: Side
    ratio: float | None
    low: float | None
    high: float | None


@dataclass(frozen=True)
class Both:
    """The errors of both with the covariance between them on each rung, and how they are bounded.

    `quantile` bounds what is computed of several errors, `marginal` one error alone.
    """

    route: Literal["propagated", "sampled"]
    old: Errors
    new: Errors
    cross: Array
    quantile: float
    marginal: float

    def rungs(self, horizon: float) -> list[ComparedRung]:
        """Return the rungs with the ratio of the errors' sizes (Fieller 1954 for its bounds)."""
        sides = [
            list(zip(errors.values, errors.half_widths(self.marginal), strict=True))
            for errors in (self.old, self.new)
        ]
        found = []
        for r, steps in enumerate(self.old.steps):
            (old, old_doubt), (new, new_doubt) = (side[r] for side in sides)
            ratio, low, high = self._ratio(r)
            found.append(
                ComparedRung(
                    steps=steps,
                    h=horizon / steps,
                    old=Side(error=finite(old), uncertainty=finite(old_doubt)),
                    new=Side(error=finite(new), uncertainty=finite(new_doubt)),
                    ratio=finite(ratio),
                    low=finite(low),
                    high=finite(high),
                )
            )
        return found

    def _ratio(self, r: int) -> tuple[float, float, float]:
        top, bottom = float(self.new.measures[r]), float(self.old.measures[r])
        if not math.isfinite(top) or not math.isfinite(bottom) or bottom == 0.0:
            return math.nan, math.nan, math.nan
        c = float(self.cross[r])
        covariance = np.array([[self.new.covariance[r, r], c], [c, self.old.covariance[r, r]]])
        low, high = ratio_interval(top, bottom, covariance, self.quantile)
        root = 1.0 / self.old.power
        return abs(top / bottom) ** root, low**root, high**root

    def constants(self, horizon: float) -> list[ErrorConstant | None]:
        """Return the error constants of the old and the new scheme, where errors settle."""
        found = []
        for errors in (self.old, self.new):
            order = observed_order(errors, counting_rungs(errors, self.quantile), self.quantile)
            found.append(settled_constant(errors, order, horizon, self.quantile))
        return found
