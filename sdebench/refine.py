"""The expectations of one rung, each refined until its uncertainty is small, or dropped.

A rung is propagated (`chain.py`) at one resolution and again with each of its parts changed alone:
nodes with width, the degree in the error, its span, where it is held, the quadrature of the noise.
Three times the sum of the changes is the uncertainty. Where it is too large, the part that is to
blame is refined; what stays too uncertain is dropped. So is what the nodes cannot be trusted with:
they are to give E f(X_T) as the exact law does, to a hundredth of the error.
"""

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from sdebench.chain import BASE, MEAN_SQUARE, MOST_NODES, Chain, Goal, Resolution
from sdebench.ladder import round_off
from sdebench.sde import Array
from sdebench.transition import NotFinite

GOOD = 1e-4  # relative uncertainty at which a rung is not refined further
KEPT = 1e-2  # relative uncertainty above which a rung is dropped
MISS = 1e-2  # of the error, by which the nodes may miss E f(X_T)
SAFETY = 3.0  # times the changes of all parts
NEAR_KINKS = 6.0  # likewise, where changes shrink more slowly: 4.4 was needed once in 450 rungs
SMALL = 0.01  # scaled errors up to which a lower degree is enough to begin with
CHECKED = 1e-8  # of the size of X: a miss of E f(X_T) up to that is none, however small errors are
FINE = 1e-11  # of the size of X: errors are resolved that far, however small they are
LOST = 2e-9  # of an expectation, to the round-off of matrix powers: 1e-9 was seen in 15000 of them
ROUNDS = 4  # of refinement
HELPED = 0.5  # times the uncertainty before: less is no help to what explodes
HIDDEN = "round-off hides it"


@dataclass(frozen=True)
class Estimate:
    """A propagated expectation with its numerical uncertainty; `dropped` says why it is no use."""

    value: float
    uncertainty: float
    dropped: str | None = None


class Rung:
    """The goals of one rung, refined until each is known well enough or no refinement is left."""

    def __init__(
        self,
        chain: Chain,
        goals: Mapping[Goal, Goal],
        exact: Mapping[Goal, float],
        scale: float,
    ) -> None:
        self.chain = chain
        self.goals = goals
        self.exact = exact
        self.scale = scale
        self.found: dict[Goal, Estimate] = {}

    def measure(self) -> dict[Goal, Estimate]:
        """Return an estimate of every goal."""
        wanted = list(self.goals)
        try:
            with np.errstate(all="ignore"):  # what is not finite is dropped
                self._refine(wanted, first_resolution(self.chain))
        except NotFinite as fault:
            self._drop(wanted, str(fault))
        return self.found

    def _refine(self, wanted: list[Goal], resolution: Resolution) -> None:
        for _ in range(ROUNDS):
            before = dict(self.found)
            changes = self._changes(wanted, resolution)
            wanted = [goal for goal in wanted if not self._final(goal, before.get(goal))]
            finer = refined(resolution, {goal: changes[goal] for goal in wanted})
            if not wanted or finer is None:
                break
            resolution = finer

    def _changes(self, wanted: Sequence[Goal], resolution: Resolution) -> dict[Goal, Array]:
        """Propagate at a resolution and with each part changed; return relative changes."""
        checks = [self.goals[goal] for goal in wanted]
        values = self.chain.expectations([*wanted, *checks], resolution)
        others = [
            values if other == resolution else self.chain.expectations(wanted, other)
            for other in variations(resolution).values()
        ]
        changes = {}
        for goal in wanted:
            value = values[goal]
            moved = np.array([abs(other[goal] - value) for other in others])
            moved[~np.isfinite(moved)] = math.inf
            changes[goal] = moved / max(abs(value), 1e-300)
            self._keep(goal, value, values[self.goals[goal]], float(moved.sum()), resolution)
        return changes

    def _keep(
        self, goal: Goal, value: float, seen: float, moved: float, resolution: Resolution
    ) -> None:
        """Keep an estimate if it is better than what there is; `seen` is to be the exact value."""
        miss = abs(seen - self.exact[goal])
        relative = miss / max(abs(self.exact[goal]), 1e-300)
        safety = NEAR_KINKS if goal.kinks else SAFETY
        lost = self._lost(goal, value)
        uncertainty = safety * (moved + relative * abs(value)) + lost
        allowed = MISS * (abs(self.exact[goal]) if goal == MEAN_SQUARE else abs(value))
        enough = max(KEPT * abs(value), self._as_measure(FINE * self.scale, goal))
        dropped = None
        if lost > enough:
            dropped = HIDDEN
        elif not uncertainty <= enough:
            dropped = "the nodes do not resolve it"
        elif not miss <= max(allowed, CHECKED * self.scale):
            dropped = f"the nodes miss the exact law by {miss:.1g}"
        elif goal.kinks and not self._dense_near(goal, resolution):
            dropped = "the nodes are too far apart near a kink"
        found, before = Estimate(value, uncertainty, dropped), self.found.get(goal)
        if before is None or _rank(found) < _rank(before):
            self.found[goal] = found

    def _lost(self, goal: Goal, value: float) -> float:
        """Return what round-off may have changed, which no resolution undoes."""
        of_end = float(round_off([self.chain.steps], self.scale)[0])
        if goal == MEAN_SQUARE:
            of_end *= 2 * math.sqrt(abs(value)) + of_end
        return LOST * abs(value) + of_end

    def _as_measure(self, error: float, goal: Goal) -> float:
        """Return the size of an error as what is averaged: its square, for a mean square."""
        return error * error if goal == MEAN_SQUARE else error

    def _dense_near(self, goal: Goal, resolution: Resolution) -> bool:
        grid = self.chain.grid(goal.kinks, resolution)
        return all(grid.spacing_near(f.place) < f.length for f in self.chain.focuses(goal.kinks))

    def _final(self, goal: Goal, before: Estimate | None) -> bool:
        """Whether an estimate is good enough, or as good as round-off lets it be, or explodes."""
        found = self.found[goal]
        explodes = found.uncertainty > self._as_measure(self.scale, goal)
        if before is not None and explodes and found.uncertainty > HELPED * before.uncertainty:
            return True
        least = max(self._as_measure(FINE * self.scale, goal), 2 * self._lost(goal, found.value))
        enough = max(GOOD * abs(found.value), least)
        return found.dropped in (None, HIDDEN) and found.uncertainty <= enough

    def _drop(self, wanted: Iterable[Goal], why: str) -> None:
        for goal in wanted:
            if goal not in self.found:
                self.found[goal] = Estimate(math.nan, math.inf, why)


