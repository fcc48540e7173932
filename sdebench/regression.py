"""What moved against a baseline: each error by how much, with its doubt, and each claim.

Propagated errors are held within their numerical uncertainty, whatever the seed. Sampled ones on
the same paths are paired by the means of equal parts, so that what both share cancels; on other
paths they are compared as independent. A change is told from chance with a probability of error
of 1e-6 over all sampled rungs, and is a regression if it is larger than what is allowed beyond
that doubt.
"""

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from enum import Enum

import numpy as np

from sdebench.baseline import AcceptedClaim, AcceptedRow, AcceptedRung, AcceptedTerm, Baseline
from sdebench.orders import student_quantile
from sdebench.verdict import Verdict

ALARM = 1e-6  # probability that a run takes chance for a change
KEPT = 1e-7  # relative: what the eight digits of the parts leave open

SHOWN = 1e-4  # the smallest doubt that is worth its digits


class Change(Enum):
    """How something stands against what was accepted."""

    SAME_BITS = "unchanged (same bits)"
    WITHIN = "unchanged within uncertainty"
    BETTER = "better"
    WORSE = "worse"
    NEW = "new"
    GONE = "gone"


@dataclass(frozen=True)
class Moved:
    """One rung against the baseline: the relative change of the error, ± `doubt`.

    Both are None where there is nothing to divide by; `red` says that it is a regression.
    """

    row: AcceptedRow
    steps: int
    change: Change
    by: float | None = None
    doubt: float | None = None
    red: bool = False

    def __str__(self) -> str:
        if self.change not in (Change.BETTER, Change.WORSE):
            return str(self.change.value)
        if self.by is None or self.doubt is None:
            return "worse: it was zero to within its uncertainty"
        doubt = f"{self.doubt:.2%}" if self.doubt >= SHOWN else f"under {SHOWN:.2%}"
        return f"{self.change.value} by {100 * abs(self.by):.3g}% ± {doubt}"


@dataclass(frozen=True)
class Judged:
    """A claim now and as it was accepted; one of them may be missing."""

    now: AcceptedClaim | None
    then: AcceptedClaim | None

    @property
    def claim(self) -> AcceptedClaim:
        """The claim as it is, or as it was."""
        found = self.now or self.then
        assert found is not None
        return found

    @property
    def lowered(self) -> bool:
        """Whether less is claimed than was accepted."""
        orders = [each.claimed for each in (self.now, self.then) if each is not None]
        known = [order for order in orders if order is not None]
        return len(known) == 2 and known[0] < known[1]

    @property
    def red(self) -> bool:
        """Whether the claim is gone, lowered, or refuted though it was not accepted so."""
        refuted = [each is not None and each.verdict is Verdict.REFUTED for each in self._both]
        return self.now is None or self.lowered or refuted == [True, False]

    @property
    def doubtful(self) -> bool:
        """Whether the claim is undecided, though it was accepted as supported or is new."""
        now, then = [each and each.verdict for each in self._both]
        return now is Verdict.UNDECIDED and then in (None, Verdict.SUPPORTED)

    @property
    def _both(self) -> tuple[AcceptedClaim | None, AcceptedClaim | None]:
        return self.now, self.then

    def __str__(self) -> str:
        if self.now is None:
            return "gone"
        if self.lowered:
            assert self.then is not None
            return f"lowered from {self.then.claimed:g} to {self.now.claimed:g}"
        now, then = self.now.verdict, self.then and self.then.verdict
        if now is then:
            return f"{now.value} as accepted"
        return f"{now.value} ({f'accepted as {then.value}' if then else 'new'})"


def moved(now: Baseline, then: Baseline, allowed: float) -> list[Moved]:
    """Return how every rung of either stands; `allowed` is a relative change of an error."""
    before = {row.key: row for row in then.rows}
    after = {row.key: row for row in now.rows}
    n_sampled = sum(len(row.rungs) for row in now.rows if row.route == "sampled")
    alarm = ALARM / max(n_sampled, 1)
    same_stream = now.seed == then.seed and now.stream == then.stream
    found: list[Moved] = []
    for key in sorted({*before, *after}):
        old, new = before.get(key), after.get(key)
        if new is None or old is None:
            row = new or old
            assert row is not None
            change = Change.NEW if old is None else Change.GONE
            found += [Moved(row, r.steps, change, red=new is None) for r in row.rungs]
        else:
            found += _rungs_moved(new, old, allowed, alarm, same_stream)
    return found


