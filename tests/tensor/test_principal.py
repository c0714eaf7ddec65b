"""Principal axes: values, right-handed axes, the truth about equal ones, and their errors by simulation."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from app.tensor.estimate import Estimate
from app.tensor.principal import find_principal

cells = st.lists(st.floats(-100, 100), min_size=9, max_size=9).map(lambda values: np.array(values).reshape(3, 3))
TURN = Rotation.from_euler("ZXZ", [33.0, 61.0, -104.0], degrees=True).as_matrix()


def plain(matrix: np.ndarray) -> Estimate:
    return Estimate(np.asarray(matrix, dtype=np.float64), None, "frame")


def compose(values: list[float], turn: np.ndarray = TURN) -> np.ndarray:
    return turn.T @ np.diag(values) @ turn


@settings(max_examples=150, deadline=None)
@given(cells, st.sampled_from([1e-200, 1e-30, 1.0, 1e30, 1e200]))
def test_values_and_axes_put_together_are_the_symmetric_part(matrix: np.ndarray, scale: float) -> None:
    principal = find_principal(plain(scale * matrix))
    symmetric = (matrix + matrix.T) / 2
    size = max(float(np.max(np.abs(symmetric))), 1e-12)
    assert np.all(np.diff(principal.values) <= 0)
    # numpy's own eigenvalues are the outside.
    assert principal.values / scale == pytest.approx(np.linalg.eigvalsh(symmetric)[::-1], abs=1e-13 * size)
    axes = principal.axes
    assert axes @ axes.T == pytest.approx(np.eye(3), abs=1e-13)
    assert np.linalg.det(axes) == pytest.approx(1.0, abs=1e-13)
    assert axes.T @ np.diag(principal.values / scale) @ axes == pytest.approx(symmetric, abs=3e-9 * size)


@pytest.mark.parametrize("gap", [1e-2, 1e-4, 1e-6, 1e-8])
def test_nearly_equal_values_against_many_digits(gap: float) -> None:
    matrix = compose([7.0, 7.0 * (1 - gap), 2.0])
    principal = find_principal(plain(matrix))
    assert principal.shape == "biaxial" and not any(principal.arbitrary)
    with mpmath.workdps(40):
        values, vectors = mpmath.eigsy(mpmath.matrix(((matrix + matrix.T) / 2).tolist()))
    for index in range(3):
        exact = np.array([float(vectors[row, 2 - index]) for row in range(3)])
        assert principal.values[index] == pytest.approx(float(values[2 - index]), rel=1e-14)
        # An axis is as sure as rounding beside the gap allows.
        assert abs(principal.axes[index] @ exact) == pytest.approx(1.0, abs=1e-14)
        assert np.linalg.norm(np.cross(principal.axes[index], exact)) < 1e-14 / gap


@pytest.mark.parametrize(
    ("values", "arbitrary", "shape"),
    [
        ([5.0, 5.0, 2.0], (True, True, False), "uniaxial"),
        ([5.0, 2.0, 2.0], (False, True, True), "uniaxial"),
        ([5.0, 5.0, 5.0], (True, True, True), "isotropic"),
        ([-5.0, -5.0, -5.0], (True, True, True), "isotropic"),
        ([0.0, 0.0, 0.0], (True, True, True), "isotropic"),
        ([2.0, 0.0, 0.0], (False, True, True), "uniaxial"),
        ([2.0, 0.0, -2.0], (False, False, False), "biaxial"),
        ([5.0, 4.0, 3.0], (False, False, False), "biaxial"),
        # Equal within rounding counts as equal.
        ([5.0, 5.0 - 1e-14, 2.0], (True, True, False), "uniaxial"),
    ],
)
@pytest.mark.parametrize("scale", [1e-30, 1.0, 1e30])
def test_which_axes_are_arbitrary(
    values: list[float], arbitrary: tuple[bool, bool, bool], shape: str, scale: float
) -> None:
    for turn in (np.eye(3), TURN):
        principal = find_principal(plain(scale * compose(values, turn)))
        assert principal.values == pytest.approx(scale * np.array(values), abs=1e-13 * scale * 5)
        assert (principal.arbitrary, principal.shape) == (arbitrary, shape)
        assert principal.sigma is None and principal.axis_sigma is None
        assert np.linalg.det(principal.axes) == pytest.approx(1.0, abs=1e-14)
        for index in range(3):
            if not arbitrary[index]:
                assert abs(principal.axes[index] @ turn[index]) == pytest.approx(1.0, abs=1e-13)


def test_axes_do_not_jump_with_rounding() -> None:
    # The same uniaxial tensor with rounding noise keeps the axes that are free to choose.
    chosen = find_principal(plain(compose([5.0, 5.0, 2.0]))).axes
    generator = np.random.default_rng(4)
    for _ in range(20):
        noise = 1e-15 * generator.normal(size=(3, 3))
        axes = find_principal(plain(compose([5.0, 5.0, 2.0]) + noise)).axes
        assert axes == pytest.approx(chosen, abs=1e-12)


def symmetric_covariance(size: float, seed: int) -> np.ndarray:
    """Of the nine cells of symmetric matrices, σ about ``size``."""
    draws = np.random.default_rng(seed).normal(size=(12, 3, 3)) * size
    flat = (draws + np.swapaxes(draws, 1, 2)).reshape(12, 9) / 2
    return flat.T @ flat / 12


def test_errors_against_a_seeded_simulation() -> None:
    covariance = symmetric_covariance(0.02, 5)
    matrix = compose([9.0, 6.0, 2.0])
    principal = find_principal(Estimate(matrix, covariance, "frame"))
    draws = np.random.default_rng(6).multivariate_normal(matrix.ravel(), covariance, size=100_000).reshape(-1, 3, 3)
    values, vectors = np.linalg.eigh((draws + np.swapaxes(draws, 1, 2)) / 2)
    assert principal.sigma == pytest.approx(np.std(values[:, ::-1], axis=0), rel=0.015)
    assert principal.axis_sigma is not None
    assert np.diag(principal.axis_sigma).tolist() == [0.0, 0.0, 0.0]
    drawn_axes = np.swapaxes(vectors, 1, 2)[:, ::-1]
    for i in range(3):
        aligned = drawn_axes[:, i] * np.sign(drawn_axes[:, i] @ principal.axes[i])[:, None]
        for j in range(3):
            if i != j:
                turned = np.rad2deg(np.arcsin(aligned @ principal.axes[j]))
                assert principal.axis_sigma[i, j] == pytest.approx(np.std(turned), rel=0.015), (i, j)
    assert principal.axis_sigma == pytest.approx(principal.axis_sigma.T)
    assert (principal.arbitrary, principal.shape) == ((False, False, False), "biaxial")


def test_an_antisymmetric_part_and_its_errors_do_not_matter() -> None:
    matrix = compose([9.0, 6.0, 2.0])
    anti = np.array([[0.0, 3, -1], [-3, 0, 2], [1, -2, 0]])
    covariance = symmetric_covariance(0.02, 5)
    flat = anti.ravel()
    plain_result = find_principal(Estimate(matrix, covariance, "frame"))
    mixed = find_principal(Estimate(matrix + anti, covariance + 4.0 * np.outer(flat, flat), "frame"))
    assert mixed.values == pytest.approx(plain_result.values)
    assert mixed.sigma == pytest.approx(plain_result.sigma)
    assert mixed.axis_sigma == pytest.approx(plain_result.axis_sigma)


def test_values_equal_by_symmetry_have_no_turn_between_them() -> None:
    # A uniaxial tensor whose covariance obeys the symmetry: 11 and 22 are one number.
    basis = np.array([np.diag([1.0, 1, 0]).ravel(), np.diag([0.0, 0, 1]).ravel()])
    covariance = basis.T @ np.diag([0.01, 0.04]) @ basis
    principal = find_principal(Estimate(np.diag([6.0, 6.0, 10.0]), covariance, "frame"))
    assert principal.arbitrary == (False, True, True)
    assert principal.sigma == pytest.approx([0.2, 0.1, 0.1])
    assert principal.axis_sigma is not None
    assert np.isnan(principal.axis_sigma[1, 2]) and np.isnan(principal.axis_sigma[2, 1])
    # The axis itself is held by symmetry: no turn at all.
    assert principal.axis_sigma[0] == pytest.approx([0.0, 0.0, 0.0], abs=1e-12)


@pytest.mark.parametrize("scale", [1e-30, 1.0, 1e30])
def test_values_that_the_data_cannot_tell_apart_are_marked(scale: float) -> None:
    covariance = scale**2 * 0.05**2 * np.eye(9)
    covariance = (covariance + covariance[:, [0, 3, 6, 1, 4, 7, 2, 5, 8]]) / 2
    far = find_principal(Estimate(scale * np.diag([9.0, 6.0, 2.0]), covariance, "frame"))
    assert (far.arbitrary, far.shape) == ((False, False, False), "biaxial")
    near = find_principal(Estimate(scale * np.diag([9.0, 6.0, 5.98]), covariance, "frame"))
    assert (near.arbitrary, near.shape) == ((False, True, True), "uniaxial")
    one = find_principal(Estimate(scale * np.diag([6.02, 6.0, 5.98]), covariance, "frame"))
    assert (one.arbitrary, one.shape) == ((True, True, True), "isotropic")
    # Without covariance nothing is known of that.
    assert find_principal(plain(scale * np.diag([9.0, 6.0, 5.98]))).shape == "biaxial"


def test_axes_held_by_symmetry_are_never_marked() -> None:
    # An orthorhombic tensor: however near its values are, its axes are x1 x2 x3 for certain.
    basis = np.array([np.diag(row).ravel() for row in np.eye(3)])
    covariance = basis.T @ np.diag([0.01, 0.01, 0.01]) @ basis
    principal = find_principal(Estimate(np.diag([6.0, 6.001, 6.002]), covariance, "frame"))
    assert (principal.arbitrary, principal.shape) == ((False, False, False), "biaxial")
    assert principal.axis_sigma == pytest.approx(np.zeros((3, 3)), abs=1e-12)


def test_the_share_of_equal_pairs_that_is_marked() -> None:
    # Equal values are marked as such in 95 of 100 draws of the data (χ² with two degrees of freedom at 0.95); the
    # binomial standard deviation of 2000 draws is 0.5 %. The errors are the same in every direction of the plane.
    unit = 0.05
    symmetric = np.array(
        [
            np.outer(np.eye(3)[i], np.eye(3)[j]) + np.outer(np.eye(3)[j], np.eye(3)[i])
            for i, j in ((0, 0), (1, 1), (2, 2), (0, 1), (0, 2), (1, 2))
        ]
    ).reshape(6, 9)
    symmetric /= np.linalg.norm(symmetric, axis=1, keepdims=True)
    covariance = unit**2 * symmetric.T @ symmetric
    generator = np.random.default_rng(12)
    marked = 0
    for _ in range(2000):
        noise = (generator.normal(size=6) * unit) @ symmetric
        found = find_principal(Estimate(np.diag([9.0, 6.0, 6.0]) + noise.reshape(3, 3), covariance, "frame"))
        marked += found.arbitrary == (False, True, True)
    assert marked / 2000 == pytest.approx(0.95, abs=0.02)
