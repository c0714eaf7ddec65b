"""Worked numbers: invented data; every answer was computed apart from this project.

Digits are as printed there, so each is held to half a unit of its last one.
"""

from __future__ import annotations

import numpy as np
import pytest

from app.crystal.crystal import Crystal, build_crystal
from app.crystal.direction import parse_direction
from app.tensor.kind import Kind
from app.tensor.pose import read_pose
from app.tensor.principal import find_principal
from app.tensor.quadric import name_quadric
from app.tensor.tensor import PropertyTensor, build_tensor
from app.tensor.values import compute_flux, compute_flux_angles, compute_rod_values, compute_values

HALF = 5.1e-7


def along(crystal: Crystal, tensor: PropertyTensor, text: str) -> float:
    return float(compute_values(tensor.estimate.matrix, crystal.resolve(parse_direction(text))))


def find_psi(vector: np.ndarray) -> float:
    """The angle in the x1-x3 plane from +x3 toward +x1."""
    return float(np.rad2deg(np.arctan2(vector[0], vector[2])))


def at_psi(psi: float) -> np.ndarray:
    return np.array([np.sin(np.deg2rad(psi)), 0.0, np.cos(np.deg2rad(psi))])


W1_CELL = [12.214, 3.0371, 5.7981, 90.0, 103.83, 90.0]
W1_FREE = {"11": 13.2, "13": 1.85, "22": 24.6, "33": 15.9}


def test_axes_of_a_monoclinic_crystal() -> None:
    crystal = build_crystal(W1_CELL, "2/m")
    tensor = build_tensor(crystal, Kind(), free=W1_FREE)
    for text, psi, value in (
        ("(-201)", -36.188681, 13.195526),
        ("[-201]", -63.866506, 12.260712),
        ("(201)", 50.750110, 16.093708),
    ):
        vector = crystal.resolve(parse_direction(text))
        assert vector[1] == pytest.approx(0.0, abs=1e-15)
        assert find_psi(vector) == pytest.approx(psi, abs=HALF)
        assert along(crystal, tensor, text) == pytest.approx(value, abs=HALF)
    assert along(crystal, tensor, "[201]") == pytest.approx(13.193579, abs=HALF)


def test_the_same_tensor_in_another_frame() -> None:
    old = build_crystal(W1_CELL, "2/m")
    new = build_crystal(W1_CELL, "2/m", frame="x1=a x3=c*")
    assert old.M is not None and new.M is not None
    tensor = build_tensor(old, Kind(), free=W1_FREE)
    turned = tensor.estimate.turn(new.M @ np.linalg.inv(old.M), new.frame_sentence).matrix
    expected = [[12.495467, 0, 1.011876], [0, 24.6, 0], [1.011876, 0, 16.604533]]
    assert turned == pytest.approx(np.array(expected), abs=HALF)
    again = build_tensor(new, Kind(), matrix=turned)
    assert again.misfit < 1e-12
    assert along(new, again, "(-201)") == pytest.approx(13.195526, abs=HALF)


def test_the_same_crystal_relabelled() -> None:
    # (a′ b′ c′) = (c a b): unique axis c.
    crystal = build_crystal([5.7981, 12.214, 3.0371, 90.0, 90.0, 103.83], "2/m", unique_axis="c")
    tensor = build_tensor(crystal, Kind(), free={"11": 15.9, "12": 1.85, "22": 13.2, "33": 24.6})
    assert along(crystal, tensor, "(1 -2 0)") == pytest.approx(13.195526, abs=HALF)
    # The values along one physical direction are the same in both: (hkl) of the old is (lhk) of the new.
    old = build_crystal(W1_CELL, "2/m")
    old_tensor = build_tensor(old, Kind(), free=W1_FREE)
    for h, k, index in ((1, 1, 1), (2, -1, 3), (0, 1, 0)):
        assert along(crystal, tensor, f"({index} {h} {k})") == pytest.approx(
            along(old, old_tensor, f"({h} {k} {index})")
        )
        assert along(crystal, tensor, f"[{index} {h} {k}]") == pytest.approx(
            along(old, old_tensor, f"[{h} {k} {index}]")
        )


