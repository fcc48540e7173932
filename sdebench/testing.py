"""Convergence as an assertion in a test function, for any test runner.

The failure message is the bench's sentence on each claim that is not supported, with the errors
it rests on.
"""

import io
from collections.abc import Callable
from dataclasses import replace
from typing import Any

from sdebench.discovery import find_scheme
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
    scheme, by name or decorated, which is held to its own claims unless these are given. `on`: a
    problem. `options` are those of `sdebench.measure` (steps, functionals, seed, looks, ...).

    >>> def euler(sde, t, x, h, noise):
    ...     return x + sde.drift(t, x) * h + sde.diffusion(t, x) * noise.dw
    >>> assert_converges(euler, on="gbm", strong=0.5, weak=1.0).verdict.value
    'supported'
    >>> assert_converges(euler, on="gbm", strong=1.0)
    Traceback (most recent call last):
    AssertionError: euler on gbm, strong: refuted. ...
    """
    __tracebackhide__ = True
    evidence = measure(_held_to(step, strong, weak), on=on, **options)
    failed = [claim for claim in evidence.claims if claim.verdict is not Verdict.SUPPORTED]
    if failed:
        raise AssertionError("\n\n".join(explained(evidence, claim) for claim in failed))
    return evidence


def _held_to(step: Any, strong: float | None, weak: float | None) -> Scheme:
    """Return a scheme with these claims, or with its own if none is given."""
    if not isinstance(step, Scheme | str):
        return decorate(strong=strong, weak=weak)(step)
    scheme = find_scheme(step)
    if strong is None and weak is None:
        return scheme
    return replace(scheme, strong=strong, weak=weak, strong_additive=None)


def explained(evidence: Evidence, claim: ClaimResult) -> str:
    """Return the sentence on a claim, with the tables that it rests on."""
    page = io.StringIO()
    terminal.show_claim(evidence, claim, terminal.console(page))
    return "\n".join(map(str.rstrip, page.getvalue().splitlines()))
