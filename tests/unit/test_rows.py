"""The layout of averaged quantities, and how they are filled."""

import math

import numpy as np
import pytest

from sdebench.rows import Rows
from tests.tolerance import round_off, sampling


@pytest.mark.parametrize("grid", [True, False], ids=["grid", "no grid"])
@pytest.mark.parametrize(("n_rungs", "n_functionals"), [(3, 1), (5, 3), (4, 0)])
def test_every_row_has_one_place(n_rungs, n_functionals, grid):
    rows = Rows(n_rungs, n_functionals, grid)
    parts = [rows.squares, rows.absolute, rows.grid, rows.reference, rows.controls]
    parts += [rows.weak(i) for i in range(n_functionals)]
    assert sorted(r for part in parts for r in part) == list(range(rows.count))


def test_the_measured_rows_come_before_the_controls():
    rows = Rows(3, 2, True)
    assert rows.controls == range(rows.n_measured, rows.count)


def test_there_is_a_square_an_absolute_and_a_weak_row_for_every_rung():
    rows = Rows(5, 2, False)
    assert [len(p) for p in (rows.squares, rows.absolute, rows.weak(0), rows.weak(1))] == [5] * 4
    assert len(rows.grid) == 0
    assert len(rows.reference) == 2


@pytest.fixture
def filled():
    """Two rungs, one functional, three paths; scheme, worst deviation and end points by hand."""
    rows = Rows(2, 1, True)
    end = np.array([1.0, 2.0, 3.0])
    states = [np.array([1.5, 2.0, 2.0]), np.array([1.25, 1.75, 3.0])]
    worst = [np.array([0.5, 1.0, 2.0]), np.array([0.25, 0.5, 0.0])]
    made = [*rows.error_rows(states, worst, end), *rows.weak_rows(states, end, [np.square])]
    return rows, np.array(made)


def test_squares_are_the_squared_errors(filled):
    rows, values = filled
    assert values[rows.squares].tolist() == [[0.25, 0.0, 1.0], [0.0625, 0.0625, 0.0]]


def test_absolute_rows_are_the_absolute_errors(filled):
    rows, values = filled
    assert values[rows.absolute].tolist() == [[0.5, 0.0, 1.0], [0.25, 0.25, 0.0]]


def test_grid_rows_are_the_squares_of_the_worst_deviation(filled):
    rows, values = filled
    assert values[rows.grid].tolist() == [[0.25, 1.0, 4.0], [0.0625, 0.25, 0.0]]


def test_weak_rows_are_signed_differences_of_the_functional(filled):
    rows, values = filled
    assert values[rows.weak(0)].tolist() == [[1.25, 0.0, -5.0], [0.5625, -0.9375, 0.0]]


def test_the_reference_is_the_functional_of_the_exact_end(filled):
    rows, values = filled
    assert values[rows.reference].tolist() == [[1.0, 4.0, 9.0]]


STEPS, HORIZON, N_PATHS = (2, 8), 1.7, 200_000


@pytest.fixture(scope="module")
def controls() -> np.ndarray:
    """Controls of 200 000 paths of 8 increments, seed 9."""
    rows = Rows(len(STEPS), 0, False)
    dw = np.random.default_rng(9).standard_normal((8, N_PATHS)) * math.sqrt(HORIZON / 8)
    quadratic = [(dw.reshape(n, 8 // n, -1).sum(axis=1) ** 2).sum(axis=0) for n in STEPS]
    made = np.array(list(rows.control_rows(dw.sum(axis=0), quadratic, HORIZON, STEPS)))
    assert len(made) == len(rows.controls)
    return made


@pytest.mark.parametrize("control", range(10))
def test_a_control_has_expectation_zero(controls, control):
    """False alarm 1e-6; catches a missing √(2/N) or a constant lost from a Hermite polynomial."""
    values = controls[control]
    assert abs(values.mean()) <= sampling(float(values.std()) / math.sqrt(N_PATHS), N_PATHS - 1)


@pytest.mark.parametrize(("control", "variance"), list(enumerate([1.0, 2.0, 6.0, 24.0])))
def test_hermite_controls_have_variance_of_their_degrees_factorial(controls, control, variance):
    """False alarm 1e-6; catches a wrong scale of W_T."""
    squares = controls[control] ** 2
    error = float(squares.std()) / math.sqrt(N_PATHS)
    assert abs(squares.mean() - variance) <= sampling(error, N_PATHS - 1)


@pytest.mark.parametrize("control", [4, 7], ids=["2 steps", "8 steps"])
def test_the_quadratic_control_has_variance_one_on_every_rung(controls, control):
    """S = Σ (ΔW² - h) / √(2 T h); false alarm 1e-6; catches a scale that forgets the rung."""
    squares = controls[control] ** 2
    error = float(squares.std()) / math.sqrt(N_PATHS)
    assert abs(squares.mean() - 1.0) <= sampling(error, N_PATHS - 1)


def test_controls_of_one_path_are_the_polynomials_by_hand():
    rows = Rows(1, 0, False)
    w, total, n = 2.0, 5.0, 2
    made = list(rows.control_rows(np.array([w]), [np.array([total])], 4.0, [n]))
    z, s = w / 2, (total - 4.0) / math.sqrt(2 * 4.0 * 2.0)
    he = [z, z**2 - 1, z**3 - 3 * z, z**4 - 6 * z**2 + 3]
    expected = [*he, s, s * z, s * (z**2 - 1) - math.sqrt(2 / n)]
    assert np.abs(np.array(made)[:, 0] - expected).max() <= round_off(3.0, 16)
