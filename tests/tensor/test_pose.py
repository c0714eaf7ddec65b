"""Poses: six ways in, three ways out, against scipy's Rotation and explicit matrices."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from app.crystal.crystal import build_crystal
from app.crystal.direction import parse_direction
from app.errors import InputError
from app.tensor.pose import IDENTITY, Pose, pose_from_matrix, read_pose, resolve_direction, resolve_directions
from tests.crystal.reference import CELLS

CUBIC = build_crystal(CELLS["cubic"], "m-3m")
HEXAGONAL = build_crystal(CELLS["hexagonal"], "6/mmm")
TRICLINIC = build_crystal(CELLS["triclinic"], "1")


def passive_z(angle: float) -> np.ndarray:
    c, s = np.cos(np.deg2rad(angle)), np.sin(np.deg2rad(angle))
    return np.array([[c, s, 0], [-s, c, 0], [0, 0, 1]])


def passive_x(angle: float) -> np.ndarray:
    c, s = np.cos(np.deg2rad(angle)), np.sin(np.deg2rad(angle))
    return np.array([[1, 0, 0], [0, c, s], [0, -s, c]])


def check_proper(matrix: np.ndarray, tolerance: float = 1e-14) -> None:
    assert matrix @ matrix.T == pytest.approx(np.eye(3), abs=tolerance)
    assert np.linalg.det(matrix) == pytest.approx(1.0, abs=tolerance)


unit_vectors = st.tuples(*[st.floats(-1, 1)] * 3).filter(lambda v: np.linalg.norm(v) > 1e-3)
angles = st.floats(-720.0, 720.0)
quaternions = st.tuples(*[st.floats(-1, 1)] * 4).filter(lambda q: np.linalg.norm(q) > 1e-2)


def test_no_pose_is_the_identity() -> None:
    assert np.array_equal(read_pose(None, CUBIC).matrix, np.eye(3))
    assert read_pose(IDENTITY, CUBIC) is IDENTITY
    assert IDENTITY.bunge == [0.0, 0.0, 0.0]
    assert IDENTITY.quaternion == [1.0, 0.0, 0.0, 0.0]


def test_axis_and_angle_by_the_interfaces_example() -> None:
    # The interface: 30° about x3 gives x = (cos 30, sin 30, 0).
    pose = read_pose({"axis": [0, 0, 1], "angle": 30}, CUBIC)
    assert pose.matrix[0] == pytest.approx([np.cos(np.pi / 6), 0.5, 0.0], abs=1e-15)


@settings(max_examples=100, deadline=None)
@given(unit_vectors, angles)
def test_axis_and_angle_are_scipys_rotation_vector(axis: tuple[float, float, float], angle: float) -> None:
    unit = np.array(axis) / np.linalg.norm(axis)
    turn = Rotation.from_rotvec(np.deg2rad(angle) * unit)
    pose = read_pose({"axis": list(axis), "angle": angle}, CUBIC)
    # The turned axes are x, y, z, the rows of C.
    for row, start in zip(pose.matrix, np.eye(3), strict=True):
        assert row == pytest.approx(turn.apply(start), abs=1e-12)


@settings(max_examples=100, deadline=None)
@given(quaternions)
def test_quaternions_are_scipys(quaternion: tuple[float, float, float, float]) -> None:
    unit = np.array(quaternion) / np.linalg.norm(quaternion)
    turn = Rotation.from_quat(unit, scalar_first=True)
    pose = read_pose({"quaternion": unit.tolist()}, CUBIC)
    assert pose.matrix == pytest.approx(turn.as_matrix().T, abs=1e-14)
    found = np.array(pose.quaternion)
    assert abs(found @ unit) == pytest.approx(1.0, abs=1e-14)
    assert found[0] >= 0
    # A quaternion and its opposite are one turn; a norm within 1e-3 is taken.
    same = read_pose({"quaternion": (-unit * 1.0009).tolist()}, CUBIC)
    assert same.matrix == pytest.approx(pose.matrix, abs=1e-14)


@settings(max_examples=200, deadline=None)
@given(angles, angles, angles)
def test_bunge_angles_are_the_explicit_matrices(phi1: float, tilt: float, phi2: float) -> None:
    # The texture literature's passive matrices: g = Z(φ2) X(Φ) Z(φ1), v_crystal = g v_specimen, C = gᵀ.
    g = passive_z(phi2) @ passive_x(tilt) @ passive_z(phi1)
    pose = read_pose({"bunge": [phi1, tilt, phi2]}, CUBIC)
    assert pose.matrix == pytest.approx(g.T, abs=1e-12)


def test_one_bunge_orientation_of_the_literature() -> None:
    # Goss orientation {011}<100> is (0, 45, 0): rolling direction x along [100], normal z along (011), from memory.
    pose = read_pose({"bunge": [0, 45, 0]}, CUBIC)
    assert pose.matrix[0] == pytest.approx([1, 0, 0], abs=1e-15)
    assert pose.matrix[2] == pytest.approx(np.array([0, 1, 1]) / np.sqrt(2), abs=1e-15)
    # Brass {011}<211> is (35.26, 45, 0): x along [2 1 -1] up to equivalents, z along (011).
    brass = read_pose({"bunge": [np.rad2deg(np.arccos(np.sqrt(2 / 3))), 45, 0]}, CUBIC)
    assert np.sort(np.abs(brass.matrix[0])) == pytest.approx(np.array([1, 1, 2]) / np.sqrt(6), abs=1e-12)


@settings(max_examples=200, deadline=None)
@given(
    quaternions,
    st.sampled_from([0.0, 1e-15, 1e-13, 1e-11, 1e-9, 1e-7, 1e-4, 1.0]),
    st.booleans(),
)
def test_every_way_out_leads_back(
    quaternion: tuple[float, float, float, float], closeness: float, reversed_z: bool
) -> None:
    # Also close to the poses whose z is along x3 or against it, where phi1 and phi2 turn about one axis.
    unit = np.array(quaternion) * [1.0, closeness, closeness, 1.0]
    if np.linalg.norm(unit) < 1e-3:
        return
    turn = Rotation.from_quat(unit / np.linalg.norm(unit), scalar_first=True)
    if reversed_z:
        turn = turn * Rotation.from_euler("X", 180, degrees=True)
    pose = Pose(turn.as_matrix().T)
    phi1, tilt, phi2 = pose.bunge
    assert 0.0 <= phi1 < 360.0
    assert 0.0 <= phi2 < 360.0
    assert 0.0 <= tilt <= 180.0
    for shape in (
        {"bunge": pose.bunge},
        {"quaternion": pose.quaternion},
        {"matrix": pose.matrix.tolist()},
    ):
        assert read_pose(shape, CUBIC).matrix == pytest.approx(pose.matrix, abs=1e-11), shape
    # scipy's own intrinsic Z X Z angles as the outside, where they are determined.
    if 1e-3 < tilt < 180 - 1e-3:
        expected = Rotation.from_matrix(pose.matrix).as_euler("ZXZ", degrees=True)
        assert np.cos(np.deg2rad(np.array(pose.bunge) - expected)) == pytest.approx([1, 1, 1], abs=1e-9)


def test_angles_are_printed_below_360() -> None:
    for tiny in (1e-17, -1e-17, 1e-15, -1e-15):
        for tilt in (0.0, 30.0, 180.0):
            phi1, _, phi2 = read_pose({"bunge": [tiny, tilt, tiny]}, CUBIC).bunge
            assert 0.0 <= phi1 < 359.0 and 0.0 <= phi2 < 359.0


@pytest.mark.parametrize(("exact", "near"), [(a, b) for a in "xyz" for b in "xyz" if a != b])
def test_exact_and_toward(exact: str, near: str) -> None:
    first, second = parse_direction("[1 2 -1]"), parse_direction("(3 0 1)")
    pose = read_pose({"exact": [exact, "[1 2 -1]"], "toward": [near, "(3 0 1)"]}, TRICLINIC)
    check_proper(pose.matrix)
    along, toward = TRICLINIC.resolve(first), TRICLINIC.resolve(second)
    assert pose.matrix["xyz".index(exact)] == pytest.approx(along, abs=1e-14)
    # As near as it can be: of all directions across the first, by brute force around the circle.
    row = pose.matrix["xyz".index(near)]
    third = np.cross(along, row)
    circle = [np.cos(t) * row + np.sin(t) * third for t in np.linspace(0, 2 * np.pi, 721)]
    assert row @ toward == pytest.approx(max(direction @ toward for direction in circle), abs=1e-12)


def test_nearly_parallel_directions_still_make_a_proper_frame() -> None:
    for index in (10, 10**4, 10**6, 10**8):
        pose = read_pose({"exact": ["z", "[1 0 0]"], "toward": ["x", f"[{index} 1 3]"]}, TRICLINIC)
        check_proper(pose.matrix)
        tilted = read_pose({"from": "[1 0 0]", "tilt": 4, "toward": f"[{index} 1 3]", "x": "(0 0 1)"}, TRICLINIC)
        check_proper(tilted.matrix)
        # The plane of both directions holds x: by exact rational arithmetic the third component is along a × [0 1 3].
        assert TRICLINIC.M is not None
        normal = np.cross(TRICLINIC.M[:, 0], TRICLINIC.M @ [0.0, 1.0, 3.0])
        assert pose.matrix[0] @ normal / np.linalg.norm(normal) == pytest.approx(0.0, abs=1e-15 * index)


def test_four_degrees_off() -> None:
    # "4° off (0001) toward [11-20]": z is 4° from c in the plane of c and a + b.
    pose = read_pose({"from": "(0001)", "tilt": 4, "toward": "[11-20]"}, HEXAGONAL)
    check_proper(pose.matrix)
    sine, cosine = np.sin(np.deg2rad(4)), np.cos(np.deg2rad(4))
    toward = np.array([0.5, np.sqrt(3) / 2, 0.0])
    assert pose.matrix[2] == pytest.approx(cosine * np.array([0, 0, 1]) + sine * toward, abs=1e-14)
    # x is as near as it can be to [11-20]: 4° below it.
    assert pose.matrix[0] == pytest.approx(cosine * toward - sine * np.array([0, 0, 1]), abs=1e-14)
    with_x = read_pose({"from": "(0001)", "tilt": 4, "toward": "[11-20]", "x": "[1-100]"}, HEXAGONAL)
    assert with_x.matrix[2] == pytest.approx(pose.matrix[2], abs=1e-15)
    assert with_x.matrix[0] == pytest.approx([np.sqrt(3) / 2, -0.5, 0], abs=1e-14)
    # The angle is that of the tilt whatever the angle to the second direction is, and a negative one goes away.
    for tilt in (-7.0, 0.0, 90.0, 123.0):
        leaned = read_pose({"from": "[0 0 1]", "tilt": tilt, "toward": "[1 0 1]", "x": "[0 1 0]"}, TRICLINIC)
        assert TRICLINIC.M is not None
        start = TRICLINIC.resolve(parse_direction("[0 0 1]"))
        assert leaned.matrix[2] @ start == pytest.approx(np.cos(np.deg2rad(tilt)), abs=1e-14)
        a = TRICLINIC.resolve(parse_direction("[1 0 0]"))
        if tilt % 180:
            assert np.sign(leaned.matrix[2] @ (a - start * (a @ start))) == np.sign(np.sin(np.deg2rad(tilt)))


@settings(max_examples=100, deadline=None)
@given(quaternions, st.lists(st.floats(-100, 100), min_size=9, max_size=9))
def test_invariants_of_a_tensor_do_not_change(quaternion: tuple[float, ...], cells: list[float]) -> None:
    unit = np.array(quaternion) / np.linalg.norm(quaternion)
    pose = read_pose({"quaternion": unit.tolist()}, CUBIC).matrix
    matrix = np.array(cells).reshape(3, 3)
    posed = pose @ matrix @ pose.T
    scale = max(1.0, float(np.linalg.norm(matrix)))
    assert np.trace(posed) == pytest.approx(np.trace(matrix), abs=1e-12 * scale)
    assert np.linalg.det(posed) == pytest.approx(np.linalg.det(matrix), abs=1e-11 * scale**3)
    symmetric, turned = matrix + matrix.T, posed + posed.T
    assert np.linalg.eigvalsh(turned) == pytest.approx(np.linalg.eigvalsh(symmetric), abs=1e-12 * scale)
    # A value is the same whichever frame it is taken in.
    direction = np.array([0.6, 0.0, 0.8])
    assert (pose @ direction) @ posed @ (pose @ direction) == pytest.approx(
        direction @ matrix @ direction, abs=1e-11 * scale
    )


def test_a_matrix_within_1e_6_is_made_exact() -> None:
    start = Rotation.from_euler("ZXZ", [10, 20, 30], degrees=True).as_matrix()
    rounded = np.round(start, 7)
    pose = read_pose({"matrix": rounded.tolist()}, CUBIC)
    check_proper(pose.matrix)
    assert pose.matrix == pytest.approx(start, abs=1e-7)
    with pytest.raises(InputError, match="orthonormal"):
        read_pose({"matrix": np.round(start, 4).tolist()}, CUBIC)
    with pytest.raises(InputError, match="left-handed"):
        read_pose({"matrix": np.diag([1.0, 1.0, -1.0]).tolist()}, CUBIC)


HUGE = 1e200
BAD_POSES: list[tuple[Any, str]] = [
    ("z up", ""),
    ([1, 2, 3], ""),
    ({}, ""),
    ({"matrix": None}, ""),
    ({"matrix": np.eye(3).tolist(), "bunge": [0, 0, 0]}, ""),
    ({"euler": [0, 0, 0]}, ""),
    ({"matrix": [[1, 0], [0, 1]]}, "matrix"),
    ({"matrix": [[HUGE, HUGE, 0], [HUGE, -HUGE, 0], [0, 0, 1]]}, "matrix"),
    ({"matrix": [[float("nan")] * 3] * 3}, "matrix"),
    ({"matrix": "identity"}, "matrix"),
    ({"quaternion": [1, 0, 0]}, "quaternion"),
    ({"quaternion": [1.01, 0, 0, 0]}, "quaternion"),
    ({"quaternion": [0, 0, 0, 0]}, "quaternion"),
    ({"quaternion": [1, 0, "0", 0]}, "quaternion[2]"),
    ({"bunge": [0, 0]}, "bunge"),
    ({"bunge": [0, float("inf"), 0]}, "bunge[1]"),
    ({"bunge": 5}, "bunge"),
    ({"axis": [0, 0, 1], "angle": "30"}, "angle"),
    ({"axis": [0, 0, 1], "angle": True}, "angle"),
    ({"axis": [0, 0, 1], "angle": 10**400}, "angle"),
    ({"axis": [0, 0, 1], "angle": 1e10}, "angle"),
    ({"axis": [0, 0, 0], "angle": 3}, "axis"),
    ({"axis": "[0 0 0 1]", "angle": 3}, "axis"),
    ({"axis": {"specimen": [0, 0, 1]}, "angle": 3}, "axis"),
    ({"axis": [0, 0, 1]}, ""),
    ({"exact": ["z", [0, 0, 1]], "toward": ["z", [1, 0, 0]]}, "toward"),
    ({"exact": ["z", [0, 0, 1]], "toward": ["x", [0, 0, -2]]}, "toward"),
    ({"exact": ["w", [0, 0, 1]], "toward": ["x", [1, 0, 0]]}, "exact"),
    ({"exact": "z [0 0 1]", "toward": ["x", [1, 0, 0]]}, "exact"),
    ({"exact": ["z", "[0 0]"], "toward": ["x", [1, 0, 0]]}, "exact[1]"),
    ({"exact": ["z", [0, 0, 1]]}, ""),
    ({"from": [0, 0, 1], "tilt": 4, "toward": [0, 0, 1]}, "toward"),
    ({"from": [0, 0, 1], "tilt": 90, "toward": [1, 0, 0], "x": [1, 0, 0]}, "x"),
    ({"from": [0, 0, 1], "tilt": None, "toward": [1, 0, 0]}, ""),
]


@pytest.mark.parametrize(("given_pose", "field"), BAD_POSES)
def test_what_is_no_pose_is_refused(given_pose: Any, field: str) -> None:
    with pytest.raises(InputError) as caught:
        read_pose(given_pose, CUBIC)
    assert (caught.value.field or "") == field
    assert caught.value.message


def test_numpy_numbers_and_arrays_are_taken() -> None:
    assert read_pose({"quaternion": np.array([1, 0, 0, 0])}, CUBIC).matrix == pytest.approx(np.eye(3))
    assert read_pose({"axis": np.array([0, 0, 1]), "angle": np.int64(0)}, CUBIC).matrix == pytest.approx(np.eye(3))
    assert pose_from_matrix(np.eye(3, dtype=int)).matrix == pytest.approx(np.eye(3))


def test_directions_of_the_specimen() -> None:
    pose = read_pose({"axis": [0, 0, 1], "angle": 30}, CUBIC)
    found = resolve_direction(CUBIC, {"specimen": [5, 0, 0]}, pose)
    assert found == pytest.approx([np.cos(np.pi / 6), 0.5, 0], abs=1e-15)
    many = resolve_directions(CUBIC, [[0, 0, 2], {"specimen": [0, 1, 0]}, "(1 1 0)", {"xyz": [1e-300, 0, 0]}], pose)
    assert many == pytest.approx(
        np.array([[0, 0, 1], [-0.5, np.cos(np.pi / 6), 0], [np.sqrt(0.5), np.sqrt(0.5), 0], [1, 0, 0]]), abs=1e-15
    )


@pytest.mark.parametrize(
    ("directions", "field"),
    [
        ([[0, 0, 1], [0, 0, 0]], "[1]"),
        (["[1 0 0]", "[1 0]"], "[1]"),
        ([[0, 0, 1], {"specimen": [0, 0, 0]}], "[1].specimen"),
    ],
)
def test_the_wrong_one_of_many_directions_is_named(directions: list[Any], field: str) -> None:
    with pytest.raises(InputError) as caught:
        resolve_directions(CUBIC, directions, IDENTITY)
    assert caught.value.field == field


def test_rows_and_normals_of_the_cell_pose_a_specimen() -> None:
    # By hand in the monoclinic cell: (−2 0 1) is along −2a* + c*, at right angles to [1 0 2] and [0 1 0].
    crystal = build_crystal([12.214, 3.0371, 5.7981, 90.0, 103.83, 90.0], "2/m")
    assert crystal.M is not None
    pose = read_pose({"exact": ["z", "(-2 0 1)"], "toward": ["x", "[0 1 0]"]}, crystal)
    assert pose.matrix[2] @ (crystal.M @ [1.0, 0.0, 2.0]) == pytest.approx(0.0, abs=1e-13)
    assert pose.matrix[0] == pytest.approx([0, 1, 0], abs=1e-15)
