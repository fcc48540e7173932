"""Wrong integrators that get away today: each is to be refuted, and says when it is.

Default seed. A strict expected failure turns into an error on the day the bench sees the fault;
the mutant then moves to its family.
"""

import pytest

import sdebench as sb
from tests.mutants.catalogue import PROPAGATED, measured
from tests.mutants.escapes import DECEPTIVE, ESCAPES, Escape
from tests.mutants.steps import milstein


def expected(escapes, *raises):
    return [
        pytest.param(
            escape,
            id=f"{escape.scheme.name}-on-{escape.on}",
            marks=[pytest.mark.xfail(strict=True, raises=raises, reason=escape.why)]
            if escape.why
            else [],
        )
        for escape in escapes
    ]


@pytest.mark.parametrize("escape", expected(ESCAPES, AssertionError))
def test_a_wrong_integrator_that_escapes_is_refuted(escape: Escape):
    evidence = measured(escape.scheme, escape.on, **escape.options)
    assert evidence.verdict is sb.Verdict.REFUTED


def assert_not_supported_by_propagation(evidence):
    supported = [
        row.functional or row.kind
        for row in evidence.results
        if row.route == PROPAGATED and row.verdict is sb.Verdict.SUPPORTED
    ]
    assert evidence.verdict is sb.Verdict.REFUTED or not supported


@pytest.mark.parametrize("escape", expected(DECEPTIVE, AssertionError, sb.BenchFault))
def test_a_step_that_deceives_its_nodes_is_refuted_or_sampled(escape: Escape):
    assert_not_supported_by_propagation(measured(escape.scheme, escape.on, **escape.options))


def tiring(calls):
    """Return a step whose noise is a tenth up after so many calls, and the list of its calls."""
    made = []

    @sb.scheme(strong=1.0, weak=1.0)
    def noise_up_after_so_many_calls(sde, t, x, h, noise):
        made.append(1)
        return milstein(sde, t, x, h, noise.dw, noise=1.1 if len(made) > calls else 1.0)

    return noise_up_after_so_many_calls, made


@pytest.mark.parametrize(
    "fraction",
    [
        pytest.param(0.05, id="while-the-contract-is-checked"),
        pytest.param(0.5, id="in-one-step"),
        pytest.param(1.0, id="when-paths-are-sampled"),
    ],
)
def test_a_step_that_tires_is_refuted_or_sampled(fraction: float):
    """State that shows after a part of the calls that all but the sample takes."""
    fresh, made = tiring(10**9)
    measured(fresh, "gbm", route="propagated")
    tired, _ = tiring(int(fraction * len(made)))
    assert_not_supported_by_propagation(measured(tired, "gbm"))
