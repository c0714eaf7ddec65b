"""Parts that are warmed: printed cells, gemmi's geometry, scipy's polar decomposition and seeded simulations."""

from __future__ import annotations

import gemmi
import numpy as np
import pytest
from scipy.linalg import polar

from app.consequences.mismatch import build_isotropic, compare_with_substrate
from app.consequences.thermal_part import compute_angle_changes, compute_changes, find_true_planes, strain_between
from app.errors import InputError
from app.tensor.estimate import Estimate

RANDOM = np.random.default_rng(24)

# Low albite, T. R. Stewart and D. Y. Limbach (1967), as printed by R. M. Hazen and L. W. Finger, Comparative Crystal
# Chemistry (1982), ch. 5.
COLD = gemmi.UnitCell(8.141, 12.790, 7.157, 94.225, 116.597, 87.772)
HOT = gemmi.UnitCell(8.278, 12.863, 7.180, 92.780, 116.045, 87.718)
COLD_BASIS, HOT_BASIS = (np.array(cell.orth.mat.tolist()) for cell in (COLD, HOT))
STRETCH = polar(HOT_BASIS @ np.linalg.inv(COLD_BASIS), side="right")[1]
ALBITE = Estimate(STRETCH - np.eye(3), None, "")


def unit(vectors: object) -> np.ndarray:
    array = np.array(vectors, dtype=float)
    return array / np.linalg.norm(array, axis=-1, keepdims=True)


ROWS = np.array([[1, 0, 0], [0, 1, 0], [0, 0, 1], [1, 1, 0], [1, -2, 3]])
COLD_ROWS = unit(ROWS @ COLD_BASIS.T)
COLD_NORMALS = unit(ROWS @ np.linalg.inv(COLD_BASIS))


def test_lengths_of_rows_and_distances_of_planes() -> None:
    found = compute_changes(ALBITE, COLD_ROWS)
    lengths = [np.linalg.norm(HOT_BASIS @ row) / np.linalg.norm(COLD_BASIS @ row) - 1 for row in ROWS]
    assert found.lengths == pytest.approx(lengths, rel=1e-10)
    # The printed edges themselves.
    assert found.lengths[:3] == pytest.approx([8.278 / 8.141 - 1, 12.863 / 12.790 - 1, 7.180 / 7.157 - 1], rel=1e-10)
    # gemmi's distances of planes.
    spacings = [HOT.calculate_d(row.tolist()) / COLD.calculate_d(row.tolist()) - 1 for row in ROWS]
    assert compute_changes(ALBITE, COLD_NORMALS).thicknesses == pytest.approx(spacings, rel=1e-10)
    assert found.length_sigma is None and found.thickness_sigma is None and found.tilt_sigma is None


def test_angles_of_edges_and_faces() -> None:
    pairs = [(1, 2), (0, 2), (0, 1)]
    first, second = np.array([one for one, _ in pairs]), np.array([two for _, two in pairs])
    edges = compute_angle_changes(ALBITE, COLD_ROWS[first], COLD_ROWS[second], "rows")
    assert edges.before == pytest.approx([94.225, 116.597, 87.772], abs=1e-9)
    assert edges.after == pytest.approx([92.780, 116.045, 87.718], abs=1e-9)
    assert edges.change == pytest.approx([92.780 - 94.225, 116.045 - 116.597, 87.718 - 87.772], abs=1e-9)
    faces = compute_angle_changes(ALBITE, COLD_NORMALS[first], COLD_NORMALS[second], "normals")
    cold, hot = COLD.reciprocal(), HOT.reciprocal()
    assert faces.before == pytest.approx([cold.alpha, cold.beta, cold.gamma], abs=1e-9)
    assert faces.after == pytest.approx([hot.alpha, hot.beta, hot.gamma], abs=1e-9)
    parallel = compute_angle_changes(ALBITE, COLD_ROWS[:1], COLD_ROWS[:1], "rows")
    assert (parallel.before[0], parallel.change[0]) == (0, 0)


def test_small_strains_keep_their_digits() -> None:
    # Quartz, 13.65 and 7.50 ×10⁻⁶/K (Kosinski, Gualtieri and Ballato, 1992), over a hundredth of a kelvin.
    alpha = Estimate(np.diag([13.65e-6, 13.65e-6, 7.50e-6]), None, "")
    found = compute_changes(strain_between(alpha, 20.0, 20.01), np.eye(3))
    assert found.lengths == pytest.approx([13.65e-8, 13.65e-8, 7.50e-8], rel=1e-12)
    assert found.thicknesses == pytest.approx([13.65e-8, 13.65e-8, 7.50e-8], rel=1e-12)
    cooled = compute_changes(strain_between(alpha, 120.0, 20.0), np.eye(3))
    assert cooled.lengths == pytest.approx([-13.65e-4, -13.65e-4, -7.50e-4], rel=1e-12)


