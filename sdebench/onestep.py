"""One-step evidence: local orders and the terms of a step, judged against the claims.

Strong: with local mean error O(h^p1) and local root mean square O(h^p2) the order of convergence
is at least min(p2 - 1/2, p1 - 1) (Milstein's fundamental theorem: Milstein & Tretyakov 2004,
Stochastic Numerics for Mathematical Physics, theorem 1.1; from memory). Weak: moments 1 … 2q+1
that agree to O(h^(q+1)) give weak order q (ibid., theorem 2.5; from memory). A term that a claim
needs and that differs in the limit refutes it; so do local errors that vanish too slowly. That
they vanish fast enough supports nothing alone.
"""

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from sdebench.blame import blamed
from sdebench.confusions import name_confusion
from sdebench.evidence import Term
from sdebench.expansion import LEADING, Expansion, Setting, expand, limit, rate, settings
from sdebench.integrator import Claim, Scheme
from sdebench.problem import Problem
from sdebench.sde import Array
from sdebench.verdict import Ruling, Verdict

TERM_LABELS = ("term h", "term dw", "term dw² - h", "term dw³ - 3h·dw")
MOMENT_LABELS = ("E ΔX / h", "E ΔX² / h", "E ΔX³ / h")
FLOOR = 1e-11  # relative to the coefficient: what round-off leaves of a term after extrapolation


@dataclass(frozen=True)
class LocalOrder:
    """The worst order that local errors allow, and where it was seen."""

    order: float
    where: str


