"""Value, flux, angle and rod along a direction, against plain matrix algebra and many digits."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from app.tensor.values import compute_flux, compute_flux_angles, compute_rod_values, compute_values, is_singular

cells = st.lists(st.floats(-50, 50), min_size=9, max_size=9).map(lambda values: np.array(values).reshape(3, 3))
directions = (
    st.tuples(*[st.floats(-1, 1)] * 3)
    .filter(lambda vector: np.linalg.norm(vector) > 1e-2)
    .map(lambda vector: np.array(vector) / np.linalg.norm(vector))
)


@settings(max_examples=100, deadline=None)
@given(cells, directions)
def test_values_and_flux_are_sums_over_cells(matrix: np.ndarray, n: np.ndarray) -> None:
    flux = [sum(matrix[i, j] * n[j] for j in range(3)) for i in range(3)]
    assert compute_flux(matrix, n) == pytest.approx(flux, abs=1e-11)
    assert compute_values(matrix, n) == pytest.approx(sum(n[i] * flux[i] for i in range(3)), abs=1e-11)
    # A general tensor's value is that of its symmetric part.
    assert compute_values((matrix + matrix.T) / 2, n) == pytest.approx(compute_values(matrix, n), abs=1e-11)


def test_batches_keep_their_shape() -> None:
    matrix = np.arange(9.0).reshape(3, 3)
    many = np.random.default_rng(1).normal(size=(4, 5, 3))
    many /= np.linalg.norm(many, axis=-1, keepdims=True)
    assert compute_values(matrix, many).shape == (4, 5)
    assert compute_flux(matrix, many).shape == (4, 5, 3)
    assert compute_flux_angles(many, compute_flux(matrix, many)).shape == (4, 5)
    assert compute_rod_values(np.diag([1.0, 2, 3]), many).shape == (4, 5)
    assert compute_values(matrix, many)[2, 3] == pytest.approx(many[2, 3] @ matrix @ many[2, 3])


def test_angles_between_cause_and_effect() -> None:
    # By hand: along a principal axis 0 or, of a negative value, 180; a quarter-turn in the plane is 90.
    x = np.array([1.0, 0, 0])
    assert compute_flux_angles(x, compute_flux(np.diag([2.0, 1, 1]), x)) == 0.0
    assert compute_flux_angles(x, compute_flux(np.diag([-2.0, 1, 1]), x)) == pytest.approx(180.0)
    quarter = np.array([[0.0, -3, 0], [3, 0, 0], [0, 0, 1]])
    assert compute_flux_angles(x, compute_flux(quarter, x)) == pytest.approx(90.0)
    assert np.isnan(compute_flux_angles(x, np.zeros(3)))
    # Angles far below what an arc cosine tells, and any scale.
    for scale in (1e-300, 1e-30, 1.0, 1e30, 1e300):
        tilted = compute_flux_angles(x, scale * np.array([1.0, 1e-9, 0.0]))
        assert tilted == pytest.approx(np.rad2deg(1e-9), rel=1e-9)


@settings(max_examples=60, deadline=None)
@given(
    st.tuples(*[st.floats(0.1, 10.0)] * 3),
    st.tuples(*[st.floats(-180, 180)] * 3),
    directions,
    st.sampled_from([1e-30, 1.0, 1e30]),
)
def test_rods_by_solving_in_many_digits(
    values: tuple[float, float, float], turn: tuple[float, float, float], n: np.ndarray, scale: float
) -> None:
    # 1/(n A⁻¹ n) with A x = n solved by mpmath.
    rotation = Rotation.from_euler("ZXZ", turn, degrees=True).as_matrix()
    matrix = scale * rotation @ np.diag(values) @ rotation.T
    with mpmath.workdps(30):
        solution = mpmath.lu_solve(mpmath.matrix(matrix.tolist()), mpmath.matrix(n.tolist()))
        expected = float(1 / sum(mpmath.mpf(float(n[i])) * solution[i] for i in range(3)))
    assert compute_rod_values(matrix, n) == pytest.approx(expected, rel=1e-11)
    # A rod shows no more than a plate: harmonic and arithmetic mean (Cauchy and Schwarz).
    assert compute_rod_values(matrix, n) <= compute_values(matrix, n) * (1 + 1e-12)


def test_rods_that_have_no_value() -> None:
    n = np.array([[1.0, 0, 0], [0, 0, 1]])
    assert np.isnan(compute_rod_values(np.diag([1.0, 2.0, 0.0]), n)).all()
    assert np.isnan(compute_rod_values(np.zeros((3, 3)), n)).all()
    # n A⁻¹ n is zero along this direction of diag(1, −1, 2): no value, and no warning.
    assert np.isnan(compute_rod_values(np.diag([1.0, -1.0, 2.0]), np.array([np.sqrt(0.5), np.sqrt(0.5), 0.0])))


def test_singular_is_relative() -> None:
    for scale in (1e-200, 1e-30, 1.0, 1e30, 1e200):
        assert is_singular(scale * np.diag([1.0, 1.0, 0.0]))
        assert not is_singular(scale * np.diag([1.0, 1.0, 1e-6]))
