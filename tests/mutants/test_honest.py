"""Sound integrators are supported, and never refuted: the other half of a fair trial.

Default seed, looks until decided. A sound claim is refuted with a probability of at most 1 - C =
0.05 a run by the bench's own policy, and far less where the order is clear of its claim, as it is
here by tens of standard errors.
"""

import pytest

import sdebench as sb
from tests.mutants import honest
from tests.mutants.catalogue import measured

SUPPORTED = {
    "derivative_free": ("gbm", "ou", "ramped-noise"),
    "stratonovich_heun": ("gbm", "ramped-noise"),
    "stratonovich_heun_on_half_steps": ("gbm", "ramped-noise"),
    "euler_maruyama_on_half_steps": ("ou", "ramped-noise"),
    "implicit_on_ornstein_uhlenbeck": ("ou",),
    "implicit_on_geometric_brownian_motion": ("gbm",),
    "implicit_milstein_on_geometric_brownian_motion": ("gbm",),
    "tamed": ("gbm", "ou"),
    "tamed_by_root_h": ("gbm", "ou"),
    "coefficients_at_the_end_of_the_step": ("ramped-noise",),
    "drift_first_then_noise": ("gbm", "ou", "ramped-noise"),
    "milstein_kept_positive": ("gbm",),
    "milstein_by_broadcasting": ("gbm", "ou", "ramped-noise"),
    "exact_geometric_brownian_motion": ("gbm",),
    "drift_averaged_over_the_step": ("ramped-noise",),
}
# Sound, with weak errors below what paths can resolve, or an order still rising on these rungs.
UNRESOLVED = {
    "stratonovich_heun": ("ou",),
    "drift_averaged_over_the_step": ("gbm", "ou"),
    "taylor_of_strong_order_15": ("gbm",),
    "taylor_of_weak_order_2": ("gbm",),
    "exact_law_on_ornstein_uhlenbeck": ("ou",),
    "two_point_noise": ("gbm", "ou", "ramped-noise"),
    "two_point_noise_by_a_choice": ("gbm", "ou", "ramped-noise"),
    "three_point_noise": ("gbm", "ou", "ramped-noise"),
    "noise_cut_off_ever_farther_out": ("gbm", "ou", "ramped-noise"),
    "tamed_by_root_h": ("ramped-noise",),
}


def pairs(table):
    found = [(name, on) for name, problems in table.items() for on in problems]
    return {"argvalues": found, "ids": [f"{name}-on-{on}" for name, on in found]}


@pytest.mark.parametrize(("name", "on"), **pairs(SUPPORTED))
def test_a_sound_integrator_is_supported(name: str, on: str):
    evidence = measured(getattr(honest, name), on, looks=None)
    assert [claim.verdict for claim in evidence.claims] == [sb.Verdict.SUPPORTED] * len(
        evidence.claims
    )
    assert evidence.exit_code == 0


@pytest.mark.parametrize(("name", "on"), **pairs(UNRESOLVED))
def test_a_sound_integrator_that_one_look_cannot_resolve_is_not_refuted(name: str, on: str):
    evidence = measured(getattr(honest, name), on)
    assert evidence.verdict is not sb.Verdict.REFUTED


def test_taming_is_supported_on_rungs_fine_enough_for_a_drift_that_grows():
    evidence = measured(honest.tamed, "ramped-noise", steps=[16, 32, 64, 128])
    assert evidence.verdict is sb.Verdict.SUPPORTED


@pytest.mark.calibration
def test_the_taylor_scheme_of_strong_order_15_and_weak_order_2_is_supported_in_full():
    evidence = measured(honest.taylor_of_strong_order_15, "gbm", looks=None)
    assert evidence.verdict is sb.Verdict.SUPPORTED


@pytest.mark.parametrize(
    ("name", "on"),
    [
        pytest.param(name, on, id=f"{name}-on-{on}")
        for name, on in (
            ("stratonovich_heun", "ou"),
            ("exact_law_on_ornstein_uhlenbeck", "ou"),
            ("two_point_noise", "gbm"),
        )
    ],
)
@pytest.mark.xfail(
    strict=True, raises=AssertionError, reason="weak errors below the noise of paths decide nothing"
)
def test_a_weak_error_too_small_to_resolve_supports_a_weak_claim(name: str, on: str):
    evidence = measured(getattr(honest, name), on, looks=2)
    assert evidence.verdict is sb.Verdict.SUPPORTED