def _rank(estimate: Estimate) -> tuple[bool, float]:
    return estimate.dropped is not None, estimate.uncertainty


def variations(r: Resolution) -> dict[str, Resolution]:
    """Return a resolution with each of its parts changed alone, most to the cheaper side.

    A change of degree alone may say little, since errors are nearly even in r; that of the span
    at one degree changes the polynomials' error by the power of their degree.
    """
    return {
        "nodes": replace(r, nodes=round(0.85 * r.nodes), width=0.92 * r.width),
        "degree": replace(r, degree=r.degree + 1),
        "span": replace(r, span=1.3 * r.span, kept=r.kept / 1.3),
        "hold": replace(r, kept=0.75 * r.kept),
        "noise": replace(r, spacing=0.82 * r.spacing, n_rest=r.n_rest - 1),
    }


PARTS = list(variations(BASE))
MOST_DEGREE = 6
HELD = 2.0  # spans, beyond which scaled errors are held


def refined(resolution: Resolution, changes: Mapping[Goal, Array]) -> Resolution | None:
    """Return a resolution with the parts refined that move most, or None if there is no finer one.

    Polynomials tell a scaled error exactly where scheme and problem are linear. Elsewhere a higher
    degree tells it better, and where steps are so long that it explodes, polynomials that are held.
    """
    worst = np.minimum(np.max([*changes.values(), np.zeros(len(PARTS))], axis=0), 1.0)
    least = max(GOOD / SAFETY, float(worst.max()) / 10)
    blamed = {part for part, moved in zip(PARTS, worst, strict=True) if moved > least}
    finer = resolution
    if "nodes" in blamed and finer.nodes < MOST_NODES:
        finer = replace(finer, nodes=min(round(1.4 * finer.nodes), MOST_NODES))
    if blamed & {"degree", "span", "hold"}:
        if finer.degree < MOST_DEGREE:
            finer = replace(finer, degree=finer.degree + 2)
        elif finer.kept > HELD:
            finer = replace(finer, kept=HELD)
    if "noise" in blamed and finer.spacing > BASE.spacing / 2:
        finer = replace(finer, spacing=finer.spacing / 2, n_rest=finer.n_rest + 2)
    return None if finer == resolution else finer


def first_resolution(chain: Chain) -> Resolution:
    """Return where to begin: the smaller the errors, the lower the degree that tells them."""
    size = chain.error_size
    return replace(BASE, degree=2 if size < SMALL else BASE.degree)
