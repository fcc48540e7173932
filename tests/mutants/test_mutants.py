"""Every integrator that is wrong on purpose is refuted, by the evidence that sees its fault.

One look of 32768 paths at the default seed. What one step and the contract say does not depend
on the seed; the sampled verdicts are repeated over 20 seeds in `test_seeds.py`.
"""

import pytest

import sdebench as sb
from sdebench.contract import Law, first_breach
from tests.mutants import (
    calculus,
    clock,
    contract_breakers,
    driving,
    factors,
    hidden,
    overclaims,
    parameters,
    precision,
    somewhere,
    step_length,
)
from tests.mutants.catalogue import ONE_STEP, SAMPLED, Mutant, measured, refutations

FAMILIES = [
    module.family
    for module in (
        factors,
        calculus,
        clock,
        somewhere,
        step_length,
        driving,
        precision,
        contract_breakers,
        parameters,
        overclaims,
        hidden,
    )
]
MUTANTS = [mutant for family in FAMILIES for mutant in family.mutants]
BREAKERS = [mutant for mutant in MUTANTS if isinstance(mutant.by, Law)]


def by_label(mutants):
    return {"argvalues": mutants, "ids": [mutant.label for mutant in mutants]}


@pytest.mark.parametrize(
    "mutant",
    [pytest.param(mutant, id=mutant.label) for mutant in MUTANTS],
)
def test_a_wrong_integrator_is_refuted_for_its_own_fault(mutant: Mutant):
    evidence = measured(mutant.scheme, mutant.on)
    assert (evidence.verdict, evidence.exit_code) == (sb.Verdict.REFUTED, 1)
    kind = "contract" if isinstance(mutant.by, Law) else mutant.by
    found = refutations(evidence)
    first = next(k for k in ("contract", ONE_STEP, SAMPLED) if found[k])
    assert (first, set(found[kind])) == (kind, set(mutant.says))
    told = {claim.kind: claim.sentence for claim in evidence.claims}
    for claim, phrase in mutant.says.items():
        assert phrase in found[kind][claim]
        assert phrase in told[claim]


@pytest.mark.parametrize("mutant", **by_label(BREAKERS))
def test_a_step_that_breaks_its_contract_is_told_the_law_it_breaks(mutant: Mutant):
    breach = first_breach(mutant.scheme, sb.problem(mutant.on))
    assert breach is not None
    assert breach.law is mutant.by


def test_there_are_many_mutants_and_no_two_share_a_label():
    labels = [mutant.label for mutant in MUTANTS]
    assert len(set(labels)) == len(labels)
    assert len(labels) >= 40