def test_the_tilt_of_a_plate() -> None:
    # By hand for a two-fold strain: a line at 45° between the stretches u and v lies at atan(v/u), its plane's
    # normal at atan(u/v).
    strain = Estimate(np.diag([0.01, -0.02, 0.0]), None, "")
    found = compute_changes(strain, unit([[1, 1, 0], [1, 0, 0], [0, 0, 1]]))
    expected = np.rad2deg(np.arctan2(1.01, 0.98) - np.arctan2(0.98, 1.01))
    assert found.tilts == pytest.approx([expected, 0, 0], abs=1e-10)


def test_sigma_by_simulation() -> None:
    spread = RANDOM.normal(size=(6, 6))
    rows, columns = np.triu_indices(3)
    expand = np.zeros((9, 6))
    for cell, (row, column) in enumerate(zip(rows, columns, strict=True)):
        expand[[3 * row + column, 3 * column + row], cell] = 1.0
    small = 1e-8 * spread @ spread.T
    mean = np.array([[0.02, 0.004, -0.01], [0.004, 0.05, 0.006], [-0.01, 0.006, -0.03]])
    strain = Estimate(mean, expand @ small @ expand.T, "")
    drawn = mean + (RANDOM.multivariate_normal(np.zeros(6), small, size=20_000) @ expand.T).reshape(-1, 3, 3)
    stretch = np.eye(3) + drawn
    inverse = np.linalg.inv(stretch)
    n, m = unit([[1, 2, 3]]), unit([[-1, 2, 0.5]])

    def angle(one: np.ndarray, two: np.ndarray) -> np.ndarray:
        sine = np.linalg.norm(np.cross(one, two), axis=-1)
        return np.rad2deg(np.arctan2(sine, np.sum(one * two, axis=-1)))

    found = compute_changes(strain, n)
    assert found.length_sigma == pytest.approx([np.std(np.linalg.norm(stretch @ n[0], axis=1))], rel=0.03)
    assert found.thickness_sigma == pytest.approx([np.std(1 / np.linalg.norm(inverse @ n[0], axis=1))], rel=0.03)
    assert found.tilt_sigma == pytest.approx([np.std(angle(stretch @ n[0], inverse @ n[0]))], rel=0.03)
    edges = compute_angle_changes(strain, n, m, "rows")
    assert edges.sigma == pytest.approx([np.std(angle(stretch @ n[0], stretch @ m[0]))], rel=0.03)
    faces = compute_angle_changes(strain, n, m, "normals")
    assert faces.sigma == pytest.approx([np.std(angle(inverse @ n[0], inverse @ m[0]))], rel=0.03)


def test_planes_that_do_not_warp() -> None:
    # Gypsum: 1.6, 42 (along b), 29 ×10⁻⁶/K at 40 °C (J. F. Nye, from memory); laid along its principal axes.
    gypsum = Estimate(np.diag([1.6e-6, 42e-6, 29e-6]), None, "")
    found = find_true_planes(gypsum)
    assert len(found.normals) == 3 and found.belt is None and not found.every
    assert compute_changes(gypsum, found.normals).tilts == pytest.approx([0, 0, 0], abs=1e-12)
    # Calcite, −5.6 and 25 (Nye, from memory).
    calcite = Estimate(np.diag([-5.6e-6, -5.6e-6, 25e-6]), None, "")
    belt = find_true_planes(calcite)
    assert belt.normals == pytest.approx(np.array([[0, 0, 1]]), abs=0) and belt.belt is not None
    assert compute_changes(calcite, unit([[1, 2, 0], [3, -1, 0]])).tilts == pytest.approx([0, 0], abs=1e-9)
    assert compute_changes(calcite, unit([[1, 0, 1]])).tilts[0] > 1e-3
    every = find_true_planes(Estimate(7e-6 * np.eye(3), None, ""))
    assert every.every and len(every.normals) == 0


