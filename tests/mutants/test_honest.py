"""Sound integrators are supported, and never refuted: the other half of a fair trial.

Default seed, looks until decided. What is propagated has no false alarm but through its check, of
1e-6 a run; a sound claim that is sampled is refuted with a probability of at most 1 - C = 0.05 a
run by the bench's own policy, and far less where the order is clear of its claim, as it is here by
tens of standard errors.
"""

import pytest

import sdebench as sb
from tests.mutants import honest
from tests.mutants.catalogue import measured

CURVED = ("sinh", "tanh", "arctan", "arcsinh")  # not linear: no factor and no sign to lose
EVERY = ("gbm", "ou", "ramped-noise", *CURVED)
SUPPORTED = {
    "derivative_free": EVERY,
    "stratonovich_heun": EVERY,
    "stratonovich_heun_on_half_steps": ("gbm", "ou", "ramped-noise", "sinh", "tanh"),
    "euler_maruyama_on_half_steps": ("ou", "ramped-noise"),
    "implicit_on_ornstein_uhlenbeck": ("ou",),
    "implicit_on_geometric_brownian_motion": ("gbm",),
    "implicit_milstein_on_geometric_brownian_motion": ("gbm",),
    "tamed_by_root_h": ("gbm", "ou", "sinh", "tanh"),
    "tamed": ("gbm", "ou", *CURVED),
    "coefficients_at_the_end_of_the_step": ("gbm", "ou", "ramped-noise", "tanh"),
    "drift_first_then_noise": EVERY,
    "milstein_kept_positive": ("gbm",),
    "milstein_by_broadcasting": EVERY,
    "exact_geometric_brownian_motion": ("gbm",),
    "drift_averaged_over_the_step": EVERY,
    "exact_law_on_ornstein_uhlenbeck": ("ou",),
    "two_point_noise": ("gbm", "ou"),
    "two_point_noise_by_a_choice": ("gbm",),
}
# Sound, with weak errors that nodes do not resolve and that lie below the noise of 32768 paths,
# since these steps do not follow the path; or with an order still rising on these rungs.
UNRESOLVED = {
    "two_point_noise": ("ramped-noise", *CURVED),
    "two_point_noise_by_a_choice": ("ramped-noise", "tanh"),
    "three_point_noise": EVERY,
    "noise_cut_off_ever_farther_out": EVERY,
    "tamed_by_root_h": ("ramped-noise",),
}
TRIED_BY_DEFAULT = [
    ("three_point_noise", "gbm"),
    ("noise_cut_off_ever_farther_out", "gbm"),
]
# Rungs at which errors of nonlinear problems have settled; paths would not resolve the weak ones.
# By default, which takes twice as long, on gbm and ramped-noise, and on all as a calibration.
FINE = {"route": "propagated", "steps": (256, 1024, 4096)}


def fewer(table):
    """Return the pairs; all but one of each integrator, on a problem in turn, are calibrations."""
    found = []
    for row, (name, problems) in enumerate(table.items()):
        for column, on in enumerate(problems):
            marks = [] if column == row % len(problems) else [pytest.mark.calibration]
            found.append(pytest.param(name, on, id=f"{name}-on-{on}", marks=marks))
    return {"argvalues": found}


def every(nth, table):
    return named([(name, on) for name, problems in table.items() for on in problems][::nth])


def named(found):
    return {"argvalues": found, "ids": [f"{name}-on-{on}" for name, on in found]}


def assert_supported(evidence):
    verdicts = [claim.verdict for claim in evidence.claims]
    assert verdicts == [sb.Verdict.SUPPORTED] * len(evidence.claims)
    assert evidence.exit_code == 0


@pytest.mark.parametrize(("name", "on"), **fewer(SUPPORTED))
def test_a_sound_integrator_is_supported(name: str, on: str):
    options = FINE if on in ("ou", *CURVED) else {}
    assert_supported(measured(getattr(honest, name), on, looks=None, **options))


@pytest.mark.calibration
@pytest.mark.parametrize(("name", "on"), **every(5, SUPPORTED))
def test_a_sound_integrator_is_supported_by_default(name: str, on: str):
    assert_supported(measured(getattr(honest, name), on, looks=None))


@pytest.mark.parametrize(("name", "on"), **fewer(UNRESOLVED))
def test_a_sound_integrator_that_one_look_cannot_resolve_is_not_refuted(name: str, on: str):
    evidence = measured(getattr(honest, name), on, route="sampled")
    assert evidence.verdict is not sb.Verdict.REFUTED


@pytest.mark.parametrize(("name", "on"), **named(TRIED_BY_DEFAULT))
def test_a_sound_integrator_that_nodes_do_not_resolve_is_not_refuted(name: str, on: str):
    evidence = measured(getattr(honest, name), on)
    assert evidence.verdict is not sb.Verdict.REFUTED


@pytest.mark.calibration
@pytest.mark.parametrize(("name", "on"), **every(3, UNRESOLVED))
def test_a_sound_integrator_that_stays_unresolved_is_not_refuted_by_default(name: str, on: str):
    evidence = measured(getattr(honest, name), on)
    assert evidence.verdict is not sb.Verdict.REFUTED


def test_taming_is_supported_on_rungs_fine_enough_for_a_drift_that_grows():
    evidence = measured(honest.tamed, "ramped-noise", steps=[16, 32, 64, 128])
    assert evidence.verdict is sb.Verdict.SUPPORTED


# Rungs on which a weak error of order 2 has settled and is not yet the round-off of the nodes.
SECOND_ORDER = {"route": "propagated", "steps": (32, 64, 128)}


@pytest.mark.parametrize(
    "on",
    ["gbm", "ou", "ramped-noise", "sinh"]
    + [pytest.param(on, marks=pytest.mark.calibration) for on in ("tanh", "arcsinh")],
)
def test_the_taylor_scheme_of_strong_order_15_and_weak_order_2_is_supported(on: str):
    options = {} if on == "ramped-noise" else SECOND_ORDER
    assert_supported(measured(honest.taylor_of_strong_order_15, on, **options))


def test_the_taylor_scheme_of_weak_order_2_is_supported():
    assert_supported(measured(honest.taylor_of_weak_order_2, "gbm", **SECOND_ORDER))


def test_a_scheme_of_order_4_is_supported_on_coarse_rungs():
    scheme = honest.decay_to_the_fourth_power_on_ornstein_uhlenbeck
    assert_supported(measured(scheme, "ou", route="propagated", steps=(2, 4, 8, 16, 32)))


def test_the_taylor_scheme_of_weak_order_2_is_supported_by_default():
    """Wrong code that this catches: rungs judged whose errors sink into round-off."""
    assert_supported(measured(honest.taylor_of_weak_order_2, "gbm"))


@pytest.mark.xfail(
    strict=True,
    raises=AssertionError,
    reason="two rungs of six are above round-off, and finer ones are asked for",
)
def test_a_scheme_of_order_4_is_supported_by_default():
    scheme = honest.decay_to_the_fourth_power_on_ornstein_uhlenbeck
    assert_supported(measured(scheme, "ou"))


@pytest.mark.calibration  # eight seconds, until refinement gives up on the coarse rungs
def test_a_row_propagated_on_fine_rungs_alone_is_measured():
    evidence = measured(honest.tamed_by_root_h, "gbm:mu=0.7,sigma=0.3,x0=0.9,horizon=1.5")
    assert evidence.verdict is not sb.Verdict.REFUTED
