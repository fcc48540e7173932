"""What a mutant is: an integrator wrong on purpose, where it shows, and what must refute it."""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import sdebench as sb
from sdebench.contract import Law
from sdebench.evidence import Evidence
from sdebench.integrator import Step

ONE_STEP = "one-step"
SAMPLED = "sampled"
PROPAGATED = "propagated"
LOW_ORDER = "is claimed (tolerance"  # an order that is too low refutes in these words
OUTLIER = "times what the rungs about it lead to"  # and one rung that stands out in these
# One step and the contract decide without errors of whole paths: these cost the least.
LEAST = {"route": "sampled", "steps": (1, 2, 4)}


@dataclass(frozen=True)
class Mutant:
    """A wrong integrator with the claims it must lose.

    `on` is a problem that shows its fault. `by` is the evidence that must refute it: a law of the
    contract, the terms of one step, sampled errors or propagated ones. `says` holds a phrase for
    each claim that this evidence refutes; no other claim may be refuted by it. `options` say how
    it is measured, where that is not by default.
    """

    family: str
    scheme: sb.Scheme
    on: str
    by: Law | str
    says: Mapping[str, str]
    options: Mapping[str, object] = field(default_factory=dict)

    @property
    def label(self) -> str:
        """A readable id."""
        return f"{self.family}:{self.scheme.name}-on-{self.on}"


class Family:
    """Mutants that share a kind of mistake; `mutant` decorates a step and adds it."""

    def __init__(self, name: str) -> None:
        self.name = name
        self.mutants: list[Mutant] = []

    def mutant(
        self,
        on: str,
        by: Law | str,
        says: str | Mapping[str, str],
        options: Mapping[str, object] | None = None,
        **claims: object,
    ) -> Callable[[Step], sb.Scheme]:
        """Return a decorator; a plain `says` is the phrase for each claim, strong 1 and weak 1."""
        given = claims or {"strong": 1.0, "weak": 1.0}
        kinds = ["contract"] if isinstance(by, Law) else ["strong", "weak"]
        phrases = dict.fromkeys(kinds, says) if isinstance(says, str) else says

        def decorate(step: Step) -> sb.Scheme:
            made = sb.scheme(**given)(step)
            self.mutants.append(Mutant(self.name, made, on, by, phrases, options or {}))
            return made

        return decorate


def measured(scheme: sb.Scheme, on: str, **options: object) -> Evidence:
    """Return the evidence of one look on one thread, unless `options` say otherwise."""
    return sb.measure(scheme, on=on, **({"looks": 1, "threads": 1} | options))


def refutations(evidence: Evidence) -> dict[str, dict[str, str]]:
    """Return the refuting sentences of each kind of evidence, by claim.

    A row of errors counts for itself only where one-step evidence agrees with its claim; a check
    of propagated errors, only where the claim is refuted in its words.
    """
    kinds = ("contract", ONE_STEP, SAMPLED, PROPAGATED)
    found: dict[str, dict[str, str]] = {kind: {} for kind in kinds}
    told = {claim.kind: claim.sentence for claim in evidence.claims}
    for row in evidence.results:
        if row.verdict is not sb.Verdict.REFUTED:
            continue
        if row.kind == "contract":
            found["contract"]["contract"] = row.sentence
        elif row.kind == ONE_STEP:
            found[ONE_STEP][row.bears_on] = row.sentence
        elif row.bears_on not in found[ONE_STEP] and (
            not row.check or told[row.bears_on] in row.sentence
        ):
            found[row.route][row.bears_on] = row.sentence
    return found
