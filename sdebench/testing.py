"""Convergence as an assertion in a test function, for any test runner.

The failure message is the bench's sentence on each claim that is not supported, with the errors
it rests on.
"""

import io
from collections.abc import Callable
from typing import Any

from sdebench.evidence import ClaimResult, Evidence
from sdebench.integrator import Scheme
from sdebench.integrator import scheme as decorate
from sdebench.reports import terminal
from sdebench.request import ProblemLike
from sdebench.study import measure
from sdebench.verdict import Verdict


def assert_converges(
    step: Scheme | str | Callable[..., Any],
    on: ProblemLike = "gbm",
    *,
    strong: float | None = None,
    weak: float | None = None,
    **options: Any,
) -> Evidence:
    """Return evidence that a step converges; raise `AssertionError` unless it supports all claims.

    `step`: a plain function f(sde, t, x, h, noise) whose claims are `strong` and `weak`, or a
    scheme, by name or decorated, with claims of its own. `on`: a problem. `options` are those of
    `sdebench.measure` (steps, functionals, seed, confidence, tolerance, looks, ...).

    >>> def euler(sde, t, x, h, noise):
    ...     return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw
    >>> assert_converges(euler, on="gbm", strong=0.5, weak=1.0).verdict.value
    'supported'
    >>> assert_converges(euler, on="gbm", strong=1.0)
    Traceback (most recent call last):
    AssertionError: euler on gbm, strong: refuted. ...
    """
    __tracebackhide__ = True
    tested = step if isinstance(step, Scheme | str) else decorate(strong=strong, weak=weak)(step)
    evidence = measure(tested, on=on, **options)
    failed = [claim for claim in evidence.claims if claim.verdict is not Verdict.SUPPORTED]
    if failed:
        raise AssertionError("\n\n".join(explained(evidence, claim) for claim in failed))
    return evidence


def explained(evidence: Evidence, claim: ClaimResult) -> str:
    """Return the sentence on a claim, with the tables that it rests on."""
    page = io.StringIO()
    terminal.show_claim(evidence, claim, terminal.console(page))
    return "\n".join(map(str.rstrip, page.getvalue().splitlines()))