def _rungs_moved(
    new: AcceptedRow, old: AcceptedRow, allowed: float, alarm: float, same_stream: bool
) -> list[Moved]:
    rungs = {rung.steps: rung for rung in new.rungs}
    known = {rung.steps: rung for rung in old.rungs}
    paired = same_stream and new.paths == old.paths and new.route == old.route
    found = []
    for steps in sorted({*rungs, *known}):
        if steps not in rungs:
            found.append(Moved(new, steps, Change.GONE, red=True))
        elif steps not in known:
            found.append(Moved(new, steps, Change.NEW))
        else:
            doubt = _doubt(new, rungs[steps], old, known[steps], alarm, paired)
            found.append(_held(new, rungs[steps], known[steps], doubt, allowed))
    return found


def _held(
    row: AcceptedRow, new: AcceptedRung, old: AcceptedRung, doubt: float, allowed: float
) -> Moved:
    """Return how a rung stands, whose difference from the accepted one has a `doubt`."""
    if new.error == old.error:
        return Moved(row, new.steps, Change.SAME_BITS, 0.0, doubt)
    difference = new.error - old.error
    if abs(difference) <= doubt:
        by = difference / old.error if old.error else None
        return Moved(row, new.steps, Change.WITHIN, by, doubt / abs(old.error) if by else None)
    size = abs(old.error)
    if size <= old.uncertainty:
        return Moved(row, new.steps, Change.WORSE, red=abs(new.error) > size + doubt)
    turned = new.error * old.error < 0
    larger = turned or abs(new.error) > size
    excess = abs(difference) if turned else abs(new.error) - size
    return Moved(
        row,
        new.steps,
        Change.WORSE if larger else Change.BETTER,
        excess / size,
        doubt / size,
        red=larger and excess - doubt > allowed * size,
    )


def _doubt(
    new_row: AcceptedRow,
    new: AcceptedRung,
    old_row: AcceptedRow,
    old: AcceptedRung,
    alarm: float,
    paired: bool,
) -> float:
    """Return the bound on how far chance and round-off move one error from the other."""
    pairable = paired and len(new.parts) == len(old.parts) > 1
    if pairable:
        difference = np.subtract(new.parts, old.parts)
        kept = KEPT * max(map(abs, (*new.parts, *old.parts)))
        return _as_error(new_row, new, old, _scatter(difference, alarm) + kept)
    doubts = []
    for row, rung in ((new_row, new), (old_row, old)):
        if row.route == "sampled" and len(rung.parts) > 1:
            spread = _scatter(np.asarray(rung.parts), alarm)
            doubts.append(_as_error(row, rung, rung, spread))
        else:
            doubts.append(rung.uncertainty)
    sampled = "sampled" in (new_row.route, old_row.route)
    return math.hypot(*doubts) if sampled else math.fsum(doubts)


def _scatter(parts: "np.ndarray[tuple[int], np.dtype[np.float64]]", alarm: float) -> float:
    """Return the half-width of the mean of parts, which chance exceeds with probability `alarm`."""
    n = len(parts)
    return student_quantile(alarm, n - 1) * float(np.std(parts, ddof=1)) / math.sqrt(n)


def _as_error(row: AcceptedRow, a: AcceptedRung, b: AcceptedRung, width: float) -> float:
    """Return a width of measures (of squares if strong) as one of errors between `a` and `b`."""
    if row.kind == "weak":
        return width
    total = a.error + b.error
    return width / total if total else math.sqrt(width)


def judged(now: Baseline, then: Baseline) -> list[Judged]:
    """Return how every claim of either stands."""
    before = {claim.key: claim for claim in then.claims}
    after = {claim.key: claim for claim in now.claims}
    found = []
    for key in sorted({*before, *after}):
        old, new = before.get(key), after.get(key)
        if key[2] != "contract" or new is not None:  # else what was broken is mended
            found.append(Judged(new, old))
    return found


def likely_term(
    now: Iterable[AcceptedTerm], then: Iterable[AcceptedTerm], scheme: str, problem: str
) -> str | None:
    """Return the sentence on the term of one step that moved, of the lowest order; or None."""
    before = {term.key: term for term in then}
    for new in now:
        old = before.get(new.key)
        if (new.scheme, new.problem) != (scheme, problem) or old is None:
            continue
        if not (new.needed and old.needed):
            continue
        shares = [t.coefficient / t.needed for t in (new, old)]
        doubts = [t.uncertainty / abs(t.needed) for t in (new, old)]
        if abs(shares[0] - shares[1]) > math.fsum(doubts):
            return (
                f"Of one step, {new.term} was {shares[1]:.6g} of what the SDE needs "
                f"and is {shares[0]:.6g} of it ({new.at})."
            )
    return None


def worst(found: Sequence[Moved]) -> Moved:
    """Return the rung of a row that says most: red before the rest, then by how much it moved."""
    rank = list(Change)

    def weight(each: Moved) -> tuple[bool, bool, float, int]:
        beyond = each.change in (Change.WORSE, Change.BETTER)
        return each.red, beyond, abs(each.by or 0.0), rank.index(each.change)

    return max(found, key=weight)