def test_plane_normal_or_row() -> None:
    crystal = build_crystal([4.990, 4.990, 17.061, 90, 90, 120], "-3m")
    tensor = build_tensor(crystal, Kind(), free={"11": -5.6, "33": 24.9})
    c = crystal.resolve(parse_direction("[001]"))
    for text, angle, value in (
        ("(104)", 44.624893, 9.849673),
        ("[104]", 4.182024, 24.737798),
        ("(012)", 63.133678, 0.628803),
        ("[-441]", 63.733862, 0.373205),
        ("[100]", 90.0, -5.6),
    ):
        vector = crystal.resolve(parse_direction(text))
        assert np.rad2deg(np.arccos(vector @ c)) == pytest.approx(angle, abs=HALF), text
        assert along(crystal, tensor, text) == pytest.approx(value, abs=HALF), text
    # (011) is not equivalent to (101): no operation of −3m takes one normal to the other, or to its opposite.
    first, second = crystal.resolve(parse_direction("(101)")), crystal.resolve(parse_direction("(011)"))
    assert not any(np.allclose(rotation @ first, second) for rotation in crystal.rotations)
    assert any(
        np.allclose(rotation @ first, crystal.resolve(parse_direction("(0-11)"))) for rotation in crystal.rotations
    )


def test_principal_values_of_both_signs() -> None:
    crystal = build_crystal(W1_CELL, "2/m")
    tensor = build_tensor(crystal, Kind(), free={"11": 31.0, "22": 8.5, "33": -12.4, "13": 6.0})
    principal = find_principal(tensor.estimate)
    assert principal.values == pytest.approx([31.814218, 8.5, -13.214218], abs=HALF)
    negative = principal.axes[2] * np.sign(principal.axes[2][2])
    # Printed cut, not rounded.
    assert find_psi(negative) == pytest.approx(-7.727999, abs=1e-6)
    assert name_quadric(principal.values) == "one-sheet hyperboloid"
    for psi in (-40.529010, 25.073011):
        assert compute_values(tensor.estimate.matrix, at_psi(psi)) == pytest.approx(0.0, abs=1e-6)
    for toward, angle in ((0, 32.801010), (1, 51.269462)):
        t = np.deg2rad(angle)
        direction = np.cos(t) * negative + np.sin(t) * principal.axes[toward]
        assert compute_values(tensor.estimate.matrix, direction) == pytest.approx(0.0, abs=1e-6)


def test_where_nothing_happens_in_a_uniaxial_crystal() -> None:
    crystal = build_crystal([4.990, 4.990, 17.061, 90, 90, 120], "-3m")
    tensor = build_tensor(crystal, Kind(), free={"11": -5.6, "33": 24.9})
    assert compute_values(tensor.estimate.matrix, at_psi(64.628017)) == pytest.approx(0.0, abs=1e-6)


def test_rod_or_plate() -> None:
    crystal = build_crystal([5, 5, 7, 90, 90, 90], "4/mmm")
    tensor = build_tensor(crystal, Kind(), free={"11": 6.2, "33": 10.7})
    direction = at_psi(45.0)
    assert compute_values(tensor.estimate.matrix, direction) == pytest.approx(8.45)
    assert compute_rod_values(tensor.estimate.matrix, direction) == pytest.approx(7.850888, abs=HALF)
    monoclinic = build_crystal(W1_CELL, "2/m")
    matrix = build_tensor(monoclinic, Kind(), free=W1_FREE).estimate.matrix
    for text, plate, rod, leaving, driven in (
        ("(-201)", 13.195526, 12.981096, 7.966857, 6.623165),
        ("(111)", 22.258631, 21.556371, 9.247028, 11.027388),
    ):
        normal = monoclinic.resolve(parse_direction(text))
        assert compute_values(matrix, normal) == pytest.approx(plate, abs=HALF)
        assert compute_rod_values(matrix, normal) == pytest.approx(rod, abs=HALF)
        assert compute_flux_angles(normal, compute_flux(matrix, normal)) == pytest.approx(leaving, abs=HALF)
        gradient = compute_flux(np.linalg.inv(matrix), normal)
        assert compute_flux_angles(normal, gradient) == pytest.approx(driven, abs=HALF)


