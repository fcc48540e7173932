"""Every integrator that is wrong on purpose is refuted, by the evidence that sees its fault.

One look of 32768 paths at the default seed. What one step, the contract and propagation say does
not depend on the seed; the sampled verdicts are repeated over 20 seeds in `test_seeds.py`. Where
one step or the contract decides, the errors of whole paths are cut short; in full they are
measured for every fifth of a family as a calibration, where no wrong step may make the two routes
contradict each other.
"""

from collections.abc import Mapping

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
    tiny,
)
from tests.mutants.catalogue import (
    LEAST,
    ONE_STEP,
    PROPAGATED,
    SAMPLED,
    Mutant,
    measured,
    refutations,
)

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
        tiny,
    )
]
MUTANTS = [mutant for family in FAMILIES for mutant in family.mutants]
BREAKERS = [mutant for mutant in MUTANTS if isinstance(mutant.by, Law)]


def by_label(mutants):
    return {"argvalues": mutants, "ids": [mutant.label for mutant in mutants]}


def check(mutant: Mutant, options: Mapping[str, object]):
    """Hold a mutant's evidence against what must refute it."""
    evidence = measured(mutant.scheme, mutant.on, **options)
    assert (evidence.verdict, evidence.exit_code) == (sb.Verdict.REFUTED, 1)
    kind = "contract" if isinstance(mutant.by, Law) else mutant.by
    found = refutations(evidence)
    first = next(k for k in ("contract", ONE_STEP, kind) if found[k])
    assert (first, set(found[kind])) == (kind, set(mutant.says))
    told = {claim.kind: claim.sentence for claim in evidence.claims}
    for claim, phrase in mutant.says.items():
        assert phrase in found[kind][claim]
        assert phrase in told[claim]


def every_other_by_one_step():
    """Return all mutants, every other one that one step refutes as a calibration."""
    found, by_one_step = [], 0
    for mutant in MUTANTS:
        by_one_step += mutant.by == ONE_STEP
        later = mutant.by == ONE_STEP and by_one_step % 2 == 0
        marks = [pytest.mark.calibration] if later else []
        found.append(pytest.param(mutant, id=mutant.label, marks=marks))
    return found


@pytest.mark.parametrize("mutant", every_other_by_one_step())
def test_a_wrong_integrator_is_refuted_for_its_own_fault(mutant: Mutant):
    by_paths = mutant.by in (SAMPLED, PROPAGATED)
    check(mutant, mutant.options if by_paths else LEAST)


IN_FULL = [m for f in FAMILIES for m in f.mutants[::5] if not m.options.get("steps")]


@pytest.mark.calibration
@pytest.mark.parametrize("mutant", **by_label(IN_FULL))
def test_by_default_a_wrong_integrator_is_refuted_for_its_own_fault(mutant: Mutant):
    check(mutant, {})


@pytest.mark.parametrize("mutant", **by_label(BREAKERS))
def test_a_step_that_breaks_its_contract_is_told_the_law_it_breaks(mutant: Mutant):
    breach = first_breach(mutant.scheme, sb.problem(mutant.on))
    assert breach is not None
    assert breach.law is mutant.by


def test_there_are_many_mutants_and_no_two_share_a_label():
    labels = [mutant.label for mutant in MUTANTS]
    assert len(set(labels)) == len(labels)
    assert len(labels) >= 40
