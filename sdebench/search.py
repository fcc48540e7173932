"""The search for the fewest steps that keep an error below a target, by propagation or sampling."""

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Literal

from sdebench.assess import Assessment, Levels, Row
from sdebench.integrator import Claim
from sdebench.ladder import DEFAULT, Ladder
from sdebench.orders import student_quantile
from sdebench.pair import Pair
from sdebench.propagate import propagate
from sdebench.refine import Estimate
from sdebench.sample import Sample
from sdebench.target import (
    PRECISION,
    Known,
    between,
    first_below,
    known_from,
    power_law,
)

SAMPLE_LOOKS = 2
SAMPLED = (DEFAULT, Ladder((16, 32, 64, 128, 256)), Ladder((64, 128, 256, 512, 1024)))
How = Literal["measured", "between rungs", "beyond the rungs"]


@dataclass(frozen=True)
class Answer:
    """So many steps, what is known of their error, and how; `finest` is the finest rung."""

    steps: int
    known: Known
    how: How
    finest: int = 0

    def sentence(self, target: float) -> str:
        """Return what the answer says."""
        said = {
            "measured": f"The error with {self.steps} steps is below {target:g}",
            "between rungs": f"{self.steps} steps, found between sampled rungs",
            "beyond the rungs": f"{self.steps} steps, extrapolated: the finest rung has "
            f"{self.finest}, and its error is above the target",
        }
        return f"{said[self.how]}."


class Search:
    """The search for the fewest steps of one scheme that keep its error below a target."""

    def __init__(
        self, pair: Pair, claim: Claim, target: float, levels: Levels, threads: int
    ) -> None:
        self.pair = pair
        self.claim = claim
        self.target = target
        self.levels = levels
        self.threads = threads

    def answer(self) -> Answer | str:
        """Return the fewest steps, or the sentence that says why there are none."""
        pair = self.pair
        if not pair.applies:
            return pair.why_not
        pair.examine(self.levels.tolerance)
        assert pair.local is not None
        if pair.local.breach is not None:
            return f"The step breaks its contract: {pair.local.breach.sentence}"
        pair.propagate(self.levels, self.threads)
        if pair.why_sampled:
            return self._from_sample()
        return self._from_propagation()

    def _from_propagation(self) -> Answer | str:
        known = self._worst(self.pair.by_propagation, 1.0)
        enough = first_below(known, self.target)
        if enough is None:
            return self._beyond(known, list(self.pair.by_propagation.values()))
        counts = sorted(known)
        before = counts[: counts.index(enough)]
        low = before[-1] if before else 0
        low_known, high_known = known.get(low), known[enough]
        while enough - low > max(1, PRECISION * enough):
            middle = between(low, low_known, enough, high_known, self.target)
            tried = self._propagated(middle)
            if tried is not None and tried.most <= self.target:
                enough, high_known = middle, tried
            else:
                low, low_known = middle, tried
        return Answer(enough, high_known, "measured")

    def _propagated(self, steps: int) -> Known | None:
        """Return the error with other numbers of steps, or None where it is not known well."""
        pair = self.pair
        found = propagate(
            pair.plan.scheme,
            pair.plan.problem,
            [steps],
            list(zip(pair.plan.functionals, pair.references, strict=True)),
            pair.scale,
        )
        estimates: list[tuple[str | None, Estimate]] = (
            [(None, found.mean_square[0])]
            if self.claim.kind == "strong"
            else [(name, e[0]) for name, e in found.weak.items()]
        )
        if any(e.dropped is not None for _, e in estimates):
            return None
        return max((known_from(name, e) for name, e in estimates), key=lambda known: known.most)

    def _from_sample(self) -> Answer | str:
        """Return an answer from sampled rungs, of one ladder after another, finer each time."""
        known: dict[int, Known] = {}
        pair = self.pair
        for ladder in SAMPLED:
            pair.plan = replace(pair.plan, ladder=ladder)
            pair.sample, pair.looks = Sample(pair.plan), 0
            for _ in range(SAMPLE_LOOKS):
                pair.look(self.levels, self.threads, lambda: None)
            found = pair.by_sample
            if any(not a.trusted for a in found.values()):
                return "A few paths weigh too much in the sample to tell its errors by."
            dof = next(iter(found.values())).errors.dof
            known |= self._worst(found, student_quantile(1 - self.levels.confidence, dof))
            enough = first_below(known, self.target)
            if enough is not None:
                return self._between_rungs(known, enough)
        return self._beyond(known, list(pair.by_sample.values()))

    def _between_rungs(self, known: dict[int, Known], enough: int) -> Answer | str:
        """Return an answer by a power law between the first rung that does and the one before."""
        before = max((steps for steps in known if steps < enough), default=None)
        if before is None:
            return Answer(enough, known[enough], "measured")
        coarse, fine = known[before], known[enough]
        steps = power_law(before, coarse, enough, fine, self.target)
        share = math.log(steps / before) / math.log(enough / before)
        most = coarse.most ** (1 - share) * fine.most**share
        doubt = most * max(coarse.uncertainty / coarse.most, fine.uncertainty / fine.most)
        error = math.copysign(most - doubt, fine.error)
        return Answer(steps, Known(error, doubt, fine.functional), "between rungs")

    def _worst(self, found: dict[Row, Assessment], quantile: float) -> dict[int, Known]:
        """Return the largest error of all criteria with each number of steps known of all."""
        known: dict[int, list[Known]] = {}
        for row, a in found.items():
            values, widths = a.errors.values, a.errors.half_widths(quantile)
            for steps, error, width in zip(a.errors.steps, values, widths, strict=True):
                if math.isfinite(error) and math.isfinite(width):
                    each = Known(float(error), float(width), self.pair.name_of(row))
                    known.setdefault(steps, []).append(each)
        return {
            steps: max(each, key=lambda k: k.most)
            for steps, each in known.items()
            if len(each) == len(found)
        }

    def _beyond(self, known: dict[int, Known], found: Sequence[Assessment]) -> Answer | str:
        """Return an answer beyond the finest rung, by the order and the constant found on rungs."""
        finest = max(known, default=0)
        name = known[finest].functional if known else None
        binding = next((a for a in found if self.pair.name_of(a.row) == name), None)
        horizon = self.pair.plan.problem.horizon
        constant = binding.constant(horizon) if binding is not None else None
        if not known or constant is None:
            return (
                f"No rung to {finest} steps has an error below the target, and no order has "
                "settled that tells of finer ones."
            )
        assert binding is not None
        p, c = constant.order, constant.value
        finest_error = float(binding.errors.values[list(binding.errors.steps).index(finest)])
        # What the next term of the error leaves at the finest rung shrinks from there like √h.
        left = abs(abs(finest_error) * (finest / horizon) ** p - c) + constant.high - c
        steps = math.ceil(horizon * ((c + left) / self.target) ** (1 / p))
        steps = max(steps, finest + 1)
        size = (horizon / steps) ** p
        doubt = left * (finest / steps) ** 0.5 * size
        return Answer(
            steps,
            Known(math.copysign(c * size, finest_error), doubt, name),
            "beyond the rungs",
            finest,
        )