@dataclass(frozen=True)
class Limits:
    """Limits of leading coefficients in one setting, arrays `(states, terms)`.

    `yours` and `needed` are the scheme's and the SDE's, `difference` is known to `uncertainty`.
    """

    setting: Setting
    yours: Array
    needed: Array
    difference: Array
    uncertainty: Array

    @property
    def clarity(self) -> Array:
        """How many uncertainties each pair of coefficients lies apart; above 1 they differ."""
        ratio = np.abs(self.difference) / self.uncertainty
        return np.where(np.isnan(ratio), np.inf, ratio)


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
            cause = name_confusion(self.limits) or _ratio(wrong[0])
            return Ruling(
                Verdict.REFUTED,
                f"One-step evidence, {wrong[0].term} {wrong[0].at}: yours {wrong[0].yours:.6g}, "
                f"the SDE needs {wrong[0].needed:.6g}: {cause}.",
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


def is_required(term: str, claim: Claim, tolerance: float) -> bool:
    """Return whether a claim needs the scheme's term to be the SDE's.

    Strong convergence of any order needs the terms in h and dw, an order above 1/2 also that in
    dw² - h; weak convergence needs the moments to agree at order h.
    """
    if claim.kind == "weak":
        return term in MOMENT_LABELS
    n_terms = 3 if claim.order - tolerance > 0.5 else 2
    return term in TERM_LABELS[:n_terms]


def measure_one_step(
    scheme: Scheme, problem: Problem, claims: Sequence[Claim], tolerance: float
) -> OneStep:
    """Return one-step evidence, with as many moments as the weak claim needs (3 to 7)."""
    weak = max((claim.order for claim in claims if claim.kind == "weak"), default=1.0)
    n_moments = min(2 * math.ceil(weak) + 1, 7)
    with np.errstate(all="ignore"), blamed(scheme, "in a single step"):
        expansions = [expand(scheme, each, n_moments) for each in settings(problem)]
    limits = [_coefficients(e) for e in expansions]
    moments = [_moments(e) for e in expansions]

    def required(label: str) -> bool:
        return any(is_required(label, claim, tolerance) for claim in claims)

    return OneStep(
        strong=_strong(expansions),
        weak=_weak(expansions),
        exact=all(bool(np.all(e.root_mean_square <= 8 * e.floors)) for e in expansions),
        limits=limits,
        terms=[*_table(limits, TERM_LABELS, required), _rest(expansions[0])],
        moments=_table(moments, MOMENT_LABELS, required),
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
        for orders in rate(e.moments, e.moment_floors).T
    ]
    return min(found, key=lambda local: local.order)


def _worst(orders: Array, setting: Setting) -> LocalOrder:
    i = int(np.argmin(orders))
    return LocalOrder(float(orders[i]), _where(setting, i))


def _coefficients(e: Expansion) -> Limits:
    floors = e.floors[..., None] / np.stack([e.h**p for p in LEADING], -1)[:, None, :]
    return _limits(e.setting, e.coefficients, e.needed, e.difference, floors)


def _moments(e: Expansion) -> Limits:
    """The first three moments over h: drift, squared diffusion, and none of the third."""
    h = e.h[:, None, None]
    difference, floors = e.moments[..., :3] / h, e.moment_floors[..., :3] / h
    needed = e.moments_needed[..., :3] / h
    return _limits(e.setting, needed + difference, needed, difference, floors)


def _limits(
    setting: Setting, yours: Array, needed: Array, difference: Array, floors: Array
) -> Limits:
    left, _ = limit(yours, floors)
    right, _ = limit(needed, floors)
    gap, doubt = limit(difference, floors)
    least = FLOOR * np.maximum(np.abs(left), np.abs(right)) + np.finfo(float).tiny
    return Limits(setting, left, right, gap, np.maximum(doubt, least))


def _table(
    limits: Sequence[Limits], labels: Sequence[str], required: Callable[[str], bool]
) -> list[Term]:
    """Return a row a term, in the problem's own setting unless only another shows a difference."""
    rows = []
    for j, label in enumerate(labels):
        clarity = [float(each.clarity[:, j].max()) for each in limits]
        own = clarity[0] > 1 or max(clarity) <= 1
        each = limits[0] if own else limits[int(np.argmax(clarity))]
        i = int(np.argmax(np.abs(each.needed[:, j])))
        if each.clarity[i, j] <= 1:
            i = int(np.argmax(each.clarity[:, j]))
        rows.append(
            Term(
                term=label,
                at=_where(each.setting, i),
                yours=float(each.yours[i, j]),
                needed=float(each.needed[i, j]),
                difference=float(each.difference[i, j]),
                uncertainty=float(each.uncertainty[i, j]),
                differs=bool(each.clarity[i, j] > 1),
                required=required(label),
            )
        )
    return rows


def _rest(e: Expansion) -> Term:
    floors = e.floors / e.h[:, None] ** 1.5
    yours, doubt = limit(e.rest, floors)
    needed, doubt_needed = limit(e.rest_needed, floors)
    uncertainty = doubt + doubt_needed
    i = int(np.argmax(np.abs(yours - needed)))
    return Term(
        term="beside dw, rms / h^1.5",
        at=_where(e.setting, i),
        yours=float(yours[i]),
        needed=float(needed[i]),
        difference=float(yours[i] - needed[i]),
        uncertainty=float(uncertainty[i]),
        differs=bool(abs(yours[i] - needed[i]) > uncertainty[i]),
        required=False,
    )


def _where(setting: Setting, state: int) -> str:
    where = f"at x={setting.x[state]:.4g}, t={setting.t:g}"
    values = ", ".join(f"{n}={setting.problem.params[n]:.4g}" for n in setting.problem.values)
    return f"{where} ({values})" if values else where


def _ratio(term: Term) -> str:
    if term.needed == 0 or abs(term.needed) <= term.uncertainty:
        return "a term that the SDE does not have"
    ratio = term.yours / term.needed
    if abs(ratio) <= FLOOR:
        return "the term is missing"
    if ratio < 0:
        return "the sign is wrong"
    if abs(ratio - 1) < 1e-6:
        return (
            f"wrong by {abs(ratio - 1):.2g} of its size, as single precision or a rounded "
            "constant would be"
        )
    if abs(ratio - 1) < 0.05:
        return f"wrong by {abs(ratio - 1):.2g} of its size"
    return f"{ratio:.3g} times too large" if ratio > 1 else f"only {ratio:.3g} of it"