W6_RAW = [[118.2, -6.9, 1.1], [9.3, 121.6, -0.8], [0.4, 0.9, 85.3]]


def test_a_lone_fourfold_axis_without_inner_symmetry() -> None:
    crystal = build_crystal([5, 5, 7, 90, 90, 90], "4")
    tensor = build_tensor(crystal, Kind("polar", "general"), matrix=W6_RAW)
    matrix = tensor.estimate.matrix
    assert tensor.form.labels == ["11", "12", "33"]
    assert matrix == pytest.approx(np.array([[119.9, -8.1, 0], [8.1, 119.9, 0], [0, 0, 85.3]]), abs=1e-12)
    assert tensor.misfit * np.linalg.norm(W6_RAW) == pytest.approx(3.388215, abs=HALF)
    x1 = np.array([1.0, 0, 0])
    assert compute_flux_angles(x1, compute_flux(matrix, x1)) == pytest.approx(3.864818, abs=HALF)
    diagonal = np.ones(3) / np.sqrt(3)
    flux = compute_flux(matrix, diagonal)
    assert compute_values(matrix, diagonal) == pytest.approx(108.366667, abs=HALF)
    assert np.linalg.norm(flux - diagonal * (flux @ diagonal)) == pytest.approx(17.600442, abs=HALF)
    pose = read_pose({"axis": [1, 0, 0], "angle": 180}, crystal).matrix
    assert (pose @ matrix @ pose.T)[1, 0] == pytest.approx(-8.1)
    # In 422 the same raw rows lose what stands off the diagonal.
    higher = build_tensor(build_crystal([5, 5, 7, 90, 90, 90], "422"), Kind("polar", "general"), matrix=W6_RAW)
    assert higher.estimate.matrix == pytest.approx(np.diag([119.9, 119.9, 85.3]), abs=1e-12)
    # The principal axes are those of the symmetric part: uniaxial.
    assert find_principal(tensor.estimate).arbitrary == (True, True, False)


def test_a_gyration_tensor() -> None:
    # Raw components in the order 11 22 33 23 13 12.
    raw = [[2.1, 1.5, 0.1], [1.5, -1.9, -0.2], [0.1, -0.2, 0.3]]
    crystal = build_crystal([5, 5, 7, 90, 90, 90], "-4")
    tensor = build_tensor(crystal, Kind("axial", "symmetric"), matrix=raw)
    matrix = tensor.estimate.matrix
    assert tensor.form.labels == ["11", "12"]
    assert matrix == pytest.approx(np.array([[2, 1.5, 0], [1.5, -2, 0], [0, 0, 0]]), abs=1e-12)
    principal = find_principal(tensor.estimate)
    assert principal.values == pytest.approx([2.5, 0.0, -2.5], abs=1e-12)
    azimuth = np.rad2deg(np.arctan2(principal.axes[0][1], principal.axes[0][0])) % 180
    assert azimuth == pytest.approx(18.434949, abs=HALF)
    assert abs(principal.axes[1][2]) == pytest.approx(1.0)
    for zero in (63.434949, -26.565051):
        for polar in (20.0, 90.0, 130.0):
            p, a = np.deg2rad(polar), np.deg2rad(zero)
            direction = np.array([np.sin(p) * np.cos(a), np.sin(p) * np.sin(a), np.cos(p)])
            assert compute_values(matrix, direction) == pytest.approx(0.0, abs=1e-7)
    assert compute_values(matrix, at_psi(60.0)) == pytest.approx(1.5)
    # Treated as polar: the wrong answer, which the kind must not give.
    polar_tensor = build_tensor(crystal, Kind("polar", "symmetric"), matrix=raw)
    assert polar_tensor.estimate.matrix == pytest.approx(np.diag([0.1, 0.1, 0.3]), abs=1e-12)
