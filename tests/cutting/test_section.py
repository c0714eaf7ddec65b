"""Values in a plane, even planes, and flux along the gradient: by hand and by substitution."""

from __future__ import annotations

import numpy as np
import pytest

from app.cutting.section import find_even_planes, find_level_in_plane, find_parallel_flux

RANDOM = np.random.default_rng(23)
X1, X2, X3 = np.eye(3)

# Worked numbers: invented data; the answers were computed apart from this project.
MONOCLINIC = np.array([[31.0, 0, 6.0], [0, 8.5, 0], [6.0, 0, -12.4]])


def draw(principal: list[float]) -> tuple[np.ndarray, np.ndarray]:
    axes = np.linalg.qr(RANDOM.normal(size=(3, 3)))[0].T
    return axes.T @ np.diag(principal) @ axes, axes


def test_the_zeros_in_the_plane_of_symmetry() -> None:
    lines = find_level_in_plane(MONOCLINIC, 0, X2).lines
    angles = sorted(np.rad2deg(np.arctan(lines[:, 0] / lines[:, 2])))
    assert angles == pytest.approx([-40.529010, 25.073011], abs=5.1e-7)


def test_values_in_random_planes() -> None:
    for _ in range(50):
        matrix, normal = RANDOM.normal(size=(3, 3)), RANDOM.normal(size=3)
        normal /= np.linalg.norm(normal)
        inside = np.cross(normal, RANDOM.normal(size=3))
        inside /= np.linalg.norm(inside)
        value = inside @ matrix @ inside
        lines = find_level_in_plane(matrix, value, normal).lines
        assert len(lines) == 2
        assert np.max(np.abs(lines @ inside)) == pytest.approx(1)
        assert lines @ normal == pytest.approx(np.zeros(2), abs=1e-14)
        assert np.einsum("ia,ab,ib->i", lines, matrix, lines) == pytest.approx(np.full(2, value), abs=1e-13)


def test_planes_with_one_no_or_every_direction_of_the_value() -> None:
    # By hand, of diag(2, 3, −1) across x3: 2 along x1 alone, 3 along x2 alone, nothing at 0.
    matrix = np.diag([2.0, 3.0, -1.0])
    assert np.abs(find_level_in_plane(matrix, 2, X3).lines) == pytest.approx(X1[None])
    assert np.abs(find_level_in_plane(matrix, 3, X3).lines) == pytest.approx(X2[None])
    assert find_level_in_plane(matrix, 0, X3).is_empty
    assert find_level_in_plane(matrix, 7, X3).is_empty
    assert len(find_level_in_plane(np.diag([2.0, 2.0, -1.0]), 2, X3).tracks) == 1
    assert len(find_level_in_plane(4 * np.eye(3), 4, X3).tracks) == 1


def test_even_planes_show_one_value() -> None:
    for _ in range(20):
        matrix, axes = draw(sorted(RANDOM.normal(size=3)))
        normals = find_even_planes(matrix).lines
        assert len(normals) == 2
        middle = axes[1] @ matrix @ axes[1]
        for normal in normals:
            inside = np.cross(normal, RANDOM.normal(size=(9, 3)))
            inside /= np.linalg.norm(inside, axis=1, keepdims=True)
            assert np.einsum("ia,ab,ib->i", inside, matrix, inside) == pytest.approx(np.full(9, middle), abs=1e-13)
    matrix, axes = draw([2.0, 2.0, 5.0])
    assert np.abs(find_even_planes(matrix).lines @ axes[2]) == pytest.approx([1])
    assert find_even_planes(3 * np.eye(3)).everywhere


def test_flux_along_the_gradient() -> None:
    matrix, axes = draw([1.0, 2.0, 4.0])
    lines = find_parallel_flux(matrix).lines
    assert sorted(np.max(np.abs(lines @ axes.T), axis=0)) == pytest.approx([1, 1, 1])
    matrix, axes = draw([2.0, 2.0, 5.0])
    found = find_parallel_flux(matrix)
    assert np.abs(found.lines @ axes[2]) == pytest.approx([1])
    assert np.abs(found.tracks[0].normal @ axes[2]) == pytest.approx(1)
    assert find_parallel_flux(3 * np.eye(3)).everywhere
    assert find_parallel_flux(np.zeros((3, 3))).everywhere


def test_flux_along_the_gradient_of_a_tensor_that_is_not_symmetric() -> None:
    # Worked number (class 4): invented data. Any direction across c is turned by 3.864818°, so only c is left.
    found = find_parallel_flux(np.array([[119.9, -8.1, 0], [8.1, 119.9, 0], [0, 0, 85.3]]))
    assert np.abs(found.lines) == pytest.approx(X3[None])
    assert found.tracks == ()
    for _ in range(30):
        matrix = RANDOM.normal(size=(3, 3))
        lines = find_parallel_flux(matrix).lines
        assert len(lines) in (1, 3)
        assert np.cross(lines, lines @ matrix.T) == pytest.approx(np.zeros((len(lines), 3)), abs=1e-12)