def test_mismatch_by_dense_sampling() -> None:
    part = Estimate(1e-6 * np.array([[9.0, 2, -1], [2, 4, 3], [-1, 3, -6]]), None, "")
    substrate = build_isotropic(5e-6)
    normal, edge = unit([1, 2, -1]), unit([0, 0, 1])
    found = compare_with_substrate(part, substrate, normal, edge)
    azimuths = np.arange(-90, 90, 0.01)
    # The edge projected, and a quarter-turn right-handed about the normal.
    start = unit(edge - normal * (edge @ normal))
    lines = np.cos(np.deg2rad(azimuths))[:, None] * start + np.sin(np.deg2rad(azimuths))[:, None] * np.cross(
        normal, start
    )
    sampled = np.einsum("ni,ij,nj->n", lines, part.matrix, lines) - 5e-6
    assert found.at(azimuths)[0] == pytest.approx(sampled, rel=1e-9, abs=1e-18)
    assert found.values == pytest.approx([np.max(sampled), np.min(sampled)], rel=1e-6)
    assert found.azimuths == pytest.approx(azimuths[[np.argmax(sampled), np.argmin(sampled)]], abs=0.02)
    crossings = azimuths[:-1][np.diff(np.sign(sampled)) != 0]
    assert np.sort(found.matched) == pytest.approx(crossings, abs=0.02)
    assert found.sigma is None and found.at(azimuths)[1] is None
    assert found.along == pytest.approx(start, abs=1e-14)
    assert found.across == pytest.approx(np.cross(normal, start), abs=1e-14)


def test_mismatch_of_calcite_on_what_does_not_expand() -> None:
    # W2's crystal (invented: −5.6, 24.9; the angle was computed apart from this project): zero at 64.628017 from c.
    part = Estimate(np.diag([-5.6e-6, -5.6e-6, 24.9e-6]), None, "")
    nothing = build_isotropic(0.0)
    face = compare_with_substrate(part, nothing, np.array([0, 1.0, 0]), np.array([0, 0, 1.0]))
    assert np.sort(face.matched) == pytest.approx([-64.628017, 64.628017], abs=5e-7)
    assert face.values == pytest.approx([24.9e-6, -5.6e-6], rel=1e-12)
    assert face.azimuths == pytest.approx([0, 90], abs=1e-9)
    basal = compare_with_substrate(part, nothing, np.array([0, 0, 1.0]), np.array([1.0, 0, 0]))
    assert basal.azimuths is None and len(basal.matched) == 0 and not basal.everywhere
    assert basal.values == pytest.approx([-5.6e-6, -5.6e-6], rel=1e-12)
    same = compare_with_substrate(part, part, np.array([0, 1.0, 0]), np.array([0, 0, 1.0]))
    assert same.everywhere and same.azimuths is None and len(same.matched) == 0
    # A substrate that follows the part along c alone.
    follows = compare_with_substrate(part, build_isotropic(24.9e-6), np.array([0, 1.0, 0]), np.array([1.0, 0, 0]))
    assert follows.matched == pytest.approx([90.0], abs=1e-5)


def test_sigma_of_the_mismatch() -> None:
    # Along an axis of the part: the two independent errors add in squares.
    covariance = np.zeros((9, 9))
    covariance[0, 0], covariance[4, 4], covariance[8, 8] = 1e-14, 4e-14, 9e-14
    part = Estimate(np.diag([9e-6, 4e-6, 1e-6]), covariance, "")
    face = compare_with_substrate(part, build_isotropic(2e-6, 4e-7), np.array([0, 0, 1.0]), np.array([1.0, 0, 0]))
    assert face.sigma == pytest.approx([np.hypot(1e-7, 4e-7), np.hypot(2e-7, 4e-7)], rel=1e-9)
    assert face.at(np.array([0.0, 90.0]))[1] == pytest.approx(face.sigma, rel=1e-9)
    exact = compare_with_substrate(part, build_isotropic(2e-6), np.array([0, 0, 1.0]), np.array([1.0, 0, 0]))
    assert exact.sigma == pytest.approx([1e-7, 2e-7], rel=1e-9)


def test_refusals() -> None:
    with pytest.raises(InputError):
        compute_changes(Estimate(np.diag([-1.0, 0, 0]), None, ""), np.eye(3))
    with pytest.raises(InputError):
        compute_changes(Estimate(np.array([[0, 0.1, 0], [0, 0, 0], [0, 0, 0]]), None, ""), np.eye(3))
    with pytest.raises(InputError, match="1 or less"):
        strain_between(Estimate(np.diag([-13.0, 7.0, 7.0]), None, ""), 20, 21)
    with pytest.raises(InputError) as caught:
        strain_between(Estimate(np.eye(3), None, ""), np.nan, 21)
    assert caught.value.field == "start"
    with pytest.raises(InputError) as caught:
        compare_with_substrate(ALBITE, ALBITE, np.array([0, 0, 1.0]), np.array([0, 0, -1.0]))
    assert caught.value.field == "edge"
