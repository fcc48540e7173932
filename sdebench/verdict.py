"""From an order to a verdict on a claim, with the sentence that says so and what to do next.

A claim is a lower bound p on the order, judged with a tolerance δ. With q the local order at the
finest counting pair of rungs and q_before the one above it:

    supported  when the lower ends of q and of q - 2.4 max(0, q_before - q) exceed p - δ
    refuted    when at least four rungs count, the finest of 32 steps or more, the upper ends of q
               and of 2 q - q_before are below p - δ, and the order falls or has moved by less
               than δ/2 (an order that still rises belongs to a ladder that is too coarse)
    undecided  otherwise
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from enum import Enum

from sdebench.orders import Errors, Interval, Order

MIN_REFUTING_RUNGS = 4
MIN_REFUTING_STEPS = 32


class Verdict(Enum):
    """The outcome for a claim or a piece of evidence; `meaning` is the word's plain sense."""

    SUPPORTED = "supported"
    REFUTED = "refuted"
    UNDECIDED = "undecided"
    NOT_APPLICABLE = "not-applicable"

    @property
    def meaning(self) -> str:
        """What the word says."""
        return _MEANING[self]

    @property
    def exit_code(self) -> int:
        """The exit code of a command whose overall verdict this is."""
        return {Verdict.REFUTED: 1, Verdict.UNDECIDED: 3}.get(self, 0)


_MEANING = {
    Verdict.SUPPORTED: "the evidence bears the claim out, within the stated detection limit",
    Verdict.REFUTED: "the evidence contradicts the claim",
    Verdict.UNDECIDED: "this evidence cannot tell; the sentence says what would",
    Verdict.NOT_APPLICABLE: "the claim says nothing about this problem",
}


def overall(verdicts: Sequence[Verdict]) -> Verdict:
    """Return the one verdict of several: refuted before undecided before supported."""
    for verdict in (Verdict.REFUTED, Verdict.UNDECIDED, Verdict.SUPPORTED):
        if verdict in verdicts:
            return verdict
    return Verdict.NOT_APPLICABLE


@dataclass(frozen=True)
class Ruling:
    """A verdict, its sentence, and whether more paths on the same rungs could change it."""

    verdict: Verdict
    sentence: str
    more_paths_help: bool = False


def judge(
    errors: Errors, order: Order | None, counting: Sequence[int], claimed: float, tolerance: float
) -> Ruling:
    """Return the ruling on a claim of order `claimed` from trusted errors and their order."""
    needed = claimed - tolerance
    if order is None:
        return _too_few(errors, counting)
    if order.curbed is None or order.extrapolated is None or order.moved is None:
        return _too_few(errors, order.counting)
    if order.curbed.low > needed:
        return Ruling(Verdict.SUPPORTED, f"{seen(errors, order)}, claimed {claimed:g}.")
    below = order.local.high < needed and order.extrapolated.high < needed
    settled = order.moved.high < tolerance / 2
    finest = errors.steps[order.counting[-1]]
    enough = len(order.counting) >= MIN_REFUTING_RUNGS and finest >= MIN_REFUTING_STEPS
    if below and settled and enough:
        sentence = f"{seen(errors, order)}, where {claimed:g} is claimed (tolerance {tolerance:g})."
        return Ruling(Verdict.REFUTED, sentence)
    if below and settled:
        return _too_few(errors, order.counting)
    return _unsettled(errors, order, order.curbed, order.moved, needed, tolerance)


def seen(errors: Errors, order: Order) -> str:
    """Return 'local order 0.998 (0.99 to 1.01) between 32 and 64 steps'."""
    coarse, fine = (errors.steps[r] for r in order.counting[-2:])
    return f"local order {shown(order.local)} between {coarse} and {fine} steps"


def shown(interval: Interval) -> str:
    """Return an interval as '0.998 (0.990 to 1.006)', cut where the uncertainty begins."""
    width = min(interval.high - interval.estimate, interval.estimate - interval.low)
    digits = 3 if not 0 < width < math.inf else min(max(1 - math.floor(math.log10(width)), 1), 4)
    high = f"to {interval.high:.{digits}f}" if interval.high < math.inf else "upward"
    low = f"{interval.low:.{digits}f}" if interval.low > -math.inf else "no lower bound"
    return f"{interval.estimate:.{digits}f} ({low} {high})"


def _unsettled(
    errors: Errors,
    order: Order,
    curbed: Interval,
    moved: Interval,
    needed: float,
    tolerance: float,
) -> Ruling:
    """The order is neither clearly high enough nor clearly too low: noise, or too coarse rungs."""
    finer_rungs = f"the rungs are too coarse to tell; try --steps {finer(errors.steps)}."
    if order.local.low > needed and curbed.estimate <= needed:
        return Ruling(
            Verdict.UNDECIDED,
            f"{seen(errors, order)}, but falling by {-moved.estimate:.2g} from the pair before: "
            f"{finer_rungs}",
            more_paths_help=curbed.high > needed,
        )
    if order.local.high < needed and moved.low > tolerance / 2:
        return Ruling(
            Verdict.UNDECIDED,
            f"{seen(errors, order)}, but rising by {moved.estimate:.2g} from the pair before: "
            f"{finer_rungs}",
        )
    return Ruling(
        Verdict.UNDECIDED,
        f"{seen(errors, order)}: too wide to tell it from {needed:g}; "
        f"{_more_paths(curbed, needed)}.",
        more_paths_help=True,
    )


def _more_paths(curbed: Interval, needed: float) -> str:
    """Say how many times the paths would tell, since a width shrinks with their square root."""
    gap, reach = curbed.estimate - needed, curbed.estimate - curbed.low
    if not 0 < gap < reach < math.inf:
        return "more paths would (each look doubles them: --looks)"
    times = 2 ** math.ceil(2 * math.log2(reach / gap))
    return f"some {times} times the paths would (each look doubles them: --looks)"


def _too_few(errors: Errors, counting: Sequence[int]) -> Ruling:
    n = len(counting)
    return Ruling(
        Verdict.UNDECIDED,
        f"Only {n} of {len(errors.steps)} rungs count (an error that changes sign or sinks into "
        f"noise or round-off does not): try --steps {finer(errors.steps)}.",
        more_paths_help=n < len(errors.steps),
    )


def finer(steps: Sequence[int]) -> str:
    """Return a ladder of five rungs that goes two octaves beyond `steps`, as an option's value."""
    first = max(steps[-1] // 4, steps[0])
    return ",".join(str(first * 2**k) for k in range(5))
