"""From an order to a verdict on a claim, with the sentence that says so and what to do next.

A claim is a lower bound p on the order, judged with a tolerance δ. With q the local order at the
finest counting pair of rungs and q_before the one above it:

    supported  when the lower ends of q and of q - 2.4 max(0, q_before - q) exceed p - δ, unless q
               has jumped up by half an order or more (as before a change of sign)
    refuted    when at least four rungs count, the finest of 32 steps or more, and the upper ends
               of q and of q + 4 max(0, q - q_before) are below p - δ (an order that still rises
               towards it belongs to a ladder that is too coarse); or when the error of one rung
               stands out from those about it (`Order.outlier`)
    undecided  otherwise
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from enum import Enum

from sdebench.orders import Errors, Interval, Order, Trend

JUMP = 0.5
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
    """A verdict, its sentence, and whether more paths on the same rungs could change it.

    `lasting` says that a fault was seen on a rung that finer rungs do not undo.
    """

    verdict: Verdict
    sentence: str
    more_paths_help: bool = False
    lasting: bool = False


def judge(
    errors: Errors,
    order: Order | None,
    counting: Sequence[int],
    claimed: float,
    tolerance: float,
    look: int | None,
    unresolved: bool,
) -> Ruling:
    """Return the ruling on a claim of order `claimed` from trusted errors and their order.

    `look` is the number of looks so far, each of which doubled the paths, or None where errors
    are not sampled; `unresolved` says whether a rung's error is still not told from zero.
    """
    needed = claimed - tolerance
    if order is None or order.trend is None:
        return _too_few(errors, counting, unresolved)
    if order.outlier is not None:
        rung, factor = order.outlier
        return Ruling(
            Verdict.REFUTED,
            f"With {errors.steps[rung]} steps the error is {factor:.3g} times what the rungs about "
            "it lead to: the step does something else at that step size.",
            lasting=True,
        )
    trend = order.trend
    if trend.curbed.low > needed and trend.moved.low > JUMP:
        return Ruling(
            Verdict.UNDECIDED,
            f"{seen(errors, order)}, a jump by {trend.moved.estimate:.2g} from the pair before: no "
            f"order has settled yet; try --steps {finer(errors.steps)}.",
        )
    if trend.curbed.low > needed:
        return Ruling(Verdict.SUPPORTED, f"{seen(errors, order)}, claimed {claimed:g}.")
    if trend.lifted.high >= needed:
        return _unsettled(errors, order, trend, needed, look)
    finest = errors.steps[counting[-1]]
    if len(counting) < MIN_REFUTING_RUNGS or finest < MIN_REFUTING_STEPS:
        return Ruling(
            Verdict.UNDECIDED,
            f"{seen(errors, order)}, where {claimed:g} is claimed, but {len(counting)} rungs to "
            f"{finest} steps are too few to refute it: try --steps {finer(errors.steps)}.",
        )
    sentence = f"{seen(errors, order)}, where {claimed:g} is claimed (tolerance {tolerance:g})."
    return Ruling(Verdict.REFUTED, sentence)


def seen(errors: Errors, order: Order) -> str:
    """Return 'Local order 0.998 (0.99 to 1.01) between 32 and 64 steps'."""
    coarse, fine = (errors.steps[r] for r in order.counting[-2:])
    return f"Local order {shown(order.local)} between {coarse} and {fine} steps"


def shown(interval: Interval) -> str:
    """Return an interval as '0.9980 (0.9897 to 1.0063)', to a tenth of its half-width.

    The value alone where its bounds round to it.
    """
    width = min(interval.high - interval.estimate, interval.estimate - interval.low)
    digits = 3 if not 0 < width < math.inf else min(max(1 - math.floor(math.log10(width)), 1), 5)
    high = f"to {interval.high:.{digits}f}" if interval.high < math.inf else "upward"
    low = f"{interval.low:.{digits}f}" if interval.low > -math.inf else "no lower bound"
    value = f"{interval.estimate:.{digits}f}"
    return value if (low, high) == (value, f"to {value}") else f"{value} ({low} {high})"


def _unsettled(
    errors: Errors, order: Order, trend: Trend, needed: float, look: int | None
) -> Ruling:
    """The order is neither clearly high enough nor clearly too low: noise, or too coarse rungs."""
    moved = trend.moved.estimate
    if order.local.low > needed and trend.curbed.estimate <= needed:
        way, open_ended = f"falling by {-moved:.2g}", trend.curbed.high > needed
    elif order.local.high < needed and trend.lifted.estimate >= needed:
        way, open_ended = f"rising by {moved:.2g}", trend.lifted.low < needed
    else:
        return Ruling(
            Verdict.UNDECIDED,
            f"{seen(errors, order)}; as it falls or rises it may lead from "
            f"{trend.curbed.low:.2f} to {trend.lifted.high:.2f}, too wide to tell from {needed:g}; "
            f"{_more_paths(trend.curbed, needed, look)}.",
            more_paths_help=look is not None,
        )
    return Ruling(
        Verdict.UNDECIDED,
        f"{seen(errors, order)}, but {way} from the pair before: the rungs are too coarse to "
        f"tell; try --steps {finer(errors.steps)}.",
        more_paths_help=open_ended and look is not None,
    )


def _more_paths(curbed: Interval, needed: float, look: int | None) -> str:
    """Say how many looks would tell, since a width shrinks with the square root of the paths."""
    if look is None:
        return "other rungs might"
    gap, reach = curbed.estimate - needed, curbed.estimate - curbed.low
    if not 0 < gap < reach < math.inf:
        return f"more paths might, as with --looks {look + 2} (each look doubles them)"
    looks = look + math.ceil(2 * math.log2(reach / gap))
    return f"more paths would, some --looks {looks} (each look doubles them)"


def _too_few(errors: Errors, counting: Sequence[int], unresolved: bool) -> Ruling:
    n = len(counting)
    return Ruling(
        Verdict.UNDECIDED,
        f"Only {n} of {len(errors.steps)} rungs count (not those whose error is as large as the "
        "solution, is yet to change sign, or has sunk into round-off): try "
        f"--steps {finer(errors.steps)}.",
        more_paths_help=unresolved,
    )


def finer(steps: Sequence[int]) -> str:
    """Return a ladder of five rungs that goes two octaves beyond `steps`, as an option's value."""
    first = max(steps[-1] // 4, steps[0])
    return ",".join(str(first * 2**k) for k in range(5))
