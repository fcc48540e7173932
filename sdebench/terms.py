"""The terms of one step, the scheme's beside the SDE's, in the limit h → 0.

Two tables: the coefficients of 1, dw, dw² - h and dw³ - 3h·dw over their leading powers of h,
which strong convergence needs, and the first moments of the increment over h, which weak
convergence needs.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np

from sdebench.evidence import Term, finite
from sdebench.expansion import LEADING, Expansion, Setting, limit
from sdebench.integrator import Claim
from sdebench.sde import Array

TERM_LABELS = ("term h", "term dw", "term dw² - h", "term dw³ - 3h·dw")
MOMENT_LABELS = ("E ΔX / h", "E ΔX² / h", "E ΔX³ / h")
FLOOR = 1e-11  # relative to the coefficient: what round-off leaves of a term after extrapolation


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


def is_required(term: str, claim: Claim, tolerance: float) -> bool:
    """Return whether a claim needs the scheme's term to be the SDE's.

    Strong convergence of any order needs the terms in h and dw, an order above 1/2 also that in
    dw² - h; weak convergence needs the moments to agree at order h.
    """
    if claim.kind == "weak":
        return term in MOMENT_LABELS
    n_terms = 3 if claim.order - tolerance > 0.5 else 2
    return term in TERM_LABELS[:n_terms]


def coefficient_limits(e: Expansion) -> Limits:
    """Return the limits of the coefficients of degree 0 … 3 in dw, over their leading powers."""
    floors = e.floors[..., None] / np.stack([e.h**p for p in LEADING], -1)[:, None, :]
    found = _limits(e.setting, e.coefficients, e.needed, e.difference, floors)
    return _doubted(found, e.difference_check, floors)


def moment_limits(e: Expansion) -> Limits:
    """Return the limits of the first three moments over h."""
    h = e.h[:, None, None]
    difference, floors = e.moments[..., :3] / h, e.moment_floors[..., :3] / h
    needed = e.moments_needed[..., :3] / h
    found = _limits(e.setting, needed + difference, needed, difference, floors)
    return _doubted(found, e.moments_check[..., :3] / h, floors)


def _limits(
    setting: Setting, yours: Array, needed: Array, difference: Array, floors: Array
) -> Limits:
    left, _ = limit(yours, floors)
    right, _ = limit(needed, floors)
    gap, doubt = limit(difference, floors)
    least = FLOOR * np.maximum(np.abs(left), np.abs(right)) + np.finfo(float).tiny
    return Limits(setting, left, right, gap, np.maximum(doubt, least))


def _doubted(found: Limits, check: Array, floors: Array) -> Limits:
    """Add what a second rule gives differently: a step may jump or bend in dw, as weak ones do."""
    again, _ = limit(check, floors)
    return replace(found, uncertainty=found.uncertainty + 3 * np.abs(found.difference - again))


def table(
    limits: Sequence[Limits], labels: Sequence[str], required: Callable[[str], bool]
) -> list[Term]:
    """Return a row a term, with the problem's own parameters unless only others differ."""
    rows = []
    for j, label in enumerate(labels):
        clarity = [float(each.clarity[:, j].max()) for each in limits]
        differing = [each for each, c in zip(limits, clarity, strict=True) if c > 1]
        each = next((d for d in differing if d.setting.own), (differing or [limits[0]])[0])
        i = int(np.argmax(np.abs(each.needed[:, j])))
        if each.clarity[i, j] <= 1:
            i = int(np.argmax(each.clarity[:, j]))
        rows.append(
            Term(
                term=label,
                at=where(each.setting, i),
                yours=finite(each.yours[i, j]),
                needed=finite(each.needed[i, j]),
                difference=finite(each.difference[i, j]),
                uncertainty=finite(each.uncertainty[i, j]),
                differs=bool(each.clarity[i, j] > 1),
                required=required(label),
            )
        )
    return rows


def rest_term(e: Expansion) -> Term:
    """Return what is no function of dw: its root mean square over h^1.5, the power that leads."""
    floors = e.floors / e.h[:, None] ** 1.5
    yours, doubt = limit(e.rest, floors)
    needed, doubt_needed = limit(e.rest_needed, floors)
    uncertainty = doubt + doubt_needed
    i = int(np.argmax(np.abs(yours - needed)))
    return Term(
        term="beside dw, rms / h^1.5",
        at=where(e.setting, i),
        yours=finite(yours[i]),
        needed=finite(needed[i]),
        difference=finite(yours[i] - needed[i]),
        uncertainty=finite(uncertainty[i]),
        differs=bool(abs(yours[i] - needed[i]) > uncertainty[i]),
        required=False,
    )


def where(setting: Setting, state: int) -> str:
    """Return where a term was seen; parameters only if they are not the problem's own."""
    place = f"at x={setting.x[state]:.4g}, t={setting.t:g}"
    if setting.own:
        return place
    values = ", ".join(f"{n}={setting.problem.params[n]:.4g}" for n in setting.problem.values)
    return f"{place} ({values})"


def degree(term: Term) -> int:
    """The degree in dw of a wrong term; moments above the first are the noise's at order h."""
    if term.term in TERM_LABELS:
        return TERM_LABELS.index(term.term)
    return min(MOMENT_LABELS.index(term.term), 1)


def number(value: float | None, uncertainty: float | None) -> str:
    """Return a coefficient for a sentence: '0' where that is within its uncertainty.

    >>> number(-1.8e-16, 1e-12)
    '0'
    """
    if value is None:
        return "NaN"
    return "0" if uncertainty is not None and abs(value) <= uncertainty else f"{value:.6g}"


def ratio_to_needed(term: Term) -> str:
    """Say how a wrong term stands to the right one, where no confusion is recognised."""
    if term.yours is None or term.needed is None or term.uncertainty is None:
        return "keep the step inside its domain"
    if abs(term.needed) <= term.uncertainty:
        return "a term that the SDE does not have"
    ratio = term.yours / term.needed
    if abs(ratio) <= FLOOR:
        return "the term is missing"
    if ratio < 0:
        return "the sign is wrong"
    # The difference is known to more digits than the ratio of two limits.
    off = abs(term.difference / term.needed) if term.difference is not None else abs(ratio - 1)
    if off < 1e-6:
        return f"wrong by {off:.2g} of its size, as single precision or a rounded constant would be"
    if off < 0.05:
        return f"wrong by {off:.2g} of its size"
    return f"{ratio:.3g} times too large" if ratio > 1 else f"only {ratio:.3g} of it"
