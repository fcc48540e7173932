"""What sampling alone decides, it decides on every seed: 20 of them, as a calibration, beside
the default one of `test_mutants.py`. Of these each fault meets every fourth one.

The faults are many times what 32768 paths resolve: the bounds on each order stay below its claim
by four times their width or more. What is propagated depends on no seed, its check does, with a
false alarm of 1e-6 a run. Some 30 paths of a rung end in the rarest NaN, and none with a
probability of 1e-13. A sound claim is refuted with a probability of at most 1 - C = 0.05 a run by
the bench's own policy, and far less where the order is clear of its claim, as it is here.
"""

import pytest

import sdebench as sb
from tests.mutants import hidden
from tests.mutants.catalogue import SAMPLED, Mutant, measured, refutations

pytestmark = pytest.mark.calibration
SEEDS = range(2, 22)


@pytest.mark.parametrize("mutant", hidden.family.mutants, ids=lambda mutant: mutant.label)
def test_a_fault_that_only_whole_paths_meet_is_refuted_on_every_seed(mutant: Mutant):
    for seed in SEEDS[hidden.family.mutants.index(mutant) % 4 :: 4]:
        evidence = measured(mutant.scheme, mutant.on, seed=seed, route="sampled")
        assert evidence.verdict is sb.Verdict.REFUTED
        assert set(mutant.says) <= set(refutations(evidence)[SAMPLED])


def test_a_registered_scheme_is_supported_on_every_seed(scheme, problem, pair_applies):
    """On two seeds by both routes; by sampling alone on 120, in tests/calibration."""
    if not pair_applies(scheme, problem):
        pytest.skip(f"{problem.name} lacks what {scheme.name} steps by")
    for seed in SEEDS[:2]:
        evidence = measured(scheme, problem, seed=seed, looks=None)
        assert evidence.verdict is sb.Verdict.SUPPORTED
