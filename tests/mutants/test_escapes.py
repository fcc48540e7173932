"""Wrong integrators that get away today: each is to be refuted, and says when it is.

Default seed. A strict expected failure turns into an error on the day the bench sees the fault;
the mutant then moves to its family.
"""

import pytest

import sdebench as sb
from tests.mutants.catalogue import measured
from tests.mutants.escapes import ESCAPES, Escape


@pytest.mark.parametrize(
    "escape",
    [
        pytest.param(
            escape,
            id=f"{escape.scheme.name}-on-{escape.on}",
            marks=pytest.mark.xfail(strict=True, raises=AssertionError, reason=escape.why),
        )
        for escape in ESCAPES
    ],
)
def test_a_wrong_integrator_that_escapes_is_refuted(escape: Escape):
    evidence = measured(escape.scheme, escape.on, looks=escape.looks)
    assert evidence.verdict is sb.Verdict.REFUTED
