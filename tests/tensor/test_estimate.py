"""σ carried through pose, inverse, value and rod: derivatives by differences, and seeded simulation."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from app.crystal.crystal import build_crystal
from app.errors import InputError
from app.tensor.estimate import Estimate, build_estimate, check_covariance
from app.tensor.form import build_form
from app.tensor.kind import Kind
from app.tensor.values import compute_rod_values, compute_values
from tests.crystal.reference import CELLS

MATRIX = np.array([[13.2, 0.7, 1.9], [-0.4, 24.6, 0.3], [1.5, -0.9, 15.9]])
POSE = Rotation.from_euler("ZXZ", [33.0, 61.0, -104.0], degrees=True).as_matrix()
DIRECTIONS = np.array([[1.0, 0, 0], [0.6, 0.0, 0.8], [0.48, 0.6, -0.64], [0.0, -1.0, 0.0]])


def make_covariance(size: float, seed: int = 3) -> np.ndarray:
    factor = np.random.default_rng(seed).normal(size=(9, 9)) * size
    return factor @ factor.T / 9


def differentiate(function, matrix: np.ndarray) -> np.ndarray:  # type: ignore[no-untyped-def]
    """Derivatives by the nine cells, central differences: shape (outputs, 9)."""
    columns = []
    for cell in range(9):
        step = np.zeros(9)
        step[cell] = 1e-5
        moved = step.reshape(3, 3)
        columns.append(np.ravel(function(matrix + moved) - function(matrix - moved)) / 2e-5)
    return np.array(columns).T


def expected_sigma(function, covariance: np.ndarray) -> np.ndarray:  # type: ignore[no-untyped-def]
    derivative = differentiate(function, MATRIX)
    return np.sqrt(np.einsum("ij,jk,ik->i", derivative, covariance, derivative))


def test_first_order_against_differences() -> None:
    # var y = J Σ Jᵀ (JCGM 100:2008, 5.2.2) with J by central differences.
    covariance = make_covariance(0.05)
    estimate = Estimate(MATRIX, covariance, "frame")
    turned = estimate.turn(POSE, "posed")
    assert turned.frame == "posed"
    assert turned.matrix == pytest.approx(POSE @ MATRIX @ POSE.T)
    expected = expected_sigma(lambda matrix: POSE @ matrix @ POSE.T, covariance)
    assert turned.sigma_matrix is not None
    assert turned.sigma_matrix.ravel() == pytest.approx(expected, rel=1e-7)
    inverse = estimate.invert("unit")
    assert inverse.matrix == pytest.approx(np.linalg.inv(MATRIX))
    assert inverse.unit == "unit" and inverse.sigma_matrix is not None
    assert inverse.sigma_matrix.ravel() == pytest.approx(expected_sigma(np.linalg.inv, covariance), rel=1e-6)
    values = estimate.value_sigma(DIRECTIONS)
    assert values == pytest.approx(expected_sigma(lambda m: compute_values(m, DIRECTIONS), covariance), rel=1e-7)
    effects = DIRECTIONS[[1, 2, 3, 0]]
    across = expected_sigma(lambda m: np.einsum("ni,ij,nj->n", effects, m, DIRECTIONS), covariance)
    assert estimate.value_sigma(DIRECTIONS, effects) == pytest.approx(across, rel=1e-7)
    rods = expected_sigma(lambda m: compute_rod_values(m, DIRECTIONS), covariance)
    assert estimate.rod_sigma(DIRECTIONS) == pytest.approx(rods, rel=1e-6)


def test_first_order_against_a_seeded_simulation() -> None:
    # 200 000 draws tell a standard deviation to 0.16 %; the second order of these small errors is far below that.
    covariance = make_covariance(0.02, seed=7)
    draws = np.random.default_rng(20).multivariate_normal(MATRIX.ravel(), covariance, size=200_000).reshape(-1, 3, 3)
    estimate = Estimate(MATRIX, covariance, "frame")
    posed = estimate.turn(POSE, "posed")
    assert posed.sigma_matrix == pytest.approx(np.std(POSE @ draws @ POSE.T, axis=0), rel=0.01)
    assert estimate.invert().sigma_matrix == pytest.approx(np.std(np.linalg.inv(draws), axis=0), rel=0.01)
    direction = DIRECTIONS[2]
    simulated = 1.0 / np.einsum("i,nij,j->n", direction, np.linalg.inv(draws), direction)
    assert estimate.rod_sigma(direction) == pytest.approx(np.std(simulated), rel=0.01)
    assert posed.covariance is not None
    sampled = np.cov((POSE @ draws @ POSE.T).reshape(-1, 9).T)
    assert posed.covariance == pytest.approx(sampled, abs=0.01 * np.max(np.diag(sampled)))


@settings(max_examples=40, deadline=None)
@given(st.tuples(*[st.floats(-180, 180)] * 3), st.integers(0, 10_000))
def test_turning_back_loses_nothing(angles: tuple[float, float, float], seed: int) -> None:
    pose = Rotation.from_euler("ZXZ", angles, degrees=True).as_matrix()
    covariance = make_covariance(0.3, seed)
    back = Estimate(MATRIX, covariance, "frame").turn(pose, "posed").turn(pose.T, "frame")
    assert back.matrix == pytest.approx(MATRIX, abs=1e-12)
    assert back.covariance == pytest.approx(covariance, abs=1e-12)
    # σ of a value does not care for the frame.
    posed = Estimate(MATRIX, covariance, "frame").turn(pose, "posed")
    direction = DIRECTIONS[1]
    expected = Estimate(MATRIX, covariance, "frame").value_sigma(direction)
    assert posed.value_sigma(pose @ direction) == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize("scale", [1e-120, 1e-30, 1e30, 1e120])
def test_any_scale(scale: float) -> None:
    covariance = make_covariance(0.05)
    plain = Estimate(MATRIX, covariance, "frame")
    scaled = Estimate(scale * MATRIX, scale**2 * covariance, "frame")
    assert scaled.value_sigma(DIRECTIONS) == pytest.approx(scale * plain.value_sigma(DIRECTIONS), rel=1e-12)
    assert scaled.rod_sigma(DIRECTIONS) == pytest.approx(scale * plain.rod_sigma(DIRECTIONS), rel=1e-12)
    inverse, plain_inverse = scaled.invert(), plain.invert()
    assert inverse.sigma_matrix is not None and plain_inverse.sigma_matrix is not None
    assert scale * inverse.sigma_matrix == pytest.approx(plain_inverse.sigma_matrix, rel=1e-9)


def test_without_covariance_there_is_no_sigma() -> None:
    estimate = Estimate(MATRIX, None, "frame")
    assert estimate.sigma_matrix is None
    assert estimate.value_sigma(DIRECTIONS) is None
    assert estimate.rod_sigma(DIRECTIONS) is None
    assert estimate.turn(POSE, "posed").covariance is None
    assert estimate.invert().covariance is None


def test_what_has_no_inverse() -> None:
    flat = Estimate(np.diag([1.0, 2.0, 0.0]), make_covariance(0.1), "frame")
    with pytest.raises(InputError, match="inverse"):
        flat.invert()
    rods = flat.rod_sigma(DIRECTIONS)
    assert rods is not None and np.isnan(rods).all()


@pytest.mark.parametrize("group", ["1", "-3m", "6/mmm"])
def test_free_cells_spread_over_the_form(group: str) -> None:
    family = "triclinic" if group == "1" else "hexagonal"
    form = build_form(build_crystal(CELLS[family], group), Kind())
    generator = np.random.default_rng(2)
    factor = generator.normal(size=(form.count, form.count))
    covariance, values = factor @ factor.T, generator.normal(size=form.count)
    estimate = build_estimate(form, values, covariance, "frame")
    draws = generator.multivariate_normal(values, covariance, size=100_000) @ form.basis.reshape(form.count, 9)
    assert estimate.covariance == pytest.approx(np.cov(draws.T), abs=0.03 * np.max(np.diag(estimate.covariance)))
    # A cell that symmetry holds at zero has none, and one that equals another has the other's.
    assert estimate.sigma_matrix is not None
    assert estimate.sigma_matrix[0, 1] == pytest.approx(estimate.sigma_matrix[1, 0])
    if group != "1":
        assert estimate.sigma_matrix[0, 1] == 0.0
        assert estimate.sigma_matrix[0, 0] == pytest.approx(estimate.sigma_matrix[1, 1])


@pytest.mark.parametrize(
    "covariance",
    [
        np.diag([1e-60, 4e-60]),
        np.diag([1e60, 4e60]),
        np.zeros((2, 2)),
        np.diag([1.0, 0.0]),
        [[1.0, 2.0], [2.0, 4.0]],
        [[1.0, 0.5], [0.5 + 1e-12, 1.0]],
        [[1e-20, 0.0], [0.0, 1e20]],
    ],
)
def test_covariances_that_are_taken(covariance: object) -> None:
    checked = check_covariance(covariance, 2)  # type: ignore[arg-type]
    assert checked == pytest.approx((np.array(covariance) + np.array(covariance).T) / 2)


@pytest.mark.parametrize(
    ("covariance", "words"),
    [
        ([[1.0]], "2 rows of 2"),
        ([1.0, 2.0], "2 rows of 2"),
        ("x", "2 rows of 2"),
        (None, "2 rows of 2"),
        ([[1.0, float("nan")], [0.0, 1.0]], "2 rows of 2"),
        ([[1.0, 0.5], [0.4, 1.0]], "not symmetric"),
        ([[1e-60, 5e-61], [0.0, 1e-60]], "not symmetric"),
        ([[1.0, 1.1], [1.1, 1.0]], "not positive"),
        ([[1e-60, 1.1e-60], [1.1e-60, 1e-60]], "not positive"),
        ([[-1.0, 0.0], [0.0, 1.0]], "not positive"),
        ([[0.0, 1.0], [1.0, 0.0]], "not positive"),
        ([[0.0, 0.1], [0.1, 1.0]], "not positive"),
    ],
)
def test_covariances_that_are_refused(covariance: object, words: str) -> None:
    with pytest.raises(InputError, match=words) as caught:
        check_covariance(covariance, 2)  # type: ignore[arg-type]
    assert caught.value.field == "covariance"
