"""One-step evidence: local orders and the terms of a step, judged against the claims.

Strong: with local mean error O(h^p1) and local root mean square O(h^p2) the order of convergence
is at least min(p2 - 1/2, p1 - 1) (Milstein's fundamental theorem: Milstein & Tretyakov 2004,
Stochastic Numerics for Mathematical Physics, theorem 1.1; from memory). Weak: moments 1 … 2q+1
that agree to O(h^(q+1)) give weak order q (ibid., theorem 2.5; from memory). A term that a claim
needs and that differs in the limit refutes it; so do local errors that vanish too slowly. That
they vanish fast enough supports nothing alone.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from sdebench.blame import blamed
from sdebench.confusions import name_confusion
from sdebench.evidence import Term
from sdebench.expansion import Expansion, Setting, expand, rate, settings
from sdebench.integrator import Claim, Scheme
from sdebench.problem import Problem
from sdebench.sde import Array
from sdebench.terms import (
    MOMENT_LABELS,
    TERM_LABELS,
    Limits,
    coefficient_limits,
    degree,
    is_required,
    moment_limits,
    number,
    ratio_to_needed,
    rest_term,
    table,
    where,
)
from sdebench.verdict import Ruling, Verdict


@dataclass(frozen=True)
class LocalOrder:
    """The worst order that local errors allow, and where it was seen."""

    order: float
    where: str


@dataclass(frozen=True)
class OneStep:
    """One-step evidence on one scheme and problem."""

    strong: LocalOrder
    weak: LocalOrder
    exact: bool
    limits: list[Limits]
    terms: list[Term]
    moments: list[Term]
    expansion: Expansion

    def ruling(self, claim: Claim, tolerance: float) -> Ruling:
        """Return what one-step evidence says of a claim: refuted, or in agreement."""
        terms = self.terms if claim.kind == "strong" else self.moments
        wrong = [t for t in terms if t.differs and is_required(t.term, claim, tolerance)]
        if wrong:
            term = wrong[0]
            cause = name_confusion(self.limits, degree(term)) or ratio_to_needed(term)
            return Ruling(
                Verdict.REFUTED,
                f"One-step evidence, {term.term} {term.at}: "
                f"yours {number(term.yours, term.uncertainty)}, "
                f"the SDE needs {number(term.needed, term.uncertainty)}: {cause}.",
            )
        local = self.strong if claim.kind == "strong" else self.weak
        if not local.order >= claim.order - tolerance:
            return Ruling(
                Verdict.REFUTED,
                f"One-step evidence: local errors allow {claim.kind} order {local.order:.2f} at "
                f"the most {local.where}, where {claim.order:g} is claimed.",
            )
        if self.exact:
            return Ruling(Verdict.SUPPORTED, "One step is the exact flow, to round-off.")
        allowed = "no bound above round-off" if math.isinf(local.order) else f"{local.order:.2f}"
        return Ruling(
            Verdict.SUPPORTED,
            f"Local errors allow {claim.kind} order {allowed}; {claim.order:g} is claimed.",
        )


def measure_one_step(
    scheme: Scheme, problem: Problem, claims: Sequence[Claim], tolerance: float
) -> OneStep:
    """Return one-step evidence, with as many moments as the weak claim needs (3 to 7)."""
    weak = max((claim.order for claim in claims if claim.kind == "weak"), default=1.0)
    n_moments = min(2 * math.ceil(weak) + 1, 7)
    with (
        np.errstate(all="ignore"),
        blamed(f"Scheme '{scheme.label}'", scheme.step, "in a single step"),
    ):
        expansions = [expand(scheme, each, n_moments) for each in settings(problem)]
    limits = [coefficient_limits(e) for e in expansions]
    moments = [moment_limits(e) for e in expansions]

    def required(label: str) -> bool:
        return any(is_required(label, claim, tolerance) for claim in claims)

    return OneStep(
        strong=_strong(expansions),
        weak=_weak(expansions),
        exact=all(bool(np.all(e.root_mean_square <= 8 * e.floors)) for e in expansions),
        limits=limits,
        terms=[*table(limits, TERM_LABELS, required), rest_term(expansions[0])],
        moments=table(moments, MOMENT_LABELS, required),
        expansion=expansions[0],
    )


def _strong(expansions: Sequence[Expansion]) -> LocalOrder:
    found = []
    for e in expansions:
        found.append(_worst(rate(e.root_mean_square, e.floors) - 0.5, e.setting))
        found.append(_worst(rate(e.mean_error, e.floors) - 1.0, e.setting))
    return min(found, key=lambda local: local.order)


def _weak(expansions: Sequence[Expansion]) -> LocalOrder:
    found = [
        _worst(orders - 1.0, e.setting)
        for e in expansions
        for orders in rate(e.moments, e.moment_floors + np.abs(e.moments - e.moments_check)).T
    ]
    return min(found, key=lambda local: local.order)


def _worst(orders: Array, setting: Setting) -> LocalOrder:
    i = int(np.argmin(orders))
    return LocalOrder(float(orders[i]), where(setting, i))
