"""The SDE and the conversion of its drift between the calculi."""

import numpy as np
import pytest

from sdebench import SDE
from tests.tolerance import round_off

X = np.array([-1.5, 0.25, 2.0])


@pytest.fixture
def square_root_like() -> SDE:
    """dX = 3 dt + (1 + X²) dW, so that (1/2) b ∂b/∂x = x (1 + x²)."""
    return SDE(
        drift=lambda t, x: np.full_like(x, 3.0),
        diffusion=lambda t, x: 1 + x * x,
        diffusion_dx=lambda t, x: 2 * x,
        params={},
        start=1.0,
        horizon=1.0,
        noise_kind="multiplicative",
    )


def test_the_stratonovich_drift_is_the_ito_drift_less_half_b_times_its_derivative(square_root_like):
    converted = square_root_like.in_calculus("stratonovich")
    expected = 3.0 - X * (1 + X**2)
    allowed = round_off(float(np.abs(expected).max()) + 3.0, 8)
    assert np.abs(converted.drift(0.0, X) - expected).max() <= allowed


def test_the_conversion_of_geometric_brownian_motion_is_the_known_one():
    """Mu x in Itô's sense is (mu - sigma²/2) x in Stratonovich's."""
    mu, sigma = 0.7, 0.4
    sde = SDE(
        drift=lambda t, x: mu * x,
        diffusion=lambda t, x: sigma * x,
        diffusion_dx=lambda t, x: np.full_like(x, sigma),
        params={},
        start=1.0,
        horizon=1.0,
        noise_kind="multiplicative",
    )
    found = sde.in_calculus("stratonovich").drift(0.0, X)
    assert np.abs(found - (mu - sigma**2 / 2) * X).max() <= round_off(2.0, 8)


def test_converting_there_and_back_gives_the_same_drift(square_root_like):
    back = square_root_like.in_calculus("stratonovich").in_calculus("ito")
    scale = 3.0 + float(np.abs(X * (1 + X**2)).max())
    assert back.calculus == "ito"
    assert np.abs(back.drift(0.0, X) - 3.0).max() <= round_off(scale, 8)


def test_the_calculus_it_is_in_changes_nothing(square_root_like):
    assert square_root_like.in_calculus("ito") is square_root_like


def test_the_conversion_leaves_the_diffusion_alone(square_root_like):
    converted = square_root_like.in_calculus("stratonovich")
    assert converted.diffusion is square_root_like.diffusion
    assert converted.calculus == "stratonovich"
