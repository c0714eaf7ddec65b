"""Where nothing expands: printed angles, angles computed apart, and the values along the curves themselves."""

from __future__ import annotations

import numpy as np
import pytest

from app.series.still_directions import find_still_directions, find_still_in_plane
from app.tensor.estimate import Estimate

RANDOM = np.random.default_rng(3)


def estimate(matrix: object, covariance: np.ndarray | None = None) -> Estimate:
    return Estimate(np.array(matrix, dtype=np.float64), covariance, "x3 along c")


def test_calcite_does_not_expand_64_67_degrees_from_its_axis() -> None:
    # −5.6 across, 25 along c (J. F. Nye, Physical Properties of Crystals, from memory); tan² = 25/5.6, derived.
    found = find_still_directions(estimate(np.diag([-5.6, -5.6, 25.0]) * 1e-6))
    assert found.kind == "cone"
    assert np.abs(found.axis) == pytest.approx([0, 0, 1], abs=1e-12)
    assert found.half_angles == pytest.approx([64.67, 64.67], abs=0.005)
    assert len(found.curves) == 2


def test_gypsum_expands_everywhere() -> None:
    # 1.6, 42, 29 ×10⁻⁶/K at 40 °C (Nye, from memory).
    found = find_still_directions(estimate(np.diag([1.6, 42.0, 29.0]) * 1e-6))
    assert found.kind == "none"
    assert "positive" in found.sentence
    assert "negative" in find_still_directions(estimate(-np.eye(3))).sentence


MONOCLINIC = [[31.0, 0, 6.0], [0, 8.5, 0], [6.0, 0, -12.4]]


def test_a_monoclinic_cone_and_its_two_directions_in_the_plane_of_symmetry() -> None:
    # Invented data; the answer was computed apart from this project. ψ is from +x3 toward +x1.
    found = find_still_directions(estimate(MONOCLINIC))
    assert found.kind == "cone"
    assert found.half_angles == pytest.approx([32.801010, 51.269462], abs=5e-7)
    assert found.axis is not None
    assert np.rad2deg(np.arctan(found.axis[0] / found.axis[2])) == pytest.approx(-7.727999, abs=1e-6)
    directions = find_still_in_plane(np.array(MONOCLINIC), np.array([0.0, 1.0, 0.0]))
    angles = sorted(np.rad2deg(np.arctan(directions[:, 0] / directions[:, 2])))
    assert angles == pytest.approx([-40.529010, 25.073011], abs=5e-7)


def test_no_point_of_the_curves_expands() -> None:
    for _ in range(20):
        values = np.array([*RANDOM.uniform(0.2, 3.0, 2), -RANDOM.uniform(0.2, 3.0)]) * RANDOM.choice([-1, 1])
        axes = np.linalg.qr(RANDOM.normal(size=(3, 3)))[0]
        matrix = axes.T @ np.diag(values) @ axes
        found = find_still_directions(estimate(matrix), points=73)
        for curve in found.curves:
            assert len(curve) == 73
            assert np.linalg.norm(curve, axis=1) == pytest.approx(np.ones(73))
            assert np.einsum("ia,ab,ib->i", curve, matrix, curve) == pytest.approx(np.zeros(73), abs=1e-12)
        assert found.axis is not None
        # At the half-angle from the cone's axis toward each of the others there is no expansion either.
        for axis, angle in zip(found.toward, np.deg2rad(found.half_angles), strict=True):
            direction = np.cos(angle) * found.axis + np.sin(angle) * axis
            assert direction @ matrix @ direction == pytest.approx(0.0, abs=1e-12)


@pytest.mark.parametrize(
    ("values", "kind", "axis"),
    [
        ([2.0, -1.0, 0.0], "planes", [0, 0, 1]),
        ([2.0, 0.0, 0.0], "plane", [1, 0, 0]),
        ([-2.0, 0.0, -1.0], "axis", [0, 1, 0]),
        ([0.0, 0.0, 0.0], "everywhere", None),
    ],
)
def test_zeros_among_the_values(values: list[float], kind: str, axis: list[float] | None) -> None:
    found = find_still_directions(estimate(np.diag(values)))
    assert found.kind == kind
    assert (found.axis is None) == (axis is None)
    if axis is not None:
        assert np.abs(found.axis) == pytest.approx(axis, abs=1e-12)
    for curve in found.curves:
        assert np.einsum("ia,ab,ib->i", curve, np.diag(values), curve) == pytest.approx(0.0 * curve[:, 0], abs=1e-12)
    if kind == "planes":
        # tan² = 1/2 from the contracting axis x2, derived.
        assert found.half_angles == pytest.approx([np.rad2deg(np.arctan(np.sqrt(0.5)))])
        assert np.abs(found.toward[0]) == pytest.approx([0, 1, 0], abs=1e-12)


def test_sigma_of_the_half_angles_by_a_seeded_simulation() -> None:
    half = RANDOM.normal(size=(6, 6)) * 0.02
    places = [(0, 0), (1, 1), (2, 2), (1, 2), (0, 2), (0, 1)]
    spread = np.zeros((9, 6))
    for column, (row, other) in enumerate(places):
        spread[3 * row + other, column] = spread[3 * other + row, column] = 1.0
    covariance = spread @ half @ half.T @ spread.T
    found = find_still_directions(estimate(MONOCLINIC, covariance))
    drawn = []
    for _ in range(1500):
        matrix = np.array(MONOCLINIC) + (spread @ half @ RANDOM.normal(size=6)).reshape(3, 3)
        values = np.linalg.eigvalsh(matrix)[::-1]
        drawn.append(np.rad2deg(np.arctan(np.sqrt(-values[2] / values[:2]))))
    assert found.sigma == pytest.approx(np.std(drawn, axis=0), rel=5 / np.sqrt(3000))


def test_planes_with_one_or_no_still_direction() -> None:
    x3 = np.array([0.0, 0.0, 1.0])
    assert len(find_still_in_plane(np.diag([2.0, 3.0, -1.0]), x3)) == 0
    assert len(find_still_in_plane(np.zeros((3, 3)), x3)) == 0
    only = find_still_in_plane(np.diag([2.0, 0.0, -1.0]), x3)
    assert np.abs(only) == pytest.approx(np.array([[0.0, 1.0, 0.0]]), abs=1e-6)
    # The value grows by a right-handed turn about the normal through the first of two.
    first, second = find_still_in_plane(np.diag([2.0, -1.0, 0.0]), x3)
    for direction, sign in ((first, 1), (second, -1)):
        ahead = direction + 1e-3 * np.cross(x3, direction)
        assert sign * (ahead @ np.diag([2.0, -1.0, 0.0]) @ ahead) > 0
